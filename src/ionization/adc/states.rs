//! Ionized states as eigenvectors of the matrix.

use super::effective::Amplitudes;
use super::layout::{Shape, spin_adapt};
use super::operator::AdcMatrix;
use crate::ionization::many_body::ManyBodyError;
use crate::numeric::davidson::{self, Search, SymmetricOperator};
use crate::numeric::gemm::gemm;
use crate::numeric::linalg::{product, view, view_mut};
use nalgebra::DMatrix;

/// Share of the pole-strength threshold that is asked of the one-hole weight in the search: the two
/// differ by the ground-state correlation.
const WEIGHT_SHARE: f64 = 0.5;
/// Configurations of a state that are listed.
const LISTED: usize = 6;
/// Vectors that the search may keep before it condenses them.
const MAX_VECTORS: usize = 600;

/// What is looked for.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Options {
    /// States below this ionization energy, hartree.
    pub ceiling_hartree: f64,
    /// Smallest pole strength of a state.
    pub least_strength: f64,
    /// Residual norm at which a state is converged, hartree.
    pub residual_hartree: f64,
    /// Iterations after which the search gives up.
    pub max_iterations: usize,
    /// Number of two-hole one-particle states, the lowest in zeroth order, that are put into the
    /// start beside all one-hole states: needed only if states without any one-hole part are
    /// wanted as well (then `least_strength` should be 0).
    pub two_hole_start: usize,
    /// Memory that may be taken besides the fitted pairs, bytes.
    pub memory_limit_bytes: u64,
}

impl Default for Options {
    fn default() -> Self {
        Self {
            ceiling_hartree: 1.0,
            least_strength: 0.01,
            residual_hartree: 1e-6,
            max_iterations: 200,
            two_hole_start: 0,
            memory_limit_bytes: 16_000_000_000,
        }
    }
}

/// Two holes and a particle, orbitals counted from 0 with frozen ones.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Configuration {
    /// The holes, lower orbital first.
    pub holes: [usize; 2],
    /// The particle.
    pub particle: usize,
    /// Share of the state, both spin couplings together.
    pub weight: f64,
}

/// One ionized state.
#[derive(Debug, Clone, PartialEq)]
pub struct State {
    /// Ionization energy, hartree.
    pub ionization_hartree: f64,
    /// Pole strength per spin orbital, 0 to 1.
    pub pole_strength: f64,
    /// Contribution of each orbital to it (all orbitals, frozen ones zero).
    pub orbital_strengths: Vec<f64>,
    /// Weight of the one-hole states in the eigenvector.
    pub one_hole_weight: f64,
    /// Leading two-hole one-particle configurations, largest first.
    pub configurations: Vec<Configuration>,
    /// Residual norm, hartree: an exact eigenvalue lies within this distance.
    pub residual_hartree: f64,
}

/// All states found, by rising energy.
#[derive(Debug, Clone, PartialEq)]
pub struct Spectrum {
    /// The states.
    pub states: Vec<State>,
    /// Sum of the pole strengths of each occupied orbital over *all* states of the matrix, found
    /// or not: what is missing from the states above has gone elsewhere.
    pub total_strengths: Vec<f64>,
}

