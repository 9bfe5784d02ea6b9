//! The static transfer curve with the bias and the static swing.

use super::curve::curve;
use super::error::PlotError;
use super::frame::{Frame, LABEL_EM, words};
use super::ink::{PAPER, QUIET, SERIES};
use super::panel::{Axis, Panel, Plot};
use super::picture::Picture;
use super::scale::Scale;
use super::thd::SHEET;
use crate::measure::report::{BiasReport, Region};
use crate::present::format::{measured, plain, stated, trimmed};

/// Room for the names of the marked levels, px.
const SIDE: f64 = 210.0;
/// Distance of base lines of those names, px.
const ROW: f64 = 33.0;
/// Shares of the plot's height kept free above and below the curve.
const MARGIN: f64 = 0.06;

/// A level marked beside the curve.
struct Level {
    volts: f64,
    lines: Vec<String>,
}

/// Output against EMF at mid-band, coupling and bypass capacitors held at their bias voltage; bias and both ends of the swing are marked.
pub fn transfer_curve(report: &BiasReport) -> Result<Picture, PlotError> {
    let points: Vec<_> = report
        .transfer
        .iter()
        .map(|point| (point.emf, Some(point.output)))
        .collect();
    let emfs = report.transfer.iter().map(|point| point.emf);
    let (from, to) = (
        emfs.clone().fold(f64::INFINITY, f64::min),
        emfs.fold(f64::NEG_INFINITY, f64::max),
    );
    if points.len() < 2 || from >= to {
        return Err(PlotError::nothing("the report has no transfer curve"));
    }
    let levels = levels(report);
    let remark =
        "static, mid-band: coupling and bypass capacitors held at their bias voltage".to_string();
    let subject = "Static transfer from the source EMF to the output";
    let mut frame = Frame::new(SHEET, &report.title, subject, &[remark], &report.conditions);
    let heights = report
        .transfer
        .iter()
        .map(|point| point.output)
        .chain(levels.iter().map(|level| level.volts));
    let largest = heights
        .clone()
        .fold(0.0f64, |largest, volts| largest.max(volts.abs()));
    let (x_unit, x_label) = prefixed(from.abs().max(to.abs()), "V");
    let (y_unit, y_label) = prefixed(largest, "V");
    let panel = Panel {
        x: Axis {
            scale: Scale::Linear { from, to },
            title: format!("source EMF, {x_unit}"),
            label: &x_label,
            most: 8,
            grid: true,
        },
        y: Axis {
            scale: Scale::around(heights, MARGIN),
            title: format!("output, {y_unit}"),
            label: &y_label,
            most: 8,
            grid: true,
        },
        second: None,
        legend: vec![],
        side: SIDE,
    };
    let plot = panel.lay(&mut frame.picture, frame.middle);
    mark_levels(&mut frame.picture, &plot, &levels);
    curve(&mut frame.picture, &plot, &points, &SERIES[0], 0);
    frame.picture.ring(plot.at(0.0, report.output_bias), PAPER);
    Ok(frame.picture)
}

/// Bias and swing ends, from the top downward.
fn levels(report: &BiasReport) -> Vec<Level> {
    let swing = &report.static_swing;
    let end = |volts: f64, sign: f64, limit: &Option<(String, Region)>| Level {
        volts: report.output_bias + sign * volts,
        lines: [
            Some(format!(
                "{} {}",
                if sign > 0.0 { "up" } else { "down" },
                measured(volts, "V")
            )),
            limit
                .as_ref()
                .map(|(part, region)| format!("{} {}", plain(part), region.word())),
        ]
        .into_iter()
        .flatten()
        .collect(),
    };
    let up = swing.up.map(|volts| end(volts, 1.0, &swing.up_limited_by));
    let down = swing
        .down
        .map(|volts| end(volts, -1.0, &swing.down_limited_by));
    let bias = Level {
        volts: report.output_bias,
        lines: vec!["bias".into(), measured(report.output_bias, "V")],
    };
    up.into_iter().chain([bias]).chain(down).collect()
}

