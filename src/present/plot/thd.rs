//! THD against level and against frequency. A logarithmic percent axis is a decibel axis too (20 dB a decade), so
//! the right side is read in dB.

use super::curve::curve;
use super::error::PlotError;
use super::frame::Frame;
use super::ink::{SERIES, Style};
use super::panel::{Axis, Key, Panel};
use super::picture::Picture;
use super::scale::{Scale, decade_above, decade_below};
use crate::measure::report::{DistortionPoint, DistortionReport};
use crate::present::format::{stated, trimmed};
use crate::present::text::bandwidth;

/// The sheet, px.
pub(super) const SHEET: (f64, f64) = (1200.0, 900.0);
/// Most decades of distortion on one sheet.
const DECADES: i32 = 7;
/// Decades drawn below the least THD for the harmonics.
const BELOW_THD: i32 = 2;

/// A named curve: level or frequency, and percent of H1 where there is one.
type Curve = (String, Vec<(f64, Option<f64>)>);

/// The curves of one sheet.
struct Family {
    curves: Vec<Curve>,
    /// Percent at the foot of the sheet.
    lowest: f64,
    /// What the y axis shows, where it is one thing: `THD `.
    what: &'static str,
}

/// THD against input level. One frequency: with harmonics 2 to 5; several: a curve each.
pub fn thd_against_level(report: &DistortionReport) -> Result<Picture, PlotError> {
    let frequencies = distinct(report.points.iter().map(|point| point.frequency));
    let shown = spread(&frequencies);
    let mut family = family(report, &shown, |point| (point.frequency, point.level), "Hz");
    let mut subject = "THD against level".to_string();
    if let [frequency] = frequencies.as_slice() {
        with_harmonics(&mut family, report);
        subject = format!(
            "THD and harmonics 2 to 5 against level at {}",
            stated(*frequency, "Hz")
        );
    }
    let volts = |volts: f64| stated(volts, "V");
    let remarks = remarks(report, shown.len(), frequencies.len(), "frequencies");
    draw(
        report,
        &family,
        &subject,
        remarks,
        ("source EMF, rms", &volts),
    )
}

/// THD against frequency, a curve for each level.
pub fn thd_against_frequency(report: &DistortionReport) -> Result<Picture, PlotError> {
    let levels = distinct(report.points.iter().map(|point| point.level));
    let shown = spread(&levels);
    let family = family(report, &shown, |point| (point.level, point.frequency), "V");
    let hertz = |hertz: f64| stated(hertz, "Hz");
    let mut remarks = remarks(report, shown.len(), levels.len(), "levels");
    if report.points.iter().any(|point| point.bandwidth.is_some()) {
        remarks.push("a step down: a harmonic has passed the edge of the bandwidth".to_string());
    }
    draw(
        report,
        &family,
        "THD against frequency, for the source EMF rms named",
        remarks,
        ("frequency", &hertz),
    )
}

/// The different values, in the order they come.
pub(super) fn distinct(values: impl Iterator<Item = f64>) -> Vec<f64> {
    values.fold(Vec::new(), |mut seen, value| {
        if !seen.contains(&value) {
            seen.push(value);
        }
        seen
    })
}

/// At most as many values as there are styles, evenly picked, both ends among them.
fn spread(values: &[f64]) -> Vec<f64> {
    let most = SERIES.len();
    if values.len() <= most {
        return values.to_vec();
    }
    (0..most)
        .map(|k| values[k * (values.len() - 1) / (most - 1)])
        .collect()
}

/// One THD curve for each value in `shown`; `split` tells a point's family and its place on the x axis.
fn family(
    report: &DistortionReport,
    shown: &[f64],
    split: impl Fn(&DistortionPoint) -> (f64, f64),
    unit: &str,
) -> Family {
    let curve = |value: &f64| {
        let own = report
            .points
            .iter()
            .filter(|point| split(point).0 == *value);
        let mut points: Vec<_> = own
            .map(|point| (split(point).1, point.thd.map(|thd| 100.0 * thd)))
            .collect();
        points.sort_by(|a, b| a.0.total_cmp(&b.0));
        (stated(*value, unit), points)
    };
    let curves: Vec<_> = shown.iter().map(curve).collect();
    let lowest = values(&curves).fold(f64::INFINITY, f64::min);
    Family {
        curves,
        lowest,
        what: "THD ",
    }
}

/// Name the single curve THD and put harmonics 2 to 5 beside it.
fn with_harmonics(family: &mut Family, report: &DistortionReport) {
    if let Some(thd) = family.curves.first_mut() {
        thd.0 = "THD".to_string();
    }
    family.what = "";
    let thd_lowest = family.lowest;
    for n in 2..=5 {
        let mut points: Vec<_> = report
            .points
            .iter()
            .map(|point| (point.level, share_of_first(point, n)))
            .collect();
        points.sort_by(|a, b| a.0.total_cmp(&b.0));
        family.curves.push((format!("H{n}"), points));
    }
    let lowest = values(&family.curves).fold(f64::INFINITY, f64::min);
    family.lowest = lowest.max(thd_lowest * 10f64.powi(-BELOW_THD));
}

/// Harmonic `n` in percent of H1; none at the floor.
fn share_of_first(point: &DistortionPoint, n: usize) -> Option<f64> {
    let relative_db = point
        .harmonics
        .iter()
        .find(|harmonic| harmonic.n == n)?
        .relative_db?;
    Some(100.0 * 10f64.powf(relative_db / 20.0))
}

fn values(curves: &[Curve]) -> impl Iterator<Item = f64> {
    curves
        .iter()
        .flat_map(|(_, points)| points.iter().filter_map(|point| point.1))
        .filter(|value| *value > 0.0 && value.is_finite())
}

