//! The checked description of a stage, with the same names as the keys of its file.

mod description;
mod devices;
mod faults;
mod gang;
mod names;
mod parts;
mod read;
mod sections;
mod table;

pub use description::*;
pub use faults::{Caution, Fault, StageError};
pub use names::nearest;
