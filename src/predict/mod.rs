//! Sticks × shape ⊗ instrument → predicted trace. Knows no molecule.
//!
//! Each hole state contributes its vibronic sticks, or one stick at its vertical ionization energy
//! where no envelope was computed, with the weight degeneracy × pole strength: all orbitals are
//! taken to have the same cross section per electron, so predicted areas are good to a factor of
//! two at best. Intensities are per eV: a state's curve integrates to its weight.

use crate::levels::{HoleState, Stick};
use crate::lineshape::{Shape, ShapeError};
use serde::{Deserialize, Serialize};

/// What stands between the sticks and the trace.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Instrument {
    /// Resolution: Gaussian full width at half maximum, eV.
    pub gaussian_fwhm_ev: f64,
    /// Lorentzian full width at half maximum (lifetime), eV.
    #[serde(default)]
    pub lorentzian_fwhm_ev: f64,
    /// Further Gaussian width of unresolved rotation and vibration, eV; adds in squares.
    #[serde(default)]
    pub extra_fwhm_ev: f64,
    /// Shown energy = scale × computed vertical energy + shift. Vibrational spacings keep their
    /// size: the error of a level is that of its electronic energy.
    #[serde(default = "one")]
    pub energy_scale: f64,
    /// The shift, eV.
    #[serde(default)]
    pub energy_shift_ev: f64,
    /// Lines of the lamp beside the main one.
    #[serde(default)]
    pub lamp_lines: Vec<LampLine>,
}

fn one() -> f64 {
    1.0
}

/// A weaker line of the lamp. Its photons carry more energy (or less), so every band appears again
/// at a lower (higher) apparent ionization energy.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LampLine {
    /// For example `He I β`.
    pub name: String,
    /// Photon energy above that of the main line, eV.
    pub excess_ev: f64,
    /// Intensity relative to the main line.
    pub relative_intensity: f64,
}

/// A predicted trace with its parts, all on the axis given.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PredictedTrace {
    /// Ionization energy of each point, eV.
    pub energy_ev: Vec<f64>,
    /// Sum of everything, per eV.
    pub total: Vec<f64>,
    /// Each hole state by itself, in the order given.
    pub states: Vec<StateCurve>,
    /// All states seen through the lamp's other lines, per eV.
    pub lamp_satellites: Vec<f64>,
}

/// One hole state as it appears.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct StateCurve {
    /// Label of the state.
    pub label: String,
    /// Vertical energy after scale and shift, eV.
    pub energy_ev: f64,
    /// Area: degeneracy × pole strength.
    pub weight: f64,
    /// Sticks where they appear; intensities sum to the weight.
    pub sticks: Vec<PlacedStick>,
    /// The curve, per eV.
    pub intensity: Vec<f64>,
}

/// A stick on the ionization-energy axis.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct PlacedStick {
    /// Where, eV.
    pub energy_ev: f64,
    /// Area.
    pub intensity: f64,
}

impl Instrument {
    /// An instrument of the given resolution (Gaussian full width at half maximum, eV) and
    /// nothing else.
    pub fn of_resolution(gaussian_fwhm_ev: f64) -> Self {
        Instrument {
            gaussian_fwhm_ev,
            lorentzian_fwhm_ev: 0.0,
            extra_fwhm_ev: 0.0,
            energy_scale: 1.0,
            energy_shift_ev: 0.0,
            lamp_lines: Vec::new(),
        }
    }

    /// The shape of a single stick.
    pub fn shape(&self) -> Result<Shape, ShapeError> {
        for gaussian in [self.gaussian_fwhm_ev, self.extra_fwhm_ev] {
            if gaussian < 0.0 {
                return Err(ShapeError::Width {
                    gaussian,
                    lorentzian: self.lorentzian_fwhm_ev,
                });
            }
        }
        let gaussian = self.gaussian_fwhm_ev.hypot(self.extra_fwhm_ev);
        Shape::new(gaussian, self.lorentzian_fwhm_ev)
    }
}

/// What `states` would show at `energies` (eV, any order and spacing).
pub fn predict(
    states: &[HoleState],
    instrument: &Instrument,
    energies: &[f64],
) -> Result<PredictedTrace, ShapeError> {
    let shape = instrument.shape()?;
    let mut total = vec![0.0; energies.len()];
    let mut lamp_satellites = vec![0.0; energies.len()];
    let mut curves = Vec::with_capacity(states.len());
    for state in states {
        let curve = state_curve(state, instrument, &shape, energies);
        for line in &instrument.lamp_lines {
            for stick in &curve.sticks {
                let centre = stick.energy_ev - line.excess_ev;
                let area = stick.intensity * line.relative_intensity;
                shape.add(centre, area, energies, &mut lamp_satellites);
            }
        }
        for (sum, value) in total.iter_mut().zip(&curve.intensity) {
            *sum += value;
        }
        curves.push(curve);
    }
    for (sum, value) in total.iter_mut().zip(&lamp_satellites) {
        *sum += value;
    }
    Ok(PredictedTrace {
        energy_ev: energies.to_vec(),
        total,
        states: curves,
        lamp_satellites,
    })
}

fn state_curve(
    state: &HoleState,
    instrument: &Instrument,
    shape: &Shape,
    energies: &[f64],
) -> StateCurve {
    let vertical =
        instrument.energy_scale * state.ionization_energy_ev + instrument.energy_shift_ev;
    let weight = state.degeneracy as f64 * state.pole_strength;
    let single = [Stick {
        offset_ev: 0.0,
        intensity: 1.0,
    }];
    let offsets = match &state.envelope {
        Some(envelope) => envelope.sticks.as_slice(),
        None => &single,
    };
    let sticks: Vec<PlacedStick> = offsets
        .iter()
        .map(|stick| PlacedStick {
            energy_ev: vertical + stick.offset_ev,
            intensity: weight * stick.intensity,
        })
        .collect();
    let mut intensity = vec![0.0; energies.len()];
    for stick in &sticks {
        shape.add(stick.energy_ev, stick.intensity, energies, &mut intensity);
    }
    StateCurve {
        label: state.label.clone(),
        energy_ev: vertical,
        weight,
        sticks,
        intensity,
    }
}
