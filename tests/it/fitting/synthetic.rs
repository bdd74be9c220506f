//! Traces whose truth is known: what must be found, what must not, and how honest the errors are.

use bandproof::fit::{BandFit, FitError, FitOptions, fit_bands};
use bandproof::lineshape::Shape;
use bandproof::trace::{Axis, Noise, Trace};
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Poisson};

/// A line of the truth.
#[derive(Clone, Copy)]
struct Line {
    position: f64,
    area: f64,
    gaussian: f64,
    lorentzian: f64,
}

fn line(position: f64, area: f64, gaussian: f64) -> Line {
    Line {
        position,
        area,
        gaussian,
        lorentzian: 0.0,
    }
}

/// Poisson counts on a uniform axis; `background` is counts per eV.
fn trace(
    span: [f64; 2],
    channels: usize,
    lines: &[Line],
    background: impl Fn(f64) -> f64,
    rng: &mut ChaCha8Rng,
) -> Trace {
    let step = (span[1] - span[0]) / (channels - 1) as f64;
    let energy_ev: Vec<f64> = (0..channels).map(|i| span[0] + step * i as f64).collect();
    let counts: Vec<f64> = energy_ev
        .iter()
        .map(|&e| {
            let signal: f64 = lines
                .iter()
                .map(|l| {
                    let shape = Shape::new(l.gaussian, l.lorentzian).unwrap();
                    l.area * shape.value(e - l.position)
                })
                .sum();
            let mean = step * (signal + background(e));
            if mean > 0.0 {
                Poisson::new(mean).unwrap().sample(rng)
            } else {
                0.0
            }
        })
        .collect();
    Trace {
        source: "made for a test".into(),
        sd: counts.iter().map(|c| c.max(1.0).sqrt()).collect(),
        exposure_ev: vec![step; channels],
        energy_ev,
        counts,
        noise: Noise::Poisson,
        photon_energy_ev: Some(21.218),
        axis: Axis::Ionization,
        comments: Vec::new(),
        notes: Vec::new(),
    }
}

fn fit(trace: &Trace) -> BandFit {
    fit_bands(trace, &FitOptions::default(), &mut |_| {}).unwrap()
}

#[test]
fn noise_alone_gives_no_bands() {
    let mut false_bands = 0;
    let runs = 100;
    for seed in 0..runs {
        let mut rng = ChaCha8Rng::seed_from_u64(1000 + seed);
        let level = [3.0, 30.0, 300.0, 3000.0][seed as usize % 4];
        // Flat, sloping or rising exponentially towards slow electrons.
        let kind = seed % 3;
        let background = move |e: f64| match kind {
            0 => 50.0 * level,
            1 => level * (20.0 + 10.0 * (e - 8.0)),
            _ => level * (10.0 + 80.0 * ((e - 18.0) / 2.5).exp()),
        };
        let t = trace([8.0, 18.0], 1000, &[], background, &mut rng);
        let result = fit(&t);
        if !result.peaks.is_empty() {
            println!("seed {seed} level {level} kind {kind}: {:?}", result.peaks);
            false_bands += 1;
        }
        assert!((0.7..1.3).contains(&result.statistics.reduced_chi_squared));
    }
    println!("{false_bands} of {runs} noise traces show a band");
    assert!(false_bands <= 2);
}

#[test]
fn separated_bands_are_counted_right() {
    let mut right = 0;
    let runs = 60;
    for seed in 0..runs {
        let mut rng = ChaCha8Rng::seed_from_u64(2000 + seed);
        let count = 1 + seed as usize % 8;
        let mut lines: Vec<Line> = Vec::new();
        let mut at = 8.6;
        for _ in 0..count {
            let width = rng.random_range(0.1..0.5);
            let before = lines.last().map_or(0.0, |l: &Line| l.gaussian);
            at += rng.random_range(1.5..2.5) * f64::max(width, before).max(0.3);
            let area = 10f64.powf(rng.random_range(2.7..4.5));
            lines.push(line(at, area, width));
        }
        let end = (at + 1.0).max(12.0);
        let t = trace(
            [8.0, end],
            1000,
            &lines,
            |e| 1500.0 + 200.0 * (e - 8.0),
            &mut rng,
        );
        let found = fit(&t);
        if found.peaks.len() == count {
            right += 1;
        } else {
            println!("seed {seed}: {count} lines, {} found", found.peaks.len());
            for l in &lines {
                println!("  true {:.3} {:.0} {:.3}", l.position, l.area, l.gaussian);
            }
            for p in &found.peaks {
                println!(
                    "  found {:.3} {:.0}±{:.0} {:.3} {:.1}",
                    p.position_ev, p.area, p.area_sd, p.fwhm_ev, p.significance
                );
            }
        }
    }
    println!("{right} of {runs} counted right");
    assert!(right >= 57);
}

