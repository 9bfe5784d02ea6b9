//! The stage as numbered elements, assembled into nodal equations and reduced to the nonlinear ports.
//!
//! Nodal equations with extra branch currents for inductors (C. W. Ho, A. E. Ruehli, P. A. Brennan, "The modified
//! nodal approach to network analysis", IEEE Trans. CAS 22, 1975). Ideal EMFs and rails are known voltages and leave
//! the unknowns. See [`assembly`] for the equations and [`reduction`] for the ports.

pub mod assembly;
pub mod elements;
mod lower;
pub mod reduction;

pub use assembly::Assembly;
pub use elements::{
    Capacitor, Conductance, CurrentSource, DiodeElement, Drive, Inductor, Network, Place, Port,
    TransistorElement,
};
pub use reduction::{Reduction, Scheme};
