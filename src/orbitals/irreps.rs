//! Symmetry labels of orbitals: `2b1`, `1e1g`, `3σg`.
//!
//! An operation R turns an orbital ψ = Σ_μ c_μ·χ_μ into Rψ: the functions of an atom go to the
//! atom that takes its place, and the 2l + 1 functions of each shell mix as the harmonics do. The
//! weight of ψ in an irreducible representation Γ is ⟨ψ|P_Γ|ψ⟩ with the projector
//! P_Γ = (d/h)·Σ_R χ_Γ(R)·R. It is the same for every member of a degenerate set, however the
//! members are turned among themselves. All of this happens in the basis after Löwdin's
//! orthogonalisation, in which every R is an orthogonal matrix even where the geometry is only
//! nearly symmetric, so that the weights of one orbital lie between 0 and 1 and add up to 1.
//!
//! Orbitals that lie so close in energy that a trifle mixes them (the cores of equivalent atoms)
//! are labelled as a group: the space that they span is taken apart instead.
//!
//! Valid for shells up to l = 5 in linear molecules and any l otherwise.

use crate::basis::Basis;
use crate::basis::harmonics::turned_harmonics;
use crate::molecule::Molecule;
use crate::molecule::symmetry::{PointGroup, Schoenflies};
use crate::numeric::linalg::{LinalgError, symmetric_eigen};
use nalgebra::{DMatrix, DVector, SymmetricEigen};
use std::collections::BTreeMap;
use thiserror::Error;

/// Orbitals with at least this weight in one representation are labelled on their own.
const PURE_WEIGHT: f64 = 0.9;

/// Neighbours in energy closer than this (hartree) may have been mixed by a trifle: a noise of
/// 1e-4 Å in the geometry moves core levels by some 1e-4 hartree.
const MIXING_HARTREE: f64 = 2e-3;

/// The symmetry of one orbital.
#[derive(Debug, Clone, PartialEq)]
pub struct OrbitalSymmetry {
    /// Number and representation, cores counted: `2b1`.
    pub label: String,
    /// Representation in small letters: `b1`.
    pub irrep: String,
    /// Which of its representation it is by rising energy, from 1, cores counted.
    pub number: usize,
    /// Number of orbitals in its degenerate set, itself included.
    pub degeneracy: usize,
    /// Orbitals of its degenerate set by index, itself included.
    pub members: Vec<usize>,
    /// Share of this orbital that has the symmetry of the label, 0 to 1.
    pub weight: f64,
    /// The same for the space that its set spans; higher than `weight` where close neighbours in
    /// energy have been mixed.
    pub set_weight: f64,
    /// Energy between the highest and the lowest member of the set, hartree.
    pub spread_hartree: f64,
}

/// Why orbitals could not be labelled.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum IrrepError {
    /// Group, molecule, basis and orbitals do not belong together.
    #[error("{what}: found {found}, expected {expected}")]
    Mismatch {
        /// What was counted.
        what: &'static str,
        /// Number found.
        found: usize,
        /// Number expected.
        expected: usize,
    },
    /// Atoms that symmetry makes equivalent carry different functions.
    #[error("atoms {first} and {second} are equivalent in {group} but carry different functions")]
    UnequalShells {
        /// Atom, from 1.
        first: usize,
        /// Atom, from 1.
        second: usize,
        /// The point group.
        group: Schoenflies,
    },
    /// The overlap matrix has a negative eigenvalue.
    #[error("the overlap matrix is not positive: its lowest eigenvalue is {lowest:e}")]
    Overlap {
        /// The eigenvalue.
        lowest: f64,
    },
    /// The overlap matrix could not be diagonalised.
    #[error("the overlap matrix: {0}")]
    Eigenvalues(#[from] LinalgError),
}

