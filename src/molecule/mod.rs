//! Elements, geometries and the XYZ reader.

use nalgebra::Vector3;

/// A molecule at one geometry.
#[derive(Debug, Clone, PartialEq)]
pub struct Molecule {
    /// Name: the file's stem unless the study gives one.
    pub name: String,
    /// Atoms in the order of the file.
    pub atoms: Vec<Atom>,
    /// Total charge.
    pub charge: i32,
    /// Spin multiplicity 2S + 1.
    pub multiplicity: u32,
}

/// A nucleus.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Atom {
    /// Atomic number.
    pub number: u8,
    /// Position, bohr.
    pub position_bohr: Vector3<f64>,
}
