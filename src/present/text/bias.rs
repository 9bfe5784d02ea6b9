//! Where the stage sits.

use super::super::format::{decibels, measured, or_floor, plain, stated};
use super::super::table::{Side, Table};
use super::{cautions, heading};
use crate::measure::report::{BiasReport, Region, StaticSwing};

/// The bias of a stage: nodes, devices, supply, static swing, gain at 1 kHz, cautions.
pub fn bias(report: &BiasReport) -> String {
    let blocks = [
        heading(&report.title, &report.conditions),
        nodes(report),
        transistors(report),
        diodes(report),
        supply(report),
        swing(&report.static_swing) + &gain(report.gain_at_1khz),
        cautions(&report.cautions),
    ];
    blocks
        .into_iter()
        .filter(|block| !block.is_empty())
        .collect::<Vec<_>>()
        .join("\n")
}

fn nodes(report: &BiasReport) -> String {
    let mut table = Table::new(&[("node", Side::Left), ("voltage", Side::Right)]);
    for (name, volts) in &report.nodes {
        table.row(vec![plain(name), settled(*volts, "V")]);
    }
    table.lines()
}

fn transistors(report: &BiasReport) -> String {
    if report.transistors.is_empty() {
        return String::new();
    }
    let numbers = ["IC", "IB", "VBE", "VCE", "gm", "rπ", "ro", "dissipation"]
        .map(|heading| (heading, Side::Right));
    let mut table = Table::new(
        &[
            &[("transistor", Side::Left), ("region", Side::Left)],
            &numbers[..],
        ]
        .concat(),
    );
    for device in &report.transistors {
        table.row(vec![
            plain(&device.name),
            device.region.word().to_string(),
            measured(device.collector_current, "A"),
            measured(device.base_current, "A"),
            measured(device.base_emitter, "V"),
            measured(device.collector_emitter, "V"),
            measured(device.transconductance, "S"),
            resistance(device.input_resistance),
            resistance(device.output_resistance),
            measured(device.dissipation, "W"),
        ]);
    }
    table.lines()
}

/// A small-signal resistance; a conductance of nothing is an infinite one.
fn resistance(ohms: Option<f64>) -> String {
    ohms.map_or_else(|| "infinite".to_string(), |ohms| measured(ohms, "Ω"))
}

fn diodes(report: &BiasReport) -> String {
    if report.diodes.is_empty() {
        return String::new();
    }
    let mut table = Table::new(&[
        ("diode", Side::Left),
        ("current", Side::Right),
        ("voltage", Side::Right),
    ]);
    for diode in &report.diodes {
        table.row(vec![
            plain(&diode.name),
            settled(diode.current, "A"),
            settled(diode.voltage, "V"),
        ]);
    }
    table.lines()
}

/// A value that may be nothing but rounding of zero, as that of a diode without bias.
fn settled(value: f64, unit: &str) -> String {
    measured(if value.abs() < 1e-18 { 0.0 } else { value }, unit)
}

fn supply(report: &BiasReport) -> String {
    if report.supply.is_empty() {
        return String::new();
    }
    let columns = [
        ("supply", Side::Left),
        ("EMF", Side::Right),
        ("current", Side::Right),
        ("power", Side::Right),
    ];
    let mut table = Table::new(&columns);
    for rail in &report.supply {
        let (current, power) = (measured(rail.current, "A"), measured(rail.power, "W"));
        table.row(vec![
            plain(&rail.name),
            stated(rail.volts, "V"),
            current,
            power,
        ]);
    }
    table.lines()
}

fn swing(swing: &StaticSwing) -> String {
    let up = one_way(swing.up, swing.up_limited_by.as_ref());
    let down = one_way(swing.down, swing.down_limited_by.as_ref());
    format!("static swing at the output: up {up}, down {down}\n")
}

/// `4.313 V to cutoff of Q1`, or that nothing limits.
pub(in super::super) fn one_way(volts: Option<f64>, limit: Option<&(String, Region)>) -> String {
    match (volts, limit) {
        (Some(volts), Some((part, region))) => {
            format!(
                "{} to {} of {}",
                measured(volts, "V"),
                region.word(),
                plain(part)
            )
        }
        (Some(volts), None) => measured(volts, "V"),
        (None, _) => "not limited".to_string(),
    }
}

fn gain((magnitude, phase): (f64, f64)) -> String {
    match decibels(magnitude) {
        Some(gain_db) => format!(
            "gain at 1 kHz, EMF to output: {} dB ({} times), phase {phase:.1}°\n",
            or_floor(Some(gain_db), 2),
            times(magnitude),
        ),
        None => "gain at 1 kHz, EMF to output: none\n".to_string(),
    }
}

/// A ratio with four digits and no prefix: `14.70`, `0.8484`, `1.573e-5`.
fn times(ratio: f64) -> String {
    let power = ratio.log10().floor() as i32;
    match power {
        -3..=3 => format!("{ratio:.*}", (3 - power) as usize),
        _ => format!("{ratio:.3e}"),
    }
}

#[cfg(test)]
mod tests {
    use super::super::super::sample;
    use super::*;

    #[test]
    fn the_whole_bias_of_a_common_emitter() {
        insta::assert_snapshot!(bias(&sample::bias()));
    }

    #[test]
    fn a_stage_without_devices_prints_no_empty_tables() {
        let mut report = sample::bias();
        report.transistors.clear();
        report.diodes.clear();
        report.static_swing = StaticSwing {
            up_emf: None,
            down_emf: None,
            up: None,
            down: None,
            up_limited_by: None,
            down_limited_by: None,
        };
        let text = bias(&report);
        assert!(
            !text.contains("transistor") && !text.contains("diode"),
            "{text}"
        );
        assert!(text.contains("up not limited, down not limited"), "{text}");
    }

    #[test]
    fn a_gain_is_a_plain_number() {
        let shown = [14.697, 0.84843, 1.5731e-5, 2345.6, 23456.0].map(times);
        assert_eq!(shown, ["14.70", "0.8484", "1.573e-5", "2346", "2.346e4"]);
    }

    #[test]
    fn a_title_cannot_move_the_cursor() {
        let report = BiasReport {
            title: "a\u{1b}[2Jb".into(),
            ..sample::bias()
        };
        assert!(!bias(&report).contains('\u{1b}'));
    }
}
