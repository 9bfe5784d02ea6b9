//! Closed forms, the linear response, and what must not depend on anything.

use std::f64::consts::TAU;

use super::stepper::Stepper;
use super::*;
use crate::stage::starters;

const RATE: f64 = 48_000.0;

fn stage(text: &str) -> Stage {
    Stage::from_text("test.toml", text).unwrap().0
}

/// A coupling capacitor of 1 µF into 10 kΩ over 30 kΩ, output across the latter: ¾ above 4 Hz.
fn divider() -> Stage {
    stage(
        "input = \"in\"\noutput = \"out\"\n[source]\nresistance = \"0\"\n[parts]\n\
         C1 = { capacitor = \"1u\", pins = [\"in\", \"a\"] }\n\
         R1 = { resistor = \"10k\", pins = [\"a\", \"out\"] }\n\
         R2 = { resistor = \"30k\", pins = [\"out\", \"gnd\"] }\n",
    )
}

/// A pickup whose winding and cable resonate near 3.6 kHz with a Q of about 15.
fn resonant() -> Stage {
    stage(
        "input = \"in\"\noutput = \"in\"\n[source]\nresistance = \"1k\"\ninductance = \"2\"\ncapacitance = \"1n\"\n\
         [parts]\nR1 = { resistor = \"1M\", pins = [\"in\", \"gnd\"] }\n",
    )
}

fn common_emitter() -> Stage {
    stage(starters::find("common-emitter-split").unwrap().text)
}

fn sine(frequency: f64, amplitude: f64, frames: usize) -> Vec<f64> {
    (0..frames)
        .map(|k| amplitude * (TAU * frequency * k as f64 / RATE).sin())
        .collect()
}

fn rendered(stage: &Stage, sound: &[f64], factor: usize) -> Vec<f64> {
    let mut renderer = SoundStage::new(stage)
        .unwrap()
        .renderer(1, RATE, factor)
        .unwrap();
    let mut out = renderer.push(&[sound]).unwrap()[0].clone();
    out.extend_from_slice(&renderer.finish().unwrap()[0]);
    out
}

#[test]
fn a_coupling_capacitor_answers_a_tone_as_its_closed_form() {
    let (frequency, frames) = (200.0, 4800);
    let out = rendered(&divider(), &sine(frequency, 1.0, frames), 8);
    let (omega, tau) = (TAU * frequency, 1e-6 * 40e3);
    let scale = 0.75 / (1.0 + (omega * tau).powi(2));
    let wanted = |t: f64| {
        let steady = omega * tau * (omega * t).sin() + (omega * t).cos();
        scale * omega * tau * (steady - (-t / tau).exp())
    };
    // The tone begins with a corner, of which the band limit makes a ripple of some hundred samples at both ends. What
    // the corner loses above the band is a charge of about 1e-6 of the tone's; the rule itself is far better here.
    let worst = (300..frames - 300)
        .map(|k| (out[k] - wanted(k as f64 / RATE)).abs())
        .fold(0.0, f64::max);
    assert!(worst < 2e-6, "{worst}");
}

#[test]
fn as_many_samples_come_out_as_go_in() {
    for frames in [1, 2, 255, 256, 257, 1000] {
        for stage in [divider(), resonant()] {
            assert_eq!(rendered(&stage, &vec![0.1; frames], 8).len(), frames);
        }
    }
}

#[test]
fn a_resistive_divider_neither_delays_nor_changes_a_sound() {
    let stage = stage(
        "input = \"in\"\noutput = \"out\"\n[source]\nresistance = \"0\"\n[parts]\n\
         R1 = { resistor = \"10k\", pins = [\"in\", \"out\"] }\n\
         R2 = { resistor = \"30k\", pins = [\"out\", \"gnd\"] }\n",
    );
    // Faded in and out, so that nothing of it lies above the pass band.
    let sound: Vec<f64> = sine(3000.0, 1.0, 2400)
        .iter()
        .enumerate()
        .map(|(k, x)| x * (std::f64::consts::PI * k as f64 / 2400.0).sin().powi(4))
        .collect();
    let out = rendered(&stage, &sound, 8);
    // Up and down are flat within 0.00002 dB each, 2.3e-6.
    for (k, (out, sound)) in out.iter().zip(&sound).enumerate() {
        assert!((out - 0.75 * sound).abs() < 5e-6, "sample {k}: {out}");
    }
}

#[test]
fn the_cut_into_blocks_changes_no_bit() {
    let sound = sine(777.0, 0.3, 3000);
    for stage in [common_emitter(), resonant()] {
        let whole = rendered(&stage, &sound, 8);
        let mut renderer = SoundStage::new(&stage)
            .unwrap()
            .renderer(1, RATE, 8)
            .unwrap();
        let mut pieces = Vec::new();
        let mut from = 0;
        for length in [1, 7, 300, 0, 1024, 64].into_iter().cycle() {
            let to = (from + length).min(sound.len());
            pieces.extend_from_slice(&renderer.push(&[&sound[from..to]]).unwrap()[0]);
            from = to;
            if from == sound.len() {
                break;
            }
        }
        pieces.extend_from_slice(&renderer.finish().unwrap()[0]);
        assert!(whole == pieces);
    }
}

