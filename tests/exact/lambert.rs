//! The exponential law with a resistance in series: with W of Lambert (DLMF §4.13),
//! `I = (n·VT/R)·W(Is·R/(n·VT)·exp((V + Is·R)/(n·VT))) − Is`.

use super::*;
use cleanswing::engine::OperatingPoint;
use cleanswing::network::Network;

const IS: f64 = 1e-14;
const OHMS: f64 = 100.0;

/// The current at `volts` across junction and resistance; W·exp(W) = exp(y) solved for W by Newton on W + ln W = y.
fn current(volts: f64) -> f64 {
    let a = IS * OHMS / VT;
    let y = a.ln() + volts / VT + a;
    let mut w = if y > 1.0 { y - y.ln() } else { y.exp() };
    for _ in 0..60 {
        w *= (1.0 + y - w.ln()) / (1.0 + w);
    }
    VT / OHMS * w - IS
}

#[test]
fn the_lambert_form_here_is_the_printed_table() {
    for row in closed_forms()["lambert_w"]["static"].as_array().unwrap() {
        let (volts, wanted) = (row["V"].as_f64().unwrap(), row["I"].as_f64().unwrap());
        let error = (current(volts) - wanted).abs();
        // twelve printed digits; below, W − Is cancels to rounding of Is
        assert!(
            error < 2e-12 * wanted.abs() + 1e-26,
            "{volts} V: {}",
            current(volts)
        );
    }
}

#[test]
fn the_static_current_is_the_lambert_form_from_cutoff_to_two_volts() {
    let stage = open("exact_degenerated");
    let network = Network::of(&stage);
    let point = OperatingPoint::of(&network).unwrap();
    let mut drives: Vec<f64> = network.drives.iter().map(|drive| drive.rest).collect();
    for volts in [-0.2, 0.0, 0.1, 0.3, 0.5, 0.65, 0.7, 1.0, 2.0] {
        drives[0] = volts - 0.7;
        let there = point.with_drives(&network, &drives).unwrap();
        // 40 Ω from the output to the rail at −0.7 V
        let found = (there.nodes[network.output] + 0.7) / 40.0;
        let wanted = current(volts);
        // rounding of 0.7 V over 40 Ω, and the Newton solution's 1e-11
        assert!(
            (found - wanted).abs() < 1e-17 + 1e-11 * wanted.abs(),
            "{volts} V: {found:e} against {wanted:e}"
        );
    }
}

#[test]
fn harmonics_with_a_series_resistance_are_those_of_the_lambert_form() {
    let stage = open("exact_degenerated");
    for set in closed_forms()["lambert_w"]["drives"].as_array().unwrap() {
        let list = |key: &str| -> Vec<f64> {
            set[key]
                .as_array()
                .unwrap()
                .iter()
                .map(|v| v.as_f64().unwrap())
                .collect()
        };
        let (rms, sines, cosines) = (list("Hn_rms_A"), list("sine_sign"), list("cosine_sign"));
        let wanted: Vec<Complex64> = (0..rms.len())
            .map(|k| of_parts(sines[k], cosines[k]) * (40.0 * std::f64::consts::SQRT_2 * rms[k]))
            .collect();
        let peak = set["amplitude_V"].as_f64().unwrap();
        let point = driven(&stage, peak);
        let error = worst(&point, &wanted);
        println!("{peak} V peak: harmonics within {error:.1e} of H1");
        // the periodic solver's tolerance; phases of harmonics below 3e-13 of H1 are not reported
        assert!(error < 3e-8, "{peak} V: off by {error:e} of H1");
        let rest = closed_forms()["lambert_w"]["bias_current_A"]
            .as_f64()
            .unwrap();
        let shift = 40.0 * (set["mean_I_A"].as_f64().unwrap() - rest);
        let error = (point.dc_shift - shift).abs() / wanted[0].norm();
        assert!(error < 3e-8, "{peak} V: mean off by {error:e} of H1");
    }
}
