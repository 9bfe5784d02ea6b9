//! JSON documents for programs. Units stand in the keys; numbers carry full double precision (shortest form that
//! reads back to the same value); what is not a finite number is `null`.

use super::format::{celsius, decibels};
use crate::measure::report::*;
use serde_json::{Map, Value, json};

/// The document of `bias`.
pub fn bias(report: &BiasReport) -> Value {
    let mut document = opening("cleanswing.bias/1", &report.title, &report.conditions);
    let mut put = |key: &str, value: Value| document.insert(key.to_string(), value);
    put(
        "nodes",
        object(
            report
                .nodes
                .iter()
                .map(|(name, volts)| (name, number(*volts))),
        ),
    );
    put(
        "transistors",
        object(
            report
                .transistors
                .iter()
                .map(|device| (&device.name, transistor(device))),
        ),
    );
    put(
        "diodes",
        object(
            report
                .diodes
                .iter()
                .map(|device| (&device.name, diode(device))),
        ),
    );
    put(
        "supply",
        object(report.supply.iter().map(|rail| (&rail.name, supply(rail)))),
    );
    put("static_swing", static_swing(&report.static_swing));
    put("gain_at_1khz", gain(report.gain_at_1khz));
    put("output_bias_v", number(report.output_bias));
    put("cautions", json!(report.cautions));
    Value::Object(document)
}

/// The document of `distortion`.
pub fn distortion(report: &DistortionReport) -> Value {
    let mut document = opening("cleanswing.distortion/1", &report.title, &report.conditions);
    document.insert(
        "points".to_string(),
        report.points.iter().map(point).collect(),
    );
    document.insert("cautions".to_string(), json!(report.cautions));
    Value::Object(document)
}

/// A document as printed on standard output: indented, one final line end.
pub fn printed(document: &Value) -> String {
    format!("{document:#}\n")
}

fn opening(schema: &str, title: &str, held: &Conditions) -> Map<String, Value> {
    let mut document = Map::new();
    document.insert("schema".to_string(), json!(schema));
    document.insert("stage".to_string(), json!(title));
    document.insert("conditions".to_string(), conditions(held));
    document
}

fn conditions(held: &Conditions) -> Value {
    json!({
        "temperature_celsius": number(celsius(held.temperature)),
        "source_resistance_ohm": number(held.source_resistance),
        "source_inductance_h": number(held.source_inductance),
        "source_capacitance_f": number(held.source_capacitance),
        "load_resistance_ohm": optional(held.load_resistance),
        "load_capacitance_f": number(held.load_capacitance),
        "rails_v": object(held.rails.iter().map(|(name, volts)| (name, number(*volts)))),
        "assumed": held.assumed,
        "overrides": held.overrides,
    })
}

fn transistor(device: &TransistorBias) -> Value {
    json!({
        "collector_current_a": number(device.collector_current),
        "base_current_a": number(device.base_current),
        "base_emitter_v": number(device.base_emitter),
        "collector_emitter_v": number(device.collector_emitter),
        "region": device.region.word(),
        "dissipation_w": number(device.dissipation),
        "transconductance_s": number(device.transconductance),
        "input_resistance_ohm": optional(device.input_resistance),
        "output_resistance_ohm": optional(device.output_resistance),
    })
}

fn diode(device: &DiodeBias) -> Value {
    json!({ "current_a": number(device.current), "voltage_v": number(device.voltage) })
}

fn supply(rail: &RailBias) -> Value {
    json!({ "current_a": number(rail.current), "power_w": number(rail.power), "emf_v": number(rail.volts) })
}

fn static_swing(swing: &StaticSwing) -> Value {
    json!({
        "up_v": optional(swing.up),
        "down_v": optional(swing.down),
        "up_limited_by": limit(swing.up_limited_by.as_ref()),
        "down_limited_by": limit(swing.down_limited_by.as_ref()),
    })
}

fn limit(limited_by: Option<&(String, Region)>) -> Value {
    limited_by.map_or(
        Value::Null,
        |(part, region)| json!({ "part": part, "region": region.word() }),
    )
}

