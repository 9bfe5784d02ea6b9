//! Reports for the tests of this module: invented figures of the right size, and distortion of a made-up limiter
//! whose spectrum is taken by a plain Fourier sum.

use crate::measure::report::*;
use std::f64::consts::{SQRT_2, TAU};

/// Samples in one period.
const PERIOD: usize = 512;

pub(super) fn conditions() -> Conditions {
    Conditions {
        temperature: 298.15,
        source_resistance: 600.0,
        source_inductance: 0.0,
        source_capacitance: 0.0,
        load_resistance: Some(47e3),
        load_capacitance: 0.0,
        rails: vec![("vcc".into(), 12.0)],
        assumed: vec![],
        overrides: vec![],
    }
}

/// A common emitter at its bias, with an invented transfer curve.
pub(super) fn bias() -> BiasReport {
    BiasReport {
        title: "Fernhill talkback preamp, first stage".into(),
        conditions: conditions(),
        nodes: vec![
            ("vcc".into(), 12.0),
            ("base".into(), 1.6821),
            ("coll".into(), 7.0412),
            ("emit".into(), 1.0539),
            ("out".into(), 0.0),
        ],
        transistors: vec![TransistorBias {
            name: "Q1".into(),
            collector_current: 1.0548e-3,
            base_current: 3.6e-6,
            base_emitter: 0.6282,
            collector_emitter: 5.9873,
            region: Region::Active,
            dissipation: 6.3177e-3,
            transconductance: 0.041017,
            input_resistance: Some(7100.5),
            output_resistance: None,
        }],
        diodes: vec![DiodeBias {
            name: "D1".into(),
            current: -2.5e-9,
            voltage: -5.25,
        }],
        supply: vec![RailBias {
            name: "vcc".into(),
            volts: 12.0,
            current: 1.2103e-3,
            power: 0.0145236,
        }],
        static_swing: StaticSwing {
            up_emf: None,
            down_emf: None,
            up: Some(4.3127),
            down: Some(5.4403),
            up_limited_by: Some(("Q1".into(), Region::Cutoff)),
            down_limited_by: Some(("Q1".into(), Region::Saturation)),
        },
        transfer: transfer(),
        gain_at_1khz: (34.25, -179.2),
        output_bias: 7.0412,
        cautions: vec!["R6 dissipates more than half its rating".into()],
    }
}

fn transfer() -> Vec<TransferPoint> {
    let emf = (-60..=60).map(|step| f64::from(step) * 5e-3);
    emf.map(|emf| TransferPoint {
        emf,
        output: 7.0412 + limited(emf),
    })
    .collect()
}

/// An inverting limiter: gain −34.25, a little curvature, soft ends at +4.31 V and −5.44 V.
fn limited(emf: f64) -> f64 {
    let wanted = -34.25 * emf * (1.0 + 0.6 * emf);
    let (limit, sharpness) = if wanted > 0.0 {
        (4.31f64, 10.0)
    } else {
        (5.44, 6.0)
    };
    wanted / (1.0 + (wanted.abs() / limit).powf(sharpness)).powf(1.0 / sharpness)
}

/// One level at one frequency through the limiter; the curvature grows with frequency so that families differ.
pub(super) fn point(frequency: f64, level: f64) -> DistortionPoint {
    let bend = 0.3 * (frequency / 1000.0).powf(0.4);
    let waveform: Vec<f64> = (0..PERIOD)
        .map(|k| {
            let emf = SQRT_2 * level * (TAU * k as f64 / PERIOD as f64).sin();
            limited(emf * (1.0 + bend * emf))
        })
        .collect();
    let harmonics = harmonics(&waveform);
    let output = harmonics[0].rms;
    let highest = (80e3 / frequency * (1.0 + 1e-9)).floor() as usize;
    let above: f64 = harmonics
        .iter()
        .skip(1)
        .take(highest.saturating_sub(1))
        .map(|h| h.rms * h.rms)
        .sum();
    let thd = above.sqrt() / output;
    DistortionPoint {
        frequency,
        level,
        output,
        gain_db: Some(20.0 * (output / level).log10()),
        thd: Some(thd),
        thd_reason: None,
        thd_of_total: Some(thd / (1.0 + thd * thd).sqrt()),
        bandwidth: Some(80e3),
        harmonics_in_thd: highest,
        dc_shift: waveform.iter().sum::<f64>() / PERIOD as f64,
        harmonics,
        error_estimate: 1e-9,
        samples: 396,
        beyond_early_range: false,
        waveform,
    }
}

fn harmonics(waveform: &[f64]) -> Vec<Harmonic> {
    let lines: Vec<(f64, f64)> = (1..=20).map(|n| line(waveform, n)).collect();
    let first = lines[0].0;
    let harmonic = |(index, &(rms, phase)): (usize, &(f64, f64))| Harmonic {
        n: index + 1,
        rms,
        phase_deg: (rms > 1e-13 * first).then_some(phase),
        relative_db: (rms > 1e-13 * first).then(|| 20.0 * (rms / first).log10()),
    };
    lines.iter().enumerate().map(harmonic).collect()
}

/// rms and phase in degrees of the n-th line of the Fourier sum, as Σ √2·Hn·sin(2πnft + φn).
fn line(waveform: &[f64], n: usize) -> (f64, f64) {
    let (mut sine, mut cosine) = (0.0, 0.0);
    for (k, value) in waveform.iter().enumerate() {
        let angle = TAU * (n * k) as f64 / waveform.len() as f64;
        sine += value * angle.sin();
        cosine += value * angle.cos();
    }
    let scale = SQRT_2 / waveform.len() as f64;
    (sine.hypot(cosine) * scale, cosine.atan2(sine).to_degrees())
}

/// A report over a grid of frequencies and levels.
pub(super) fn distortion(frequencies: &[f64], levels: &[f64]) -> DistortionReport {
    let points = frequencies
        .iter()
        .flat_map(|&f| levels.iter().map(move |&level| point(f, level)))
        .collect();
    DistortionReport {
        title: "Fernhill talkback preamp, first stage".into(),
        conditions: conditions(),
        points,
        cautions: vec![],
    }
}

/// `count` levels evenly spaced in their logarithm.
pub(super) fn levels(from: f64, to: f64, count: usize) -> Vec<f64> {
    (0..count)
        .map(|k| from * (to / from).powf(k as f64 / (count - 1) as f64))
        .collect()
}

/// A report of one hand-written point, every figure a short decimal: for snapshots that no libm can move.
pub(super) fn short() -> DistortionReport {
    let harmonic = |n, rms, phase_deg, relative_db| Harmonic {
        n,
        rms,
        phase_deg,
        relative_db,
    };
    DistortionReport {
        title: "Fernhill talkback preamp, first stage".into(),
        conditions: Conditions {
            assumed: vec!["0 Ω source".into()],
            source_resistance: 0.0,
            ..conditions()
        },
        points: vec![DistortionPoint {
            frequency: 1000.0,
            level: 0.02,
            output: 0.685,
            gain_db: Some(30.69),
            thd: Some(0.01),
            thd_reason: None,
            thd_of_total: Some(0.0099995),
            bandwidth: Some(80e3),
            harmonics_in_thd: 80,
            dc_shift: -0.0051,
            harmonics: vec![
                harmonic(1, 0.685, Some(-179.5), Some(0.0)),
                harmonic(2, 0.00685, Some(90.25), Some(-40.0)),
                harmonic(3, 1e-17, None, None),
            ],
            error_estimate: 1e-8,
            samples: 396,
            beyond_early_range: false,
            waveform: vec![],
        }],
        cautions: vec![],
    }
}
