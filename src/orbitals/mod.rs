//! What orbitals are made of: populations and character.

pub mod irreps;
