//! A predicted trace from a geometry.

use super::settings::TheorySettings;
use super::{Observer, StudyError, compute};
use crate::levels::{HoleState, Levels};
use crate::predict::{Instrument, PredictedTrace, predict};
use crate::report::{self, Heading, Overlay, OverlayStick, PredictedCurve};
use std::path::{Path, PathBuf};

/// Settings of `simulate`.
#[derive(Debug, Clone, PartialEq)]
pub struct SimulateSettings {
    /// Molecule and level.
    pub theory: TheorySettings,
    /// Full width at half maximum of every line, eV.
    pub resolution_ev: f64,
    /// Added to every computed energy, eV.
    pub shift_ev: f64,
    /// Multiplies every computed energy before the shift.
    pub scale: f64,
    /// States above it are left out, eV.
    pub photon_energy_ev: Option<f64>,
}

/// A prediction with what it was made from.
#[derive(Debug, Clone, PartialEq)]
pub struct Simulation {
    /// The computed levels.
    pub levels: Levels,
    /// The states that are shown, one per curve of the prediction.
    pub states: Vec<HoleState>,
    /// The predicted trace.
    pub predicted: PredictedTrace,
    /// What it was made with.
    pub instrument: Instrument,
}

impl Simulation {
    /// Writes levels, curve and figure into a folder; returns the files.
    ///
    /// # Errors
    /// An output that cannot be made or written.
    pub fn write(&self, folder: &Path) -> Result<Vec<PathBuf>, StudyError> {
        let Self {
            levels,
            states,
            predicted,
            instrument,
        } = self;
        let molecule = &levels.molecule;
        let mut details = format!(
            "{} · resolution {} eV",
            levels.level, instrument.gaussian_fwhm_ev
        );
        if instrument.energy_scale != 1.0 || instrument.energy_shift_ev != 0.0 {
            details += &format!(
                " · shifted: {} × computed {:+} eV",
                instrument.energy_scale, instrument.energy_shift_ev
            );
        }
        let heading = Heading {
            title: format!("{}, {}", molecule.name, molecule.formula),
            details,
        };
        let sticks = (predicted.states.iter().zip(states)).map(|(curve, state)| OverlayStick {
            label: curve.label.clone(),
            computed_ev: state.ionization_energy_ev,
            shifted_ev: curve.energy_ev,
            height: curve.weight,
            band: None,
            verdict: state.character.verdict,
        });
        let overlay = Overlay {
            unit: "arbitrary units".to_owned(),
            sticks: sticks.collect(),
            predicted: Some(PredictedCurve {
                energy_ev: predicted.energy_ev.clone(),
                intensity: predicted.total.clone(),
            }),
            ..Overlay::default()
        };
        Ok(report::write_prediction(
            &heading, &overlay, levels, folder,
        )?)
    }
}

/// Points per line width on the predicted axis.
const POINTS_PER_WIDTH: f64 = 12.0;

/// Line widths that the axis reaches beyond the outermost lines.
const MARGIN_WIDTHS: f64 = 4.0;

/// Computes levels and predicts the trace of the outer valence region and what else the photon
/// energy reaches.
///
/// # Errors
/// What [`compute::levels`] says, and impossible line shapes.
pub fn run(settings: &SimulateSettings, observer: Observer) -> Result<Simulation, StudyError> {
    let levels = compute::levels(&settings.theory, observer)?;
    let shown = |state: &HoleState| settings.scale * state.ionization_energy_ev + settings.shift_ev;
    let states: Vec<HoleState> = (levels.hole_states.iter())
        .filter(|s| {
            settings
                .photon_energy_ev
                .is_none_or(|limit| shown(s) < limit)
        })
        .cloned()
        .collect();
    if states.is_empty() {
        return Err(StudyError::Option {
            option: "--photon-energy",
            problem: format!(
                "no state can be ionized below {} eV; the lowest computed one lies at {:.2} eV",
                settings.photon_energy_ev.unwrap_or_default(),
                levels
                    .hole_states
                    .iter()
                    .map(shown)
                    .fold(f64::INFINITY, f64::min)
            ),
        });
    }
    let margin = MARGIN_WIDTHS * settings.resolution_ev;
    let low = states.iter().map(shown).fold(f64::INFINITY, f64::min) - margin;
    let high = states.iter().map(shown).fold(f64::NEG_INFINITY, f64::max) + margin;
    let steps = ((high - low) / settings.resolution_ev * POINTS_PER_WIDTH).ceil() as usize;
    let energies: Vec<f64> = (0..=steps)
        .map(|i| low + (high - low) * i as f64 / steps as f64)
        .collect();
    let mut instrument = Instrument::of_resolution(settings.resolution_ev);
    instrument.energy_scale = settings.scale;
    instrument.energy_shift_ev = settings.shift_ev;
    Ok(Simulation {
        predicted: predict(&states, &instrument, &energies)?,
        levels,
        states,
        instrument,
    })
}