/// A dashed line across the plot and a name beside it for each level.
fn mark_levels(picture: &mut Picture, plot: &Plot, levels: &[Level]) {
    let (left, right) = (plot.area.left, plot.area.right);
    let bases = base_lines(plot, levels);
    for (level, base) in levels.iter().zip(bases) {
        let y = plot.at(0.0, level.volts).1;
        picture.dashed(vec![(left, y), (right + 12.0, y)], 2.0, &[9.0, 7.0], QUIET);
        for (row, line) in level.lines.iter().enumerate() {
            let at = (right + 20.0, base + row as f64 * ROW);
            picture.text(words(line.clone(), at, LABEL_EM, false));
        }
    }
}

/// The first base line of each name: beside its level, but clear of the name above it, and the last line of all no
/// lower than the plot, where the x axis has its labels.
fn base_lines(plot: &Plot, levels: &[Level]) -> Vec<f64> {
    let height = |level: &Level| level.lines.len() as f64 * ROW + 6.0;
    let mut free = f64::NEG_INFINITY;
    let mut bases: Vec<f64> = Vec::new();
    for level in levels {
        let beside = plot.at(0.0, level.volts).1 + 0.36 * LABEL_EM;
        bases.push(beside.max(free));
        free = bases[bases.len() - 1] + height(level);
    }
    let mut limit = plot.area.bottom + ROW;
    for (base, level) in bases.iter_mut().zip(levels).rev() {
        *base = base.min(limit - height(level));
        limit = *base;
    }
    bases
}

/// The unit with the prefix that fits `largest`, and how a value in base units is written in it.
pub(super) fn prefixed(largest: f64, unit: &str) -> (String, impl Fn(f64) -> String + use<>) {
    let power = if largest > 0.0 {
        (largest.log10() + 1e-9).floor() as i32
    } else {
        0
    };
    let factor = 10f64.powi(power.div_euclid(3) * 3);
    let name = stated(factor, unit)
        .trim_start_matches(|c: char| c.is_ascii_digit())
        .trim()
        .to_string();
    let label = move |value: f64| {
        let number = format!("{:.6}", value / factor);
        let number = trimmed(&number);
        if number == "-0" {
            "0".to_string()
        } else {
            number.replace('-', "−")
        }
    };
    (name, label)
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::super::super::sample;
    use super::*;

    #[test]
    fn one_prefix_serves_the_whole_axis() {
        let (unit, label) = prefixed(0.3, "V");
        assert_eq!(
            (unit.as_str(), label(-0.25), label(-0.0)),
            ("mV", "−250".to_string(), "0".to_string())
        );
        let (unit, label) = prefixed(12.0, "V");
        assert_eq!((unit.as_str(), label(7.5)), ("V", "7.5".to_string()));
    }

    #[test]
    fn bias_and_swing_are_named_beside_the_curve() {
        let texts = transfer_curve(&sample::bias()).unwrap().texts().join("\n");
        for name in [
            "bias",
            "7.041 V",
            "up 4.313 V",
            "Q1 cutoff",
            "down 5.440 V",
            "Q1 saturation",
        ] {
            assert!(texts.contains(name), "no {name} in {texts}");
        }
    }

    #[test]
    fn a_swing_of_almost_nothing_keeps_its_names_apart() {
        let mut report = sample::bias();
        report.static_swing.up = Some(0.01);
        report.static_swing.down = Some(0.01);
        let boxes = transfer_curve(&report).unwrap().text_boxes();
        for (index, (text, area)) in boxes.iter().enumerate() {
            let covered = boxes[index + 1..]
                .iter()
                .find(|(_, other)| area.overlaps(other));
            assert!(covered.is_none(), "{text} covers {covered:?}");
        }
    }

    #[test]
    fn a_report_without_a_curve_is_refused() {
        let mut report = sample::bias();
        report.transfer.clear();
        assert!(transfer_curve(&report).is_err());
    }
}
