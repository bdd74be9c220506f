//! NIST Statistical Reference Datasets for nonlinear regression, from both certified starts.
//! Derivatives are exact (forward differentiation in [`Dual`]).

use bandproof::fit::solver::{
    Bounds, Linearization, Objective, Solution, SolverError, SolverOptions, minimize,
};
use nalgebra::{DMatrix, DVector};
use std::ops::{Add, Div, Mul, Neg, Sub};

const MOST: usize = 9;

/// A number with its derivatives by the parameters.
#[derive(Clone, Copy)]
struct Dual {
    v: f64,
    d: [f64; MOST],
}

impl Dual {
    fn constant(v: f64) -> Self {
        Dual { v, d: [0.0; MOST] }
    }
    fn chain(self, v: f64, slope: f64) -> Self {
        Dual {
            v,
            d: self.d.map(|x| x * slope),
        }
    }
    fn exp(self) -> Self {
        let e = self.v.exp();
        self.chain(e, e)
    }
    fn sin(self) -> Self {
        self.chain(self.v.sin(), self.v.cos())
    }
    fn cos(self) -> Self {
        self.chain(self.v.cos(), -self.v.sin())
    }
    fn atan(self) -> Self {
        self.chain(self.v.atan(), 1.0 / (1.0 + self.v * self.v))
    }
    fn ln(self) -> Self {
        self.chain(self.v.ln(), 1.0 / self.v)
    }
    fn pow(self, p: Dual) -> Self {
        (p * self.ln()).exp()
    }
}

fn zip(a: Dual, b: Dual, v: f64, f: impl Fn(f64, f64) -> f64) -> Dual {
    let mut d = [0.0; MOST];
    for k in 0..MOST {
        d[k] = f(a.d[k], b.d[k]);
    }
    Dual { v, d }
}

impl Add for Dual {
    type Output = Dual;
    fn add(self, o: Dual) -> Dual {
        zip(self, o, self.v + o.v, |a, b| a + b)
    }
}
impl Sub for Dual {
    type Output = Dual;
    fn sub(self, o: Dual) -> Dual {
        zip(self, o, self.v - o.v, |a, b| a - b)
    }
}
impl Mul for Dual {
    type Output = Dual;
    fn mul(self, o: Dual) -> Dual {
        zip(self, o, self.v * o.v, |a, b| a * o.v + b * self.v)
    }
}
impl Div for Dual {
    type Output = Dual;
    fn div(self, o: Dual) -> Dual {
        let v = self.v / o.v;
        zip(self, o, v, |a, b| (a - b * v) / o.v)
    }
}
impl Neg for Dual {
    type Output = Dual;
    fn neg(self) -> Dual {
        self.chain(-self.v, -1.0)
    }
}

type Model = fn(&[Dual], &[f64]) -> Dual;

struct Dataset {
    starts: [Vec<f64>; 2],
    certified: Vec<f64>,
    certified_sd: Vec<f64>,
    rss: f64,
    x: Vec<Vec<f64>>,
    y: Vec<f64>,
    model: Model,
}

fn c(v: f64) -> Dual {
    Dual::constant(v)
}

fn three_exponentials(b: &[Dual], x: &[f64]) -> Dual {
    let x = c(x[0]);
    b[0] * (-b[1] * x).exp() + b[2] * (-b[3] * x).exp() + b[4] * (-b[5] * x).exp()
}

fn two_gaussians(b: &[Dual], x: &[f64]) -> Dual {
    let x = c(x[0]);
    let bell = |h: Dual, m: Dual, w: Dual| {
        let t = (x - m) / w;
        h * (-(t * t)).exp()
    };
    b[0] * (-b[1] * x).exp() + bell(b[2], b[3], b[4]) + bell(b[5], b[6], b[7])
}

fn cubic_ratio(b: &[Dual], x: &[f64]) -> Dual {
    let x = c(x[0]);
    (b[0] + x * (b[1] + x * (b[2] + x * b[3]))) / (c(1.0) + x * (b[4] + x * (b[5] + x * b[6])))
}

fn falling_ratio(b: &[Dual], x: &[f64]) -> Dual {
    let x = c(x[0]);
    (-b[0] * x).exp() / (b[1] + b[2] * x)
}

