//! The molecular-orbital engine: integrals and the self-consistent field.

#[path = "engine/integrals.rs"]
mod integrals;
#[path = "engine/scf.rs"]
mod scf;
