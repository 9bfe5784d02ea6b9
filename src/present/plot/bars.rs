//! Harmonics as bars, up to three drives side by side.

use super::error::PlotError;
use super::frame::Frame;
use super::ink::FILLS;
use super::panel::{Axis, Key, Panel, outlined};
use super::picture::{Area, Picture};
use super::scale::Scale;
use super::thd::SHEET;
use crate::measure::report::{Conditions, DistortionPoint};
use crate::present::format::{plain, stated};

/// Harmonics shown.
const HARMONICS: usize = 10;
/// Limits of the foot of the axis, dB.
const DEEPEST: f64 = -140.0;
const SHALLOWEST: f64 = -60.0;
/// Width of all bars of one harmonic, over the distance of two harmonics.
const GROUP: f64 = 0.78;

/// One drive of a bar chart.
#[derive(Clone, Copy, Debug)]
pub struct Drive<'a> {
    /// What the legend calls it: `clean`; the level is added.
    pub name: &'a str,
    /// The point measured at it.
    pub point: &'a DistortionPoint,
}

/// Harmonics 1 to 10 relative to H1 in dB, for one to three drives.
pub fn harmonic_bars(
    title: &str,
    held: &Conditions,
    drives: &[Drive],
) -> Result<Picture, PlotError> {
    let foot = foot(drives)?;
    let subject = format!("Harmonics at {}", frequencies(drives));
    let mut frame = Frame::new(SHEET, title, &subject, &[remark(foot)], held);
    draw(&mut frame.picture, frame.middle, drives, foot);
    Ok(frame.picture)
}

/// What the chart says under itself.
pub(super) fn remark(foot: f64) -> String {
    format!(
        "levels: source EMF rms; no bar: below −{:.0} dB or at the floor",
        foot.abs()
    )
}

fn frequencies(drives: &[Drive]) -> String {
    let mut names: Vec<String> = drives
        .iter()
        .map(|drive| stated(drive.point.frequency, "Hz"))
        .collect();
    names.dedup();
    names.join(", ")
}

/// The foot of the axis: the next 20 dB below the lowest harmonic.
pub(super) fn foot(drives: &[Drive]) -> Result<f64, PlotError> {
    if drives.is_empty() || drives.len() > FILLS.len() {
        return Err(PlotError::nothing("a bar chart takes one to three drives"));
    }
    let shown = drives
        .iter()
        .flat_map(|drive| (1..=HARMONICS).filter_map(|n| relative(drive, n)));
    let lowest = shown.fold(f64::INFINITY, f64::min);
    if !lowest.is_finite() {
        return Err(PlotError::nothing("every harmonic is at the floor"));
    }
    Ok(((lowest / 20.0).floor() * 20.0).clamp(DEEPEST, SHALLOWEST))
}

fn relative(drive: &Drive, n: usize) -> Option<f64> {
    let harmonic = drive
        .point
        .harmonics
        .iter()
        .find(|harmonic| harmonic.n == n)?;
    harmonic.relative_db.filter(|relative| relative.is_finite())
}

/// The chart within `room`.
pub(super) fn draw(picture: &mut Picture, room: Area, drives: &[Drive], foot: f64) {
    let order = |n: f64| format!("H{n:.0}");
    let decibels = |value: f64| format!("{value:.0}").replace('-', "−");
    let legend = |(drive, fill): (&Drive, _)| {
        let level = stated(round(drive.point.level), "V");
        (
            format!("{} {level}", plain(drive.name)).trim().to_string(),
            Key::Fill(fill),
        )
    };
    let panel = Panel {
        x: Axis {
            scale: Scale::Linear {
                from: 0.5,
                to: HARMONICS as f64 + 0.5,
            },
            title: "harmonic".to_string(),
            label: &order,
            most: HARMONICS,
            grid: false,
        },
        y: Axis {
            scale: Scale::Linear {
                from: foot,
                to: 0.0,
            },
            title: "relative to H1, dB".to_string(),
            label: &decibels,
            most: 7,
            grid: true,
        },
        second: None,
        legend: drives.iter().zip(FILLS).map(legend).collect(),
        side: 0.0,
    };
    let plot = panel.lay(picture, room);
    let width = GROUP / drives.len() as f64;
    for (place, (drive, fill)) in drives.iter().zip(FILLS).enumerate() {
        for n in 1..=HARMONICS {
            let Some(value) = relative(drive, n).filter(|value| *value > foot) else {
                continue;
            };
            let left = n as f64 - GROUP / 2.0 + place as f64 * width;
            let ((left, top), (right, bottom)) =
                (plot.at(left, value.min(0.0)), plot.at(left + width, foot));
            outlined(
                picture,
                Area {
                    left,
                    top,
                    right,
                    bottom,
                },
                fill,
            );
        }
    }
}

/// A level with four digits: enough to tell drives apart.
fn round(level: f64) -> f64 {
    format!("{level:.3e}").parse().unwrap_or(level)
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::super::super::sample;
    use super::*;

    #[test]
    fn four_drives_or_none_are_refused() {
        let point = sample::point(1000.0, 0.1);
        let drive = Drive {
            name: "edge",
            point: &point,
        };
        assert!(foot(&[]).is_err());
        assert!(foot(&[drive; 4]).is_err());
        assert!(foot(&[drive; 3]).is_ok());
    }

    #[test]
    fn a_clean_drive_has_a_foot_of_at_most_140_db() {
        let point = sample::point(1000.0, 1e-4);
        assert_eq!(
            foot(&[Drive {
                name: "",
                point: &point
            }])
            .unwrap(),
            DEEPEST
        );
    }
}
