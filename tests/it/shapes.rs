//! See the head of `main.rs`.
