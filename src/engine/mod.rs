//! The solver: bias, linearisation, stepping in time, periodic steady state.
//!
//! Everything after the bias is computed as a deviation from it. The engine knows no file format and takes its drive as
//! a function of time or a block of samples.

pub mod bank;
pub mod bias;
pub mod error;
pub mod linear;
pub mod periodic;
pub mod scheme;
pub mod small;
pub mod step;
pub mod transient;

pub use bank::PortBank;
pub use bias::OperatingPoint;
pub use error::EngineError;
pub use linear::Linearised;
pub use periodic::{PeriodicSolution, PeriodicSolver};
pub use transient::{RadauTransient, UniformTransient};
