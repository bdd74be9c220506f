//! From what was recorded to ionization energy.
//!
//! * Ionization: I = x. Wavenumber: I = h·c·x.
//! * Kinetic: I = hν − x (energy conservation; the recoil of the ion, below 0.1 meV for electrons
//!   of valence spectra, is left out).
//! * Flight time: E = ½·m·(L/(t − t0))² + V, I = hν − E, with V the retarding potential. Channel
//!   edges lie midway between the times; a channel's energy is the middle of its edges in eV and
//!   its exposure their distance, so the Jacobian is exact for each channel.
//!
//! Channels that no electron can reach are left out, and a note says how many and with how many
//! counts: flight times whose channel begins at or before time zero, flight times faster than the
//! photon energy allows, negative kinetic energies.

use std::ops::RangeInclusive;

use crate::units;

use super::error::Problem;
use super::record::{Meaning, Record};
use super::{Axis, MIN_CHANNELS, Noise, ReadOptions, Trace, TraceError, poisson_sd};

const SECONDS_PER_NANOSECOND: f64 = 1e-9;

/// One point of a record on its way to the trace.
struct Channel {
    /// Its place in the record.
    index: usize,
    energy_ev: f64,
    exposure_ev: f64,
}

/// Converts a record; the counts come through untouched.
pub(super) fn to_trace(
    record: Record,
    source: &str,
    options: &ReadOptions,
) -> Result<Trace, TraceError> {
    let whole = |problem| TraceError::file(source, problem);
    if let Some((unit, expected)) = &record.foreign_unit
        && !record.converted
    {
        let (column, unit) = (record.abscissa_name.clone(), unit.clone());
        let problem = Problem::Unit {
            column,
            unit,
            expected,
        };
        return Err(TraceError {
            line: record.abscissa_line,
            ..whole(problem)
        });
    }
    check_points(&record, source)?;
    let mut notes = record.notes.clone();
    let photon = settle_photon_energy(&record, options, &mut notes).map_err(whole)?;
    let axis = settle_axis(&record, options, &mut notes).map_err(whole)?;
    let window = match options.window_ev {
        Some([lo, hi]) if lo.is_finite() && hi.is_finite() && lo < hi => Some(lo..=hi),
        Some([lo, hi]) => return Err(whole(Problem::Window { lo, hi })),
        None => None,
    };
    let needed_photon = |axis| {
        let because = match (&options.axis, record.meaning_from.as_str()) {
            (None, from) if !from.is_empty() => format!(" (by {from})"),
            _ => String::new(),
        };
        photon.ok_or_else(|| whole(Problem::NoPhotonEnergy { axis, because }))
    };
    let mut channels = match axis {
        _ if record.converted => converted(&record),
        Axis::Ionization => scanned(&record, |x| x),
        Axis::Wavenumber => scanned(&record, |x| x * units::EV_PER_WAVENUMBER),
        Axis::Kinetic => {
            let photon = needed_photon("kinetic energy")?;
            kinetic(&record, photon, window.as_ref(), source, &mut notes)?
        }
        Axis::FlightTime {
            length_m,
            time_zero_ns,
            retarding_v,
        } => {
            check_calibration(length_m, time_zero_ns, retarding_v).map_err(whole)?;
            let photon = needed_photon("flight time")?;
            let ionization = |t: f64| {
                let seconds = (t - time_zero_ns) * SECONDS_PER_NANOSECOND;
                photon - units::flight_kinetic_energy_ev(length_m, seconds) - retarding_v
            };
            flight_time(&record, ionization, time_zero_ns, &mut notes)
        }
    };
    check_enough(&record, &channels, &notes).map_err(whole)?;
    if let Some(window) = window {
        let of = channels.len();
        channels.retain(|c| window.contains(&c.energy_ev));
        if channels.len() < MIN_CHANNELS {
            let (found, lo, hi) = (channels.len(), *window.start(), *window.end());
            return Err(whole(Problem::TooFewInWindow {
                found,
                of,
                lo,
                hi,
                needed: MIN_CHANNELS,
            }));
        }
    }
    if channels[0].energy_ev > channels[channels.len() - 1].energy_ev {
        channels.reverse();
    }
    check_resolved(&channels).map_err(whole)?;

    let counts: Vec<f64> = channels.iter().map(|c| record.counts[c.index]).collect();
    let sd = match &record.sd {
        Some(sd) => channels.iter().map(|c| sd[c.index]).collect(),
        None => counts.iter().map(|&c| poisson_sd(c)).collect(),
    };
    let mut trace = Trace {
        source: source.to_string(),
        energy_ev: channels.iter().map(|c| c.energy_ev).collect(),
        counts,
        sd,
        exposure_ev: channels.iter().map(|c| c.exposure_ev).collect(),
        noise: noise_of(&record),
        photon_energy_ev: photon,
        axis,
        comments: record.comments,
        notes,
    };
    if trace.noise == Noise::Poisson && !record.converted && !trace.looks_like_counts() {
        trace.notes.push(
            "the counts are not all whole numbers: a normalised, smoothed or averaged trace has \
             other errors than the Poisson ones assumed here"
                .to_string(),
        );
    }
    Ok(trace)
}

