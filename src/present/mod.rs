//! One report value, many faces: tables for people, JSON, CSV, pictures.
//!
//! Nothing here computes physics: every figure comes from a report of `measure`, and this module only gives it a
//! unit, a prefix, decibels or percent. Tables are plain text without colour, so that a terminal, a pipe and a file
//! get the same bytes; JSON and CSV carry full double precision.

mod conditions;
pub mod csv;
mod format;
pub mod json;
pub mod plot;
#[cfg(test)]
mod sample;
mod table;
pub mod text;
