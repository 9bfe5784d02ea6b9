//! The checked description of a stage, with the same names as the keys of its file.

mod cautions;
mod check;
mod description;
mod device_tables;
mod devices;
mod faults;
mod gang;
mod groups;
mod kinds;
mod loops;
mod names;
mod overrides;
mod part_settings;
mod parts;
mod read;
mod sections;
mod settings;
pub mod starters;
mod table;
mod terminals;

pub use check::{NetworkFault, NetworkPlace};
pub use description::*;
pub use faults::{Caution, Fault, StageError};
pub use names::nearest;
pub use overrides::{Override, OverrideError};
pub use terminals::Terminal;