fn model(name: &str) -> Model {
    match name {
        "Bennett5" => |b, x| b[0] * (b[1] + c(x[0])).pow(c(-1.0) / b[2]),
        "BoxBOD" | "Misra1a" => |b, x| b[0] * (c(1.0) - (-b[1] * c(x[0])).exp()),
        "Chwirut1" | "Chwirut2" => falling_ratio,
        "DanWood" => |b, x| b[0] * c(x[0]).pow(b[1]),
        "ENSO" => |b, x| {
            let turn = c(2.0 * std::f64::consts::PI * x[0]);
            let year = turn / c(12.0);
            let (p, q) = (turn / b[3], turn / b[6]);
            b[0] + b[1] * year.cos()
                + b[2] * year.sin()
                + b[4] * p.cos()
                + b[5] * p.sin()
                + b[7] * q.cos()
                + b[8] * q.sin()
        },
        "Eckerle4" => |b, x| {
            let t = (c(x[0]) - b[2]) / b[1];
            b[0] / b[1] * (c(-0.5) * t * t).exp()
        },
        "Gauss1" | "Gauss2" | "Gauss3" => two_gaussians,
        "Hahn1" | "Thurber" => cubic_ratio,
        "Kirby2" => |b, x| {
            let x = c(x[0]);
            (b[0] + x * (b[1] + x * b[2])) / (c(1.0) + x * (b[3] + x * b[4]))
        },
        "Lanczos1" | "Lanczos2" | "Lanczos3" => three_exponentials,
        "MGH09" => |b, x| {
            let x = c(x[0]);
            b[0] * (x * x + x * b[1]) / (x * x + x * b[2] + b[3])
        },
        "MGH10" => |b, x| b[0] * (b[1] / (c(x[0]) + b[2])).exp(),
        "MGH17" => |b, x| {
            let x = c(x[0]);
            b[0] + b[1] * (-x * b[3]).exp() + b[2] * (-x * b[4]).exp()
        },
        "Misra1b" => |b, x| {
            let t = c(1.0) + b[1] * c(0.5 * x[0]);
            b[0] * (c(1.0) - c(1.0) / (t * t))
        },
        "Misra1c" => |b, x| b[0] * (c(1.0) - (c(1.0) + b[1] * c(2.0 * x[0])).pow(c(-0.5))),
        "Misra1d" => |b, x| {
            let t = b[1] * c(x[0]);
            b[0] * t / (c(1.0) + t)
        },
        "Nelson" => |b, x| b[0] - b[1] * c(x[0]) * (-b[2] * c(x[1])).exp(),
        "Rat42" => |b, x| b[0] / (c(1.0) + (b[1] - b[2] * c(x[0])).exp()),
        "Rat43" => |b, x| b[0] / (c(1.0) + (b[1] - b[2] * c(x[0])).exp()).pow(c(1.0) / b[3]),
        "Roszman1" => |b, x| {
            let angle = (b[2] / (c(x[0]) - b[3])).atan();
            b[0] - b[1] * c(x[0]) - angle / c(std::f64::consts::PI)
        },
        other => panic!("no model for {other}"),
    }
}

/// Reads a file in the format that its own header describes.
fn read(name: &str) -> Dataset {
    let path = format!(
        "{}/tests/data/fitting/nist_strd/{name}.dat",
        env!("CARGO_MANIFEST_DIR")
    );
    let text = std::fs::read_to_string(&path).unwrap_or_else(|e| panic!("{path}: {e}"));
    let numbers = |line: &str| -> Vec<f64> {
        line.split_whitespace()
            .filter_map(|t| t.parse().ok())
            .collect()
    };
    let mut starts = [Vec::new(), Vec::new()];
    let (mut certified, mut certified_sd) = (Vec::new(), Vec::new());
    let mut rss = None;
    let mut data_from = 0;
    for (number, line) in text.lines().enumerate() {
        let trimmed = line.trim_start();
        if trimmed.starts_with('b') && line.contains('=') {
            let values = numbers(line.split_once('=').unwrap().1);
            if values.len() == 4 {
                starts[0].push(values[0]);
                starts[1].push(values[1]);
                certified.push(values[2]);
                certified_sd.push(values[3]);
            }
        }
        if line.starts_with("Residual Sum of Squares:") {
            rss = numbers(line).first().copied();
        }
        if line.starts_with("Data:") {
            data_from = number + 1;
        }
    }
    let (mut x, mut y) = (Vec::new(), Vec::new());
    for line in text.lines().skip(data_from) {
        let row = numbers(line);
        if row.len() >= 2 {
            y.push(if name == "Nelson" {
                row[0].ln()
            } else {
                row[0]
            });
            x.push(row[1..].to_vec());
        }
    }
    Dataset {
        starts,
        certified,
        certified_sd,
        rss: rss.expect("residual sum of squares"),
        x,
        y,
        model: model(name),
    }
}

