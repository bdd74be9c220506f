//! Line shapes, the functions under them and predicted traces against references and identities.

use bandproof::levels::{Character, Envelope, HoleState, LineKind, Stick, Verdict};
use bandproof::lineshape::Shape;
use bandproof::numeric::{faddeeva, statistics};
use bandproof::predict::{Instrument, LampLine, predict};
use nalgebra::Complex;

/// Rows of a file in `tests/data/shapes`, header and comments dropped.
fn rows(name: &str) -> Vec<Vec<String>> {
    let path = format!("{}/tests/data/shapes/{name}", env!("CARGO_MANIFEST_DIR"));
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .from_path(path)
        .unwrap();
    reader
        .records()
        .map(|record| record.unwrap().iter().map(str::to_owned).collect())
        .collect()
}

fn number(text: &str) -> f64 {
    text.parse().unwrap()
}

#[test]
fn faddeeva_agrees_with_eighty_digits() {
    let mut worst_re = (0.0, 0.0, 0.0);
    let (mut worst_im, mut worst_scipy) = (0.0f64, 0.0f64);
    let table = rows("faddeeva.csv");
    assert!(table.len() > 1200);
    for row in &table {
        let (x, y) = (number(&row[0]), number(&row[1]));
        let (re, im, scipy) = (number(&row[2]), number(&row[3]), number(&row[4]));
        let w = faddeeva::faddeeva(Complex::new(x, y));
        let deviation = (w.re / re - 1.0).abs();
        assert!(deviation < 1e-12, "Re w({x:e}, {y:e}): {deviation:e}");
        if deviation > worst_re.0 {
            worst_re = (deviation, x, y);
        }
        worst_scipy = worst_scipy.max((w.re / scipy - 1.0).abs());
        let deviation = (w.im - im).abs() / re.hypot(im);
        assert!(deviation < 1e-13, "Im w({x:e}, {y:e}): {deviation:e}");
        worst_im = worst_im.max(deviation);
        let mirrored = faddeeva::faddeeva(Complex::new(-x, y));
        assert_eq!((mirrored.re, mirrored.im), (w.re, -w.im));
        let [same, first, second] = faddeeva::faddeeva_with_derivatives(Complex::new(x, y));
        assert_eq!(same, w);
        derivatives_obey_their_equation(x, y, [same, first, second]);
    }
    assert!(worst_scipy < 1e-12);
    println!(
        "Re w: {worst_re:?} to 80 digits, {worst_scipy:e} to scipy; Im w: {worst_im:e} of |w|"
    );
}

/// w″ + 2zw′ + 2w = 0 and w′ + 2zw = 2i/√π, each to the rounding of its own terms.
fn derivatives_obey_their_equation(x: f64, y: f64, [w, first, second]: [Complex<f64>; 3]) {
    let z = Complex::new(x, y);
    let terms = [
        first,
        2.0 * z * w,
        -Complex::new(0.0, 2.0 / std::f64::consts::PI.sqrt()),
    ];
    let size: f64 = terms.iter().map(|t| t.norm()).sum();
    assert!(
        terms.iter().sum::<Complex<f64>>().norm() < 1e-13 * size,
        "w' at {z}"
    );
    let terms = [second, 2.0 * z * first, 2.0 * w];
    let size: f64 = terms.iter().map(|t| t.norm()).sum();
    assert!(
        terms.iter().sum::<Complex<f64>>().norm() < 1e-13 * size,
        "w'' at {z}"
    );
}

#[test]
fn statistics_agree_with_eighty_digits() {
    let mut worst = std::collections::BTreeMap::new();
    for row in rows("statistics.csv") {
        let (x, expected) = (number(&row[1]), number(&row[3]));
        let (value, tolerance) = match row[0].as_str() {
            "normal_cdf" => (statistics::normal_cdf(x), 1e-12),
            "normal_quantile" => (statistics::normal_quantile(x), 1e-13),
            "erfc" => (faddeeva::erfc(x), 1e-13),
            "ln_gamma" => (statistics::ln_gamma(x), 1e-13),
            "chi_squared_survival" => (statistics::chi_squared_survival(x, number(&row[2])), 1e-11),
            other => panic!("no function {other}"),
        };
        let deviation = if expected == 0.0 {
            value.abs()
        } else {
            (value / expected - 1.0).abs()
        };
        assert!(
            deviation < tolerance,
            "{row:?}: {value:e}, off by {deviation:e}"
        );
        let entry = worst.entry(row[0].clone()).or_insert(0.0f64);
        *entry = entry.max(deviation);
    }
    assert_eq!(worst.len(), 5);
    println!("{worst:?}");
}

