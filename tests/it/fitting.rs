//! The solver against certified values, and bands against traces whose truth is known.

mod nist;
mod synthetic;
