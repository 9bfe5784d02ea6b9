//! The circumstances of a figure, in words: the same lines stand under every table and every picture.

use super::format::{celsius, plain, stated, trimmed};
use crate::measure::report::Conditions;

/// The lines to print: what holds, what was assumed, what the command line changed.
pub(super) fn lines(conditions: &Conditions) -> Vec<String> {
    let mut lines = vec![holding(conditions)];
    if !conditions.assumed.is_empty() {
        lines.push(format!(
            "assumed: {}",
            plain(&conditions.assumed.join(", "))
        ));
    }
    if !conditions.overrides.is_empty() {
        lines.push(format!("set: {}", plain(&conditions.overrides.join(", "))));
    }
    lines
}

fn holding(conditions: &Conditions) -> String {
    let mut words = vec![
        format!(
            "{} °C",
            trimmed(&format!("{:.2}", celsius(conditions.temperature)))
        ),
        format!("source {}", source(conditions)),
        format!("load {}", load(conditions)),
    ];
    words.extend(
        conditions
            .rails
            .iter()
            .map(|(name, volts)| format!("{} {}", plain(name), stated(*volts, "V"))),
    );
    words.join(", ")
}

fn source(conditions: &Conditions) -> String {
    let mut source = stated(conditions.source_resistance, "Ω");
    if conditions.source_inductance != 0.0 {
        source += &format!(" + {}", stated(conditions.source_inductance, "H"));
    }
    if conditions.source_capacitance != 0.0 {
        source += &format!(" ∥ {}", stated(conditions.source_capacitance, "F"));
    }
    source
}

fn load(conditions: &Conditions) -> String {
    let capacitance =
        (conditions.load_capacitance != 0.0).then(|| stated(conditions.load_capacitance, "F"));
    match (
        conditions.load_resistance.map(|ohms| stated(ohms, "Ω")),
        capacitance,
    ) {
        (Some(resistance), Some(capacitance)) => format!("{resistance} ∥ {capacitance}"),
        (Some(only), None) | (None, Some(only)) => only,
        (None, None) => "none".to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::super::sample;
    use super::*;

    #[test]
    fn everything_that_holds_is_on_the_first_line() {
        let conditions = Conditions {
            source_inductance: 3.2,
            source_capacitance: 620e-12,
            load_resistance: Some(47e3),
            load_capacitance: 100e-12,
            ..sample::conditions()
        };
        assert_eq!(
            lines(&conditions)[0],
            "25 °C, source 600 Ω + 3.2 H ∥ 620 pF, load 47 kΩ ∥ 100 pF, vcc 12 V"
        );
    }

    #[test]
    fn what_was_assumed_and_what_was_set_have_a_line_each() {
        let conditions = Conditions {
            source_resistance: 0.0,
            load_resistance: None,
            assumed: vec!["0 Ω source".into(), "no load".into()],
            overrides: vec!["RC=2k2".into()],
            ..sample::conditions()
        };
        assert_eq!(
            lines(&conditions),
            [
                "25 °C, source 0 Ω, load none, vcc 12 V",
                "assumed: 0 Ω source, no load",
                "set: RC=2k2"
            ]
        );
    }
}
