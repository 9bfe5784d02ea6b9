//! Element laws: the transistor, the diode, and how both move with temperature.
//!
//! Every law is evaluated as a *deviation from an anchor* (the bias, or zero volts): differences of exponentials, powers
//! and roots are formed analytically, so that a microvolt of drive keeps its relative accuracy beside volts of bias.

pub mod diode;
pub mod junction;
pub mod parameters;
pub mod temperature;
pub mod transistor;

pub use diode::{DiodeAnchor, DiodeLaw, DiodeState};
pub use parameters::{DiodeParameters, Polarity, TransistorParameters};
pub use transistor::{TransistorAnchor, TransistorLaw, TransistorState};
