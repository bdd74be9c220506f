//! Numerical methods that know nothing of molecules or spectra.

pub mod faddeeva;
pub mod statistics;
