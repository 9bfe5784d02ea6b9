//! Three drives, placed by the stage's own THD curve.

use crate::measure::report::DistortionPoint;

/// What they are called, gentlest first.
pub const NAMES: [&str; 3] = ["clean", "edge", "crushed"];
/// THD of a sine at each, as a ratio. A plucked phrase lies some 14 dB below its peaks most of the time, so to hear a stage
/// crush it the peaks must go far.
const THD: [f64; 3] = [0.001, 0.03, 0.5];

/// One drive and what a sine does at it.
pub struct Drive {
    /// `clean`, `edge` or `crushed`.
    pub name: &'static str,
    /// The stage at it.
    pub point: DistortionPoint,
}

/// The EMF in V rms of each drive, three digits: where the curve of `points`, ascending in level, first passes its THD.
pub fn levels(points: &[DistortionPoint]) -> [f64; 3] {
    THD.map(|thd| three_digits(level_of(points, thd)))
}

/// By straight lines between the logarithms; the nearest end of the curve where it does not pass.
fn level_of(points: &[DistortionPoint], wanted: f64) -> f64 {
    let known: Vec<(f64, f64)> = points
        .iter()
        .filter_map(|point| Some((point.level, point.thd.filter(|thd| *thd > 0.0)?)))
        .collect();
    let crossing = known
        .windows(2)
        .find(|pair| pair[0].1 <= wanted && wanted < pair[1].1);
    if let Some([(below, thd_below), (above, thd_above)]) = crossing {
        let share = (wanted / thd_below).ln() / (thd_above / thd_below).ln();
        return below * (above / below).powf(share);
    }
    let end = match known.first() {
        Some((_, thd)) if *thd > wanted => known.first(),
        _ => known.last(),
    };
    end.map_or(0.01, |(level, _)| *level)
}

fn three_digits(level: f64) -> f64 {
    format!("{level:.2e}").parse().unwrap_or(level)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn curve(pairs: &[(f64, f64)]) -> Vec<DistortionPoint> {
        pairs
            .iter()
            .map(|&(level, thd)| DistortionPoint {
                frequency: 1000.0,
                level,
                output: level,
                gain_db: None,
                thd: Some(thd),
                thd_reason: None,
                thd_of_total: None,
                bandwidth: None,
                harmonics_in_thd: 20,
                dc_shift: 0.0,
                harmonics: Vec::new(),
                error_estimate: 0.0,
                samples: 0,
                beyond_early_range: false,
                waveform: Vec::new(),
            })
            .collect()
    }

    #[test]
    fn a_drive_lies_where_the_curve_passes_its_thd() {
        // THD in proportion to the level: 0.1, 3 and 50 % at 1, 30 and 500 mV.
        let points = curve(&[(1e-4, 1e-4), (0.02, 0.02), (0.9, 0.9)]);
        assert_eq!(levels(&points), [1e-3, 0.03, 0.5]);
    }

    #[test]
    fn a_curve_that_ends_early_gives_its_end() {
        let points = curve(&[(0.01, 0.002), (0.02, 0.004)]);
        assert_eq!(levels(&points), [0.01, 0.02, 0.02]);
    }
}
