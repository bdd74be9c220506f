//! Writing a trace as comma-separated text that reads back bit for bit.

use std::io::{self, Write};

use super::super::stated::{
    AXIS, COMMENT, LENGTH, NOISE, NOTE, PHOTON, RETARDING, SOURCE, TIME_ZERO, TRACE, VERSION,
    escape,
};
use super::super::{Axis, Noise, Trace};

/// The columns of our own files.
pub(super) const COLUMNS: [&str; 4] = ["energy_ev", "counts", "sd", "exposure_ev"];

/// Writes a trace: statements in comment lines, a header, then one row per channel.
///
/// Numbers have as many digits as it takes to read the same bits again. Reading the text under
/// the trace's own source name gives back an equal trace.
///
/// # Errors
/// Those of the writer.
pub fn write_delimited(trace: &Trace, out: &mut impl Write) -> io::Result<()> {
    writeln!(out, "# {TRACE}: {VERSION}")?;
    writeln!(out, "# {SOURCE}: {}", escape(&trace.source))?;
    writeln!(out, "# {AXIS}: {}", trace.axis.name())?;
    if let Axis::FlightTime {
        length_m,
        time_zero_ns,
        retarding_v,
    } = trace.axis
    {
        writeln!(out, "# {LENGTH}: {} m", exact(length_m))?;
        writeln!(out, "# {TIME_ZERO}: {} ns", exact(time_zero_ns))?;
        writeln!(out, "# {RETARDING}: {} V", exact(retarding_v))?;
    }
    if let Some(photon) = trace.photon_energy_ev {
        writeln!(out, "# {PHOTON}: {} eV", exact(photon))?;
    }
    let noise = match trace.noise {
        Noise::Poisson => "poisson",
        Noise::Stated => "stated",
    };
    writeln!(out, "# {NOISE}: {noise}")?;
    for note in &trace.notes {
        writeln!(out, "# {NOTE}: {}", escape(note))?;
    }
    for comment in &trace.comments {
        writeln!(out, "# {COMMENT}: {}", escape(comment))?;
    }
    writeln!(out, "{}", COLUMNS.join(","))?;
    for i in 0..trace.len() {
        let values = [
            trace.energy_ev[i],
            trace.counts[i],
            trace.sd[i],
            trace.exposure_ev[i],
        ];
        writeln!(out, "{}", values.map(exact).join(","))?;
    }
    Ok(())
}

/// The shortest text that reads back as the same number.
pub(in super::super) fn exact(value: f64) -> String {
    let size = value.abs();
    if size == 0.0 || (1e-5..1e16).contains(&size) {
        format!("{value}")
    } else {
        format!("{value:e}")
    }
}
