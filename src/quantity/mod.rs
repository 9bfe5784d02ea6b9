//! Physical constants, and values as the trade writes them: engineering text and
//! IEC 60062 marks, levels, frequencies, lists and ranges.

pub mod constants;
