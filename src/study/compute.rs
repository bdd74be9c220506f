//! The theory half of a study: geometry in, levels out.

use super::settings::TheorySettings;
use super::{Event, Observer, StudyError};
use crate::basis::{Basis, BasisSet};
use crate::levels::{
    AtomLine, Level, Levels, Method, MoleculeSummary, SCHEMA, ScfSummary,
};
use crate::molecule::Molecule;
use crate::scf::{self, ScfOptions};
use crate::{integrals, ionization, orbitals};

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
    let characters = (mean_field.orbitals.by_spin().into_iter())
        .map(|(_, set)| orbitals::characters(molecule, &basis, &overlap, set))
        .collect::<Result<Vec<_>, _>>()?;
    let core = molecule.core_orbital_count();
    Ok(Levels {
        schema: SCHEMA.to_owned(),
        program: PROGRAM.to_owned(),
        molecule: summary(molecule),
        level: Level {
            method: settings.level.method,
            basis: basis.name.clone(),
            auxiliary: auxiliary.name.clone(),
            frozen_core: false,
        },
        scf: ScfSummary {
            energy_hartree: mean_field.energy_hartree,
            nuclear_repulsion_hartree: mean_field.nuclear_repulsion_hartree,
            iterations: mean_field.iterations,
            converged: true,
            dipole_debye: mean_field.dipole_debye,
        },
        orbitals: ionization::orbital_lines(&mean_field.orbitals, core, &characters, EMPTY_SHOWN),
        hole_states: match settings.level.method {
            Method::Koopmans => ionization::koopmans(&mean_field.orbitals, core, &characters)?,
        },
    })
}

/// Empty orbitals listed beside the occupied ones.
const EMPTY_SHOWN: usize = 3;

fn summary(molecule: &Molecule) -> MoleculeSummary {
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
        point_group: None,
        atoms,
    }
}
