//! Element laws: the transistor, the diode, and how both move with temperature.
//!
//! Every law is evaluated as a *deviation from an anchor* (the bias, or zero volts): differences of exponentials, powers
//! and roots are formed analytically, so that a microvolt of drive keeps its relative accuracy beside volts of bias.

pub mod classes;
pub mod diode;
pub mod junction;
pub mod keys;
pub mod parameters;
mod ratings;
pub mod temperature;
pub mod transistor;

pub use diode::{DiodeAnchor, DiodeLaw, DiodeState};
pub use parameters::{DiodeParameters, Polarity, TransistorParameters};
pub use ratings::Ratings;
pub use transistor::{TransistorAnchor, TransistorLaw, TransistorState};
