//! THD and harmonics, a table a frequency.

use super::super::format::{FLOOR, dbu, dbv, decibels, measured, or_floor, percent, plain, stated};
use super::super::table::{Side, Table};
use super::{cautions, heading};
use crate::measure::report::{DistortionPoint, DistortionReport};

/// Share of H1 below which a mean shift is rounding of the arithmetic: the engine's own floor is about −250 dB
/// (design, section 5).
const ROUNDING: f64 = 1e-12;
/// Harmonics with a column of their own.
const SHOWN: [usize; 4] = [2, 3, 4, 5];

/// Distortion against level, one table for each run of points at one frequency.
pub fn distortion(report: &DistortionReport) -> String {
    let text = heading(&report.title, &report.conditions) + &tables(report);
    let gap = if report.cautions.is_empty() { "" } else { "\n" };
    text + gap + &cautions(&report.cautions)
}

/// The tables alone, for a page that has stated the conditions already.
pub fn tables(report: &DistortionReport) -> String {
    let mut text = String::new();
    for points in report.points.chunk_by(|a, b| a.frequency == b.frequency) {
        text += &format!("\n{}\n", definition(&points[0]));
        text += &table(points);
        text += &notes(points);
    }
    text
}

/// Frequency and form of the THD: `1 kHz: THD relative to H1, harmonics 2..80, 80 kHz`.
pub(in super::super) fn definition(point: &DistortionPoint) -> String {
    let frequency = stated(point.frequency, "Hz");
    if point.thd.is_none() && point.harmonics_in_thd < 2 {
        return format!("{frequency}: no harmonic within {}", bandwidth(point));
    }
    if point.bandwidth.is_none() {
        return format!(
            "{frequency}: THD relative to H1, all harmonics, {}",
            bandwidth(point)
        );
    }
    format!(
        "{frequency}: THD relative to H1, harmonics 2..{}, {}",
        point.harmonics_in_thd,
        bandwidth(point)
    )
}

/// The bandwidth of the THD in words.
pub(in super::super) fn bandwidth(point: &DistortionPoint) -> String {
    point.bandwidth.map_or_else(
        || "no bandwidth limit".to_string(),
        |hertz| stated(hertz, "Hz"),
    )
}

fn table(points: &[DistortionPoint]) -> String {
    let headings = [
        "EMF rms", "dBV", "dBu", "H1 rms", "gain dB", "THD %", "THD dB", "H2 dB", "H3 dB", "H4 dB",
        "H5 dB", "dc shift",
    ];
    let mut table = Table::new(&headings.map(|heading| (heading, Side::Right)));
    for point in points {
        table.row(row(point));
    }
    table.lines()
}

fn row(point: &DistortionPoint) -> Vec<String> {
    let mut cells = vec![
        measured(point.level, "V"),
        or_floor(dbv(point.level), 2),
        or_floor(dbu(point.level), 2),
        if point.gain_db.is_some() {
            measured(point.output, "V")
        } else {
            FLOOR.to_string()
        },
        or_floor(point.gain_db, 2),
        point.thd.map_or_else(
            || "none".to_string(),
            |thd| percent(thd, point.error_estimate),
        ),
        point
            .thd
            .map_or_else(|| "none".to_string(), |thd| or_floor(decibels(thd), 2)),
    ];
    cells.extend(SHOWN.map(|n| harmonic(point, n)));
    cells.push(dc_shift(point));
    cells
}

/// Harmonic `n` relative to H1, marked where the solution's own error estimate is larger.
fn harmonic(point: &DistortionPoint, n: usize) -> String {
    let relative = point
        .harmonics
        .iter()
        .find(|h| h.n == n)
        .and_then(|h| h.relative_db);
    let mark = if below_error(point, relative) {
        "~"
    } else {
        ""
    };
    format!("{mark}{}", or_floor(relative, 1))
}

fn below_error(point: &DistortionPoint, relative: Option<f64>) -> bool {
    relative
        .zip(decibels(point.error_estimate))
        .is_some_and(|(relative, error)| relative < error)
}

fn dc_shift(point: &DistortionPoint) -> String {
    if point.dc_shift.abs() <= ROUNDING * point.output {
        return FLOOR.to_string();
    }
    let mark = if point.dc_shift.abs() < point.error_estimate * point.output {
        "~"
    } else {
        ""
    };
    format!("{mark}{}", measured(point.dc_shift, "V"))
}

/// What the signs in the table mean, and why a THD is missing; only what applies.
fn notes(points: &[DistortionPoint]) -> String {
    let body: String = points.iter().flat_map(row).collect::<Vec<_>>().join(" ");
    let mut notes = String::new();
    if body.contains(FLOOR) {
        notes += "  floor: at the arithmetic floor, no figure\n";
    }
    if body.contains('~') {
        notes += "  ~ smaller than the solution's own error estimate\n";
    }
    let mut reasons: Vec<&str> = points
        .iter()
        .filter_map(|point| point.thd_reason.as_deref())
        .collect();
    reasons.dedup();
    reasons
        .iter()
        .for_each(|reason| notes += &format!("  no THD: {}\n", plain(reason)));
    notes
}

#[cfg(test)]
mod tests {
    use super::super::super::sample;
    use super::*;

    #[test]
    fn one_frequency_and_a_few_levels() {
        let levels = [0.02, 0.1, 0.2];
        insta::assert_snapshot!(distortion(&sample::distortion(&[1000.0], &levels)));
    }

    #[test]
    fn every_frequency_has_its_own_definition() {
        let text = distortion(&sample::distortion(&[100.0, 10e3], &[0.01]));
        assert!(
            text.contains("100 Hz: THD relative to H1, harmonics 2..800, 80 kHz"),
            "{text}"
        );
        assert!(
            text.contains("10 kHz: THD relative to H1, harmonics 2..8, 80 kHz"),
            "{text}"
        );
    }

    #[test]
    fn a_missing_thd_gives_its_reason() {
        let mut report = sample::short();
        let point = &mut report.points[0];
        point.frequency = 50e3;
        point.thd = None;
        point.thd_reason = Some("H2 lies above 80 kHz".into());
        point.harmonics_in_thd = 1;
        let text = distortion(&report);
        assert!(text.contains("50 kHz: no harmonic within 80 kHz"), "{text}");
        assert!(text.contains("no THD: H2 lies above 80 kHz"), "{text}");
    }

    #[test]
    fn the_floor_is_a_word_and_doubt_has_a_mark() {
        let mut report = sample::short();
        report.points[0].harmonics[1].relative_db = Some(-170.0);
        report.points[0].dc_shift = 1e-15;
        let text = distortion(&report);
        assert!(text.contains("~-170.0") && text.contains(FLOOR), "{text}");
        assert!(text.contains("at the arithmetic floor"), "{text}");
        assert!(text.contains("error estimate"), "{text}");
    }
}
