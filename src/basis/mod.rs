//! Contracted spherical Gaussian shells: bundled sets, and a set put on a molecule.

use nalgebra::Vector3;

/// Highest angular momentum of an orbital shell (g).
pub const MAX_ORBITAL_L: usize = 4;
/// Highest angular momentum of an auxiliary shell (h).
pub const MAX_AUXILIARY_L: usize = 5;

/// A contracted shell of 2l + 1 real spherical Gaussians on one centre.
///
/// χ_m(r) = Σ_k c_k · S_lm(r − R) · exp(−α_k |r − R|²), m = −l … +l, where S_lm is the real
/// solid harmonic normalised so that Σ_m S_lm² = r^{2l} × (2l+1)/(4π). Coefficients include the
/// normalisation, so that ⟨χ_m|χ_m⟩ = 1.
#[derive(Debug, Clone, PartialEq)]
pub struct Shell {
    /// Index of the atom that carries it.
    pub atom: usize,
    /// Centre, bohr.
    pub centre_bohr: Vector3<f64>,
    /// Angular momentum l.
    pub l: usize,
    /// Exponents α_k, bohr⁻².
    pub exponents: Vec<f64>,
    /// Coefficients c_k with all normalisation in them.
    pub coefficients: Vec<f64>,
    /// Index of its first function in the basis.
    pub first: usize,
}

impl Shell {
    /// Number of functions, 2l + 1.
    pub fn len(&self) -> usize {
        2 * self.l + 1
    }

    /// A shell always has functions; kept for symmetry with `len`.
    pub fn is_empty(&self) -> bool {
        false
    }
}

/// A basis set put on the atoms of a molecule.
#[derive(Debug, Clone, PartialEq)]
pub struct Basis {
    /// Canonical lower-case name of the set.
    pub name: String,
    /// Shells, atom by atom; `first` rises without gaps.
    pub shells: Vec<Shell>,
    /// Total number of functions.
    pub functions: usize,
    /// For each atom the half-open range of its functions.
    pub atom_functions: Vec<std::ops::Range<usize>>,
}
