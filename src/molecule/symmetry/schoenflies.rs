//! The symbols of the molecular point groups.

use std::fmt;

/// A point group in Schoenflies' notation. The order n of a family is at least 2, that of
/// [`Rotoreflection`](Schoenflies::Rotoreflection) even and at least 4; the smaller ones have
/// names of their own.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Schoenflies {
    /// C1: nothing but the identity.
    C1,
    /// Ci: a centre of inversion.
    Ci,
    /// Cs: a mirror plane.
    Cs,
    /// Cn: one axis.
    Cyclic(usize),
    /// Cnv: an axis and mirror planes that contain it.
    Pyramidal(usize),
    /// Cnh: an axis and a mirror plane across it.
    Paddle(usize),
    /// Sn: one rotation-reflection axis.
    Rotoreflection(usize),
    /// Dn: an axis and n twofold axes across it.
    Dihedral(usize),
    /// Dnh: Dn with a mirror plane across the main axis.
    Prism(usize),
    /// Dnd: Dn with mirror planes between the twofold axes.
    Antiprism(usize),
    /// T: the rotations of the tetrahedron.
    T,
    /// Td: the tetrahedron.
    Td,
    /// Th: the rotations of the tetrahedron, with inversion.
    Th,
    /// O: the rotations of the cube.
    O,
    /// Oh: cube and octahedron.
    Oh,
    /// I: the rotations of the icosahedron.
    I,
    /// Ih: icosahedron and dodecahedron.
    Ih,
    /// C∞v: a linear molecule with two different ends.
    LinearPolar,
    /// D∞h: a linear molecule with two equal ends.
    LinearCentred,
    /// Kh: a single atom.
    Atom,
}

impl Schoenflies {
    /// Whether the group belongs to a linear molecule.
    pub fn is_linear(self) -> bool {
        matches!(self, Schoenflies::LinearPolar | Schoenflies::LinearCentred)
    }

    /// Number of operations; `None` for the infinite groups.
    pub fn order(self) -> Option<usize> {
        use Schoenflies::*;
        Some(match self {
            C1 => 1,
            Ci | Cs => 2,
            Cyclic(n) | Rotoreflection(n) => n,
            Pyramidal(n) | Paddle(n) | Dihedral(n) => 2 * n,
            Prism(n) | Antiprism(n) => 4 * n,
            T => 12,
            Td | Th | O => 24,
            Oh => 48,
            I => 60,
            Ih => 120,
            LinearPolar | LinearCentred | Atom => return None,
        })
    }
}

impl fmt::Display for Schoenflies {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        use Schoenflies::*;
        match self {
            C1 => f.write_str("C1"),
            Ci => f.write_str("Ci"),
            Cs => f.write_str("Cs"),
            Cyclic(n) => write!(f, "C{n}"),
            Pyramidal(n) => write!(f, "C{n}v"),
            Paddle(n) => write!(f, "C{n}h"),
            Rotoreflection(n) => write!(f, "S{n}"),
            Dihedral(n) => write!(f, "D{n}"),
            Prism(n) => write!(f, "D{n}h"),
            Antiprism(n) => write!(f, "D{n}d"),
            T => f.write_str("T"),
            Td => f.write_str("Td"),
            Th => f.write_str("Th"),
            O => f.write_str("O"),
            Oh => f.write_str("Oh"),
            I => f.write_str("I"),
            Ih => f.write_str("Ih"),
            LinearPolar => f.write_str("C∞v"),
            LinearCentred => f.write_str("D∞h"),
            Atom => f.write_str("Kh"),
        }
    }
}