#[test]
fn channels_know_nothing_of_each_other() {
    let (left, right) = (sine(440.0, 0.5, 2000), sine(1230.0, 0.2, 2000));
    let stage = common_emitter();
    let mut both = SoundStage::new(&stage)
        .unwrap()
        .renderer(2, RATE, 8)
        .unwrap();
    let mut out = both.push(&[&left, &right]).unwrap().to_vec();
    for (out, rest) in out.iter_mut().zip(both.finish().unwrap()) {
        out.extend_from_slice(rest);
    }
    assert!(out[0] == rendered(&stage, &left, 8));
    assert!(out[1] == rendered(&stage, &right, 8));
}

/// Complex amplitude of `frequency` in the last whole periods of `out` that fill `frames`, as (sine, cosine) parts.
fn lock_in(out: &[f64], frequency: f64, frames: usize) -> (f64, f64) {
    let first = out.len() - frames;
    let mut parts = (0.0, 0.0);
    for (k, value) in out.iter().enumerate().skip(first) {
        let angle = TAU * frequency * k as f64 / RATE;
        parts.0 += 2.0 / frames as f64 * value * angle.sin();
        parts.1 += 2.0 / frames as f64 * value * angle.cos();
    }
    parts
}

#[test]
fn a_small_tone_comes_out_by_the_linearised_gain() {
    let stage = common_emitter();
    let network = Network::of(&stage);
    let point = OperatingPoint::of(&network).unwrap();
    for frequency in [100.0, 1000.0, 10_000.0] {
        let mut sound = sine(frequency, 1e-6, 60_000);
        // A second and a quarter: the slowest pole, near 2 Hz, has died down to 1e-7 of its small share.
        let tail = 4800;
        sound.extend(vec![0.0; 600]);
        let out = rendered(&stage, &sound, 8);
        let (sine, cosine) = lock_in(&out[..59_000 / 480 * 480], frequency, tail);
        let gain = Linearised::at(&network, &point).gain(frequency).unwrap() * 1e-6;
        let error = (sine - gain.re).hypot(cosine - gain.im) / gain.norm();
        // Third-order differences of a tone err by (ωh)³/4 of a charge's current. Of the output's own, 100 pF on
        // 4.6 kΩ (0.46 µs), the share is ω·0.46 µs; below that the coupling capacitors still move by 1e-6.
        let omega = TAU * frequency;
        let bound = 2e-6 + 1.2 * (omega / (8.0 * RATE)).powi(3) / 4.0 * omega * 0.46e-6;
        assert!(error < bound, "{frequency} Hz: {error}");
    }
}

#[test]
fn a_lightly_damped_resonance_is_stepped_by_collocation_and_right() {
    let stage = resonant();
    let network = Network::of(&stage);
    let point = OperatingPoint::of(&network).unwrap();
    let renderer = SoundStage::new(&stage).unwrap().renderer(1, RATE, 8);
    assert_eq!(renderer.unwrap().rule(), StepRule::Radau);
    let frequency = 3000.0;
    let out = rendered(&stage, &sine(frequency, 1.0, 12_000), 8);
    let (sine, cosine) = lock_in(&out[..11_520], frequency, 4800);
    let gain = Linearised::at(&network, &point).gain(frequency).unwrap();
    let error = (sine - gain.re).hypot(cosine - gain.im) / gain.norm();
    // A step errs by z⁴/72: (ω₀h)³/72 = 2.7e-6 of the resonance's own rate, which at 3 kHz is seen
    // 1/(1 − (f/f₀)²) = 3.5 times as large.
    assert!(error < 1.3e-5, "{error}");
}

#[test]
fn both_rules_give_one_answer_where_both_are_stable() {
    let network = Network::of(&common_emitter());
    let point = OperatingPoint::of(&network).unwrap();
    let step = 1.0 / (16.0 * RATE);
    let emf: Vec<f64> = (0..8000)
        .map(|k| 0.1 * (TAU * 1000.0 * k as f64 * step).sin())
        .collect();
    let run = |rule| {
        let mut stepper = Stepper::by_rule(rule, &network, &point, step).unwrap();
        let mut out = Vec::new();
        stepper.push(&emf, &mut out).unwrap();
        stepper.finish(&mut out).unwrap();
        out
    };
    let (uniform, radau) = (run(StepRule::BackwardDifference), run(StepRule::Radau));
    assert_eq!(uniform.len(), radau.len());
    // Both are of third order: (ωh)³ = 5e-7 of 2 V, and more at the corner where the tone begins.
    let worst = uniform
        .iter()
        .zip(&radau)
        .skip(100)
        .take(7800)
        .map(|(a, b)| (a - b).abs())
        .fold(0.0, f64::max);
    assert!(worst < 2e-5, "{worst} V");
}

#[test]
fn the_internal_rate_is_at_least_384_khz_by_twos_and_threes() {
    let factors = [
        (8_000.0, 48),
        (22_050.0, 18),
        (44_100.0, 9),
        (48_000.0, 8),
        (88_200.0, 6),
        (96_000.0, 4),
        (192_000.0, 2),
    ];
    for (rate, factor) in factors {
        assert_eq!(default_factor(rate), factor, "{rate} Hz");
    }
}
