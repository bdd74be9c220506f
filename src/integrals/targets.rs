//! The other side of a Coulomb integral: auxiliary functions or point charges, laid out eight
//! primitives at a time.

use crate::basis::Shell;
use crate::numeric::lanes::Eight;
use nalgebra::Vector3;

/// Eight primitives of the same angular momentum.
///
/// A point charge is the limit of an s Gaussian of infinite exponent, so both are described by a
/// charge and by 1/q.
#[derive(Debug, Clone, Copy)]
pub struct Block {
    /// 1/q, bohr²; 0 for a point charge.
    pub inverse_exponent: Eight,
    /// Charge of the underlying s Gaussian times the factors of Hobson's theorem; 0 in lanes that
    /// are not used.
    pub charge: Eight,
    /// Centre, bohr.
    pub centre: [Eight; 3],
}

/// Blocks of one angular momentum.
#[derive(Debug, Clone)]
pub struct Group {
    /// Angular momentum.
    pub l: usize,
    /// The blocks.
    pub blocks: Vec<Block>,
    /// Position of the group's first value in a row of results, counted in [`Eight`]s. Block b,
    /// component m stands at first + b(2l + 1) + m.
    pub first: usize,
}

/// All targets, and how raw results add up to them.
#[derive(Debug, Clone)]
pub struct Targets {
    /// By rising l.
    pub groups: Vec<Group>,
    /// [`Eight`]s in one row of raw results.
    pub width: usize,
    /// Number of targets.
    pub len: usize,
    /// For target i the raw values `sources[starts[i]..starts[i + 1]]` are summed.
    starts: Vec<u32>,
    sources: Vec<u32>,
}

/// One primitive, and the target of its component m = −l.
struct Entry {
    inverse_exponent: f64,
    charge: f64,
    centre: Vector3<f64>,
    target: usize,
}

impl Targets {
    /// The functions of a set of shells, in the order of the basis.
    pub fn of_shells(shells: &[Shell]) -> Self {
        let top = shells.iter().map(|s| s.l).max().unwrap_or(0);
        let mut entries: Vec<Vec<Entry>> = (0..=top).map(|_| Vec::new()).collect();
        let mut len = 0;
        for shell in shells {
            for (&q, &c) in shell.exponents.iter().zip(&shell.coefficients) {
                // S_lm(∂_C) = (−1)^l S_lm(∂_P) because the integral depends on P − C.
                let hobson = (-0.5 / q).powi(shell.l as i32);
                entries[shell.l].push(Entry {
                    inverse_exponent: 1.0 / q,
                    charge: c * hobson * (std::f64::consts::PI / q).powf(1.5),
                    centre: shell.centre_bohr,
                    target: len,
                });
            }
            len += shell.len();
        }
        Self::pack(entries, len)
    }

    /// One target: the potential energy of a unit charge distribution among point charges.
    pub fn of_charges(charges: &[(f64, Vector3<f64>)]) -> Self {
        // The kernel multiplies by S_00, which a bare charge does not have.
        let s00 = (4.0 * std::f64::consts::PI).sqrt().recip();
        let entries = charges.iter().map(|&(charge, centre)| Entry {
            inverse_exponent: 0.0,
            charge: charge / s00,
            centre,
            target: 0,
        });
        Self::pack(vec![entries.collect()], 1)
    }

    fn pack(entries: Vec<Vec<Entry>>, len: usize) -> Self {
        let mut groups = Vec::new();
        let mut width = 0;
        let mut sources: Vec<Vec<u32>> = vec![Vec::new(); len];
        for (l, list) in entries
            .iter()
            .enumerate()
            .filter(|(_, list)| !list.is_empty())
        {
            let first = width;
            let blocks: Vec<Block> = list
                .chunks(8)
                .enumerate()
                .map(|(b, chunk)| {
                    // Unused lanes repeat the first primitive with no charge.
                    let of = |f: &dyn Fn(&Entry) -> f64| {
                        Eight(std::array::from_fn(|i| {
                            f(chunk.get(i).unwrap_or(&chunk[0]))
                        }))
                    };
                    for (lane, entry) in chunk.iter().enumerate() {
                        for m in 0..2 * l + 1 {
                            let position = (first + b * (2 * l + 1) + m) * 8 + lane;
                            sources[entry.target + m].push(position as u32);
                        }
                    }
                    Block {
                        inverse_exponent: of(&|e| e.inverse_exponent),
                        charge: Eight(std::array::from_fn(|i| {
                            chunk.get(i).map_or(0.0, |e| e.charge)
                        })),
                        centre: std::array::from_fn(|axis| of(&|e| e.centre[axis])),
                    }
                })
                .collect();
            width += blocks.len() * (2 * l + 1);
            groups.push(Group { l, blocks, first });
        }
        let mut starts = vec![0];
        for list in &sources {
            starts.push(starts[starts.len() - 1] + list.len() as u32);
        }
        Self {
            groups,
            width,
            len,
            starts,
            sources: sources.concat(),
        }
    }

    /// Adds one row of raw results up into the targets.
    pub fn gather(&self, raw: &[Eight], out: &mut [f64]) {
        let value = |source: u32| raw[source as usize >> 3].0[source as usize & 7];
        for (target, range) in out[..self.len].iter_mut().zip(self.starts.windows(2)) {
            let sources = &self.sources[range[0] as usize..range[1] as usize];
            *target = match sources {
                [one] => value(*one),
                many => many.iter().map(|&s| value(s)).sum(),
            };
        }
    }
}
