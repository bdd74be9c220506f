//! Integration tests: one binary, one module per subject.

mod assignment;
mod bad_input;
mod commands;
mod common_practice;
mod demo;
mod engine;
mod fitting;
mod layers;
mod many_body;
mod measured;
mod reporting;
mod shapes;
mod symmetry;
mod traces;
