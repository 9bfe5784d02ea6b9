//! One period of the output with the source's sine behind it.

use super::bars;
use super::curve::curve;
use super::error::PlotError;
use super::frame::Frame;
use super::ink::{Marker, QUIET, SERIES, Style};
use super::panel::{Axis, Key, Panel};
use super::picture::{Area, Picture};
use super::scale::Scale;
use super::thd::SHEET;
use super::transfer::prefixed;
use crate::measure::report::{Conditions, DistortionPoint};
use crate::present::format::{measured, percent, stated};
use crate::present::text::definition;
use std::f64::consts::{SQRT_2, TAU};

/// Points of the drawn sine.
const SINE: usize = 240;
/// The sheet of waveform and spectrum together, px.
const TALL: (f64, f64) = (1200.0, 1500.0);

/// How the source's sine is drawn: behind, quiet, dashed.
const BEHIND: Style = Style {
    colour: QUIET,
    width: 2.5,
    dash: &[10.0, 8.0],
    marker: Marker::None,
};

/// One period of the output as deviation from its bias.
pub fn waveform(
    title: &str,
    held: &Conditions,
    point: &DistortionPoint,
) -> Result<Picture, PlotError> {
    check(point)?;
    let mut frame = Frame::new(SHEET, title, &subject(point), &[definition(point)], held);
    draw(&mut frame.picture, frame.middle, point);
    Ok(frame.picture)
}

/// The waveform above the spectrum: the picture of a single point.
pub fn spectrum_and_waveform(
    title: &str,
    held: &Conditions,
    point: &DistortionPoint,
) -> Result<Picture, PlotError> {
    check(point)?;
    let drives = [bars::Drive {
        name: "output at EMF",
        point,
    }];
    let foot = bars::foot(&drives)?;
    let mut frame = Frame::new(TALL, title, &subject(point), &[bars::remark(foot)], held);
    let Area {
        left,
        top,
        right,
        bottom,
    } = frame.middle;
    let half = (top + bottom) / 2.0;
    draw(
        &mut frame.picture,
        Area {
            left,
            top,
            right,
            bottom: half - 30.0,
        },
        point,
    );
    bars::draw(
        &mut frame.picture,
        Area {
            left,
            top: half,
            right,
            bottom,
        },
        &drives,
        foot,
    );
    Ok(frame.picture)
}

fn check(point: &DistortionPoint) -> Result<(), PlotError> {
    if point.waveform.len() < 2 || !(point.level > 0.0 && point.output.is_finite()) {
        return Err(PlotError::nothing("the point has no waveform"));
    }
    Ok(())
}

fn subject(point: &DistortionPoint) -> String {
    let thd = point.thd.map_or_else(String::new, |thd| {
        format!(", THD {} %", percent(thd, point.error_estimate))
    });
    format!(
        "One period at {} and {} EMF rms{thd}",
        stated(point.frequency, "Hz"),
        measured(point.level, "V")
    )
}

/// The source's sine at the size of the output's fundamental, turned over where the stage inverts, and its name.
fn source(point: &DistortionPoint) -> (String, Vec<(f64, Option<f64>)>) {
    let phase = point
        .harmonics
        .first()
        .and_then(|first| first.phase_deg)
        .unwrap_or(0.0);
    let inverts = phase.abs() > 90.0;
    let peak = SQRT_2 * point.output * if inverts { -1.0 } else { 1.0 };
    let turns = (0..=SINE).map(|k| k as f64 / SINE as f64);
    let points = turns
        .map(|turn| (turn / point.frequency, Some(peak * (TAU * turn).sin())))
        .collect();
    let times = measured(point.output / point.level, "");
    let inverted = if inverts { ", inverted" } else { "" };
    (format!("source EMF × {}{inverted}", times.trim()), points)
}

/// The samples of the output over one period, the first repeated at its end.
fn output(point: &DistortionPoint) -> Vec<(f64, Option<f64>)> {
    let count = point.waveform.len();
    let time = |k: usize| k as f64 / count as f64 / point.frequency;
    (0..=count)
        .map(|k| (time(k), Some(point.waveform[k % count])))
        .collect()
}

fn draw(picture: &mut Picture, room: Area, point: &DistortionPoint) {
    let (name, sine) = source(point);
    let output = output(point);
    let heights = sine.iter().chain(&output).filter_map(|point| point.1);
    let largest = heights
        .clone()
        .fold(0.0f64, |largest, height| largest.max(height.abs()));
    let (time, time_label) = prefixed(1.0 / point.frequency, "s");
    let (volts, volts_label) = prefixed(largest, "V");
    let style = SERIES[0];
    let panel = Panel {
        x: Axis {
            scale: Scale::Linear {
                from: 0.0,
                to: 1.0 / point.frequency,
            },
            title: format!("time, {time}"),
            label: &time_label,
            most: 10,
            grid: true,
        },
        y: Axis {
            scale: Scale::around(heights, 0.08),
            title: format!("output from its bias, {volts}"),
            label: &volts_label,
            most: 7,
            grid: true,
        },
        second: None,
        legend: vec![
            ("output".to_string(), Key::Line(style)),
            (name, Key::Line(BEHIND)),
        ],
        side: 0.0,
    };
    let plot = panel.lay(picture, room);
    curve(picture, &plot, &sine, &BEHIND, 0);
    curve(picture, &plot, &output, &style, 0);
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::super::super::sample;
    use super::*;

    #[test]
    fn the_source_is_turned_over_with_an_inverting_stage() {
        let point = sample::point(1000.0, 0.01);
        let (name, sine) = source(&point);
        assert!(name.contains("× 34.25, inverted"), "{name}");
        assert!(sine[SINE / 4].1.unwrap() < 0.0);
    }

    #[test]
    fn the_period_closes_on_its_first_sample() {
        let output = output(&sample::point(1000.0, 0.1));
        assert_eq!(output[0].1, output[output.len() - 1].1);
        assert_eq!(output[output.len() - 1].0, 1e-3);
    }

    #[test]
    fn a_point_without_samples_is_refused() {
        let report = sample::short();
        assert!(waveform(&report.title, &report.conditions, &report.points[0]).is_err());
    }
}
