//! What orbitals are made of: populations and character.
