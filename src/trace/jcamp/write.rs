//! Writing traces as JCAMP-DX 5.01 that reads back bit for bit.
//!
//! What the standard has no place for goes into labels of our own (they begin with `$`, as it
//! asks): deviations, exposures, and the statements that delimited text carries in comments.

use std::io::{self, Write};

use super::super::delimited::exact;
use super::super::stated::{
    AXIS, COMMENT, LENGTH, NOISE, NOTE, PHOTON, RETARDING, SOURCE, TIME_ZERO, TRACE, VERSION,
    escape,
};
use super::super::{Axis, Noise, Trace};
use super::asdf::{Ordinates, encode};
use super::block::grid;

/// Label of the list of standard deviations.
pub(super) const SD: &str = "$SD";
/// Label of the list of exposures.
pub(super) const EXPOSURE: &str = "$EXPOSURE";

/// Whole numbers up to here are exact in double precision, and so are their differences.
const EXACT_INTEGER: f64 = 4_503_599_627_370_496.0;

/// Writes one trace as a block, several as linked blocks.
///
/// `ordinates` is the form of the table. A trace whose energies are not evenly spaced to the last
/// bit, or whose counts are not whole numbers, is written in pairs whatever was asked for: the
/// other forms would lose something.
///
/// # Errors
/// Those of the writer.
pub fn write_jcamp(traces: &[Trace], ordinates: Ordinates, out: &mut impl Write) -> io::Result<()> {
    if let [trace] = traces {
        return write_block(trace, None, ordinates, out);
    }
    writeln!(out, "##TITLE= {} traces", traces.len())?;
    writeln!(out, "##JCAMP-DX= 5.01")?;
    writeln!(out, "##DATA TYPE= LINK")?;
    writeln!(out, "##BLOCKS= {}", traces.len())?;
    for (i, trace) in traces.iter().enumerate() {
        write_block(trace, Some(i + 1), ordinates, out)?;
    }
    writeln!(out, "##END=")
}

fn write_block(
    trace: &Trace,
    id: Option<usize>,
    ordinates: Ordinates,
    out: &mut impl Write,
) -> io::Result<()> {
    let even = even_whole(trace).filter(|_| ordinates != Ordinates::Pairs);
    writeln!(out, "##TITLE= {}", text(&trace.source))?;
    writeln!(out, "##JCAMP-DX= 5.01")?;
    writeln!(out, "##DATA TYPE= PHOTOELECTRON SPECTRUM")?;
    writeln!(
        out,
        "##DATA CLASS= {}",
        if even.is_some() { "XYDATA" } else { "XYPOINTS" }
    )?;
    if let Some(id) = id {
        writeln!(out, "##BLOCK_ID= {id}")?;
    }
    writeln!(out, "##ORIGIN= unstated")?;
    writeln!(out, "##OWNER= unstated")?;
    own(out, TRACE, VERSION)?;
    own(out, SOURCE, &text(&trace.source))?;
    own(out, AXIS, trace.axis.name())?;
    if let Axis::FlightTime {
        length_m,
        time_zero_ns,
        retarding_v,
    } = trace.axis
    {
        own(out, LENGTH, &format!("{} m", exact(length_m)))?;
        own(out, TIME_ZERO, &format!("{} ns", exact(time_zero_ns)))?;
        own(out, RETARDING, &format!("{} V", exact(retarding_v)))?;
    }
    if let Some(photon) = trace.photon_energy_ev {
        own(out, PHOTON, &format!("{} eV", exact(photon)))?;
    }
    let noise = match trace.noise {
        Noise::Poisson => "poisson",
        Noise::Stated => "stated",
    };
    own(out, NOISE, noise)?;
    for note in &trace.notes {
        own(out, NOTE, &text(note))?;
    }
    for comment in &trace.comments {
        own(out, COMMENT, &text(comment))?;
    }
    for (label, list) in [(SD, &trace.sd), (EXPOSURE, &trace.exposure_ev)] {
        writeln!(out, "##{label}=")?;
        for value in list {
            writeln!(out, "{}", affn(*value))?;
        }
    }
    writeln!(out, "##XUNITS= IONIZATION ENERGY (EV)")?;
    writeln!(out, "##YUNITS= COUNTS")?;
    let fold = |list: &[f64], pick: fn(f64, f64) -> f64| list.iter().copied().reduce(pick);
    for (label, value) in [
        ("FIRSTX", trace.energy_ev.first().copied()),
        ("LASTX", trace.energy_ev.last().copied()),
        ("MINY", fold(&trace.counts, f64::min)),
        ("MAXY", fold(&trace.counts, f64::max)),
        ("FIRSTY", trace.counts.first().copied()),
        ("XFACTOR", Some(1.0)),
        ("YFACTOR", Some(1.0)),
    ] {
        writeln!(out, "##{label}= {}", affn(value.unwrap_or(0.0)))?;
    }
    writeln!(out, "##NPOINTS= {}", trace.len())?;
    match even {
        Some(counts) => {
            writeln!(out, "##XYDATA= (X++(Y..Y))")?;
            for line in encode(&counts, ordinates, |i| affn(trace.energy_ev[i])) {
                writeln!(out, "{line}")?;
            }
        }
        None => {
            writeln!(out, "##XYPOINTS= (XY..XY)")?;
            for (energy, counts) in trace.energy_ev.iter().zip(&trace.counts) {
                writeln!(out, "{}, {}", affn(*energy), affn(*counts))?;
            }
        }
    }
    writeln!(out, "##END=")
}

/// The counts as whole numbers, if they are and the axis is exactly even.
fn even_whole(trace: &Trace) -> Option<Vec<i64>> {
    let ends = [*trace.energy_ev.first()?, *trace.energy_ev.last()?];
    let n = trace.len();
    let even = (0..n).all(|i| grid(ends, n, i).to_bits() == trace.energy_ev[i].to_bits());
    let whole = |c: &f64| {
        c.fract() == 0.0 && c.abs() < EXACT_INTEGER && !(*c == 0.0 && c.is_sign_negative())
    };
    (even && trace.counts.iter().all(whole))
        .then(|| trace.counts.iter().map(|&c| c as i64).collect())
}

fn own(out: &mut impl Write, key: &str, value: &str) -> io::Result<()> {
    writeln!(out, "##${}= {value}", key.to_uppercase())
}

/// A number with the sign that the standard wants in an exponent.
fn affn(value: f64) -> String {
    let text = exact(value);
    match text.split_once('e') {
        Some((digits, power)) if !power.starts_with('-') => format!("{digits}E+{power}"),
        _ => text.replace('e', "E"),
    }
}

/// Any text in one line, safe from being taken for a comment.
fn text(any: &str) -> String {
    escape(any).replace('$', "\\$")
}