/// Widths over twelve decades of their ratio, and the two limits.
fn shapes() -> Vec<Shape> {
    let mut widths = vec![(0.03, 0.0), (0.0, 0.03)];
    widths.extend((-6..=6).map(|k| (0.03, 0.03 * 10f64.powi(k))));
    widths
        .into_iter()
        .map(|(g, l)| Shape::new(g, l).unwrap())
        .collect()
}

#[test]
fn area_is_one() {
    let mut worst = 0.0f64;
    for shape in shapes() {
        let reach = 400.0 * shape.gaussian_fwhm().max(shape.lorentzian_fwhm());
        let inside = quadrature(&shape, reach);
        let outside = tails(&shape, reach);
        let error = (inside + outside - 1.0).abs();
        assert!(error < 1e-10, "{shape:?}: {error:e}");
        worst = worst.max(error);
        let error = (shape.area_between(-reach, reach) + outside - 1.0).abs();
        assert!(error < 1e-10, "{shape:?}: {error:e}");
    }
    println!("area: {worst:e} from 1");
}

/// Trapezoidal rule in t with d = scale·sinh t, on the whole of [−reach, reach].
fn quadrature(shape: &Shape, reach: f64) -> f64 {
    let scale = shape.gaussian_fwhm().max(shape.lorentzian_fwhm());
    // Graded towards the centre, where a narrow Gaussian may sit on a wide scale.
    let end = (reach / scale).asinh();
    let steps = 4000;
    let h = 2.0 * end / steps as f64;
    let f = |t: f64| shape.value(scale * t.sinh()) * scale * t.cosh();
    // Gauss-Legendre of two points in each step.
    (0..steps)
        .map(|k| {
            let middle = -end + (k as f64 + 0.5) * h;
            let offset = 0.5 * h / 3f64.sqrt();
            0.5 * h * (f(middle - offset) + f(middle + offset))
        })
        .sum()
}

/// Area beyond ±reach. Far out a Voigt profile is the Lorentzian plus σ²/2 times its curvature:
/// both integrate in closed form; the next term, of order (σ/reach)⁴ of the tail, is left out.
fn tails(shape: &Shape, reach: f64) -> f64 {
    let half = 0.5 * shape.lorentzian_fwhm();
    if half == 0.0 {
        return 0.0;
    }
    let sd = shape.gaussian_fwhm() / bandproof::lineshape::GAUSSIAN_FWHM_PER_SD;
    let lorentzian = 2.0 * half.atan2(reach) / std::f64::consts::PI;
    let slope = 2.0 * half * reach / std::f64::consts::PI / (reach * reach + half * half).powi(2);
    lorentzian + sd * sd * slope
}

#[test]
fn derivatives_agree_with_differences() {
    for shape in shapes() {
        let (g, l) = (shape.gaussian_fwhm(), shape.lorentzian_fwhm());
        let width = shape.fwhm();
        for k in -30..=30 {
            let d = 0.17 * k as f64 * width;
            let analytic = shape.value_and_gradient(d);
            assert!((analytic.value / shape.value(d) - 1.0).abs() < 1e-12);
            let scale = analytic.value.max(1e-30);
            let check = |name: &str, derivative: f64, numeric: f64, unit: f64| {
                let error = (derivative - numeric).abs() * unit / scale;
                assert!(
                    error < 1e-6,
                    "{shape:?} at {d}: {name} {derivative} {numeric}"
                );
            };
            let value = |g: f64, l: f64, d: f64| Shape::new(g, l).unwrap().value(d);
            let h = 1e-4 * width;
            let in_distance = |d: f64| value(g, l, d);
            check(
                "centre",
                -analytic.centre,
                five_point(in_distance, d, h),
                width / 30.0,
            );
            if g > 0.0 {
                let h = 1e-4 * g;
                let numeric = five_point(|g| value(g, l, d), g, h);
                check("Gaussian width", analytic.gaussian_fwhm, numeric, g / 60.0);
            }
            if l > 0.0 {
                let h = 1e-2 * l;
                let numeric = five_point(|l| value(g, l, d), l, h);
                check("Lorentzian width", analytic.lorentzian_fwhm, numeric, l);
            }
        }
    }
}

