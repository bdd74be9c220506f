//! Ionization energies from orbitals.
