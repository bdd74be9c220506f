//! The whole job: levels and bands, matched.

use super::settings::{Settings, TraceSettings};
use super::{Event, Observer, StudyError, compute, dossier};
use crate::assign::{self, Conditions};
use crate::fit::{self, BandFit, FitOptions};
use crate::report::{self, Dossier, Heading};
use crate::trace::Trace;
use std::path::{Path, PathBuf};

/// A trace with its fit.
#[derive(Debug, Clone, PartialEq)]
pub struct Measured {
    /// The trace.
    pub trace: Trace,
    /// Its bands.
    pub fit: BandFit,
}

impl Measured {
    /// Writes bands and figure into a folder; returns the files.
    ///
    /// # Errors
    /// An output that cannot be made or written.
    pub fn write(&self, folder: &Path) -> Result<Vec<PathBuf>, StudyError> {
        let first = &self.fit.groupings[0];
        let photon = (self.trace.photon_energy_ev).map(|e| format!("hν = {e:.2} eV"));
        let heading = Heading {
            title: self.trace.source.clone(),
            details: photon.unwrap_or_default(),
        };
        let overlay = dossier::measured_overlay(self, first);
        Ok(report::write_bands(&heading, &overlay, &self.fit, folder)?)
    }
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