fn noise_of(record: &Record) -> Noise {
    let by_column = if record.sd.is_some() {
        Noise::Stated
    } else {
        Noise::Poisson
    };
    record.noise.unwrap_or(by_column)
}

/// What must hold for the numbers whatever they mean.
fn check_points(record: &Record, source: &str) -> Result<(), TraceError> {
    let at = |i: usize, problem| {
        let line = record.lines[i] as usize;
        Err(TraceError {
            line: Some(line),
            ..TraceError::file(source, problem)
        })
    };
    let x = &record.abscissa;
    let rising = x.len() < 2 || x[1] > x[0];
    for i in 1..x.len() {
        let what = record.abscissa_name.clone();
        if x[i] == x[i - 1] {
            let first = record.lines[i - 1] as usize;
            let hint = record.axis_hint;
            return at(
                i,
                Problem::Duplicate {
                    what,
                    value: x[i],
                    first,
                    hint,
                },
            );
        }
        if (x[i] > x[i - 1]) != rising {
            let direction = if rising { "rising" } else { "falling" };
            let (value, previous, hint) = (x[i], x[i - 1], record.axis_hint);
            return at(
                i,
                Problem::TurnsBack {
                    what,
                    value,
                    previous,
                    direction,
                    hint,
                },
            );
        }
    }
    if let Some(sd) = &record.sd
        && let Some(i) = sd.iter().position(|&s| s <= 0.0)
    {
        return at(i, Problem::SdNotPositive { found: sd[i] });
    }
    if noise_of(record) == Noise::Poisson
        && let Some(i) = record.counts.iter().position(|&c| c < 0.0)
    {
        return at(
            i,
            Problem::NegativeCounts {
                found: record.counts[i],
            },
        );
    }
    if let Some(exposure) = &record.exposure_ev
        && let Some(i) = exposure.iter().position(|&e| e <= 0.0)
    {
        return at(i, Problem::ExposureNotPositive { found: exposure[i] });
    }
    Ok(())
}

fn check_enough(record: &Record, channels: &[Channel], notes: &[String]) -> Result<(), Problem> {
    let (found, needed) = (channels.len(), MIN_CHANNELS);
    if found >= needed {
        return Ok(());
    }
    if found < record.counts.len() && record.counts.len() >= needed {
        let why = notes.last().cloned().unwrap_or_default();
        return Err(Problem::TooFewReachable { found, needed, why });
    }
    Err(Problem::TooFew { found, needed })
}

/// Energies must still rise, and widths be usable, after rounding to double precision.
fn check_resolved(channels: &[Channel]) -> Result<(), Problem> {
    let bad_width = channels
        .iter()
        .find(|c| !(c.exposure_ev.is_finite() && c.exposure_ev > 0.0));
    let bad_step = channels
        .windows(2)
        .find(|w| w[1].energy_ev <= w[0].energy_ev)
        .map(|w| &w[1]);
    match bad_width.or(bad_step) {
        Some(c) => Err(Problem::Unresolvable {
            energy_ev: c.energy_ev,
        }),
        None => Ok(()),
    }
}

