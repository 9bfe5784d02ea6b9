//! Element laws: the transistor, the diode, and how both move with temperature.

pub mod classes;
pub mod keys;
pub mod parameters;
mod ratings;

pub use parameters::{DiodeParameters, Polarity, TransistorParameters};
pub use ratings::Ratings;
