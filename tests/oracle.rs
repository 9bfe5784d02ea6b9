//! The program against the open reference values in `tests/expected/open` (its README says how they were computed):
//! every stage, every level.

#![allow(clippy::expect_used)]

use cleanswing::engine::OperatingPoint;
use cleanswing::engine::linear::Linearised;
use cleanswing::measure::distortion::{DistortionRequest, distortion};
use cleanswing::measure::report::DistortionPoint;
use cleanswing::network::Network;
use cleanswing::stage::Stage;
use num_complex::Complex64;
use serde_json::Value;
use std::path::PathBuf;

const STAGES: [&str; 11] = [
    "a_plain_common_emitter",
    "b_split_emitter",
    "c_collector_feedback",
    "d_emitter_follower",
    "e_series_feedback_pair",
    "f_complementary_pair",
    "g_long_tailed_pair",
    "h_diode_clipper",
    "i_cold",
    "i_room",
    "i_warm",
];

fn folder() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("tests/expected/open")
}

fn stage(name: &str) -> Stage {
    Stage::read(&folder().join(format!("{name}.toml")))
        .expect("the open stages are valid")
        .0
}

fn expected(name: &str) -> Value {
    let text =
        std::fs::read_to_string(folder().join(format!("{name}.json"))).expect("an expected file");
    serde_json::from_str(&text).expect("valid JSON")
}

fn numbers(value: &Value) -> Vec<f64> {
    value
        .as_array()
        .expect("a list")
        .iter()
        .map(|v| v.as_f64().unwrap_or(f64::NAN))
        .collect()
}

fn number(value: &Value) -> f64 {
    value.as_f64().expect("a number")
}

#[test]
fn bias_voltages_and_currents_are_the_reference_s() {
    for name in STAGES {
        let report = cleanswing::measure::bias::bias(&stage(name)).expect("a bias");
        let expected = &expected(name)["bias"];
        let rail = report
            .supply
            .iter()
            .map(|rail| rail.volts.abs())
            .fold(0.0, f64::max);
        for (node, volts) in expected["nodes"].as_object().expect("nodes") {
            let found = report
                .nodes
                .iter()
                .find(|(name, _)| name == node)
                .map(|(_, v)| *v);
            let found = found.unwrap_or_else(|| panic!("{name}: no node {node}"));
            let error = (found - number(volts)).abs() / rail;
            // the reference is printed to ten digits
            assert!(
                error < 1e-9,
                "{name}: {node} is {found}, expected {volts}, off by {error:e} of the rail"
            );
        }
        for (transistor, values) in expected["transistors"].as_object().expect("transistors") {
            let found = report
                .transistors
                .iter()
                .find(|t| t.name == *transistor)
                .expect("the transistor");
            for (key, value) in [("IC", found.collector_current), ("IB", found.base_current)] {
                let wanted = number(&values[key]);
                let error = (value - wanted).abs();
                assert!(
                    error < 1e-8 * wanted.abs() + 1e-15,
                    "{name}: {transistor} {key} is {value}, expected {wanted}"
                );
            }
            let word = match values["region"].as_str().expect("a region") {
                "saturated" => "saturation",
                "cut-off" => "cutoff",
                word => word,
            };
            assert_eq!(found.region.word(), word, "{name}: {transistor}");
        }
        for (diode, values) in expected["diodes"].as_object().into_iter().flatten() {
            let found = report
                .diodes
                .iter()
                .find(|d| d.name == *diode)
                .expect("the diode");
            let wanted = number(&values["I"]);
            assert!(
                (found.current - wanted).abs() < 1e-8 * wanted.abs() + 1e-15,
                "{name}: {diode} is {}, expected {wanted}",
                found.current
            );
        }
    }
}

#[test]
fn the_complex_gain_is_the_reference_s() {
    for name in STAGES {
        let stage = stage(name);
        let network = Network::of(&stage);
        let point = OperatingPoint::of(&network).expect("a bias");
        let linearised = Linearised::at(&network, &point);
        let expected = &expected(name)["small_signal"];
        let real = numbers(&expected["gain_re"]);
        let imaginary = numbers(&expected["gain_im"]);
        for (k, frequency) in numbers(&expected["frequency_Hz"]).into_iter().enumerate() {
            let found = linearised.gain(frequency).expect("a gain");
            let wanted = Complex64::new(real[k], imaginary[k]);
            let error = (found - wanted).norm() / wanted.norm();
            // printed to ten or eleven digits
            assert!(
                error < 1e-8,
                "{name} at {frequency} Hz: {found}, expected {wanted}, off by {error:e}"
            );
        }
    }
}

/// Largest complex difference of H1…H20 relative to H1.
fn harmonic_error(point: &DistortionPoint, expected: &Value) -> f64 {
    let rms = numbers(&expected["H_rms_V"]);
    let phases = numbers(&expected["phase_deg"]);
    let mut largest = 0.0f64;
    for (k, harmonic) in point.harmonics.iter().enumerate() {
        let error = match (harmonic.phase_deg, phases[k]) {
            (Some(phase), wanted) if wanted.is_finite() => {
                let found = Complex64::from_polar(harmonic.rms, phase.to_radians());
                (found - Complex64::from_polar(rms[k], wanted.to_radians())).norm()
            }
            _ => (harmonic.rms - rms[k]).abs(),
        };
        largest = largest.max(error);
    }
    largest / rms[0]
}

#[test]
fn harmonics_and_thd_are_the_reference_s_at_every_level() {
    let mut failures = Vec::new();
    let only = std::env::var("ONLY").unwrap_or_default();
    for name in STAGES.into_iter().filter(|name| name.contains(&only)) {
        let stage = stage(name);
        let mut worst = (0.0f64, 0.0f64);
        for set in expected(name)["harmonics"]
            .as_array()
            .expect("harmonic sets")
        {
            let frequency = number(&set["frequency_Hz"]);
            let level = number(&set["emf_rms_V"]);
            let request = DistortionRequest {
                levels: vec![level],
                frequencies: vec![frequency],
                bandwidth: Some(80e3),
            };
            let place = format!("{name} at {frequency} Hz, {level} V");
            let report = match distortion(&stage, &request) {
                Ok(report) => report,
                Err(error) => {
                    failures.push(format!("{place}: {error}"));
                    continue;
                }
            };
            let point = &report.points[0];
            let error = harmonic_error(point, set);
            let wanted = number(&set["THD_80kHz_percent"]) / 100.0;
            let thd = (point.thd.expect("a THD") - wanted).abs() / wanted;
            if std::env::var_os("SHOW").is_some() {
                println!(
                    "{place}: harmonics {error:.1e}, THD {thd:.1e}, claimed {:.1e}, {} points",
                    point.error_estimate, point.samples
                );
            }
            worst = (worst.0.max(error), worst.1.max(thd));
            // phases are printed to 1e-7 degree, which is 2e-9 of a harmonic
            if error > 1e-7 {
                failures.push(format!("{place}: harmonics off by {error:e} of H1"));
            }
            if thd > 1e-5 {
                failures.push(format!(
                    "{place}: THD off by {thd:e}, {:?} against {wanted}",
                    point.thd
                ));
            }
            if point.harmonics_in_thd != set["harmonics_in_THD"].as_u64().expect("a count") as usize
            {
                failures.push(format!(
                    "{place}: {} harmonics in THD",
                    point.harmonics_in_thd
                ));
            }
        }
        println!(
            "{name}: harmonics within {:.1e} of H1, THD within {:.1e}",
            worst.0, worst.1
        );
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
}