fn five_point(f: impl Fn(f64) -> f64, x: f64, h: f64) -> f64 {
    (8.0 * (f(x + h) - f(x - h)) - (f(x + 2.0 * h) - f(x - 2.0 * h))) / (12.0 * h)
}

#[test]
fn limits_are_reached_smoothly() {
    let gaussian = Shape::new(0.03, 0.0).unwrap();
    let nearly = Shape::new(0.03, 1e-14).unwrap();
    let lorentzian = Shape::new(0.0, 0.03).unwrap();
    let almost = Shape::new(1e-9, 0.03).unwrap();
    for k in -20..=20 {
        let d = 0.004 * k as f64;
        // First order in the vanishing width, by the analytic derivative at zero.
        let slope = gaussian.value_and_gradient(d).lorentzian_fwhm;
        let change = nearly.value(d) - gaussian.value(d);
        assert!((change - slope * 1e-14).abs() < 1e-13 * gaussian.value(0.0));
        assert!((almost.value(d) / lorentzian.value(d) - 1.0).abs() < 1e-12);
        let (a, b) = (
            almost.value_and_gradient(d),
            lorentzian.value_and_gradient(d),
        );
        assert!((a.centre - b.centre).abs() <= 1e-11 * b.centre.abs());
        assert!((a.lorentzian_fwhm - b.lorentzian_fwhm).abs() <= 1e-10 * b.value / 0.03);
        assert!(a.gaussian_fwhm.abs() < 1e-6 * b.value / 0.03);
        assert_eq!(b.gaussian_fwhm, 0.0);
    }
}

#[test]
fn shapes_are_symmetric_and_have_the_width_they_say() {
    for shape in shapes() {
        let width = shape.fwhm();
        assert!((shape.value(0.5 * width) / shape.value(0.0) - 0.5).abs() < 1e-14);
        let (g, l) = (shape.gaussian_fwhm(), shape.lorentzian_fwhm());
        assert!(width >= g.max(l) * (1.0 - 1e-15) && width <= g + l);
        // Olivero and Longbothum's approximation is known to hold within 0.02 %.
        let approximate = 0.5346 * l + (0.2166 * l * l + g * g).sqrt();
        assert!((width / approximate - 1.0).abs() < 2.5e-4, "{shape:?}");
        for k in 1..40 {
            let d = 0.1 * k as f64 * width;
            assert_eq!(shape.value(d), shape.value(-d));
            let (right, left) = (shape.value_and_gradient(d), shape.value_and_gradient(-d));
            assert_eq!(right.centre, -left.centre);
            assert!(right.centre > 0.0 || shape.value(d) == 0.0);
        }
    }
}

#[test]
fn channel_areas_agree_with_midpoint_values() {
    for shape in shapes() {
        let width = 1e-3 * shape.fwhm();
        for k in 0..30 {
            let d = 0.1 * k as f64 * shape.fwhm();
            let area = shape.area_between(d - 0.5 * width, d + 0.5 * width);
            let error = (area / width / shape.value(d) - 1.0).abs();
            assert!(error < 2e-5, "{shape:?} at {d}: {error:e}");
        }
        let total = shape.area_between(-2.0, 0.5) + shape.area_between(0.5, 1.5);
        assert!((shape.area_between(-2.0, 1.5) / total - 1.0).abs() < 1e-11);
    }
}

fn state(label: &str, energy: f64, degeneracy: usize, pole_strength: f64) -> HoleState {
    HoleState {
        label: label.into(),
        ionization_energy_ev: energy,
        koopmans_ev: energy,
        pole_strength,
        degeneracy,
        kind: LineKind::Main,
        leading_orbitals: Vec::new(),
        character: Character {
            verdict: Verdict::Mixed,
            description: String::new(),
            net_overlap_population: 0.0,
            atoms: Vec::new(),
            bonds: Vec::new(),
        },
        envelope: None,
    }
}

