//! The theory half of a study: geometry in, levels out.

use super::settings::TheorySettings;
use super::{Event, Observer, StudyError};
use crate::basis::{self, Basis, BasisSet};
use crate::integrals::FittedPairs;
use crate::ionization::{self, ManyBodyLevels, ManyBodySettings, Portrait};
use crate::levels::{AtomLine, Level, Levels, Method, MoleculeSummary, SCHEMA, ScfSummary};
use crate::molecule::Molecule;
use crate::molecule::symmetry::{self, PointGroup};
use crate::orbitals::irreps;
use crate::scf::{self, ScfOptions, SpinOrbitals};
use crate::{integrals, orbitals};
use nalgebra::DMatrix;

/// Name and version of the program, as it stands in the outputs.
pub const PROGRAM: &str = concat!(env!("CARGO_PKG_NAME"), " ", env!("CARGO_PKG_VERSION"));

/// Computes the ionized states of a molecule.
///
/// # Errors
/// A wrong geometry, an unknown basis, or a calculation that did not converge.
pub fn levels(settings: &TheorySettings, observer: Observer) -> Result<Levels, StudyError> {
    let molecule = Molecule::read(
        &settings.geometry_path,
        settings.charge,
        settings.multiplicity,
    )?;
    levels_of(&molecule, settings, observer)
}

/// The same for a molecule in memory.
///
/// # Errors
/// An unknown basis, or a calculation that did not converge.
pub fn levels_of(
    molecule: &Molecule,
    settings: &TheorySettings,
    observer: Observer,
) -> Result<Levels, StudyError> {
    observer(&Event::Stage("integrals"));
    let basis = Basis::new(molecule, &BasisSet::orbital(&settings.level.basis)?)?;
    let auxiliary = Basis::new(molecule, &BasisSet::auxiliary(&settings.auxiliary)?)?;
    let mean_field = scf::run(
        molecule,
        &basis,
        &auxiliary,
        &ScfOptions::default(),
        &mut |step| {
            observer(&Event::Scf {
                iteration: step.iteration,
                energy_hartree: step.energy_hartree,
                gradient_hartree: step.gradient_hartree,
            })
        },
    )?;
    observer(&Event::Stage("character of the orbitals"));
    let overlap = integrals::overlap(&basis);
    let group = symmetry::find(molecule, SYMMETRY_TOLERANCE_ANGSTROM);
    let portraits = (mean_field.orbitals.by_spin().into_iter())
        .map(|(_, set)| portraits(molecule, &group, &basis, &overlap, set))
        .collect::<Result<Vec<_>, _>>()?;
    let core = molecule.core_orbital_count();
    let mut level = Level {
        method: settings.level.method,
        basis: basis.name.clone(),
        auxiliary: auxiliary.name.clone(),
        correlation_auxiliary: None,
        frozen_core: false,
    };
    let found = if level.method == Method::Koopmans {
        ManyBodyLevels {
            states: ionization::koopmans(&mean_field.orbitals, core, &portraits)?,
            unresolved: Vec::new(),
        }
    } else {
        observer(&Event::Stage("ionization energies"));
        let fitting = correlation_auxiliary(molecule, &basis, &auxiliary)?;
        level.frozen_core = !settings.all_electrons;
        level.correlation_auxiliary = Some(fitting.name.clone());
        let many_body = ManyBodySettings {
            core,
            frozen_core: level.frozen_core,
            ..ManyBodySettings::default()
        };
        let pairs = FittedPairs::new(&basis, &fitting)?;
        let orbitals = &mean_field.orbitals;
        ionization::hole_states(level.method, orbitals, &pairs, &many_body, &portraits)?
    };
    Ok(Levels {
        schema: SCHEMA.to_owned(),
        program: PROGRAM.to_owned(),
        molecule: summary(molecule, &group),
        level,
        scf: ScfSummary {
            energy_hartree: mean_field.energy_hartree,
            nuclear_repulsion_hartree: mean_field.nuclear_repulsion_hartree,
            iterations: mean_field.iterations,
            converged: true,
            dipole_debye: mean_field.dipole_debye,
        },
        orbitals: ionization::orbital_lines(&mean_field.orbitals, core, &portraits, EMPTY_SHOWN)?,
        hole_states: found.states,
        notes: found.unresolved,
    })
}

/// The auxiliary set that was made for correlated methods in this basis, where one is bundled;
/// else that of the mean field.
fn correlation_auxiliary(
    molecule: &Molecule,
    orbital: &Basis,
    mean_field: &Basis,
) -> Result<Basis, StudyError> {
    Ok(match basis::correlation_auxiliary(&orbital.name) {
        Some(name) => Basis::new(molecule, &BasisSet::auxiliary(name)?)?,
        None => mean_field.clone(),
    })
}

/// An atom may stand this far from its symmetric place, Å: more than the rounding of published
/// geometries, less than any distortion that matters to a spectrum.
const SYMMETRY_TOLERANCE_ANGSTROM: f64 = 5e-3;

/// Label and character of every orbital of one spin.
fn portraits(
    molecule: &Molecule,
    group: &PointGroup,
    basis: &Basis,
    overlap: &DMatrix<f64>,
    set: &SpinOrbitals,
) -> Result<Vec<Portrait>, StudyError> {
    let symmetries = irreps::labels(
        group,
        molecule,
        basis,
        overlap,
        &set.coefficients,
        &set.energies,
    )?;
    let characters = orbitals::characters(molecule, basis, overlap, set)?;
    Ok((symmetries.into_iter().zip(characters))
        .map(|(symmetry, character)| Portrait {
            label: symmetry.label,
            character,
        })
        .collect())
}

/// Empty orbitals listed beside the occupied ones.
const EMPTY_SHOWN: usize = 3;

fn summary(molecule: &Molecule, group: &PointGroup) -> MoleculeSummary {
    let atoms = (molecule.atoms.iter())
        .zip(molecule.positions_angstrom())
        .map(|(atom, position)| AtomLine {
            element: atom.symbol().to_owned(),
            x: position.x,
            y: position.y,
            z: position.z,
        })
        .collect();
    MoleculeSummary {
        name: molecule.name.clone(),
        formula: molecule.formula(),
        charge: molecule.charge,
        multiplicity: molecule.multiplicity,
        point_group: Some(group.symbol.to_string()),
        atoms,
    }
}
