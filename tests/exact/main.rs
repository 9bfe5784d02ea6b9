//! The program against closed forms and conservation laws.

#![allow(clippy::unwrap_used, clippy::expect_used)]

mod balance;
mod exponential;
mod gain;
mod lambert;
mod linear;
mod pair;

use cleanswing::measure::distortion::{DistortionRequest, distortion};
use cleanswing::measure::report::{DistortionPoint, Harmonic};
use cleanswing::stage::Stage;
use num_complex::Complex64;
use serde_json::Value;
use std::path::PathBuf;

/// Thermal voltage at 25 °C, V, as printed in `closed_forms.json` (k and q of the SI of 2019).
const VT: f64 = 0.0256925791210858;

fn open(name: &str) -> Stage {
    let folder = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("tests/expected/open");
    Stage::read(&folder.join(format!("{name}.toml"))).unwrap().0
}

fn inline(text: &str) -> Stage {
    match Stage::from_text("inline.toml", text) {
        Ok((stage, _)) => stage,
        Err(error) => panic!("{error}"),
    }
}

fn closed_forms() -> Value {
    let path =
        PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("tests/expected/open/closed_forms.json");
    serde_json::from_str(&std::fs::read_to_string(path).unwrap()).unwrap()
}

/// Harmonics of `stage` at 1 kHz under an EMF of `peak` V.
fn driven(stage: &Stage, peak: f64) -> DistortionPoint {
    driven_at(stage, 1e3, peak)
}

fn driven_at(stage: &Stage, frequency: f64, peak: f64) -> DistortionPoint {
    let request = DistortionRequest {
        levels: vec![peak / std::f64::consts::SQRT_2],
        frequencies: vec![frequency],
        bandwidth: None,
    };
    let mut report = match distortion(stage, &request) {
        Ok(report) => report,
        Err(error) => panic!("{}: {error}", stage.title),
    };
    report.points.remove(0)
}

/// A harmonic as c in Im(c·exp(jnωt)), peak.
fn phasor(harmonic: &Harmonic) -> Complex64 {
    let phase = harmonic.phase_deg.unwrap_or(0.0).to_radians();
    Complex64::from_polar(harmonic.rms * std::f64::consts::SQRT_2, phase)
}

/// c of `cosine·cos nωt + sine·sin nωt`.
fn of_parts(sine: f64, cosine: f64) -> Complex64 {
    Complex64::new(sine, cosine)
}

/// Largest difference of the harmonics from `expected` (peak, from H1 on), relative to H1.
fn worst(point: &DistortionPoint, expected: &[Complex64]) -> f64 {
    point
        .harmonics
        .iter()
        .zip(expected)
        .map(|(found, wanted)| (phasor(found) - wanted).norm())
        .fold(0.0, f64::max)
        / expected[0].norm()
}
