//! Non-Dyson algebraic-diagrammatic construction for ionization: ADC(2), ADC(2)-x and ADC(3) of a
//! closed shell.
//!
//! All ionized states up to two holes and one particle come from one symmetric matrix: its
//! eigenvalues are ionization energies, and its eigenvectors with the spectroscopic amplitudes give
//! the pole strengths, so that main lines and the satellites that share their strength appear
//! together. Main lines are of second (ADC(2), ADC(2)-x) or third order; satellites are of zeroth
//! order in ADC(2) and of first order in the other two, which leaves errors of some eV: what their
//! positions are worth is told in `docs/ionization.md`.
//!
//! Parts: [`effective`] builds the matrix, [`operator`] applies it, [`layout`] holds the index
//! conventions, [`ladder`] the contractions with many virtual orbitals.

pub mod effective;
pub mod ladder;
pub mod layout;
pub mod operator;
mod states;

pub use effective::{Amplitudes, build, build_for_p3};
pub use operator::AdcMatrix;
pub use states::{Configuration, Options, Spectrum, State, spectroscopic};

use super::fitted::FittedOrbitals;
use super::many_body::ManyBodyError;

/// How far the expansion is carried.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Order {
    /// ADC(2): strict second order.
    Second,
    /// ADC(2)-x: second order with first-order interaction of the two-hole states.
    SecondExtended,
    /// ADC(3): strict third order.
    Third,
}

impl Order {
    /// The trade's name.
    pub fn name(self) -> &'static str {
        match self {
            Order::Second => "ADC(2)",
            Order::SecondExtended => "ADC(2)-x",
            Order::Third => "ADC(3)",
        }
    }

    /// Bytes that a calculation takes at its largest, besides the fitted pairs.
    pub fn bytes(self, occupied: usize, virtuals: usize, auxiliaries: usize) -> u64 {
        let (o, v, n) = (occupied as u64, virtuals as u64, auxiliaries as u64);
        let rings = match self {
            Order::Second => 2,
            Order::SecondExtended => 8,
            Order::Third => 9,
        };
        // Half-contracted pairs, coupling, and the vectors of the search.
        let vectors = 200 * o * o * v * 2;
        let blocks = if self == Order::Second {
            0
        } else {
            4 * v * v * v
        };
        8 * (rings * o * o * v * v + 3 * o * v * n + o * o * o * v + vectors + blocks)
    }
}

/// All ionized states below the ceiling with enough strength, and the matrix's main numbers.
///
/// # Errors
/// If it would not fit in memory, or eigenvectors do not converge.
pub fn run(
    orbitals: &FittedOrbitals,
    order: Order,
    options: &Options,
) -> Result<Spectrum, ManyBodyError> {
    let (o, v) = (orbitals.occupied(), orbitals.virtuals());
    let needed_bytes = order.bytes(o, v, orbitals.auxiliaries());
    if needed_bytes > options.memory_limit_bytes {
        return Err(ManyBodyError::Memory {
            method: order.name(),
            needed_bytes,
            limit_bytes: options.memory_limit_bytes,
            occupied: o,
            virtuals: v,
            auxiliaries: orbitals.auxiliaries(),
        });
    }
    let (matrix, amplitudes) = build(orbitals, order);
    states::find(&matrix, &amplitudes, orbitals.frozen, options)
}