fn settle_photon_energy(
    record: &Record,
    options: &ReadOptions,
    notes: &mut Vec<String>,
) -> Result<Option<f64>, Problem> {
    let photon = match (options.photon_energy_ev, record.photon_energy_ev) {
        (Some(said), Some(stated)) if said != stated && record.converted => {
            return Err(Problem::AlreadyConverted {
                stated: format!("photon energy {stated} eV"),
                wanted: format!("photon energy {said} eV"),
            });
        }
        (Some(said), Some(stated)) if said != stated => {
            notes.push(format!(
                "the file states a photon energy of {stated} eV; {said} eV was asked for and used"
            ));
            Some(said)
        }
        (said, stated) => said.or(stated),
    };
    match photon {
        Some(found) if !(found.is_finite() && found > 0.0) => Err(Problem::PhotonEnergy { found }),
        other => Ok(other),
    }
}

/// The axis: as asked for, else as the file states it, else by the file's words, else ionization.
fn settle_axis(
    record: &Record,
    options: &ReadOptions,
    notes: &mut Vec<String>,
) -> Result<Axis, Problem> {
    if record.converted {
        let stated = record.axis.unwrap_or(Axis::Ionization);
        return match options.axis {
            Some(wanted) if wanted != stated && wanted != Axis::Ionization => {
                let (stated, wanted) = (stated.name().to_string(), wanted.name().to_string());
                Err(Problem::AlreadyConverted { stated, wanted })
            }
            _ => Ok(stated),
        };
    }
    let by_words = match record.meaning {
        Meaning::Unsaid => None,
        Meaning::Ionization => Some(Axis::Ionization),
        Meaning::Kinetic => Some(Axis::Kinetic),
        Meaning::Wavenumber => Some(Axis::Wavenumber),
        Meaning::Time => {
            if options.axis.or(record.axis).is_none() {
                return Err(Problem::Uncalibrated {
                    column: record.abscissa_name.clone(),
                });
            }
            None
        }
    };
    let from = &record.meaning_from;
    if let Some(wanted) = options.axis.or(record.axis) {
        let is_time = matches!(wanted, Axis::FlightTime { .. });
        let clash = match record.meaning {
            Meaning::Unsaid => false,
            Meaning::Time => !is_time,
            _ => by_words != Some(wanted),
        };
        if clash {
            let words = by_words.map_or("flight time", |a| a.name());
            notes.push(format!(
                "the axis was read as {}, as stated, though {from} says {words}",
                wanted.name()
            ));
        }
        return Ok(wanted);
    }
    match by_words {
        Some(axis) => {
            notes.push(format!("the axis was read as {}, by {from}", axis.name()));
            Ok(axis)
        }
        None => {
            notes.push(
                "nothing says how the axis was recorded: it was read as ionization energy in eV"
                    .to_string(),
            );
            Ok(Axis::Ionization)
        }
    }
}

fn check_calibration(length_m: f64, time_zero_ns: f64, retarding_v: f64) -> Result<(), Problem> {
    if !(length_m.is_finite() && length_m > 0.0) {
        let expected = "a positive length in metres";
        return Err(Problem::Calibration {
            what: "flight length",
            found: length_m,
            expected,
        });
    }
    for (what, found) in [
        ("time zero", time_zero_ns),
        ("retarding potential", retarding_v),
    ] {
        if !found.is_finite() {
            return Err(Problem::Calibration {
                what,
                found,
                expected: "a finite number",
            });
        }
    }
    Ok(())
}

fn converted(record: &Record) -> Vec<Channel> {
    let exposure = record.exposure_ev.as_deref().unwrap_or_default();
    let points = record.abscissa.iter().zip(exposure).enumerate();
    points
        .map(|(index, (&energy_ev, &exposure_ev))| Channel {
            index,
            energy_ev,
            exposure_ev,
        })
        .collect()
}

