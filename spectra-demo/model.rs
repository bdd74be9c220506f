//! Makes an invented trace from a scenario: bands with vibrational members, gases in the cell,
//! lines of the lamp, background, an offset of the energy scale, and Poisson counts.
//!
//! Shared by the generator and the tests (`#[path]`), so that the truth behind a trace is at hand
//! as data: tests move it and look whether the program still finds it.

use bandproof::lineshape::Shape;
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Poisson};
use std::fmt::Write;

#[path = "scenarios.rs"]
mod scenarios;
pub use scenarios::all;

/// One invented measurement.
#[derive(Debug, Clone)]
pub struct Scenario {
    /// Folder and file name.
    pub name: &'static str,
    /// The molecule in words.
    pub molecule: &'static str,
    /// What happened at the station, for the header.
    pub story: &'static str,
    /// Bands of the molecule, by rising published energy.
    pub bands: Vec<Band>,
    /// Gases in the cell; their lines do not move when the truth is moved.
    pub gases: Vec<Gas>,
    /// Lines of the lamp beside He I α.
    pub lamp: Vec<LampLine>,
    /// Measured range, ionization energy in eV.
    pub window_ev: [f64; 2],
    /// Distance of the points, eV.
    pub step_ev: f64,
    /// Resolution: Gaussian full width at half maximum, eV.
    pub resolution_ev: f64,
    /// Counts per point under everything, at the two ends of the window.
    pub background: [f64; 2],
    /// Shown minus true ionization energy, eV.
    pub offset_ev: f64,
    /// Form of the trace file.
    pub form: Form,
    /// Seed of the counting noise.
    pub seed: u64,
}

/// Photon energy of He I α, eV (memory).
pub const PHOTON_ENERGY_EV: f64 = 21.218;

/// How the trace file is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Form {
    /// Ionization energy, comma-separated, decimal point.
    IonizationCommas,
    /// Kinetic energy, semicolon-separated, decimal comma.
    KineticSemicolons,
}

/// One ionization.
#[derive(Debug, Clone)]
pub struct Band {
    /// Name of the ion's state.
    pub state: &'static str,
    /// Orbital, as published.
    pub orbital: &'static str,
    /// First member, eV.
    pub origin_ev: f64,
    /// Published energies, eV.
    pub published: Published,
    /// Members: distance from the origin in eV, share, and width of their own.
    pub members: Vec<Line>,
    /// Area, counts.
    pub area: f64,
}

/// Published energies of a band, eV.
#[derive(Debug, Clone, Copy)]
pub struct Published {
    /// Adiabatic ionization energy, where one is given.
    pub adiabatic_ev: Option<f64>,
    /// Vertical ionization energy: the band's maximum.
    pub vertical_ev: f64,
    /// Where, and whether the value was read there or recalled.
    pub source: &'static str,
}

/// One line: a member of a band.
#[derive(Debug, Clone, Copy)]
pub struct Line {
    /// Distance from the band's origin, eV.
    pub offset_ev: f64,
    /// Share of the band's area.
    pub share: f64,
    /// Gaussian full width at half maximum before the instrument, eV.
    pub gaussian_fwhm_ev: f64,
    /// Lorentzian full width at half maximum, eV.
    pub lorentzian_fwhm_ev: f64,
}

/// A vibration that an ionization excites.
#[derive(Debug, Clone, Copy)]
pub struct Mode {
    /// Quantum, eV.
    pub quantum_ev: f64,
    /// Huang-Rhys factor S: shares follow S^v exp(−S)/v!.
    pub huang_rhys: f64,
}

/// A gas that was in the cell without being asked for.
#[derive(Debug, Clone)]
pub struct Gas {
    /// Its name.
    pub name: &'static str,
    /// Its bands, areas in counts.
    pub bands: Vec<Band>,
}

/// A weaker line of the lamp.
#[derive(Debug, Clone, Copy)]
pub struct LampLine {
    /// Its name.
    pub name: &'static str,
    /// Photon energy above that of He I α, eV.
    pub excess_ev: f64,
    /// Intensity relative to He I α.
    pub relative_intensity: f64,
}

