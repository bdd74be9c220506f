//! What a reader hands over: the numbers of a file as they stand, and what the file says of them.

use super::{Axis, Noise};

/// One trace of a file before its axis is converted.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Record {
    /// Its name within the file; empty where the format has none.
    pub name: String,
    /// The axis values in the order of the file: energies, wavenumbers or flight times.
    pub abscissa: Vec<f64>,
    /// The counts.
    pub counts: Vec<f64>,
    /// Standard deviations, where the file has them.
    pub sd: Option<Vec<f64>>,
    /// Channel widths in eV: only in files that we wrote after a conversion.
    pub exposure_ev: Option<Vec<f64>>,
    /// The line of the file that each point came from.
    pub lines: Vec<u32>,
    /// The line that names the abscissa.
    pub abscissa_line: Option<usize>,
    /// What the file calls the abscissa.
    pub abscissa_name: String,
    /// What may have gone wrong where the abscissa makes no axis; empty, or a clause in brackets.
    pub axis_hint: &'static str,
    /// What the file's words say the abscissa is.
    pub meaning: Meaning,
    /// The unit of the abscissa and what is expected instead, where it is none that we convert.
    pub foreign_unit: Option<(String, &'static str)>,
    /// Where the words were found ("the header", "the comment in line 3"); empty where nowhere.
    pub meaning_from: String,
    /// The axis, where the file states it outright.
    pub axis: Option<Axis>,
    /// The photon energy in eV, where the file states it outright.
    pub photon_energy_ev: Option<f64>,
    /// How the deviations are known, where the file states it outright.
    pub noise: Option<Noise>,
    /// Whether the abscissa already is ionization energy, whatever `axis` says was recorded.
    pub converted: bool,
    /// Comments, without their marks.
    pub comments: Vec<String>,
    /// What the reader noticed.
    pub notes: Vec<String>,
}

/// What the words of a file say its abscissa is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Meaning {
    /// Nothing, or only "energy".
    #[default]
    Unsaid,
    /// Ionization or binding energy, eV.
    Ionization,
    /// Kinetic energy, eV.
    Kinetic,
    /// Ionization or binding energy, cm⁻¹.
    Wavenumber,
    /// Flight time, ns.
    Time,
}
