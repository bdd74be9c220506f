//! The starting density: a superposition of atomic densities.
//!
//! Each element is solved once, as a spherical atom with its ground configuration spread evenly
//! over every open shell and both spins, in the same basis and with the same fitted integrals as
//! the molecule. The idea: J. Almlöf, K. Faegri, K. Korsell, J. Comput. Chem. 3, 385 (1982); J. H.
//! Van Lenthe et al., J. Comput. Chem. 27, 926 (2006) (memory).

use super::ScfError;
use super::diis::Diis;
use super::fock::two_electron;
use super::orthogonal::canonical_orthogonalisation;
use crate::basis::{Basis, Shell};
use crate::integrals::{FittedPairs, kinetic, nuclear_attraction, overlap};
use crate::molecule::Molecule;
use crate::numeric::linalg::{congruence, product, symmetric_eigen, view};
use nalgebra::{DMatrix, Vector3};

/// Iterations that an atom gets; the guess serves even if the last digits are missing.
const ITERATIONS: usize = 40;
/// Largest element of the orbital gradient at which an atom is good enough, hartree.
const GOOD_ENOUGH: f64 = 1e-4;

/// Orbitals C of one spin, weighted by √occupation, such that C·Cᵀ is half the superposed density.
///
/// # Errors
/// If an atom's integrals cannot be made.
pub fn superposed_atoms(
    molecule: &Molecule,
    basis: &Basis,
    auxiliary: &Basis,
) -> Result<DMatrix<f64>, ScfError> {
    let mut solved: Vec<(u8, Basis, DMatrix<f64>)> = Vec::new();
    let mut placed: Vec<(usize, usize)> = Vec::new();
    for (index, atom) in molecule.atoms.iter().enumerate() {
        let own = single_atom(basis, index);
        let known = solved
            .iter()
            .position(|(number, basis, _)| *number == atom.number && *basis == own);
        let which = match known {
            Some(which) => which,
            None => {
                let orbitals = spherical_atom(atom.number, &own, &single_atom(auxiliary, index))?;
                solved.push((atom.number, own, orbitals));
                solved.len() - 1
            }
        };
        placed.push((basis.atom_functions[index].start, which));
    }
    let columns = placed
        .iter()
        .map(|&(_, which)| solved[which].2.ncols())
        .sum();
    let mut out = DMatrix::zeros(basis.functions, columns);
    let mut column = 0;
    for (first, which) in placed {
        let orbitals = &solved[which].2;
        out.view_mut((first, column), orbitals.shape())
            .copy_from(orbitals);
        column += orbitals.ncols();
    }
    Ok(out)
}

/// The shells of one atom, moved to the origin.
fn single_atom(basis: &Basis, atom: usize) -> Basis {
    let range = basis.atom_functions[atom].clone();
    let shells: Vec<Shell> = basis
        .shells
        .iter()
        .filter(|s| s.atom == atom)
        .map(|s| Shell {
            atom: 0,
            centre_bohr: Vector3::zeros(),
            first: s.first - range.start,
            ..s.clone()
        })
        .collect();
    Basis {
        name: basis.name.clone(),
        shells,
        functions: range.len(),
        atom_functions: std::iter::once(0..range.len()).collect(),
    }
}

/// Electrons in s, p, d and f shells of the neutral ground state (common knowledge; the order of
/// filling is Madelung's rule, with the exceptions of chromium and copper).
fn configuration(number: u8) -> [usize; 4] {
    const FILLING: [(usize, usize); 15] = [
        (0, 2),
        (0, 2),
        (1, 6),
        (0, 2),
        (1, 6),
        (0, 2),
        (2, 10),
        (1, 6),
        (0, 2),
        (2, 10),
        (1, 6),
        (0, 2),
        (3, 14),
        (2, 10),
        (1, 6),
    ];
    let mut left = usize::from(number);
    let mut counts = [0; 4];
    for (l, room) in FILLING {
        let here = left.min(room);
        counts[l] += here;
        left -= here;
    }
    if matches!(number, 24 | 29) {
        counts[0] -= 1;
        counts[2] += 1;
    }
    counts
}