/// Members of displaced harmonic modes: all combinations down to a share of 10⁻⁴. `width_ev` is
/// the Gaussian width of the origin; each quantum adds `widening_ev` to it.
pub fn progression(modes: &[Mode], width_ev: f64, widening_ev: f64) -> Vec<Line> {
    let mut lines = vec![(0.0, 1.0, 0)];
    for mode in modes {
        let mut share = (-mode.huang_rhys).exp();
        let mut extended = Vec::new();
        for v in 0..60 {
            if v > 0 {
                share *= mode.huang_rhys / v as f64;
            }
            extended.extend(lines.iter().map(|(offset, weight, quanta)| {
                (
                    offset + v as f64 * mode.quantum_ev,
                    weight * share,
                    quanta + v,
                )
            }));
        }
        extended.retain(|(_, weight, _)| *weight > 1e-4);
        lines = extended;
    }
    let total: f64 = lines.iter().map(|(_, weight, _)| weight).sum();
    let mut members: Vec<Line> = lines
        .into_iter()
        .map(|(offset_ev, weight, quanta)| Line {
            offset_ev,
            share: weight / total,
            gaussian_fwhm_ev: width_ev + widening_ev * quanta as f64,
            lorentzian_fwhm_ev: 0.0,
        })
        .collect();
    members.sort_by(|a, b| a.offset_ev.total_cmp(&b.offset_ev));
    members
}

/// Members given one by one: distance from the origin and weight, all of one width.
pub fn lines(offsets_and_weights: &[(f64, f64)], width_ev: f64) -> Vec<Line> {
    let total: f64 = offsets_and_weights.iter().map(|(_, weight)| weight).sum();
    offsets_and_weights
        .iter()
        .map(|(offset_ev, weight)| Line {
            offset_ev: *offset_ev,
            share: weight / total,
            gaussian_fwhm_ev: width_ev,
            lorentzian_fwhm_ev: 0.0,
        })
        .collect()
}

impl Band {
    /// First moment: the vertical ionization energy by the Franck-Condon sum rule, eV.
    pub fn vertical_ev(&self) -> f64 {
        let mean: f64 = self.members.iter().map(|m| m.share * m.offset_ev).sum();
        self.origin_ev + mean
    }

    /// Standard deviation of the members about the first moment, eV.
    pub fn spread_ev(&self) -> f64 {
        let mean = self.vertical_ev() - self.origin_ev;
        let square = |m: &Line| m.share * (m.offset_ev - mean).powi(2);
        self.members.iter().map(square).sum::<f64>().sqrt()
    }

    /// Adds the band's counts per point to `out`.
    fn add(&self, scenario: &Scenario, shift_ev: f64, scale: f64, axis: &[f64], out: &mut [f64]) {
        for member in &self.members {
            let width = member.gaussian_fwhm_ev.hypot(scenario.resolution_ev);
            let shape = Shape::new(width, member.lorentzian_fwhm_ev)
                .expect("a scenario has a resolution and widths that are not negative");
            let centre = self.origin_ev + member.offset_ev + shift_ev;
            let area = scale * self.area * member.share * scenario.step_ev;
            shape.add(centre, area, axis, out);
        }
    }
}

impl Scenario {
    /// Ionization energy of each point as the station's scale shows it, eV, rising.
    pub fn axis_ev(&self) -> Vec<f64> {
        let [low, high] = self.window_ev;
        let count = ((high - low) / self.step_ev).round() as usize;
        (0..=count).map(|k| low + self.step_ev * k as f64).collect()
    }

    /// Expected counts at each point.
    pub fn expected(&self) -> Vec<f64> {
        let axis = self.axis_ev();
        let [low, high] = self.background;
        let span = self.window_ev[1] - self.window_ev[0];
        let mut out: Vec<f64> = axis
            .iter()
            .map(|e| low + (high - low) * (e - self.window_ev[0]) / span)
            .collect();
        let gas_bands = self.gases.iter().flat_map(|gas| &gas.bands);
        for band in self.bands.iter().chain(gas_bands) {
            band.add(self, self.offset_ev, 1.0, &axis, &mut out);
            for line in &self.lamp {
                let shift = self.offset_ev - line.excess_ev;
                band.add(self, shift, line.relative_intensity, &axis, &mut out);
            }
        }
        out
    }

