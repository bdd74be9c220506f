//! Bandproof assigns the bands of a gas-phase valence photoelectron spectrum.
//!
//! A geometry and a measured trace go in; a defended assignment of every band comes out.
//!
//! ```text
//! geometry ─► orbitals ─► hole states ─► predicted trace ┐
//!             (scf)       (ionization)    (predict)       ├─► matches + remarks ─► dossier ─► figure, table, page
//! measured file ─► trace ─► bands ────────────────────────┘     (assign)                     (report)
//!                           (fit)
//! ```
//!
//! The modules form layers; each imports only from layers below its own. The table stands in
//! `DEVELOPERS.md`, the reasons in `docs/architecture.md`.
//!
//! # Conventions
//! * Positions are bohr and energies hartree inside the theory half; Å and eV at every door.
//!   Names carry the unit where a value could be mistaken: `_ev`, `_hartree`, `_bohr`, `_angstrom`.
//! * An ionization energy is positive. Koopmans: I = −ε.
//! * Matrices are column-major `nalgebra` matrices. Atoms and orbitals count from 0 in code and
//!   data files, from 1 in printed text.
//! * Spherical functions of one shell run from m = −l to m = +l.

pub mod assign;
pub mod basis;
pub mod cli;
pub mod fit;
pub mod integrals;
pub mod ionization;
pub mod levels;
pub mod lineshape;
pub mod molecule;
pub mod numeric;
pub mod orbitals;
pub mod predict;
pub mod report;
pub mod scf;
pub mod study;
pub mod trace;
pub mod units;
