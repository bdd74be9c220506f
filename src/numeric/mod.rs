//! Numerical methods that know nothing of molecules or spectra.

pub mod boys;
pub mod davidson;
pub mod gemm;
pub mod lanes;
pub mod linalg;
