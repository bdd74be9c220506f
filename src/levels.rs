//! What a calculation says about the ionized states of a molecule: plain data.
//!
//! The two halves of the program meet here. The theory half writes [`Levels`]; the matcher reads
//! them beside the bands of a fit and knows nothing of basis sets or integrals. The JSON form is
//! the stable schema `bandproof/levels/1`: fields are added freely and never renamed.

use serde::{Deserialize, Serialize};
use std::fmt;
use std::str::FromStr;

/// Name of the JSON schema of [`Levels`].
pub const SCHEMA: &str = "bandproof/levels/1";

/// Everything computed for one molecule at one level.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Levels {
    /// Always [`SCHEMA`].
    pub schema: String,
    /// Version of the program that computed this.
    pub program: String,
    /// The molecule, at the geometry used.
    pub molecule: MoleculeSummary,
    /// Method, basis and what was left out.
    pub level: Level,
    /// The mean-field calculation underneath.
    pub scf: ScfSummary,
    /// Occupied orbitals and the lowest empty ones, by rising energy.
    pub orbitals: Vec<OrbitalLine>,
    /// Ionized states, by rising ionization energy. Members of a degenerate set are one entry.
    pub hole_states: Vec<HoleState>,
    /// What the method could not say, a sentence each.
    #[serde(default)]
    pub notes: Vec<String>,
}

/// The molecule as the outputs show it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct MoleculeSummary {
    /// Name, from the file or the study.
    pub name: String,
    /// Formula in Hill's order.
    pub formula: String,
    /// Total charge.
    pub charge: i32,
    /// Spin multiplicity 2S + 1.
    pub multiplicity: u32,
    /// Schoenflies symbol; `null` where it was not determined.
    pub point_group: Option<String>,
    /// Atoms in the order of the input.
    pub atoms: Vec<AtomLine>,
}

/// One atom, in Å.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct AtomLine {
    /// Element symbol.
    pub element: String,
    /// x in Å.
    pub x: f64,
    /// y in Å.
    pub y: f64,
    /// z in Å.
    pub z: f64,
}

/// How the hole states were obtained.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Method {
    /// Koopmans: I = −ε (T. Koopmans, Physica 1, 104, 1934).
    Koopmans,
    /// Diagonal second-order Dyson self-energy.
    SecondOrder,
    /// Partial third-order self-energy P3, renormalised where that is safe.
    P3,
    /// Non-Dyson ADC(2).
    Adc2,
    /// Non-Dyson ADC(2)-x.
    Adc2x,
    /// Non-Dyson ADC(3).
    Adc3,
}

impl Method {
    /// All methods in rising order of cost.
    pub const ALL: [Method; 6] = [
        Method::Koopmans,
        Method::SecondOrder,
        Method::P3,
        Method::Adc2,
        Method::Adc2x,
        Method::Adc3,
    ];

    /// The name used on the command line and in files.
    pub fn name(self) -> &'static str {
        match self {
            Method::Koopmans => "koopmans",
            Method::SecondOrder => "second-order",
            Method::P3 => "p3",
            Method::Adc2 => "adc2",
            Method::Adc2x => "adc2x",
            Method::Adc3 => "adc3",
        }
    }
}

impl fmt::Display for Method {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.name())
    }
}

impl FromStr for Method {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let known = || Method::ALL.map(Method::name).join(", ");
        Method::ALL
            .into_iter()
            .find(|m| m.name().eq_ignore_ascii_case(text))
            .ok_or_else(|| format!("unknown method '{text}'; known: {}", known()))
    }
}

/// Method and basis, written `method/basis`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Level {
    /// How hole states were obtained.
    pub method: Method,
    /// Orbital basis, canonical lower-case name.
    pub basis: String,
    /// Auxiliary basis of the density fitting.
    pub auxiliary: String,
    /// Auxiliary basis of the correlated step; `null` where there is none.
    #[serde(default)]
    pub correlation_auxiliary: Option<String>,
    /// Whether core orbitals were kept out of the correlated step.
    pub frozen_core: bool,
}

impl fmt::Display for Level {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}/{}", self.method, self.basis)
    }
}

/// Outcome of the mean-field calculation. A calculation that did not converge never gets here.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ScfSummary {
    /// Total energy, hartree.
    pub energy_hartree: f64,
    /// Nuclear repulsion, hartree.
    pub nuclear_repulsion_hartree: f64,
    /// Iterations taken.
    pub iterations: usize,
    /// Always true; kept in the file so that a reader need not know the rule.
    pub converged: bool,
    /// Total dipole moment, debye, in the input frame (origin: the frame's own).
    pub dipole_debye: [f64; 3],
}

