//! Fills the dossier: everything that the outputs show is computed here or before.

use super::assigning::Measured;
use super::compute::PROGRAM;
use super::settings::Settings;
use crate::assign::Assignment;
use crate::fit::Grouping;
use crate::levels::{Levels, LineKind};
use crate::report::{
    AssignmentSummary, BandCurve, Dossier, FitSummary, Overlay, OverlayStick, SCHEMA, TraceSummary,
};
use crate::trace::Axis;

/// Puts a finished study on record.
pub(super) fn fill(
    settings: &Settings,
    measured: Measured,
    levels: Levels,
    assignment: Assignment,
) -> Dossier {
    let grouping = &measured.fit.groupings[assignment.grouping];
    let mut overlay = measured_overlay(&measured, grouping);
    overlay.direction = settings.direction;
    overlay.sticks = sticks(&levels, &assignment);
    let study = match serde_json::to_value(settings) {
        Ok(serde_json::Value::Object(map)) => map,
        other => unreachable!("settings are a plain struct, not {other:?}"),
    };
    Dossier {
        schema: SCHEMA.to_owned(),
        program: PROGRAM.to_owned(),
        title: settings.name.clone(),
        study,
        trace: TraceSummary::of(&measured.trace),
        bands: grouping.bands.clone(),
        fit: FitSummary::of(&measured.fit),
        assignment: AssignmentSummary::of(&assignment),
        levels,
        matches: assignment.matches,
        remarks: assignment.remarks,
        overlay,
    }
}

/// The measured part of a figure: points, fit, one curve per band, residuals.
pub(super) fn measured_overlay(measured: &Measured, grouping: &Grouping) -> Overlay {
    let Measured { trace, fit } = measured;
    // Intensity is counts per eV. On a scanned axis all channels have one exposure and the
    // counts themselves are what the chemist knows.
    let (unit, factor) = match trace.axis {
        Axis::FlightTime { .. } => ("counts per eV", 1.0),
        Axis::Ionization | Axis::Kinetic | Axis::Wavenumber => ("counts", trace.exposure_ev[0]),
    };
    let shown = |intensity: &[f64]| intensity.iter().map(|y| y * factor).collect::<Vec<_>>();
    let per_ev = |values: &[f64]| {
        (values.iter().zip(&trace.exposure_ev))
            .map(|(v, exposure)| v / exposure * factor)
            .collect::<Vec<_>>()
    };
    let bands = (grouping.bands.iter())
        .map(|band| BandCurve {
            band: band.id,
            intensity: shown(&fit.band_curve(band, &trace.energy_ev)),
        })
        .collect();
    Overlay {
        energy_ev: trace.energy_ev.clone(),
        intensity: per_ev(&trace.counts),
        intensity_sd: per_ev(&trace.sd),
        unit: unit.to_owned(),
        fit: shown(&fit.total),
        background: shown(&fit.background),
        bands,
        residual: fit.residuals.clone(),
        ..Overlay::default()
    }
}

fn sticks(levels: &Levels, assignment: &Assignment) -> Vec<OverlayStick> {
    (levels.hole_states.iter())
        .filter(|state| state.kind == LineKind::Main)
        .map(|state| OverlayStick {
            label: state.label.clone(),
            computed_ev: state.ionization_energy_ev,
            shifted_ev: assignment.scale * state.ionization_energy_ev + assignment.shift_ev,
            height: state.pole_strength * state.degeneracy as f64,
            band: (assignment.matches.iter())
                .find(|m| m.hole_states.contains(&state.label))
                .map(|m| m.band),
            verdict: state.character.verdict,
        })
        .collect()
}