/// Finds the states of a matrix.
pub(super) fn find(
    matrix: &AdcMatrix,
    amplitudes: &Amplitudes,
    frozen: usize,
    options: &Options,
) -> Result<Spectrum, ManyBodyError> {
    let shape = matrix.shape;
    let search = Search {
        leading: shape.o,
        ceiling: options.ceiling_hartree,
        least_weight: WEIGHT_SHARE * options.least_strength,
        residual: options.residual_hartree,
        max_iterations: options.max_iterations,
        max_vectors: MAX_VECTORS,
    };
    let pairs = davidson::search(matrix, &start(matrix, options), &search)?;
    let mut vectors = DMatrix::zeros(matrix.size(), pairs.len());
    for (column, pair) in pairs.iter().enumerate() {
        vectors.set_column(column, &pair.vector);
    }
    let spectroscopic = spectroscopic(&vectors, amplitudes, shape);
    let states = pairs.iter().enumerate().map(|(k, pair)| {
        let own = spectroscopic.column(k);
        let mut orbital_strengths = vec![0.0; frozen];
        orbital_strengths.extend(own.iter().map(|x| x * x));
        State {
            ionization_hartree: pair.value,
            pole_strength: own.norm_squared(),
            orbital_strengths,
            one_hole_weight: pair.vector.rows(0, shape.o).norm_squared(),
            configurations: configurations(&pair.vector.as_slice()[shape.o..], shape, frozen),
            residual_hartree: pair.residual,
        }
    });
    Ok(Spectrum {
        states: states
            .filter(|s| s.pole_strength >= options.least_strength)
            .collect(),
        total_strengths: total_strengths(amplitudes, shape, frozen),
    })
}

/// Unit vectors of all one-hole states, and of low two-hole states where they are wanted.
fn start(matrix: &AdcMatrix, options: &Options) -> DMatrix<f64> {
    let o = matrix.shape.o;
    let mut rows: Vec<usize> = (0..o).collect();
    let mut low: Vec<usize> = (o..matrix.size()).collect();
    low.sort_by(|&a, &b| matrix.diagonal()[a].total_cmp(&matrix.diagonal()[b]));
    rows.extend(&low[..options.two_hole_start.min(low.len())]);
    let mut start = DMatrix::zeros(matrix.size(), rows.len());
    for (column, row) in rows.into_iter().enumerate() {
        start[(row, column)] = 1.0;
    }
    start
}

/// x_p = Σ_i f_i,p c_i + Σ_kla f_kla,p c_kla of every vector: all orbitals × vectors.
pub fn spectroscopic(
    vectors: &DMatrix<f64>,
    amplitudes: &Amplitudes,
    shape: Shape,
) -> DMatrix<f64> {
    let Shape { o, v } = shape;
    let ov = shape.ov();
    let one = view(vectors).subrows(0, o);
    let mut out = product(view(&amplitudes.one_hole).transpose(), one);
    let mut two = vectors.rows(o, shape.two_hole()).into_owned();
    spin_adapt(two.as_mut_slice(), shape);
    let virtuals = view_mut(&mut out);
    let mut virtuals = virtuals.subrows_mut(o, v);
    for k in 0..o {
        // f_kla,b = −t_kl^ba: row (k, b) of the ring matrix against column (l, a).
        let rows = view(&amplitudes.two_hole).subrows(k * v, v);
        gemm(
            virtuals.as_mut(),
            true,
            -1.0,
            rows,
            view(&two).subrows(k * ov, ov),
        );
    }
    out
}

/// Σ over all states of |x_p|², that is the norm of f_p, for occupied p (frozen ones zero).
fn total_strengths(amplitudes: &Amplitudes, shape: Shape, frozen: usize) -> Vec<f64> {
    let mut out = vec![0.0; frozen];
    out.extend((0..shape.o).map(|p| amplitudes.one_hole.column(p).norm_squared()));
    out
}

fn configurations(two_hole: &[f64], shape: Shape, frozen: usize) -> Vec<Configuration> {
    let Shape { o, v } = shape;
    let mut all = Vec::new();
    for k in 0..o {
        for l in 0..=k {
            for a in 0..v {
                let (x, y) = (two_hole[a + v * (l + o * k)], two_hole[a + v * (k + o * l)]);
                let weight = if k == l { x * x } else { x * x + y * y };
                if weight > 0.005 {
                    all.push(Configuration {
                        holes: [frozen + l, frozen + k],
                        particle: frozen + o + a,
                        weight,
                    });
                }
            }
        }
    }
    all.sort_by(|a, b| b.weight.total_cmp(&a.weight));
    all.truncate(LISTED);
    all
}