/// Spin of an orbital.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Spin {
    /// Doubly occupied or empty orbital of a closed shell.
    Both,
    /// Spin up.
    Alpha,
    /// Spin down.
    Beta,
}

/// One orbital as the outputs list it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct OrbitalLine {
    /// Position by rising energy, from 0, core counted.
    pub index: usize,
    /// Spin.
    pub spin: Spin,
    /// Name of the orbital: a symmetry label where one is known, else `orbital N` from 1.
    pub label: String,
    /// Orbital energy, hartree.
    pub energy_hartree: f64,
    /// Orbital energy, eV.
    pub energy_ev: f64,
    /// Electrons in it: 2, 1 or 0.
    pub occupation: f64,
    /// Whether it belongs to an atomic core.
    pub core: bool,
    /// Computed character; `null` for empty and core orbitals.
    pub character: Option<Character>,
}

/// One ionized state (a degenerate set counts as one).
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct HoleState {
    /// Name: that of the leading orbital.
    pub label: String,
    /// Vertical ionization energy, eV.
    pub ionization_energy_ev: f64,
    /// Koopmans' value of the leading orbital, eV.
    pub koopmans_ev: f64,
    /// Pole strength per spin orbital, 0 to 1.
    pub pole_strength: f64,
    /// Spatial degeneracy.
    pub degeneracy: usize,
    /// Main line or satellite.
    pub kind: LineKind,
    /// Leading one-hole amplitudes squared, largest first.
    pub leading_orbitals: Vec<OrbitalWeight>,
    /// Character of the orbital that the electron left.
    pub character: Character,
    /// Vibronic envelope; `null` where none was computed.
    pub envelope: Option<Envelope>,
}

/// Main line or satellite.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum LineKind {
    /// The line that carries most of its orbital's strength.
    Main,
    /// A line that borrows strength from a main line.
    Satellite,
}

/// Weight of one orbital in a hole state.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct OrbitalWeight {
    /// Index into [`Levels::orbitals`] numbering.
    pub index: usize,
    /// Squared amplitude.
    pub weight: f64,
}

/// Vibronic sticks of one hole state.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Envelope {
    /// Temperature, kelvin.
    pub temperature_kelvin: f64,
    /// Sticks, by rising energy; intensities sum to 1.
    pub sticks: Vec<Stick>,
}

/// One vibronic line.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Stick {
    /// Offset from the vertical ionization energy, eV.
    pub offset_ev: f64,
    /// Share of the state's intensity.
    pub intensity: f64,
}

/// What kind of orbital it was.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Verdict {
    /// Holds atoms together.
    Bonding,
    /// Neither holds together nor drives apart, spread over several atoms.
    Nonbonding,
    /// Nonbonding and essentially on one atom.
    LonePair,
    /// Drives atoms apart.
    Antibonding,
    /// No single word fits.
    Mixed,
}

impl fmt::Display for Verdict {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Verdict::Bonding => "bonding",
            Verdict::Nonbonding => "nonbonding",
            Verdict::LonePair => "lone pair",
            Verdict::Antibonding => "antibonding",
            Verdict::Mixed => "mixed",
        })
    }
}

/// The verdict on an orbital with the numbers behind it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Character {
    /// One word.
    pub verdict: Verdict,
    /// One phrase in a chemist's words, for example `S lone pair, π (out of plane)`.
    pub description: String,
    /// Sum of the overlap populations over all atom pairs, per electron pair of the orbital.
    pub net_overlap_population: f64,
    /// Share of the orbital on each atom that holds at least 1 %, largest first; shares sum to ~1.
    pub atoms: Vec<AtomShare>,
    /// Overlap population per bonded pair, largest magnitude first.
    pub bonds: Vec<BondShare>,
}

/// Share of an orbital on one atom.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct AtomShare {
    /// Atom number from 0.
    pub atom: usize,
    /// Element and number from 1, for example `S1`.
    pub name: String,
    /// Share, 0 to 1 (gross population over occupation).
    pub share: f64,
}

/// Overlap population of an orbital in one bond.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BondShare {
    /// The two atoms, from 0.
    pub atoms: [usize; 2],
    /// For example `S1–H2`.
    pub name: String,
    /// Overlap population, electrons: positive is bonding.
    pub overlap_population: f64,
}
