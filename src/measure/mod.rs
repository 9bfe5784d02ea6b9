//! Figures with their conditions: bias, harmonics and THD.

pub mod report;
