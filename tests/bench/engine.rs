//! Speed of the engine, as ratios within one run: `cargo bench --bench engine`.
//!
//! Circuits: A one transistor, exponential law, static; B one transistor, full model with charges and ohmic
//! resistances; C a direct-coupled pair of B devices. `bare exponentials` is the yardstick: a chain in which each
//! exponential waits for the one before, as the steps of a transient do; a clean step of A needs two, of B four.

// a bench that cannot set up has nothing to say
#![allow(clippy::expect_used)]

use cleanswing::audio::oversample::Oversampling;
use cleanswing::engine::periodic::PeriodicOptions;
use cleanswing::engine::step::State;
use cleanswing::engine::{OperatingPoint, PeriodicSolver, UniformTransient};
use cleanswing::measure::distortion::solve_level;
use cleanswing::measure::thd::distortion;
use cleanswing::network::Network;
use cleanswing::stage::Stage;
use criterion::{Criterion, Throughput, criterion_group, criterion_main};
use std::f64::consts::TAU;
use std::hint::black_box;

/// Circuit, clean level and clipping level, V peak.
const CIRCUITS: [(&str, &str, f64, f64); 3] = [
    ("A", "a_plain_common_emitter", 1e-3, 50e-3),
    ("B", "c_collector_feedback", 5e-3, 500e-3),
    ("C", "e_series_feedback_pair", 10e-3, 500e-3),
];
const RATE: f64 = 48e3;
const FACTOR: usize = 8;
const STEPS: usize = 8 * 480;

fn network(name: &str) -> Network {
    let path = format!(
        "{}/tests/expected/open/{name}.toml",
        env!("CARGO_MANIFEST_DIR")
    );
    let (stage, _) = Stage::read(path.as_ref()).expect("a valid stage");
    Network::of(&stage)
}

fn tones(frequencies: &[f64], peak: f64, count: usize, rate: f64) -> Vec<f64> {
    (0..count)
        .map(|k| {
            let t = k as f64 / rate;
            let sum: f64 = frequencies.iter().map(|f| (TAU * f * t).sin()).sum();
            peak * sum / frequencies.len() as f64
        })
        .collect()
}

fn bare_exponentials(c: &mut Criterion) {
    let mut group = c.benchmark_group("bare exponentials");
    group.throughput(Throughput::Elements(STEPS as u64));
    for (name, chain) in [("for A", 2), ("for B", 4)] {
        group.bench_function(name, |b| {
            b.iter(|| {
                let mut x = black_box(0.3f64);
                for _ in 0..STEPS * chain {
                    x = (-x).exp();
                }
                x
            });
        });
    }
    group.finish();
}

fn steps(c: &mut Criterion) {
    let mut group = c.benchmark_group("step at 8 times 48 kHz");
    group.throughput(Throughput::Elements(STEPS as u64));
    let clean = [1000.0];
    let five = [440.0, 1310.0, 2770.0, 5230.0, 11900.0];
    for (circuit, name, low, high) in CIRCUITS {
        let network = network(name);
        let point = OperatingPoint::of(&network).expect("a bias");
        let rate = RATE * FACTOR as f64;
        for (kind, frequencies, peak) in [
            ("clean", &clean[..], low),
            ("five tones clipping", &five[..], high),
        ] {
            let drive = tones(frequencies, peak, STEPS, rate);
            let fresh = UniformTransient::new(&network, &point, 1.0 / rate).expect("a transient");
            let mut output = vec![0.0; STEPS];
            group.bench_function(format!("{circuit} {kind}"), |b| {
                b.iter(|| {
                    let mut transient = fresh.clone();
                    transient
                        .advance_block(&drive, &mut output)
                        .expect("solved");
                    output[STEPS - 1]
                });
            });
        }
    }
    group.finish();
}

fn sound(c: &mut Criterion) {
    let mut group = c.benchmark_group("48 kHz mono with resampling, samples");
    let (_, name, low, high) = CIRCUITS[1];
    let network = network(name);
    let point = OperatingPoint::of(&network).expect("a bias");
    let oversampling = Oversampling::new(FACTOR).expect("a factor");
    let frames = 4800;
    group.throughput(Throughput::Elements(frames as u64));
    for (kind, peak) in [("B clean", low), ("B clipping", high)] {
        let input = tones(&[440.0, 1310.0, 2770.0], peak, frames, RATE);
        group.bench_function(kind, |b| {
            b.iter(|| {
                let step = 1.0 / (RATE * FACTOR as f64);
                let mut transient =
                    UniformTransient::new(&network, &point, step).expect("a transient");
                let (mut up, mut down) = (oversampling.interpolator(), oversampling.decimator());
                let mut fine = Vec::new();
                up.push(&input, &mut fine);
                let mut wide = vec![0.0; fine.len()];
                transient.advance_block(&fine, &mut wide).expect("solved");
                let mut output = Vec::new();
                down.push(&wide, &mut output);
                output.len()
            });
        });
    }
    group.finish();
}

fn curves(c: &mut Criterion) {
    let mut group = c.benchmark_group("60-level THD curve");
    group.sample_size(10);
    for (circuit, name, low, high) in CIRCUITS {
        let network = network(name);
        let point = OperatingPoint::of(&network).expect("a bias");
        for (kind, tolerance, first_local_error) in
            [("to 2e-3 dB", 1e-4, 1e-2), ("to 1e-7 of H1", 1e-7, 3e-4)]
        {
            let options = PeriodicOptions {
                tolerance,
                first_local_error,
                ..PeriodicOptions::default()
            };
            group.bench_function(format!("{circuit} {kind}"), |b| {
                b.iter(|| {
                    let mut solver =
                        PeriodicSolver::new(&network, &point, 1000.0, options).expect("a solver");
                    let mut before: Option<(f64, State<f64>)> = None;
                    let mut last = 0.0;
                    for k in 0..60 {
                        let level = 0.2 * low * (high / (0.2 * low)).powf(k as f64 / 59.0);
                        let solution =
                            solve_level(&mut solver, level, before.as_ref()).expect("a state");
                        last = distortion(&solution, 1000.0, Some(80e3))
                            .thd
                            .expect("a THD");
                        before = Some((level, solution.start));
                    }
                    last
                });
            });
        }
    }
    group.finish();
}

criterion_group!(benches, bare_exponentials, steps, sound, curves);
criterion_main!(benches);
