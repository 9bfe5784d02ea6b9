//! What went through a stage, in a few lines.

use super::super::format::{or_floor, plain, stated};
use super::cautions;
use crate::audio::levels::dbfs;
use crate::engine::transient::StepRule;
use crate::render::{RenderReport, Side};

/// Input, output, engine, cautions.
pub fn listen(report: &RenderReport) -> String {
    let channels = match report.channels {
        1 => "1 channel".to_string(),
        several => format!("{several} channels"),
    };
    format!(
        "input   {}: {}, {channels}, {:.2} s\n{}output  {}\n{}engine  {} times oversampled ({}), {}; {:.1} times real time\n{}",
        plain(&report.input.path),
        stated(f64::from(report.rate), "Hz"),
        report.seconds,
        side(&report.input),
        plain(&report.output.path),
        side(&report.output),
        report.factor,
        stated(f64::from(report.rate) * report.factor as f64, "Hz"),
        rule(report.rule),
        report.speed,
        cautions(&report.cautions),
    )
}

/// `        s24, full scale 200 mV peak; peak -6.0 dBFS, true peak -5.9 dBTP, rms -20.3 dBFS, -23.1 LUFS`
fn side(side: &Side) -> String {
    let volts: f64 = format!("{:.3e}", side.full_scale)
        .parse()
        .unwrap_or(side.full_scale);
    let note = side.full_scale_note.as_ref();
    let note = note.map_or_else(String::new, |note| format!(" ({note})"));
    let decibels = |value: Option<f64>, unit: &str| match value {
        Some(value) => format!("{} {unit}", or_floor(Some(value), 1)),
        None => format!("no {unit}"),
    };
    format!(
        "        {}, full scale {} peak{note}\n        peak {}, true peak {}, rms {}, loudness {}\n",
        side.format.word(),
        stated(volts, "V"),
        decibels(dbfs(side.levels.peak), "dBFS"),
        decibels(dbfs(side.levels.true_peak), "dBTP"),
        decibels(side.levels.rms_dbfs, "dBFS"),
        decibels(side.levels.loudness_lufs, "LUFS"),
    )
}

fn rule(rule: StepRule) -> &'static str {
    match rule {
        StepRule::BackwardDifference => "backward differences of third order",
        StepRule::Radau => "Radau IIA of third order, for a lightly damped resonance",
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::audio::wav::SampleFormat;
    use crate::render::SoundLevels;

    #[test]
    fn a_rendering_says_levels_full_scales_and_how() {
        let levels = SoundLevels {
            peak: 0.5,
            true_peak: 0.51,
            rms_dbfs: Some(-20.26),
            loudness_lufs: None,
            offset: 0.0,
        };
        let side = |path: &str, full_scale, note: Option<&str>| Side {
            path: path.to_string(),
            format: SampleFormat::S24,
            full_scale,
            full_scale_note: note.map(str::to_string),
            levels,
        };
        let report = RenderReport {
            input: side("in.wav", 1.0, Some("assumed; state it with --full-scale")),
            output: side("out.wav", 8.123456, None),
            rate: 44_100,
            channels: 2,
            seconds: 6.0,
            factor: 9,
            rule: StepRule::BackwardDifference,
            clipped_samples: 0,
            speed: 20.04,
            cautions: vec!["the input is silent".to_string()],
        };
        insta::assert_snapshot!(listen(&report), @r"
        input   in.wav: 44.1 kHz, 2 channels, 6.00 s
                s24, full scale 1 V peak (assumed; state it with --full-scale)
                peak -6.0 dBFS, true peak -5.8 dBTP, rms -20.3 dBFS, loudness no LUFS
        output  out.wav
                s24, full scale 8.123 V peak
                peak -6.0 dBFS, true peak -5.8 dBTP, rms -20.3 dBFS, loudness no LUFS
        engine  9 times oversampled (396.9 kHz), backward differences of third order; 20.0 times real time
        caution: the input is silent
        ");
    }
}
