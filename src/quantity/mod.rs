//! Physical constants, and values as the trade writes them: engineering text and
//! IEC 60062 marks, levels, frequencies, lists and ranges.

pub mod constants;
mod decimal;
pub mod engineering;
mod error;
mod format;
mod frequency;
mod level;
mod list;
mod quote;
pub mod ratio;
mod temperature;
mod tone;
mod unit;

pub use decimal::Decimal;
pub use error::ValueError;
pub use format::engineering as format_engineering;
pub use frequency::Frequency;
pub use level::{Level, dbu_reference};
pub use list::{Element, List};
pub use quote::quoted;
pub use ratio::Percent;
pub use temperature::parse_temperature;
pub use tone::{Tone, Tones};
pub use unit::Unit;
