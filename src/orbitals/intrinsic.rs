//! Intrinsic atomic orbitals: the occupied orbitals in an exact minimal basis.
//!
//! G. Knizia, J. Chem. Theory Comput. 9, 4834 (2013): free-atom orbitals are polarised just enough
//! to hold the occupied molecular orbitals exactly. Whatever set the calculation used, the
//! occupied orbitals then have one 1s, 2s, 2p … per atom as coefficients, so populations do not
//! depend on the size of the set or on its diffuse functions.
//!
//! Two forms are kept. The orthonormal one gives shares of an orbital on atoms (never negative,
//! sum 1). In the original, overlapping one the classical overlap population (R. S. Mulliken, J.
//! Chem. Phys. 23, 1833, 1955) has its meaning: how much density an orbital puts between atoms.

use super::CharacterError;
use crate::basis::Basis;
use crate::integrals;
use crate::molecule::Molecule;
use crate::numeric::linalg::{congruence, product, symmetric_eigen, symmetrise, view};
use crate::scf::SpinOrbitals;
use nalgebra::{DMatrix, DVector};

/// Eigenvalues of a projected overlap below this mean that an occupied orbital is not made of the
/// atoms' own orbitals (a Rydberg or unbound orbital).
const SMALLEST_PROJECTION: f64 = 1e-6;

/// The occupied orbitals of one spin over intrinsic atomic orbitals.
#[derive(Debug, Clone, PartialEq)]
pub struct IntrinsicOrbitals {
    /// The free-atom orbitals behind them: one intrinsic orbital per function, on the same atom.
    pub minimal: Basis,
    /// Overlap of the intrinsic orbitals, each normalised.
    pub overlap: DMatrix<f64>,
    /// Occupied orbitals over the overlapping intrinsic orbitals, one column each.
    pub coefficients: DMatrix<f64>,
    /// Occupied orbitals over the symmetrically orthonormalised ones; columns are orthonormal.
    pub orthonormal: DMatrix<f64>,
    /// Fock matrix over the orthonormalised ones, hartree.
    pub fock: DMatrix<f64>,
}

impl IntrinsicOrbitals {
    /// Builds them for the occupied orbitals of one spin. `overlap` is that of `basis`.
    pub fn new(
        molecule: &Molecule,
        basis: &Basis,
        overlap: &DMatrix<f64>,
        orbitals: &SpinOrbitals,
    ) -> Result<IntrinsicOrbitals, CharacterError> {
        let minimal = Basis::minimal(molecule)?;
        let occupied = orbitals.occupied();
        if occupied > minimal.functions {
            return Err(CharacterError::TooManyOccupied {
                occupied,
                atomic: minimal.functions,
            });
        }
        let c = orbitals.coefficients.columns(0, occupied).into_owned();
        let (cross, small) = cross_and_small_overlap(basis, &minimal);

        // Free-atom orbitals in the large basis, and the occupied orbitals with everything but
        // their free-atom part taken away ("depolarised"), orthonormalised.
        // S⁻¹ is written C Cᵀ with all orbitals, which also holds where the calculation dropped
        // linearly dependent functions.
        let all = &orbitals.coefficients;
        let projected = product(
            view(all),
            view(&product(view(all).transpose(), view(&cross))),
        );
        let factor = small.cholesky().ok_or(CharacterError::CoincidentAtoms)?;
        let back = factor.solve(&(cross.transpose() * &c));
        let depolarised = &projected * back;
        let metric = congruence(&depolarised, overlap);
        let depolarised = depolarised * power(&metric, -0.5)?;

        // A = [O Õ + (1 − O)(1 − Õ)] P with the projectors O = C Cᵀ S, Õ = C̃ C̃ᵀ S; S P = S₁₂.
        let on_occupied = c.transpose() * &cross;
        let on_depolarised = depolarised.transpose() * &cross;
        let between = product(view(&c).transpose(), view(&(overlap * &depolarised)));
        let mut a = projected - &c * on_occupied - &depolarised * &on_depolarised
            + &c * (between * on_depolarised) * 2.0;

        let norms = congruence(&a, overlap).diagonal();
        for (mut column, norm) in a.column_iter_mut().zip(norms.iter()) {
            column /= norm.sqrt();
        }
        let metric = congruence(&a, overlap);
        let inverse_root = power(&metric, -0.5)?;
        let moments = product(
            view(&a).transpose(),
            view(&(overlap * &orbitals.coefficients)),
        );
        let expanded = &inverse_root * moments;
        let orthonormal = expanded.columns(0, occupied).into_owned();
        let coefficients = &inverse_root * &orthonormal;
        let scaled = &expanded * DMatrix::from_diagonal(&orbitals.energies);
        let mut fock = product(view(&scaled), view(&expanded).transpose());
        symmetrise(&mut fock);
        Ok(IntrinsicOrbitals {
            minimal,
            overlap: metric,
            coefficients,
            orthonormal,
            fock,
        })
    }