#[test]
fn sharp_line_on_a_broad_band_is_found_and_kept_apart() {
    for seed in 0..10 {
        let mut rng = ChaCha8Rng::seed_from_u64(3000 + seed);
        let truth = [line(12.0, 40000.0, 0.8), line(12.15, 800.0, 0.025)];
        let t = trace([10.0, 14.0], 2000, &truth, |_| 2000.0, &mut rng);
        let found = fit(&t);
        assert_eq!(found.peaks.len(), 2, "seed {seed}: {:?}", found.peaks);
        let sharp = found
            .peaks
            .iter()
            .find(|p| p.fwhm_ev < 0.06)
            .expect("the sharp line");
        assert!((sharp.position_ev - 12.15).abs() < 4.0 * sharp.position_sd);
        assert!((sharp.area - 800.0).abs() < 4.0 * sharp.area_sd);
        assert_eq!(found.groupings[0].bands.len(), 2);
        assert!(found.groupings[0].probability > 0.9);
    }
}

/// Members of a displaced oscillator.
fn progression(origin: f64, spacing: f64, huang_rhys: f64, area: f64, width: f64) -> Vec<Line> {
    let mut weight = (-huang_rhys).exp();
    let mut lines = Vec::new();
    for v in 0..12 {
        let n = v as f64;
        if weight > 0.004 {
            let position = origin + spacing * n - 0.004 * spacing * n * n;
            lines.push(line(position, area * weight, width));
        }
        weight *= huang_rhys / (n + 1.0);
    }
    lines
}

#[test]
fn blurred_progression_is_one_band() {
    for seed in 0..10 {
        let mut rng = ChaCha8Rng::seed_from_u64(4000 + seed);
        let truth = progression(12.0, 0.11, 2.0, 60000.0, 0.06);
        let t = trace(
            [10.5, 14.0],
            1750,
            &truth,
            |e| 3000.0 - 500.0 * (e - 10.5),
            &mut rng,
        );
        let found = fit(&t);
        let first = &found.groupings[0];
        assert_eq!(first.bands.len(), 1, "seed {seed}: {:#?}", found.peaks);
        let band = &first.bands[0];
        assert!(first.probability > 0.8, "{}", first.probability);
        assert!(band.members.len() >= 6, "{} members", band.members.len());
        assert!((band.spacing_ev.unwrap() - 0.108).abs() < 0.004);
        assert!((band.origin_ev.unwrap() - 12.0).abs() < 0.005);
        let area: f64 = truth.iter().map(|l| l.area).sum();
        let vertical = truth.iter().map(|l| l.area * l.position).sum::<f64>() / area;
        assert!((band.vertical_ev - vertical).abs() < 4.0 * band.vertical_sd + 0.002);
        // The third member is the highest, with the second close by.
        assert!((band.maximum_ev - 12.11).abs() < 0.12);
    }
}

#[test]
fn stated_errors_cover_the_truth() {
    // Two lines one and a half widths apart; a third of the runs may miss by more than one
    // standard deviation.
    let (mut inside, mut total) = (0, 0);
    let mut pulls = Vec::new();
    for seed in 0..100 {
        let mut rng = ChaCha8Rng::seed_from_u64(5000 + seed);
        let truth = [line(10.0, 8000.0, 0.2), line(10.3, 5000.0, 0.2)];
        let t = trace([9.0, 11.3], 400, &truth, |_| 4000.0, &mut rng);
        let found = fit(&t);
        assert_eq!(found.peaks.len(), 2, "seed {seed}: {:?}", found.peaks);
        for (p, l) in found.peaks.iter().zip(&truth) {
            for pull in [
                (p.position_ev - l.position) / p.position_sd,
                (p.area - l.area) / p.area_sd,
                (p.fwhm_ev - 0.2) / p.fwhm_sd.unwrap(),
            ] {
                pulls.push(pull);
                total += 1;
                if pull.abs() < 1.0 {
                    inside += 1;
                }
            }
        }
    }
    let share = inside as f64 / total as f64;
    let spread = (pulls.iter().map(|p| p * p).sum::<f64>() / total as f64).sqrt();
    println!("one standard deviation covers {share:.3}; pulls scatter by {spread:.3}");
    // 100 runs of six correlated parameters: about ±0.035.
    assert!((share - 0.683).abs() < 0.07, "{share}");
}