/// Points with equal dwell: one exposure for all, the median step.
fn scanned(record: &Record, ionization: impl Fn(f64) -> f64) -> Vec<Channel> {
    let energies = record.abscissa.iter().map(|&x| ionization(x));
    let mut channels: Vec<Channel> = energies
        .enumerate()
        .map(|(index, energy_ev)| Channel {
            index,
            energy_ev,
            exposure_ev: 0.0,
        })
        .collect();
    let mut steps: Vec<f64> = channels
        .windows(2)
        .map(|w| (w[1].energy_ev - w[0].energy_ev).abs())
        .collect();
    steps.sort_by(f64::total_cmp);
    let median = match steps.len() {
        0 => 0.0,
        n if n % 2 == 1 => steps[n / 2],
        n => 0.5 * (steps[n / 2 - 1] + steps[n / 2]),
    };
    for channel in &mut channels {
        channel.exposure_ev = median;
    }
    channels
}

fn kinetic(
    record: &Record,
    photon: f64,
    window: Option<&RangeInclusive<f64>>,
    source: &str,
    notes: &mut Vec<String>,
) -> Result<Vec<Channel>, TraceError> {
    let mut channels = scanned(record, |x| photon - x);
    for channel in &channels {
        let kinetic = record.abscissa[channel.index];
        let kept = window.is_none_or(|w| w.contains(&channel.energy_ev));
        if kept && kinetic >= photon {
            let line = record.lines[channel.index] as usize;
            let problem = Problem::KineticAbovePhoton { kinetic, photon };
            return Err(TraceError::line(source, line, problem));
        }
    }
    let mut negative = Dropped::default();
    channels.retain(|c| {
        let keep = record.abscissa[c.index] >= 0.0;
        if !keep {
            negative.add(record.counts[c.index]);
        }
        keep
    });
    negative.note("with a negative kinetic energy", notes);
    Ok(channels)
}

fn flight_time(
    record: &Record,
    ionization: impl Fn(f64) -> f64,
    time_zero_ns: f64,
    notes: &mut Vec<String>,
) -> Vec<Channel> {
    let t = &record.abscissa;
    if t.len() < 2 {
        return Vec::new();
    }
    let last = t.len() - 1;
    let middle = |i: usize| 0.5 * (t[i] + t[i + 1]);
    let edges = |i: usize| {
        let before = if i == 0 {
            t[0] - (middle(0) - t[0])
        } else {
            middle(i - 1)
        };
        let after = if i == last {
            t[last] + (t[last] - middle(last - 1))
        } else {
            middle(i)
        };
        [before.min(after), before.max(after)]
    };
    let mut channels = Vec::new();
    let (mut before_zero, mut too_fast) = (Dropped::default(), Dropped::default());
    for (index, &counts) in record.counts.iter().enumerate() {
        let [early, late] = edges(index);
        if early <= time_zero_ns {
            before_zero.add(counts);
            continue;
        }
        let (low, high) = (ionization(early), ionization(late));
        let energy_ev = 0.5 * (low + high);
        if energy_ev > 0.0 {
            channels.push(Channel {
                index,
                energy_ev,
                exposure_ev: high - low,
            });
        } else {
            too_fast.add(counts);
        }
    }
    before_zero.note("that begin at or before time zero", notes);
    too_fast.note("with more kinetic energy than the photon has", notes);
    channels
}

/// Channels left out, for a note.
#[derive(Default)]
struct Dropped {
    channels: usize,
    counts: f64,
}

impl Dropped {
    fn add(&mut self, counts: f64) {
        self.channels += 1;
        self.counts += counts;
    }

    fn note(&self, which: &str, notes: &mut Vec<String>) {
        if self.channels > 0 {
            let Dropped { channels, counts } = self;
            notes.push(format!(
                "left out {channels} channels {which} ({counts} counts)"
            ));
        }
    }
}
