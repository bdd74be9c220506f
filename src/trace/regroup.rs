//! Cutting a trace to a window and merging its channels. Counts are kept, never interpolated.

use super::{MIN_CHANNELS, Noise, Problem, Trace, TraceError, poisson_sd};

impl Trace {
    /// The part between two ionization energies (eV, both included).
    ///
    /// # Errors
    /// When the window is upside down or leaves fewer than [`MIN_CHANNELS`] channels.
    pub fn window(&self, [lo, hi]: [f64; 2]) -> Result<Trace, TraceError> {
        if !(lo.is_finite() && hi.is_finite() && lo < hi) {
            return Err(TraceError::file(&self.source, Problem::Window { lo, hi }));
        }
        let first = self.energy_ev.partition_point(|&e| e < lo);
        let end = self.energy_ev.partition_point(|&e| e <= hi);
        if end - first < MIN_CHANNELS {
            let (found, of) = (end - first, self.len());
            let problem = Problem::TooFewInWindow {
                found,
                of,
                lo,
                hi,
                needed: MIN_CHANNELS,
            };
            return Err(TraceError::file(&self.source, problem));
        }
        let cut = |v: &[f64]| v[first..end].to_vec();
        Ok(Trace {
            source: self.source.clone(),
            energy_ev: cut(&self.energy_ev),
            counts: cut(&self.counts),
            sd: cut(&self.sd),
            exposure_ev: cut(&self.exposure_ev),
            comments: self.comments.clone(),
            notes: self.notes.clone(),
            ..*self
        })
    }

    /// Neighbouring channels merged until each is at least `min_width_ev` wide (by its exposure).
    ///
    /// Counts and exposures are summed, so areas and Poisson statistics stay what they were. The
    /// energy is the mean weighted by exposure, which for adjacent bins is the middle between the
    /// outer edges whatever the counts. Stated deviations add in quadrature. A remainder at the
    /// end that is too narrow joins the channel before it.
    pub fn merged(&self, min_width_ev: f64) -> Trace {
        let mut out = Trace {
            source: self.source.clone(),
            energy_ev: Vec::new(),
            counts: Vec::new(),
            sd: Vec::new(),
            exposure_ev: Vec::new(),
            comments: self.comments.clone(),
            notes: self.notes.clone(),
            ..*self
        };
        let mut groups: Vec<[usize; 2]> = Vec::new();
        let (mut start, mut width) = (0, 0.0);
        for i in 0..self.len() {
            width += self.exposure_ev[i];
            if width >= min_width_ev {
                groups.push([start, i + 1]);
                (start, width) = (i + 1, 0.0);
            }
        }
        if start < self.len() {
            match groups.last_mut() {
                Some(last) => last[1] = self.len(),
                None => groups.push([start, self.len()]),
            }
        }
        for [a, b] in groups {
            let exposure: f64 = self.exposure_ev[a..b].iter().sum();
            let moment: f64 = (a..b)
                .map(|i| self.exposure_ev[i] * self.energy_ev[i])
                .sum();
            let counts: f64 = self.counts[a..b].iter().sum();
            let single = b - a == 1;
            out.energy_ev.push(if single {
                self.energy_ev[a]
            } else {
                moment / exposure
            });
            out.exposure_ev.push(exposure);
            out.counts.push(counts);
            out.sd.push(match self.noise {
                _ if single => self.sd[a],
                Noise::Poisson => poisson_sd(counts),
                Noise::Stated => self.sd[a..b].iter().map(|s| s * s).sum::<f64>().sqrt(),
            });
        }
        if out.len() < self.len() {
            out.notes.push(format!(
                "{} channels merged into {}, each at least {min_width_ev} eV wide",
                self.len(),
                out.len()
            ));
        }
        out
    }
}