/// The functions of one angular momentum: the first function of every shell.
struct Channel {
    l: usize,
    firsts: Vec<usize>,
    /// Orthonormal radial combinations.
    orthogonal: DMatrix<f64>,
}

impl Channel {
    /// Mean over m of a matrix's diagonal blocks: the radial matrix of a spherical operator.
    fn radial(&self, matrix: &DMatrix<f64>) -> DMatrix<f64> {
        radial(self.l, &self.firsts, matrix)
    }
}

fn radial(l: usize, firsts: &[usize], matrix: &DMatrix<f64>) -> DMatrix<f64> {
    let width = 2 * l + 1;
    DMatrix::from_fn(firsts.len(), firsts.len(), |i, j| {
        let sum: f64 = (0..width)
            .map(|m| matrix[(firsts[i] + m, firsts[j] + m)])
            .sum();
        sum / width as f64
    })
}

fn spherical_atom(number: u8, basis: &Basis, auxiliary: &Basis) -> Result<DMatrix<f64>, ScfError> {
    let s = overlap(basis);
    let charge = [(f64::from(number), Vector3::zeros())];
    let core = kinetic(basis) + nuclear_attraction(basis, &charge);
    let pairs = FittedPairs::new(basis, auxiliary)?;
    let electrons = configuration(number);
    let mut channels = Vec::new();
    for l in 0..electrons.len() {
        let of_l = basis.shells.iter().filter(|shell| shell.l == l);
        let firsts: Vec<usize> = of_l.map(|shell| shell.first).collect();
        let (orthogonal, _) = canonical_orthogonalisation(&radial(l, &firsts, &s))?;
        channels.push(Channel {
            l,
            firsts,
            orthogonal,
        });
    }
    let mut orbitals = occupy(&channels, &electrons, &core, basis.functions)?;
    let mut diis = Diis::default();
    for _ in 0..ITERATIONS {
        let density = product(view(&orbitals), view(&orbitals).transpose());
        let repulsion = two_electron(&pairs, std::slice::from_ref(&orbitals), 2.0);
        let fock = &core + &repulsion.coulomb - &repulsion.exchange[0];
        let fds = &fock * &density * &s;
        let error = &fds - fds.transpose();
        if error.amax() < GOOD_ENOUGH {
            break;
        }
        let fock = diis.extrapolate(vec![fock], vec![error]).remove(0);
        orbitals = occupy(&channels, &electrons, &fock, basis.functions)?;
    }
    Ok(orbitals)
}

/// Diagonalises every angular momentum by itself and fills its lowest orbitals evenly.
fn occupy(
    channels: &[Channel],
    electrons: &[usize],
    fock: &DMatrix<f64>,
    functions: usize,
) -> Result<DMatrix<f64>, ScfError> {
    let mut columns = Vec::new();
    for (channel, &count) in channels.iter().zip(electrons) {
        let width = 2 * channel.l + 1;
        let (_, vectors) =
            symmetric_eigen(&congruence(&channel.orthogonal, &channel.radial(fock)))?;
        let vectors = &channel.orthogonal * vectors;
        let mut left = count as f64;
        // A basis too small for the configuration holds what it can: this is only a guess.
        for radial in vectors.column_iter() {
            let share = left.min(2.0 * width as f64) / (2.0 * width as f64);
            if share <= 0.0 {
                break;
            }
            left -= 2.0 * width as f64 * share;
            for m in 0..width {
                let mut column = nalgebra::DVector::zeros(functions);
                for (&first, &c) in channel.firsts.iter().zip(radial.iter()) {
                    column[first + m] = c * share.sqrt();
                }
                columns.push(column);
            }
        }
    }
    if columns.is_empty() {
        return Ok(DMatrix::zeros(functions, 0));
    }
    Ok(DMatrix::from_columns(&columns))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn configurations_hold_all_electrons() {
        for number in 1..=86 {
            assert_eq!(
                configuration(number).iter().sum::<usize>(),
                usize::from(number)
            );
        }
        assert_eq!(configuration(35), [8, 17, 10, 0]);
        assert_eq!(configuration(29), [7, 12, 10, 0]);
    }
}