/// Labels every orbital, occupied or not.
///
/// `overlap` is functions × functions, `coefficients` functions × orbitals, orthonormal in it, and
/// `energies` in hartree, rising. The molecule may be anywhere: operations are applied where the
/// group was found.
pub fn labels(
    group: &PointGroup,
    molecule: &Molecule,
    basis: &Basis,
    overlap: &DMatrix<f64>,
    coefficients: &DMatrix<f64>,
    energies: &DVector<f64>,
) -> Result<Vec<OrbitalSymmetry>, IrrepError> {
    let n = basis.functions;
    let group_atoms = group.operations.first().map_or(0, |o| o.permutation.len());
    for (what, found, expected) in [
        (
            "atoms of the point group",
            group_atoms,
            molecule.atoms.len(),
        ),
        (
            "atoms of the basis",
            basis.atom_functions.len(),
            molecule.atoms.len(),
        ),
        ("rows of the overlap", overlap.nrows(), n),
        ("columns of the overlap", overlap.ncols(), n),
        ("rows of the coefficients", coefficients.nrows(), n),
        ("orbital energies", energies.len(), coefficients.ncols()),
    ] {
        if found != expected {
            return Err(IrrepError::Mismatch {
                what,
                found,
                expected,
            });
        }
    }
    let orthogonal = square_root(overlap)? * coefficients;
    let parts = match group.symbol {
        Schoenflies::Atom => parts_by_l(basis, &orthogonal),
        _ => parts_by_projection(group, basis, &orthogonal)?,
    };
    let assigned = assign(&parts, energies);
    Ok(sets(&parts, assigned, energies))
}

/// The labels with the numbering started at the valence shell: the lowest `core` orbitals are left
/// out of the count and keep the label that counts them.
pub fn valence_labels(orbitals: &[OrbitalSymmetry], core: usize) -> Vec<String> {
    let mut numbers: BTreeMap<&str, usize> = BTreeMap::new();
    let mut valence = vec![None; orbitals.len()];
    for (i, orbital) in orbitals.iter().enumerate() {
        if orbital.members.iter().any(|&m| m < core) {
            continue;
        }
        if orbital.members.first() == Some(&i) {
            let number = numbers.entry(&orbital.irrep).or_default();
            *number += 1;
            for &m in &orbital.members {
                valence[m] = Some(format!("{number}{}", orbital.irrep));
            }
        }
    }
    orbitals
        .iter()
        .zip(valence)
        .map(|(orbital, label)| label.unwrap_or_else(|| orbital.label.clone()))
        .collect()
}

/// The term of a state whose open shell has the symmetry of one orbital, such as a hole in a
/// closed shell: `²B1`, `²E1g`, `²Πg`, `²Σg⁺`.
pub fn state_label(irrep: &str, multiplicity: u32) -> String {
    let superscript = |digit: char| match digit {
        '1' => '¹',
        '2' => '²',
        '3' => '³',
        other => char::from_u32('⁰' as u32 + other as u32 - '0' as u32).unwrap_or(other),
    };
    let mut text: String = multiplicity.to_string().chars().map(superscript).collect();
    let mut letters = irrep.chars();
    if let Some(first) = letters.next() {
        text.extend(first.to_uppercase());
        text.push_str(letters.as_str().trim_start_matches('−'));
    }
    if irrep.starts_with('σ') {
        text.push(if irrep.contains('−') { '⁻' } else { '⁺' });
    }
    text
}

/// A representation and the part of every orbital that belongs to it.
struct Part {
    name: String,
    dimension: usize,
    /// What the label's number is ahead of the count (2p is the first p).
    ahead: usize,
    /// P_Γ·x for every orbital x in the orthogonalised basis: functions × orbitals.
    projected: DMatrix<f64>,
}

impl Part {
    fn weight(&self, orbital: usize) -> f64 {
        self.projected.column(orbital).norm_squared()
    }
}

/// S^{1/2}.
fn square_root(overlap: &DMatrix<f64>) -> Result<DMatrix<f64>, IrrepError> {
    let (values, vectors) = symmetric_eigen(overlap)?;
    let lowest = values.iter().copied().fold(f64::INFINITY, f64::min);
    if lowest < -1e-10 {
        return Err(IrrepError::Overlap { lowest });
    }
    let roots = values.map(|v| v.max(0.0).sqrt());
    Ok(&vectors * DMatrix::from_diagonal(&roots) * vectors.transpose())
}

/// An atom: shells of one l are one representation of the rotation group.
fn parts_by_l(basis: &Basis, orbitals: &DMatrix<f64>) -> Vec<Part> {
    let highest = basis.shells.iter().map(|s| s.l).max().unwrap_or(0);
    let part = |l: usize| {
        let mut projected = DMatrix::zeros(orbitals.nrows(), orbitals.ncols());
        for shell in basis.shells.iter().filter(|s| s.l == l) {
            let rows = orbitals.rows(shell.first, shell.len());
            projected
                .rows_mut(shell.first, shell.len())
                .copy_from(&rows);
        }
        Part {
            name: "spdfghi"
                .chars()
                .nth(l)
                .map_or(format!("l{l}"), String::from),
            dimension: 2 * l + 1,
            ahead: l,
            projected,
        }
    };
    (0..=highest).map(part).collect()
}

