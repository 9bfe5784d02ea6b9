//! Figures with their conditions: bias, harmonics and THD.

pub mod bias;
pub mod distortion;
pub mod report;
mod swing;
pub mod thd;

use crate::quantity::constants::ZERO_CELSIUS;
use crate::stage::Stage;
use report::Conditions;

/// The circumstances every figure of `stage` holds under.
pub fn conditions_of(stage: &Stage) -> Conditions {
    let mut assumed = Vec::new();
    if !stage.source.stated {
        assumed.push("0 Ω source".to_string());
    }
    if !stage.load.stated {
        assumed.push("no load".to_string());
    }
    Conditions {
        temperature: stage.temperature,
        source_resistance: stage.source.resistance,
        source_inductance: stage.source.inductance,
        source_capacitance: stage.source.capacitance,
        load_resistance: stage.load.resistance,
        load_capacitance: stage.load.capacitance,
        rails: stage
            .rails
            .iter()
            .map(|rail| (rail.name.clone(), rail.volts))
            .collect(),
        assumed,
        overrides: stage.overrides.clone(),
    }
}

/// Celsius of a temperature in K.
pub fn celsius(temperature: f64) -> f64 {
    temperature - ZERO_CELSIUS
}
