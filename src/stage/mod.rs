//! The checked description of a stage, with the same names as the keys of its file.

mod cautions;
mod check;
mod description;
mod devices;
mod faults;
mod gang;
mod groups;
mod names;
mod parts;
mod read;
mod sections;
mod table;
mod terminals;

pub use check::{NetworkFault, NetworkPlace};
pub use description::*;
pub use faults::{Caution, Fault, StageError};
pub use names::nearest;
pub use terminals::Terminal;
