//! Numerical methods that know nothing of molecules or spectra.
