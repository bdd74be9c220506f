//! Numerical methods that know nothing of molecules or spectra.

pub mod boys;
pub mod davidson;
pub mod faddeeva;
pub mod gemm;
pub mod lanes;
pub mod linalg;
pub mod statistics;
