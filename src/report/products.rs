//! The smaller products: bands of a trace without a molecule, a prediction without a trace, and
//! what is in a measured file.

use super::files::write_files;
use super::{Figure, Heading, Overlay, ReportError};
use crate::fit::{Band, BandFit};
use crate::levels::Levels;
use crate::trace::{Axis, Noise, Trace};
use serde::Serialize;
use std::path::{Path, PathBuf};

/// Writes `bands.json`, `bands.csv` and the figure of a fit into a folder; returns their paths.
///
/// # Errors
/// Any [`ReportError`].
pub fn write_bands(
    heading: &Heading,
    overlay: &Overlay,
    fit: &BandFit,
    folder: &Path,
) -> Result<Vec<PathBuf>, ReportError> {
    let bands: &[Band] = fit.groupings.first().map_or(&[], |g| &g.bands);
    let figure = Figure::new(heading, overlay, bands, &[])?;
    let mut outputs = vec![
        ("bands.json", json("bands.json", fit)?),
        ("bands.csv", bands_csv(bands)?),
    ];
    outputs.extend(drawings(&figure, ["bands.svg", "bands.png", "bands.pdf"])?);
    write_files(folder, outputs)
}

/// Writes `levels.json`, `predicted.csv` and the figure of a prediction into a folder; returns
/// their paths.
///
/// # Errors
/// Any [`ReportError`].
pub fn write_prediction(
    heading: &Heading,
    overlay: &Overlay,
    levels: &Levels,
    folder: &Path,
) -> Result<Vec<PathBuf>, ReportError> {
    let figure = Figure::new(heading, overlay, &[], &[])?;
    let curve = overlay.predicted.as_ref().ok_or(ReportError::Empty)?;
    let rows = (curve.energy_ev.iter())
        .zip(&curve.intensity)
        .map(|(energy, intensity)| [energy.to_string(), intensity.to_string()]);
    let table = csv_text(
        "predicted.csv",
        &["ionization_energy_ev", "intensity_per_ev"],
        rows,
    )?;
    let mut outputs = vec![
        ("levels.json", json("levels.json", levels)?),
        ("predicted.csv", table),
    ];
    outputs.extend(drawings(
        &figure,
        ["predicted.svg", "predicted.png", "predicted.pdf"],
    )?);
    write_files(folder, outputs)
}

/// What is in a trace, for a terminal.
pub fn trace_summary(trace: &Trace) -> String {
    let [low, high] = trace.span_ev();
    let mut lines = vec![
        format!("{}: {} channels", trace.source, trace.len()),
        format!("  ionization energy {low:.4} to {high:.4} eV"),
        format!("  axis as recorded: {}", trace.axis.name()),
    ];
    if let Axis::FlightTime {
        length_m,
        time_zero_ns,
        retarding_v,
    } = trace.axis
    {
        lines.push(format!(
            "  flight length {length_m} m, time zero {time_zero_ns} ns, retarding potential {retarding_v} V"
        ));
    }
    if let Some(energy) = trace.photon_energy_ev {
        lines.push(format!("  photon energy {energy} eV"));
    }
    let steps = || trace.energy_ev.windows(2).map(|w| w[1] - w[0]);
    let narrowest = steps().fold(f64::INFINITY, f64::min);
    let widest = steps().fold(0.0, f64::max);
    lines.push(format!("  steps {narrowest:.5} to {widest:.5} eV"));
    let largest = trace
        .counts
        .iter()
        .copied()
        .fold(f64::NEG_INFINITY, f64::max);
    lines.push(format!(
        "  counts: total {:.0}, largest {largest:.0}",
        trace.total_counts()
    ));
    lines.push(match trace.noise {
        Noise::Poisson => "  standard deviations: Poisson, from the counts".to_owned(),
        Noise::Stated => "  standard deviations: stated in the file".to_owned(),
    });
    lines.extend(trace.notes.iter().map(|note| format!("  note: {note}")));
    lines.extend(
        trace
            .comments
            .iter()
            .map(|comment| format!("  # {comment}")),
    );
    lines.join("\n") + "\n"
}

fn drawings<'a>(
    figure: &Figure,
    [svg, png, pdf]: [&'a str; 3],
) -> Result<[(&'a str, Vec<u8>); 3], ReportError> {
    Ok([
        (svg, figure.svg().as_bytes().to_vec()),
        (png, figure.png()?),
        (pdf, figure.pdf()?),
    ])
}

fn json(name: &'static str, value: &impl Serialize) -> Result<Vec<u8>, ReportError> {
    let text = serde_json::to_string_pretty(value).map_err(|e| ReportError::Encoding {
        name,
        reason: e.to_string(),
    })?;
    Ok((text + "\n").into_bytes())
}

fn bands_csv(bands: &[Band]) -> Result<Vec<u8>, ReportError> {
    let header = [
        "band",
        "vertical_ev",
        "vertical_sd",
        "maximum_ev",
        "origin_ev",
        "area",
        "area_sd",
        "fwhm_ev",
        "members",
        "spacing_ev",
    ];
    let optional = |value: Option<f64>| value.map_or(String::new(), |v| v.to_string());
    let rows = bands.iter().map(|band| {
        [
            band.id.to_string(),
            band.vertical_ev.to_string(),
            band.vertical_sd.to_string(),
            band.maximum_ev.to_string(),
            optional(band.origin_ev),
            band.area.to_string(),
            band.area_sd.to_string(),
            band.fwhm_ev.to_string(),
            band.members.len().to_string(),
            optional(band.spacing_ev),
        ]
    });
    csv_text("bands.csv", &header, rows)
}

fn csv_text<const N: usize>(
    name: &'static str,
    header: &[&str; N],
    rows: impl Iterator<Item = [String; N]>,
) -> Result<Vec<u8>, ReportError> {
    let failed = |reason: String| ReportError::Encoding { name, reason };
    let mut writer = csv::Writer::from_writer(Vec::new());
    writer
        .write_record(header)
        .map_err(|e| failed(e.to_string()))?;
    for row in rows {
        writer
            .write_record(&row)
            .map_err(|e| failed(e.to_string()))?;
    }
    writer.into_inner().map_err(|e| failed(e.to_string()))
}