fn parts_by_projection(
    group: &PointGroup,
    basis: &Basis,
    orbitals: &DMatrix<f64>,
) -> Result<Vec<Part>, IrrepError> {
    let mut parts: Vec<Part> = group
        .irreps
        .iter()
        .map(|irrep| Part {
            name: irrep.name.clone(),
            dimension: irrep.dimension,
            ahead: 0,
            projected: DMatrix::zeros(orbitals.nrows(), orbitals.ncols()),
        })
        .collect();
    for k in 0..group.operations.len() {
        let turned = apply(group, k, basis, orbitals)?;
        for (part, irrep) in parts.iter_mut().zip(&group.irreps) {
            let weight = irrep.projector_weight(k);
            if weight.abs() > 1e-12 {
                part.projected.zip_apply(&turned, |p, t| *p += weight * t);
            }
        }
    }
    Ok(parts)
}

/// Applies operation k of a group to orbitals given by their coefficients in `basis` (functions ×
/// orbitals): χ_m on atom A goes to Σ_m' D_m'm·χ_m' on the atom that takes A's place, where D
/// turns the harmonics.
pub fn apply(
    group: &PointGroup,
    k: usize,
    basis: &Basis,
    orbitals: &DMatrix<f64>,
) -> Result<DMatrix<f64>, IrrepError> {
    let operation = &group.operations[k];
    let highest = basis.shells.iter().map(|s| s.l).max().unwrap_or(0);
    let mixing: Vec<DMatrix<f64>> = (0..=highest)
        .map(|l| turned_harmonics(l, &operation.input_matrix))
        .collect();
    let mut shells_of_atom = vec![Vec::new(); operation.permutation.len()];
    for shell in &basis.shells {
        shells_of_atom[shell.atom].push(shell);
    }
    let mut turned = DMatrix::zeros(orbitals.nrows(), orbitals.ncols());
    for (atom, &image) in operation.permutation.iter().enumerate() {
        let (from, to) = (&shells_of_atom[atom], &shells_of_atom[image]);
        let alike = from.len() == to.len()
            && from
                .iter()
                .zip(to)
                .all(|(a, b)| a.l == b.l && a.exponents == b.exponents);
        if !alike {
            return Err(IrrepError::UnequalShells {
                first: atom + 1,
                second: image + 1,
                group: group.symbol,
            });
        }
        for (a, b) in from.iter().zip(to) {
            let block = &mixing[a.l] * orbitals.rows(a.first, a.len());
            turned.rows_mut(b.first, b.len()).copy_from(&block);
        }
    }
    Ok(turned)
}

/// The representation of an orbital, by index into the parts.
#[derive(Clone, Copy)]
struct Assigned {
    part: usize,
    set_weight: f64,
    /// Orbitals that were labelled as a group go by energy order within it: the index of its
    /// degenerate set there.
    set: Option<usize>,
}

fn assign(parts: &[Part], energies: &DVector<f64>) -> Vec<Assigned> {
    let weights = |i: usize| parts.iter().map(move |p| p.weight(i)).enumerate();
    let mut assigned: Vec<Assigned> = (0..energies.len())
        .map(|i| {
            let (part, weight) = weights(i)
                .max_by(|a, b| a.1.total_cmp(&b.1))
                .unwrap_or((0, 0.0));
            Assigned {
                part,
                set_weight: weight,
                set: None,
            }
        })
        .collect();
    let mut start = 0;
    let mut next_set = 0;
    while start < energies.len() {
        let mut end = start + 1;
        while end < energies.len() && energies[end] - energies[end - 1] < MIXING_HARTREE {
            end += 1;
        }
        let all: Vec<usize> = (start..end).collect();
        let mixed: Vec<usize> = (start..end)
            .filter(|&i| assigned[i].set_weight < PURE_WEIGHT)
            .collect();
        start = end;
        if mixed.is_empty() {
            continue;
        }
        // The mixed ones may hold whole sets among themselves; if not, all neighbours together may.
        for orbitals in [mixed, all] {
            if let Some(resolved) = resolve(parts, energies, &orbitals, next_set) {
                next_set += resolved.len();
                for (&i, resolved) in orbitals.iter().zip(resolved) {
                    assigned[i] = resolved;
                }
                break;
            }
        }
    }
    assigned
}

