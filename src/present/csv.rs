//! Comma-separated values for programs and spreadsheets (RFC 4180, lines ended by a line feed): one header row with
//! the units in its names, full double precision, an empty field where there is no value. The conditions stand in
//! the rows themselves, so that a figure cut out of the file keeps them.

use super::format::{celsius, decibels};
use crate::measure::report::*;

/// Harmonics in a row of `distortion`, whatever the bandwidth of the THD.
const HARMONICS: usize = 20;

/// The bias in long form: one row an item.
pub fn bias(report: &BiasReport) -> String {
    let mut rows = Rows::new();
    rows.conditions(&report.title, &report.conditions);
    for (name, volts) in &report.nodes {
        rows.number("nodes", name, "voltage", "V", Some(*volts));
    }
    report
        .transistors
        .iter()
        .for_each(|device| rows.transistor(device));
    for diode in &report.diodes {
        rows.number("diodes", &diode.name, "current", "A", Some(diode.current));
        rows.number("diodes", &diode.name, "voltage", "V", Some(diode.voltage));
    }
    for rail in &report.supply {
        rows.number("supply", &rail.name, "current", "A", Some(rail.current));
        rows.number("supply", &rail.name, "power", "W", Some(rail.power));
    }
    rows.swing(&report.static_swing);
    let (gain, phase) = report.gain_at_1khz;
    rows.number("gain_at_1khz", "", "gain", "", Some(gain));
    rows.number("gain_at_1khz", "", "gain", "dB", decibels(gain));
    rows.number("gain_at_1khz", "", "phase", "deg", Some(phase));
    rows.0
}

/// The rows of the long form, as text.
struct Rows(String);

impl Rows {
    fn new() -> Self {
        Rows(line(
            &["section", "name", "quantity", "unit", "value"].map(str::to_string),
        ))
    }

    fn word(&mut self, section: &str, name: &str, quantity: &str, value: &str) {
        self.0 += &line(&[section, name, quantity, "", value].map(str::to_string));
    }

    fn number(
        &mut self,
        section: &str,
        name: &str,
        quantity: &str,
        unit: &str,
        value: Option<f64>,
    ) {
        self.0 += &line(&[section, name, quantity, unit, &number(value)].map(str::to_string));
    }

    fn conditions(&mut self, title: &str, held: &Conditions) {
        let section = "conditions";
        self.word(section, "", "stage", title);
        self.number(
            section,
            "",
            "temperature",
            "celsius",
            Some(celsius(held.temperature)),
        );
        self.number(
            section,
            "source",
            "resistance",
            "ohm",
            Some(held.source_resistance),
        );
        self.number(
            section,
            "source",
            "inductance",
            "H",
            Some(held.source_inductance),
        );
        self.number(
            section,
            "source",
            "capacitance",
            "F",
            Some(held.source_capacitance),
        );
        self.number(section, "load", "resistance", "ohm", held.load_resistance);
        self.number(
            section,
            "load",
            "capacitance",
            "F",
            Some(held.load_capacitance),
        );
        for (name, volts) in &held.rails {
            self.number(section, name, "rail", "V", Some(*volts));
        }
        held.assumed
            .iter()
            .for_each(|words| self.word(section, "", "assumed", words));
        held.overrides
            .iter()
            .for_each(|words| self.word(section, "", "override", words));
    }

    fn transistor(&mut self, device: &TransistorBias) {
        let (section, name) = ("transistors", device.name.as_str());
        self.number(
            section,
            name,
            "collector_current",
            "A",
            Some(device.collector_current),
        );
        self.number(
            section,
            name,
            "base_current",
            "A",
            Some(device.base_current),
        );
        self.number(
            section,
            name,
            "base_emitter",
            "V",
            Some(device.base_emitter),
        );
        self.number(
            section,
            name,
            "collector_emitter",
            "V",
            Some(device.collector_emitter),
        );
        self.word(section, name, "region", device.region.word());
        self.number(section, name, "dissipation", "W", Some(device.dissipation));
        self.number(
            section,
            name,
            "transconductance",
            "S",
            Some(device.transconductance),
        );
        self.number(
            section,
            name,
            "input_resistance",
            "ohm",
            device.input_resistance,
        );
        self.number(
            section,
            name,
            "output_resistance",
            "ohm",
            device.output_resistance,
        );
    }

    fn swing(&mut self, swing: &StaticSwing) {
        self.number("static_swing", "output", "up", "V", swing.up);
        self.number("static_swing", "output", "down", "V", swing.down);
        for (quantity, limit) in [
            ("up", &swing.up_limited_by),
            ("down", &swing.down_limited_by),
        ] {
            if let Some((part, region)) = limit {
                self.word(
                    "static_swing",
                    part,
                    &format!("{quantity}_limited_by"),
                    region.word(),
                );
            }
        }
    }
}

/// Distortion: one row a point.
pub fn distortion(report: &DistortionReport) -> String {
    let held = condition_fields(report);
    let mut text = line(
        &[
            point_names(),
            held.iter().map(|(name, _)| name.clone()).collect(),
        ]
        .concat(),
    );
    let constant: Vec<String> = held.into_iter().map(|(_, value)| value).collect();
    for point in &report.points {
        text += &line(&[point_values(point), constant.clone()].concat());
    }
    text
}