fn remarks(report: &DistortionReport, shown: usize, all: usize, what: &str) -> Vec<String> {
    let mut remarks = Vec::new();
    if let Some(first) = report.points.first() {
        let same = report
            .points
            .iter()
            .all(|point| point.harmonics_in_thd == first.harmonics_in_thd);
        let harmonics = if first.bandwidth.is_none() {
            "all harmonics".to_string()
        } else if same {
            format!("harmonics 2..{}", first.harmonics_in_thd)
        } else {
            "harmonics".to_string()
        };
        let joint = if same || first.bandwidth.is_none() {
            ", "
        } else {
            " up to "
        };
        remarks.push(format!(
            "THD relative to H1, {harmonics}{joint}{}",
            bandwidth(first)
        ));
    }
    if shown < all {
        remarks.push(format!("{shown} of {all} {what} drawn"));
    }
    remarks
}

fn draw(
    report: &DistortionReport,
    family: &Family,
    subject: &str,
    remarks: Vec<String>,
    (x_title, x_label): (&str, &dyn Fn(f64) -> String),
) -> Result<Picture, PlotError> {
    let highest = values(&family.curves).fold(0.0, f64::max);
    let Some(scale) = across(family).filter(|_| highest > 0.0) else {
        return Err(PlotError::nothing("no point of the report has a THD"));
    };
    let mut frame = Frame::new(SHEET, &report.title, subject, &remarks, &report.conditions);
    let percent = |value: f64| format!("{} %", trimmed(&format!("{value:.9}")));
    let decibels =
        |value: f64| format!("{:.0} dB", 20.0 * (value / 100.0).log10()).replace('-', "−");
    let styles: Vec<Style> = SERIES[..family.curves.len()].to_vec();
    let names = family.curves.iter().map(|(name, _)| name.clone());
    let panel = Panel {
        x: Axis {
            scale,
            title: x_title.to_string(),
            label: x_label,
            most: 7,
            grid: true,
        },
        y: Axis {
            scale: upward(family.lowest, highest),
            title: format!("{}relative to H1", family.what),
            label: &percent,
            most: 7,
            grid: true,
        },
        second: Some(&decibels),
        legend: names
            .zip(styles.iter().map(|style| Key::Line(*style)))
            .collect(),
        side: 0.0,
    };
    let plot = panel.lay(&mut frame.picture, frame.middle);
    // The first curve is the one that matters most: drawn last, it lies on top.
    for (place, ((_, points), style)) in family.curves.iter().zip(&styles).enumerate().rev() {
        curve(&mut frame.picture, &plot, points, style, place);
    }
    Ok(frame.picture)
}

/// The x axis from the first to the last value of all curves, around a single one half an octave either way; `None`
/// where no value has a logarithm.
fn across(family: &Family) -> Option<Scale> {
    let places = family
        .curves
        .iter()
        .flat_map(|(_, points)| points.iter().map(|point| point.0));
    let places = places.filter(|place| *place > 0.0 && place.is_finite());
    let from = places.clone().reduce(f64::min)?;
    let to = places.reduce(f64::max)?;
    let reach = if to > from {
        1.0
    } else {
        std::f64::consts::SQRT_2
    };
    Some(Scale::Log {
        from: from / reach,
        to: to * reach,
    })
}

/// The y axis in whole decades, at least one and at most `DECADES`.
fn upward(lowest: f64, highest: f64) -> Scale {
    let to = decade_above(highest);
    let from = decade_below(lowest)
        .min(to / 10.0)
        .max(to / 10f64.powi(DECADES));
    Scale::Log { from, to }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::super::super::sample;
    use super::*;

    #[test]
    fn more_values_than_styles_are_thinned_with_both_ends_kept() {
        let shown = spread(&sample::levels(1.0, 31.0, 31));
        assert_eq!((shown.len(), shown[0]), (6, 1.0));
        assert!((shown[5] - 31.0).abs() < 1e-9, "rounding of the level grid");
    }

    #[test]
    fn a_report_without_any_thd_is_refused_with_the_reason() {
        let mut report = sample::short();
        report.points[0].thd = None;
        report.points[0].harmonics.clear();
        let error = thd_against_level(&report).unwrap_err();
        assert!(
            error
                .to_string()
                .contains("no point of the report has a THD"),
            "{error}"
        );
    }

    #[test]
    fn a_level_of_zero_and_a_figure_that_is_not_one_do_no_harm() {
        let mut report = sample::distortion(&[1000.0], &[0.01, 0.02, 0.03]);
        report.points[0].level = 0.0;
        report.points[1].thd = Some(f64::INFINITY);
        assert!(thd_against_level(&report).is_ok());
        report.points.truncate(1);
        assert!(thd_against_level(&report).is_err());
    }

    #[test]
    fn thinning_is_said_under_the_plot() {
        let report = sample::distortion(&[1000.0, 2000.0, 4000.0], &sample::levels(1e-3, 0.1, 10));
        let texts = thd_against_frequency(&report).unwrap().texts();
        assert!(
            texts.iter().any(|text| text == "6 of 10 levels drawn"),
            "{texts:?}"
        );
    }

    #[test]
    fn a_curve_that_spans_too_much_is_cut_at_seven_decades() {
        assert_eq!(
            upward(1e-12, 20.0),
            Scale::Log {
                from: 1e-5,
                to: 100.0
            }
        );
        assert_eq!(
            upward(5.0, 6.0),
            Scale::Log {
                from: 1.0,
                to: 10.0
            }
        );
    }
}
