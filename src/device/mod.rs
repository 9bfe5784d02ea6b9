//! Element laws: the transistor, the diode, and how both move with temperature.

pub mod parameters;

pub use parameters::{DiodeParameters, Polarity, TransistorParameters};
