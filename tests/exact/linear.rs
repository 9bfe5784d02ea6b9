//! Linear networks: the distortion is the arithmetic floor, magnitude and phase are those of the complex impedances
//! written out by hand.

use super::*;
use cleanswing::measure::thd::FLOOR;
use std::f64::consts::TAU;

fn j(x: f64) -> Complex64 {
    Complex64::new(0.0, x)
}

fn parallel(a: Complex64, b: Complex64) -> Complex64 {
    a * b / (a + b)
}

/// A linear network at one frequency with its closed form.
type Case = (&'static str, Stage, f64, Complex64);

fn cases() -> Vec<Case> {
    [low_pass(), resonance(), pickup()].concat()
}

#[test]
fn magnitude_and_phase_of_a_linear_network_are_its_formula() {
    for (what, stage, frequency, wanted) in cases() {
        for peak in [1e-6, 1.0] {
            let point = driven_at(&stage, frequency, peak);
            let found = phasor(&point.harmonics[0]) / peak;
            let error = (found - wanted).norm() / wanted.norm();
            println!(
                "{what} at {frequency} Hz, {peak} V peak: |H| {:.9}, off by {error:.1e}, claimed {:.1e}",
                found.norm(),
                point.error_estimate
            );
            // the periodic solver's tolerance; its own estimate must cover what is really left
            let allowed = point.error_estimate.clamp(1e-13, 3e-8);
            assert!(
                error < allowed,
                "{what} at {frequency} Hz: {found}, expected {wanted}, off by {error:e}"
            );
        }
    }
}

#[test]
fn the_distortion_of_a_linear_network_is_the_arithmetic_floor() {
    let mut faults = Vec::new();
    for (what, stage, frequency, _) in cases() {
        for peak in [1e-6, 1.0] {
            let point = driven_at(&stage, frequency, peak);
            let largest = point.harmonics[1..]
                .iter()
                .map(|h| h.rms)
                .fold(0.0, f64::max);
            let distortion = largest / point.harmonics[0].rms;
            println!(
                "{what} at {frequency} Hz, {peak} V peak: largest of H2…H20 {distortion:.1e} of H1"
            );
            // what the program itself calls rounding
            if distortion > FLOOR {
                faults.push(format!(
                    "{what} at {frequency} Hz, {peak} V: {distortion:e}"
                ));
            }
        }
    }
    assert!(
        faults.is_empty(),
        "above the floor of {FLOOR:e}:\n{}",
        faults.join("\n")
    );
}

fn low_pass() -> Vec<Case> {
    let stage = inline(
        r#"
        input = "in"
        output = "out"
        [source]
        resistance = "600"
        [parts]
        R1 = { resistor = "10k", pins = ["in", "out"] }
        C1 = { capacitor = "10n", pins = ["out", "gnd"] }
        "#,
    );
    let mut found = Vec::new();
    for frequency in [20.0, 1e3, 20e3] {
        let omega = TAU * frequency;
        let wanted = (1.0 + j(omega * 10.6e3 * 10e-9)).inv();
        found.push(("RC low-pass", stage.clone(), frequency, wanted));
    }
    found
}

fn resonance() -> Vec<Case> {
    let stage = inline(
        r#"
        input = "in"
        output = "out"
        [source]
        resistance = "50"
        [load]
        resistance = "47k"
        [parts]
        L1 = { inductor = "10m", pins = ["in", "mid"], resistance = "12" }
        C1 = { capacitor = "1u", pins = ["mid", "out"] }
        C2 = { capacitor = "220n", pins = ["out", "gnd"] }
        "#,
    );
    let mut found = Vec::new();
    for frequency in [100.0, 1.59e3, 3.8e3, 15e3] {
        let s = j(TAU * frequency);
        let series = 62.0 + s * 10e-3 + (s * 1e-6).inv();
        let shunt = parallel((s * 220e-9).inv(), 47e3.into());
        found.push(("RLC", stage.clone(), frequency, shunt / (series + shunt)));
    }
    found
}

fn pickup() -> Vec<Case> {
    let stage = inline(
        r#"
        input = "in"
        output = "wiper"
        [source]
        resistance = "7k"
        inductance = "3.2"
        capacitance = "620p"
        [load]
        resistance = "1M"
        [parts]
        P1 = { potentiometer = "250k", clockwise = "in", wiper = "wiper", anticlockwise = "gnd", turn = 0.8 }
        "#,
    );
    let mut found = Vec::new();
    for frequency in [82.4, 1e3, 3.57e3, 10e3] {
        let s = j(TAU * frequency);
        let below = parallel(200e3.into(), 1e6.into());
        let shunt = parallel((s * 620e-12).inv(), 50e3 + below);
        let divider = below / (50e3 + below);
        found.push((
            "pickup",
            stage.clone(),
            frequency,
            divider * shunt / (7e3 + s * 3.2 + shunt),
        ));
    }
    found
}
