//! VAMAS.
