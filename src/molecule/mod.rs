//! Elements, geometries and the XYZ reader.
//!
//! Positions are bohr inside and Å in files. A [`Molecule`] made by [`Molecule::from_xyz`] or
//! [`Molecule::read`] is known to be sound: supported elements, finite positions, no two atoms on
//! top of each other, and a multiplicity that its electrons can have.

mod elements;
mod error;
mod geometry;
pub mod symmetry;
mod xyz;

pub use elements::{
    LAST_SUPPORTED, core_orbitals, covalent_radius_angstrom, number_of_symbol, symbol,
};
pub use error::{CLOSEST_ANGSTROM, FARTHEST_ANGSTROM, GeometryError};
pub use geometry::{BOND_SLACK_ANGSTROM, BondedPair};

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

impl Atom {
    /// Element symbol.
    pub fn symbol(&self) -> &'static str {
        symbol(self.number).unwrap_or("?")
    }
}