    /// Share of an occupied orbital on every atom; sums to 1.
    pub fn atom_shares(&self, orbital: usize) -> DVector<f64> {
        let column = self.orthonormal.column(orbital);
        let share =
            |range: &std::ops::Range<usize>| column.rows(range.start, range.len()).norm_squared();
        DVector::from_iterator(
            self.minimal.atom_functions.len(),
            self.minimal.atom_functions.iter().map(share),
        )
    }

    /// Overlap population between every two atoms, electrons per electron pair in the orbital:
    /// 2·2·Σ c_μ c_ν S_μν over μ on one atom, ν on the other. Symmetric; zero diagonal.
    pub fn overlap_populations(&self, orbital: usize) -> DMatrix<f64> {
        self.pair_sums(&self.coefficients, &self.overlap, orbital, 4.0)
    }

    /// What the orbital's energy owes to mixing between two atoms, hartree: 2·Σ c_μ F_μν c_ν in
    /// the orthonormal form. Negative holds together. Symmetric; zero diagonal.
    pub fn interaction_hartree(&self, orbital: usize) -> DMatrix<f64> {
        self.pair_sums(&self.orthonormal, &self.fock, orbital, 2.0)
    }

    fn pair_sums(
        &self,
        vectors: &DMatrix<f64>,
        matrix: &DMatrix<f64>,
        orbital: usize,
        factor: f64,
    ) -> DMatrix<f64> {
        let ranges = &self.minimal.atom_functions;
        let column = vectors.column(orbital);
        let mut sums = DMatrix::zeros(ranges.len(), ranges.len());
        for (a, ra) in ranges.iter().enumerate() {
            for (b, rb) in ranges.iter().enumerate().take(a) {
                let mut sum = 0.0;
                for nu in rb.clone() {
                    for mu in ra.clone() {
                        sum += column[mu] * matrix[(mu, nu)] * column[nu];
                    }
                }
                sums[(a, b)] = factor * sum;
                sums[(b, a)] = factor * sum;
            }
        }
        sums
    }
}

/// ⟨large|small⟩ and ⟨small|small⟩, as blocks of the overlap of both sets taken together.
fn cross_and_small_overlap(large: &Basis, small: &Basis) -> (DMatrix<f64>, DMatrix<f64>) {
    let mut both = large.clone();
    for shell in &small.shells {
        let mut shell = shell.clone();
        shell.first += large.functions;
        both.shells.push(shell);
    }
    both.functions += small.functions;
    let shifted = small.atom_functions.iter();
    both.atom_functions
        .extend(shifted.map(|r| r.start + large.functions..r.end + large.functions));
    let overlap = integrals::overlap(&both);
    let (n, k) = (large.functions, small.functions);
    (
        overlap.view((0, n), (n, k)).into_owned(),
        overlap.view((n, n), (k, k)).into_owned(),
    )
}

/// A symmetric positive definite matrix to a power.
fn power(matrix: &DMatrix<f64>, exponent: f64) -> Result<DMatrix<f64>, CharacterError> {
    let (values, vectors) = symmetric_eigen(matrix)?;
    if let Some(&smallest) = values.iter().next()
        && smallest < SMALLEST_PROJECTION
    {
        return Err(CharacterError::NotOfAtoms { smallest });
    }
    let scaled = &vectors * DMatrix::from_diagonal(&values.map(|v| v.powf(exponent)));
    Ok(scaled * vectors.transpose())
}