/// Takes the space of neighbouring orbitals apart: pure orbitals inside it, sets by rising mean
/// energy, handed to the given orbitals in that order. `None` where the space does not hold whole
/// sets.
fn resolve(
    parts: &[Part],
    energies: &DVector<f64>,
    orbitals: &[usize],
    first_set: usize,
) -> Option<Vec<Assigned>> {
    let size = orbitals.len();
    let levels = DMatrix::from_diagonal(&energies.select_rows(orbitals));
    // (mean energy, part, weights of the members)
    let mut found: Vec<(f64, usize, Vec<f64>)> = Vec::new();
    for (index, part) in parts.iter().enumerate() {
        let columns = part.projected.select_columns(orbitals);
        let eigen = SymmetricEigen::new(columns.transpose() * columns);
        let mut kept: Vec<usize> = (0..size).filter(|&k| eigen.eigenvalues[k] > 0.5).collect();
        kept.sort_by(|&a, &b| eigen.eigenvalues[b].total_cmp(&eigen.eigenvalues[a]));
        if !kept.len().is_multiple_of(part.dimension) {
            return None;
        }
        if kept.is_empty() {
            continue;
        }
        let space = eigen.eigenvectors.select_columns(&kept);
        let inner = SymmetricEigen::new(space.transpose() * &levels * &space);
        let mut order: Vec<usize> = (0..kept.len()).collect();
        order.sort_by(|&a, &b| inner.eigenvalues[a].total_cmp(&inner.eigenvalues[b]));
        let weight = |k: usize| -> f64 {
            let squares = inner.eigenvectors.column(k).map(|v| v * v);
            squares
                .iter()
                .zip(&kept)
                .map(|(s, &j)| s * eigen.eigenvalues[j])
                .sum()
        };
        for members in order.chunks(part.dimension) {
            let sum: f64 = members.iter().map(|&k| inner.eigenvalues[k]).sum();
            let weights = members.iter().map(|&k| weight(k)).collect();
            found.push((sum / part.dimension as f64, index, weights));
        }
    }
    if found
        .iter()
        .map(|(_, _, weights)| weights.len())
        .sum::<usize>()
        != size
    {
        return None;
    }
    found.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    let mut resolved = Vec::with_capacity(size);
    for (set, (_, part, weights)) in found.into_iter().enumerate() {
        let mean = weights.iter().sum::<f64>() / weights.len() as f64;
        resolved.extend(weights.iter().map(|_| Assigned {
            part,
            set_weight: mean,
            set: Some(first_set + set),
        }));
    }
    Some(resolved)
}

/// Gathers degenerate sets and numbers them.
fn sets(parts: &[Part], assigned: Vec<Assigned>, energies: &DVector<f64>) -> Vec<OrbitalSymmetry> {
    let count = assigned.len();
    let mut members: Vec<Option<Vec<usize>>> = vec![None; count];
    for i in 0..count {
        if members[i].is_some() {
            continue;
        }
        let part = assigned[i].part;
        let dimension = parts[part].dimension;
        let mut open = (i + 1..count).filter(|&j| assigned[j].part == part && members[j].is_none());
        let set: Vec<usize> = match assigned[i].set {
            Some(set) => (i..count)
                .filter(|&j| assigned[j].set == Some(set))
                .collect(),
            None => std::iter::once(i)
                .chain(
                    open.by_ref()
                        .filter(|&j| assigned[j].set.is_none())
                        .take(dimension - 1),
                )
                .collect(),
        };
        for &j in &set {
            members[j] = Some(set.clone());
        }
    }
    let mut numbers = vec![0; parts.len()];
    let mut numbered = vec![0; count];
    let mut orbitals = Vec::with_capacity(count);
    for (i, (assigned, members)) in assigned.iter().zip(members).enumerate() {
        let members = members.unwrap_or_else(|| vec![i]);
        let part = &parts[assigned.part];
        if members[0] == i {
            numbers[assigned.part] += 1;
            for &m in &members {
                numbered[m] = numbers[assigned.part] + part.ahead;
            }
        }
        let levels = || members.iter().map(|&m| energies[m]);
        let spread_hartree = levels().fold(f64::MIN, f64::max) - levels().fold(f64::MAX, f64::min);
        orbitals.push(OrbitalSymmetry {
            label: format!("{}{}", numbered[i], part.name),
            irrep: part.name.clone(),
            number: numbered[i],
            degeneracy: members.len(),
            weight: part.weight(i),
            set_weight: assigned.set_weight,
            spread_hartree,
            members,
        });
    }
    orbitals
}
