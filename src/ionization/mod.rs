//! Ionization energies from orbitals.

pub mod adc;
pub mod fitted;
pub mod many_body;
pub mod poles;
pub mod second_order;

pub use fitted::{FittedOrbitals, Pairs};
pub use many_body::ManyBodyError;
