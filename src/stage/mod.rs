//! The checked description of a stage, with the same names as the keys of its file.

mod description;

pub use description::*;