fn point_names() -> Vec<String> {
    let names = "frequency_hz,level_v_rms,output_v_rms,gain_db,thd_percent,thd_db,thd_of_total_percent,thd_reason,\
                 bandwidth_hz,harmonics_in_thd,dc_shift_v,error_estimate";
    let harmonics = (1..=HARMONICS).flat_map(|n| {
        ["v_rms", "phase_deg", "relative_db"].map(|quantity| format!("h{n}_{quantity}"))
    });
    names
        .split(',')
        .map(str::to_string)
        .chain(harmonics)
        .collect()
}

fn point_values(point: &DistortionPoint) -> Vec<String> {
    let mut values = vec![
        number(Some(point.frequency)),
        number(Some(point.level)),
        number(Some(point.output)),
        number(point.gain_db),
        number(point.thd.map(|thd| 100.0 * thd)),
        number(point.thd.and_then(decibels)),
        number(point.thd_of_total.map(|thd| 100.0 * thd)),
        point
            .thd_reason
            .clone()
            .filter(|_| point.thd.is_none())
            .unwrap_or_default(),
        number(point.bandwidth),
        point
            .bandwidth
            .map_or_else(String::new, |_| point.harmonics_in_thd.to_string()),
        number(Some(point.dc_shift)),
        number(Some(point.error_estimate)),
    ];
    for n in 1..=HARMONICS {
        let harmonic = point.harmonics.iter().find(|harmonic| harmonic.n == n);
        values.push(number(harmonic.map(|harmonic| harmonic.rms)));
        values.push(number(harmonic.and_then(|harmonic| harmonic.phase_deg)));
        values.push(number(harmonic.and_then(|harmonic| harmonic.relative_db)));
    }
    values
}

fn condition_fields(report: &DistortionReport) -> Vec<(String, String)> {
    let held = &report.conditions;
    let mut fields = vec![
        ("stage".to_string(), report.title.clone()),
        (
            "temperature_celsius".to_string(),
            number(Some(celsius(held.temperature))),
        ),
        (
            "source_resistance_ohm".to_string(),
            number(Some(held.source_resistance)),
        ),
        (
            "source_inductance_h".to_string(),
            number(Some(held.source_inductance)),
        ),
        (
            "source_capacitance_f".to_string(),
            number(Some(held.source_capacitance)),
        ),
        (
            "load_resistance_ohm".to_string(),
            number(held.load_resistance),
        ),
        (
            "load_capacitance_f".to_string(),
            number(Some(held.load_capacitance)),
        ),
    ];
    fields.extend(
        held.rails
            .iter()
            .map(|(name, volts)| (format!("rail_{name}_v"), number(Some(*volts)))),
    );
    fields.push(("assumed".to_string(), held.assumed.join("; ")));
    fields.push(("overrides".to_string(), held.overrides.join("; ")));
    fields
}

/// The shortest form that reads back to the same value; empty for no value and for what is not finite.
fn number(value: Option<f64>) -> String {
    value
        .and_then(serde_json::Number::from_f64)
        .map(|number| number.to_string())
        .unwrap_or_default()
}

fn line(fields: &[String]) -> String {
    fields
        .iter()
        .map(|text| field(text))
        .collect::<Vec<_>>()
        .join(",")
        + "\n"
}

/// A field, quoted where RFC 4180 asks for it.
fn field(text: &str) -> String {
    if text.contains([',', '"', '\n', '\r']) {
        format!("\"{}\"", text.replace('"', "\"\""))
    } else {
        text.to_string()
    }
}

#[cfg(test)]
mod tests {
    use super::super::sample;
    use super::*;

    /// The fields of a line without quoted fields.
    fn fields(line: &str) -> Vec<&str> {
        line.split(',').collect()
    }

    #[test]
    fn the_bias_is_one_row_an_item() {
        let report = BiasReport {
            gain_at_1khz: (100.0, -179.2),
            ..sample::bias()
        };
        insta::assert_snapshot!(bias(&report));
    }

    #[test]
    fn every_row_has_as_many_fields_as_the_header() {
        let mut report = sample::distortion(&[1000.0, 10e3], &[0.01, 0.2]);
        report.title = "plain".into();
        let text = distortion(&report);
        let mut lines = text.lines();
        let header = fields(lines.next().unwrap_or_default());
        assert_eq!(header.first(), Some(&"frequency_hz"));
        assert_eq!(lines.clone().count(), 4);
        assert!(lines.all(|row| fields(row).len() == header.len()));
    }

    #[test]
    fn values_have_full_precision_and_missing_ones_are_empty() {
        let mut report = sample::short();
        report.points[0].level = 0.1 + 0.2;
        let text = distortion(&report);
        assert!(
            text.contains("1000.0,0.30000000000000004,0.685,30.69,"),
            "{text}"
        );
        assert!(text.contains(",1e-17,,,"), "{text}");
    }

    #[test]
    fn commas_and_quotes_in_a_title_stay_inside_one_field() {
        assert_eq!(field("a \"b\", c"), "\"a \"\"b\"\", c\"");
        assert_eq!(field("plain"), "plain");
    }
}