    /// Poisson counts about [`Scenario::expected`]. Every point draws from a stream of its own:
    /// a mean that another machine rounds differently changes that point at most.
    pub fn counts(&self) -> Vec<u64> {
        let draw = |(point, mean): (usize, f64)| {
            let mut random = ChaCha8Rng::seed_from_u64(self.seed);
            random.set_stream(point as u64 + 1);
            let poisson = Poisson::new(mean).expect("the expected counts are positive");
            poisson.sample(&mut random) as u64
        };
        self.expected().into_iter().enumerate().map(draw).collect()
    }

    /// The same measurement with the truth moved: every band by up to ±0.3 eV, every area (gases
    /// and lamp lines too) by up to a factor of 2, other noise. Bands keep their published order
    /// and at least 0.15 eV between first moments; draws that do not are drawn again.
    pub fn moved(&self, draw: u64) -> Scenario {
        let mut random = ChaCha8Rng::seed_from_u64(draw.wrapping_mul(1_000_003) ^ self.seed);
        let mut moved = self.clone();
        loop {
            for (band, published) in moved.bands.iter_mut().zip(&self.bands) {
                band.origin_ev = published.origin_ev + random.random_range(-0.3..0.3);
            }
            let apart = |pair: &[Band]| pair[1].vertical_ev() - pair[0].vertical_ev() >= 0.15;
            if moved.bands.windows(2).all(apart) {
                break;
            }
        }
        let mut factor = || 2f64.powf(random.random_range(-1.0..1.0));
        for band in &mut moved.bands {
            band.area *= factor();
        }
        for gas in &mut moved.gases {
            let factor = factor();
            gas.bands.iter_mut().for_each(|band| band.area *= factor);
        }
        for line in &mut moved.lamp {
            line.relative_intensity *= factor();
        }
        moved.seed = random.random();
        moved
    }

    /// The trace file: a header that says what went in, then one row per point.
    pub fn file(&self) -> String {
        let mut text = self.header();
        let rows = self.axis_ev().into_iter().zip(self.counts());
        match self.form {
            Form::IonizationCommas => {
                text.push_str("ionization_energy_ev,counts\n");
                for (energy, counts) in rows {
                    let _ = writeln!(text, "{energy:.4},{counts}");
                }
            }
            Form::KineticSemicolons => {
                text.push_str("kinetic_energy_ev;counts\n");
                for (energy, counts) in rows.rev() {
                    let kinetic = format!("{:.4}", PHOTON_ENERGY_EV - energy);
                    let _ = writeln!(text, "{};{counts}", kinetic.replace('.', ","));
                }
            }
        }
        text
    }

    fn header(&self) -> String {
        let mut text = format!(
            "# INVENTED DATA. Heather Moss air station (there is no such place): {}.\n\
             # {}\n\
             # He I alpha, {PHOTON_ENERGY_EV} eV; resolution {} eV; scale offset {:+} eV \
             (shown minus true); background {} to {} counts; seed {}.\n\
             # What went in, ionization energies in eV before the offset, areas in counts:\n",
            self.molecule,
            self.story,
            self.resolution_ev,
            self.offset_ev,
            self.background[0],
            self.background[1],
            self.seed
        );
        for band in &self.bands {
            text.push_str(&band.planted(""));
        }
        for gas in &self.gases {
            for band in &gas.bands {
                text.push_str(&band.planted(&format!("{} in the cell: ", gas.name)));
            }
        }
        for line in &self.lamp {
            let _ = writeln!(
                text,
                "#   lamp: {} at {:.2} % of He I alpha, everything again {:.3} eV lower",
                line.name,
                100.0 * line.relative_intensity,
                line.excess_ev
            );
        }
        text
    }
}

impl Band {
    fn planted(&self, prefix: &str) -> String {
        let adiabatic = match self.published.adiabatic_ev {
            Some(energy) => format!("{energy} adiabatic, "),
            None => String::new(),
        };
        format!(
            "#   {prefix}{} {}: origin {:.4}, first moment {:.4}, spread {:.3}, area {:.0} \
             (published: {adiabatic}{} vertical; {})\n",
            self.state,
            self.orbital,
            self.origin_ev,
            self.vertical_ev(),
            self.spread_ev(),
            self.area,
            self.published.vertical_ev,
            self.published.source,
        )
    }
}
