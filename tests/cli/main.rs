//! The program as a person meets it: what it prints, where, the exit code, and which files it touches.
//!
//! Figures are held elsewhere (`tests/oracle.rs`, `tests/reference/`); here only the surface. Every run checks that
//! there was no panic.
#![allow(clippy::unwrap_used, clippy::expect_used)] // helpers of tests, which the lint counts as code

mod bias;
mod demo;
mod distortion;
mod faults;
mod help;
mod listen;
mod start;
mod support;
