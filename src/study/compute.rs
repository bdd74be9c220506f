//! The theory half of a study: geometry in, levels out.

use super::settings::TheorySettings;
use super::{Event, Observer, StudyError};
use crate::basis::{Basis, BasisSet};
use crate::levels::{
    AtomLine, Level, Levels, Method, MoleculeSummary, OrbitalLine, SCHEMA, ScfSummary,
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
                gradient: step.gradient,
            })
        },
    )?;
    observer(&Event::Stage("character of the orbitals"));
    todo_replace(molecule, basis, auxiliary, mean_field, settings)
}
