//! The only place where units meet: conversion factors and constants, one CODATA set.
//!
//! All values are CODATA 2018 (Tiesinga, Mohr, Newell, Taylor, Rev. Mod. Phys. 93, 025010, 2021).
//! Spectra are eV, geometries Å, and the engine works in atomic units.

/// Electronvolts per hartree.
pub const EV_PER_HARTREE: f64 = 27.211_386_245_988;

/// Ångström per bohr.
pub const ANGSTROM_PER_BOHR: f64 = 0.529_177_210_903;

/// Debye per atomic unit of dipole moment (e·a0 over 10⁻²¹/c C·m).
pub const DEBYE_PER_ATOMIC_UNIT: f64 = 2.541_746_473;

/// Electronvolts per reciprocal centimetre (h·c).
pub const EV_PER_WAVENUMBER: f64 = 1.239_841_984e-4;

/// Boltzmann's constant in eV per kelvin.
pub const EV_PER_KELVIN: f64 = 8.617_333_262e-5;

/// Electron mass over elementary charge, in eV·s²/m²: a free electron of speed v (m/s) has the
/// kinetic energy ½·m·v² in eV.
pub const ELECTRON_MASS_EV_S2_PER_M2: f64 = 9.109_383_701_5e-31 / 1.602_176_634e-19;

/// Converts hartree to eV.
pub fn hartree_to_ev(hartree: f64) -> f64 {
    hartree * EV_PER_HARTREE
}

/// Converts eV to hartree.
pub fn ev_to_hartree(ev: f64) -> f64 {
    ev / EV_PER_HARTREE
}

/// Converts bohr to Å.
pub fn bohr_to_angstrom(bohr: f64) -> f64 {
    bohr * ANGSTROM_PER_BOHR
}

/// Converts Å to bohr.
pub fn angstrom_to_bohr(angstrom: f64) -> f64 {
    angstrom / ANGSTROM_PER_BOHR
}

/// Kinetic energy in eV of an electron that covers `length_m` metres in `time_s` seconds without
/// a field: E = ½·m·(L/t)².
pub fn flight_kinetic_energy_ev(length_m: f64, time_s: f64) -> f64 {
    0.5 * ELECTRON_MASS_EV_S2_PER_M2 * (length_m / time_s).powi(2)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn factors_agree_with_each_other() {
        // h·c·R∞·2 is one hartree: 2 × 109737.31568160 cm⁻¹ (CODATA 2018).
        let hartree_in_wavenumbers = 2.0 * 109_737.315_681_60;
        let ev = hartree_in_wavenumbers * EV_PER_WAVENUMBER;
        assert!((ev / EV_PER_HARTREE - 1.0).abs() < 1e-9);
        assert_eq!(ev_to_hartree(hartree_to_ev(1.0)), 1.0);
        assert!((angstrom_to_bohr(bohr_to_angstrom(1.3)) - 1.3).abs() < 1e-15);
    }

    #[test]
    fn electron_of_one_ev_has_its_textbook_speed() {
        // v = sqrt(2·e/m) = 5.930970e5 m/s for 1 eV.
        let energy = flight_kinetic_energy_ev(5.930_970e5, 1.0);
        assert!((energy - 1.0).abs() < 1e-6);
    }
}