impl Objective for Dataset {
    fn parameters(&self) -> usize {
        self.certified.len()
    }
    fn value(&self, p: &[f64]) -> f64 {
        let b: Vec<Dual> = p.iter().map(|&v| c(v)).collect();
        self.x
            .iter()
            .zip(&self.y)
            .map(|(x, y)| ((self.model)(&b, x).v - y).powi(2))
            .sum()
    }
    fn linearize(&self, p: &[f64]) -> Linearization {
        let n = p.len();
        let b: Vec<Dual> = p
            .iter()
            .enumerate()
            .map(|(k, &v)| {
                let mut dual = c(v);
                dual.d[k] = 1.0;
                dual
            })
            .collect();
        let rows: Vec<Dual> = self.x.iter().map(|x| (self.model)(&b, x)).collect();
        Linearization::Rows {
            residuals: DVector::from_fn(rows.len(), |i, _| rows[i].v - self.y[i]),
            jacobian: DMatrix::from_fn(rows.len(), n, |i, j| rows[i].d[j]),
        }
    }
}

/// Number of certified digits reached (log relative error), at most 11.
fn digits(found: &[f64], certified: &[f64]) -> f64 {
    found
        .iter()
        .zip(certified)
        .map(|(f, c)| -((f - c) / c).abs().max(1e-11).log10())
        .fold(11.0, f64::min)
}

fn solve(data: &Dataset, start: usize) -> Result<Solution, SolverError> {
    minimize(
        data,
        &data.starts[start],
        &Bounds::free(data.parameters()),
        &SolverOptions::default(),
    )
}

fn deviations(data: &Dataset, solution: &Solution) -> Vec<f64> {
    let freedom = (data.y.len() - data.parameters()) as f64;
    let spread = (solution.value / freedom).sqrt();
    (0..data.parameters())
        .map(|j| spread * solution.covariance.sd(j))
        .collect()
}

const ALL: [&str; 27] = [
    "Bennett5", "BoxBOD", "Chwirut1", "Chwirut2", "DanWood", "ENSO", "Eckerle4", "Gauss1",
    "Gauss2", "Gauss3", "Hahn1", "Kirby2", "Lanczos1", "Lanczos2", "Lanczos3", "MGH09", "MGH10",
    "MGH17", "Misra1a", "Misra1b", "Misra1c", "Misra1d", "Nelson", "Rat42", "Rat43", "Roszman1",
    "Thurber",
];

#[test]
fn certified_values_are_reached_from_both_starts() {
    let mut short = Vec::new();
    for name in ALL {
        let data = read(name);
        for start in 0..2 {
            match solve(&data, start) {
                Ok(s) => {
                    let parameters = digits(&s.parameters, &data.certified);
                    let errors = digits(&deviations(&data, &s), &data.certified_sd);
                    let rss = digits(&[s.value], &[data.rss]);
                    println!(
                        "{name:9} start {} {parameters:5.1} {errors:5.1} {rss:5.1} {:4} {:4} {}",
                        start + 1,
                        s.iterations,
                        s.evaluations,
                        s.stop
                    );
                    // Lanczos1's residuals (9e-14 on data of 2.5) keep under three digits in double
                    // arithmetic, and its standard deviations are proportional to them.
                    let wanted = if name == "Lanczos1" { 2.5 } else { 6.0 };
                    if parameters < 8.0 || errors < wanted {
                        short.push(format!("{name} start {}", start + 1));
                    }
                }
                Err(e) => {
                    println!("{name:9} start {} {e}", start + 1);
                    short.push(format!("{name} start {}", start + 1));
                }
            }
        }
    }
    assert!(short.is_empty(), "too few digits: {short:?}");
}
