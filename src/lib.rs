//! What a transistor audio stage does to sound, computed in the time domain.
//!
//! ```text
//! quantity ─ numeric          values as the trade writes them; small dense algebra
//!     └─ device               element laws: transistor, diode, temperature
//!         └─ stage            the checked stage file, same names as its keys
//!             └─ network      numbered elements, reduced to the nonlinear ports
//!                 └─ engine   bias, linearisation, transient, periodic steady state
//!                     ├─ render ─ audio     a WAV through a stage
//!                     └─ measure            figures with their conditions
//!                           └─ present      tables, JSON, CSV, plots
//!                                 └─ commands   one file a subcommand
//! ```
//!
//! Data flows one way: nothing in this picture imports anything below or to the right of it.
//! SI units inside (volts, amperes, ohms, seconds, kelvin); a name says so where it is otherwise.

pub mod audio;
pub mod cli;
pub mod commands;
pub mod device;
pub mod engine;
pub mod failure;
pub mod measure;
pub mod network;
pub mod numeric;
pub mod present;
pub mod quantity;
pub mod render;
pub mod stage;