fn axis(low: f64, high: f64, step: f64) -> Vec<f64> {
    let count = ((high - low) / step).round() as usize;
    (0..=count).map(|k| low + step * k as f64).collect()
}

#[test]
fn predicted_area_is_degeneracy_times_pole_strength() {
    let mut pair = state("1e", 11.0, 2, 0.93);
    pair.envelope = Some(Envelope {
        temperature_kelvin: 300.0,
        sticks: [(-0.3, 0.5), (-0.1, 0.3), (0.9, 0.2)]
            .map(|(offset_ev, intensity)| Stick {
                offset_ev,
                intensity,
            })
            .to_vec(),
    });
    let states = [state("3a1", 9.5, 1, 1.0), pair];
    let energies = axis(5.0, 16.0, 0.005);
    let traced = predict(&states, &Instrument::of_resolution(0.03), &energies).unwrap();
    for (curve, area) in traced.states.iter().zip([1.0, 1.86]) {
        // A Gaussian sampled six times per width: the sum is the integral to rounding.
        let sum: f64 = curve.intensity.iter().sum::<f64>() * 0.005;
        assert!((sum - area).abs() < 1e-10, "{}: {sum}", curve.label);
        assert!((curve.weight - area).abs() < 1e-15);
    }
    for k in 0..energies.len() {
        let sum: f64 = traced.states.iter().map(|c| c.intensity[k]).sum();
        assert!((traced.total[k] - sum).abs() <= 1e-15 * sum);
    }
    // First moment of the second state: the envelope's mean offset is −0.03 + 0.18 − 0.15 = 0.
    let curve = &traced.states[1];
    let moment: f64 = (0..energies.len())
        .map(|k| energies[k] * curve.intensity[k])
        .sum::<f64>()
        * 0.005;
    assert!((moment / curve.weight - 11.0).abs() < 1e-9);
}

#[test]
fn degenerate_states_weigh_as_many_single_ones() {
    let energies = axis(9.0, 11.0, 0.01);
    let instrument = Instrument {
        lorentzian_fwhm_ev: 0.1,
        ..Instrument::of_resolution(0.05)
    };
    let once = predict(&[state("1e", 10.0, 3, 0.9)], &instrument, &energies).unwrap();
    let singles: Vec<HoleState> = (0..3).map(|_| state("a", 10.0, 1, 0.9)).collect();
    let three = predict(&singles, &instrument, &energies).unwrap();
    for (a, b) in once.total.iter().zip(&three.total) {
        assert!((a / b - 1.0).abs() < 1e-14);
    }
}

#[test]
fn scale_and_lamp_lines_move_what_they_should() {
    let mut instrument = Instrument::of_resolution(0.03);
    instrument.energy_scale = 0.92;
    instrument.energy_shift_ev = 0.1;
    instrument.lamp_lines = vec![LampLine {
        name: "He I β".into(),
        excess_ev: 1.869,
        relative_intensity: 0.02,
    }];
    let energies = axis(5.0, 15.0, 0.005);
    let traced = predict(&[state("2b1", 12.5, 1, 1.0)], &instrument, &energies).unwrap();
    let highest = |values: &[f64]| {
        let k = (0..values.len())
            .max_by(|a, b| values[*a].total_cmp(&values[*b]))
            .unwrap();
        energies[k]
    };
    assert!((traced.states[0].energy_ev - 11.6).abs() < 1e-12);
    assert!((highest(&traced.states[0].intensity) - 11.6).abs() < 1e-9);
    assert!((highest(&traced.lamp_satellites) - 9.731).abs() < 0.003);
    let ghost: f64 = traced.lamp_satellites.iter().sum::<f64>() * 0.005;
    assert!((ghost - 0.02).abs() < 1e-12);
    let total: f64 = traced.total.iter().sum::<f64>() * 0.005;
    assert!((total - 1.02).abs() < 1e-10);
}

#[test]
fn an_instrument_without_width_is_refused() {
    assert!(predict(&[], &Instrument::of_resolution(0.0), &[1.0]).is_err());
    assert!(predict(&[], &Instrument::of_resolution(-0.02), &[1.0]).is_err());
    assert!(predict(&[], &Instrument::of_resolution(f64::NAN), &[1.0]).is_err());
}