fn gain((magnitude, phase): (f64, f64)) -> Value {
    json!({ "gain": number(magnitude), "gain_db": optional(decibels(magnitude)), "phase_deg": number(phase) })
}

fn point(point: &DistortionPoint) -> Value {
    let mut value = json!({
        "frequency_hz": number(point.frequency),
        "level_v_rms": number(point.level),
        "output_v_rms": number(point.output),
        "gain_db": optional(point.gain_db),
        "thd_percent": optional(point.thd.map(|thd| 100.0 * thd)),
        "thd_db": optional(point.thd.and_then(decibels)),
        "thd_of_total_percent": optional(point.thd_of_total.map(|thd| 100.0 * thd)),
        "bandwidth_hz": optional(point.bandwidth),
        "harmonics_in_thd": point.bandwidth.map(|_| point.harmonics_in_thd),
        "dc_shift_v": number(point.dc_shift),
        "harmonics": point.harmonics.iter().map(harmonic).collect::<Vec<_>>(),
        "error_estimate": number(point.error_estimate),
    });
    if point.thd.is_none() {
        value["thd_reason"] = json!(point.thd_reason);
    }
    value
}

fn harmonic(harmonic: &Harmonic) -> Value {
    json!({
        "n": harmonic.n,
        "v_rms": number(harmonic.rms),
        "phase_deg": optional(harmonic.phase_deg),
        "relative_db": optional(harmonic.relative_db),
    })
}

fn object<'a>(entries: impl Iterator<Item = (&'a String, Value)>) -> Value {
    Value::Object(entries.map(|(name, value)| (name.clone(), value)).collect())
}

/// A finite number, or null.
fn number(value: f64) -> Value {
    serde_json::Number::from_f64(value).map_or(Value::Null, Value::Number)
}

fn optional(value: Option<f64>) -> Value {
    value.map_or(Value::Null, number)
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::super::sample;
    use super::*;

    #[test]
    fn the_bias_document_has_every_key_in_order() {
        let report = BiasReport {
            gain_at_1khz: (100.0, -179.2),
            ..sample::bias()
        };
        insta::assert_snapshot!(printed(&bias(&report)));
    }

    #[test]
    fn the_distortion_document_has_every_key_in_order() {
        insta::assert_snapshot!(printed(&distortion(&sample::short())));
    }

    #[test]
    fn numbers_read_back_to_the_same_bits() {
        let mut report = sample::bias();
        // 0.1 + 0.2, a value whose shortest form needs all 17 digits, and a subnormal-sized current.
        report.nodes[1].1 = 0.1 + 0.2;
        report.diodes[0].current = -1.234567890123456e-300;
        let text = printed(&bias(&report));
        assert!(
            text.contains("0.30000000000000004") && text.contains("-1.234567890123456e-300"),
            "{text}"
        );
    }

    #[test]
    fn what_is_not_finite_is_null() {
        let mut report = sample::short();
        report.points[0].dc_shift = f64::NAN;
        report.points[0].gain_db = Some(f64::NEG_INFINITY);
        let document = distortion(&report);
        assert_eq!(document["points"][0]["dc_shift_v"], Value::Null);
        assert_eq!(document["points"][0]["gain_db"], Value::Null);
        let text = printed(&document).to_lowercase();
        assert!(!text.contains("nan") && !text.contains("inf"), "{text}");
    }

    #[test]
    fn a_null_thd_comes_with_its_reason_and_no_other_does() {
        let mut report = sample::short();
        assert!(distortion(&report)["points"][0].get("thd_reason").is_none());
        report.points[0].thd = None;
        report.points[0].thd_of_total = None;
        report.points[0].thd_reason = Some("H2 lies above 80 kHz".into());
        let point = &distortion(&report)["points"][0];
        assert_eq!(point["thd_percent"], Value::Null);
        assert_eq!(point["thd_db"], Value::Null);
        assert_eq!(point["thd_reason"], "H2 lies above 80 kHz");
    }
}