#[test]
fn few_counts_do_not_bias_areas() {
    // Ten counts at the top, one below: weighting with √counts loses 14 % of the area here.
    let sd: f64 = 0.12;
    let step = 0.01;
    let height = 10.0 / step;
    let area = height * sd * (2.0 * std::f64::consts::PI).sqrt();
    let width = 2.354_820_045 * sd;
    let runs = 200;
    let mut sum = 0.0;
    for seed in 0..runs {
        let mut rng = ChaCha8Rng::seed_from_u64(6000 + seed);
        let t = trace(
            [9.0, 11.0],
            201,
            &[line(10.0, area, width)],
            |_| 1.0 / step,
            &mut rng,
        );
        let found = fit(&t);
        // All that is above the background, however many lines describe it.
        sum += found.peaks.iter().map(|p| p.area).sum::<f64>();
    }
    let bias = sum / runs as f64 / area - 1.0;
    println!("area bias at ten counts: {:.2} %", 100.0 * bias);
    assert!(bias.abs() < 0.015, "{bias}");
}

#[test]
fn lorentzian_wings_are_measured() {
    let mut rng = ChaCha8Rng::seed_from_u64(7000);
    let truth = [Line {
        position: 15.58,
        area: 200_000.0,
        gaussian: 0.03,
        lorentzian: 0.02,
    }];
    let t = trace([14.5, 16.5], 1000, &truth, |_| 3000.0, &mut rng);
    let found = fit(&t);
    assert_eq!(found.peaks.len(), 1, "{:?}", found.peaks);
    let p = &found.peaks[0];
    assert!((p.lorentzian_fwhm_ev - 0.02).abs() < 0.002);
    assert!((p.gaussian_fwhm_ev - 0.03).abs() < 0.002);
    assert!((p.area / 200_000.0 - 1.0).abs() < 0.01);
}

#[test]
fn stated_standard_deviations_are_used() {
    let mut rng = ChaCha8Rng::seed_from_u64(8000);
    let truth = [line(10.0, 20000.0, 0.2), line(11.0, 5000.0, 0.3)];
    let mut t = trace([9.0, 12.0], 600, &truth, |_| 4000.0, &mut rng);
    // A normalised trace: counts and standard deviations scaled alike, negative values allowed.
    for i in 0..t.counts.len() {
        t.sd[i] = (t.counts[i] + 1.0).sqrt() / 500.0;
        t.counts[i] = (t.counts[i] - 20.0) / 500.0;
    }
    t.noise = Noise::Stated;
    let found = fit(&t);
    assert_eq!(found.peaks.len(), 2, "{:?}", found.peaks);
    assert!((0.8..1.2).contains(&found.statistics.reduced_chi_squared));
    for (p, l) in found.peaks.iter().zip(&truth) {
        assert!((500.0 * p.area - l.area).abs() < 4.0 * 500.0 * p.area_sd);
    }
}

#[test]
fn the_same_trace_gives_the_same_fit() {
    let make = || {
        let mut rng = ChaCha8Rng::seed_from_u64(9000);
        let truth = progression(12.0, 0.15, 1.2, 20000.0, 0.05);
        trace([11.0, 14.0], 1200, &truth, |_| 2000.0, &mut rng)
    };
    assert_eq!(fit(&make()), fit(&make()));
}

#[test]
fn what_cannot_be_fitted_is_refused() {
    let mut rng = ChaCha8Rng::seed_from_u64(9500);
    let good = trace([9.0, 10.0], 100, &[], |_| 1000.0, &mut rng);
    let refuse = |t: &Trace, options: FitOptions| {
        fit_bands(t, &options, &mut |_| {}).expect_err("must be refused")
    };
    let narrow = FitOptions {
        window_ev: Some([9.0, 9.05]),
        ..FitOptions::default()
    };
    assert!(matches!(
        refuse(&good, narrow),
        FitError::TooFewChannels { .. }
    ));
    let reversed = FitOptions {
        window_ev: Some([10.0, 9.0]),
        ..FitOptions::default()
    };
    assert!(matches!(
        refuse(&good, reversed),
        FitError::EmptyWindow { .. }
    ));
    let mut bad = good.clone();
    bad.counts[7] = f64::NAN;
    let message = refuse(&bad, FitOptions::default()).to_string();
    assert!(message.contains("channel 8"), "{message}");
    let mut bad = good.clone();
    bad.energy_ev[5] = bad.energy_ev[4];
    assert!(matches!(
        refuse(&bad, FitOptions::default()),
        FitError::BadChannel { channel: 6, .. }
    ));
    let mut bad = good.clone();
    bad.counts[3] = -1.0;
    assert!(matches!(
        refuse(&bad, FitOptions::default()),
        FitError::BadChannel { channel: 4, .. }
    ));
    // Nothing measured at all is no error: there are no bands.
    let mut dark = good;
    dark.counts.fill(0.0);
    assert!(fit(&dark).peaks.is_empty());
}
