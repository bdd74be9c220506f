//! The whole job: levels and bands, matched.

use super::settings::{Settings, TraceSettings};
use super::{Event, Observer, StudyError, compute, dossier};
use crate::assign::{self, Conditions};
use crate::fit::{self, BandFit, FitOptions};
use crate::report::Dossier;
use crate::trace::Trace;

/// A trace with its fit.
#[derive(Debug, Clone, PartialEq)]
pub struct Measured {
    /// The trace.
    pub trace: Trace,
    /// Its bands.
    pub fit: BandFit,
}

/// Reads a trace and fits its bands.
///
/// # Errors
/// A wrong file, or a fit that did not converge.
pub fn fit(
    settings: &TraceSettings,
    options: &FitOptions,
    observer: Observer,
) -> Result<Measured, StudyError> {
    observer(&Event::Stage("reading the trace"));
    let trace = settings.load()?;
    let fit = fit::fit_bands(&trace, options, &mut |step| {
        observer(&Event::Fit(step.to_string()))
    })
    .map_err(|error| StudyError::Fit {
        file: trace.source.clone(),
        error,
    })?;
    Ok(Measured { trace, fit })
}

/// Runs a study from its settings to the dossier.
///
/// # Errors
/// Wrong input, or a calculation that did not converge.
pub fn run(settings: &Settings, observer: Observer) -> Result<Dossier, StudyError> {
    // The trace comes first: what is wrong with it shows before the long calculation.
    let measured = fit(&settings.trace, &settings.fit, observer)?;
    let levels = compute::levels(&settings.theory, observer)?;
    observer(&Event::Stage("matching bands and orbitals"));
    let conditions = Conditions {
        photon_energy_ev: measured.trace.photon_energy_ev,
        window_ev: measured.trace.span_ev(),
        scale_offset_sd_ev: settings.trace.scale_offset_sd_ev,
    };
    let assignment = assign::assign(&measured.fit.groupings, &levels, &conditions)?;
    Ok(dossier::fill(settings, measured, levels, assignment))
}
