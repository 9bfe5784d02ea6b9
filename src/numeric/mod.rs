//! Small dense algebra over a lane type, and the lane type itself.

pub mod fourier;
mod lane;
mod lu;
mod matrix;
pub mod roots;

pub use lane::Lane;
pub use lu::{Factored, SingularMatrix};
pub use matrix::Matrix;
