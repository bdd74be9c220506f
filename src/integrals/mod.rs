//! One-electron integrals, and two- and three-centre Coulomb integrals.
