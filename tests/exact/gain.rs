//! `−RC·IC/VT`: where it must hold, and what holds where it must not (small-signal transistor circuits, common
//! practice; each form follows from the exponential law by one differentiation).

use super::*;
use cleanswing::engine::OperatingPoint;
use cleanswing::network::Network;

const RC: f64 = 3300.0;

/// A common emitter at about 1 mA behind an ideal source; `between` stands at the emitter, `load` at the
/// output, `device` holds optional parameters. Capacitors of 1 F are shorts at 1 kHz to 1e-5.
fn stage(emitter: &str, load: &str, device: &str) -> Stage {
    let (output, coupling) = match load {
        "" => ("coll", ""),
        _ => ("out", r#"C3 = { capacitor = "1", pins = ["coll", "out"] }"#),
    };
    inline(&format!(
        r#"
        input = "in"
        output = "{output}"
        {load}
        [rails]
        vcc = "12"
        [parts]
        R1 = {{ resistor = "82k", pins = ["vcc", "base"] }}
        R2 = {{ resistor = "18k", pins = ["base", "gnd"] }}
        RC = {{ resistor = "{RC}", pins = ["vcc", "coll"] }}
        C1 = {{ capacitor = "1", pins = ["in", "base"] }}
        {coupling}
        {emitter}
        Q1 = {{ npn = "law", collector = "coll", base = "base", emitter = "emit" }}
        [devices.law]
        saturation_current = "14f"
        forward_gain = 200
        {device}
        "#
    ))
}

const BYPASSED: &str = r#"
    R4 = { resistor = "1k", pins = ["emit", "gnd"] }
    C2 = { capacitor = "1", pins = ["emit", "gnd"] }"#;
const NO_LOAD: &str = "";

/// (IC, VCB) at the bias.
fn bias(stage: &Stage) -> (f64, f64) {
    let report = cleanswing::measure::bias::bias(stage).unwrap();
    let q = &report.transistors[0];
    (q.collector_current, q.collector_emitter - q.base_emitter)
}

/// H1 over the EMF at a microvolt, from the periodic solution, and by the linearised network.
fn gains(stage: &Stage) -> [f64; 2] {
    let point = driven(stage, 1e-6);
    let network = Network::of(stage);
    let rest = OperatingPoint::of(&network).unwrap();
    let linear = cleanswing::engine::Linearised::at(&network, &rest)
        .gain(1e3)
        .unwrap();
    [
        point.harmonics[0].rms * std::f64::consts::SQRT_2 / 1e-6,
        linear.norm(),
    ]
}

/// Both gains against `wanted`, and the naive form further off than `apart`.
fn check(what: &str, stage: &Stage, wanted: f64, apart: Option<f64>) {
    let naive = RC * bias(stage).0 / VT;
    for found in gains(stage) {
        println!(
            "{what}: gain {found:.6}, formula {wanted:.6}, RC·IC/VT {naive:.6} ({:+.2} %)",
            100.0 * (naive / found - 1.0)
        );
        // shorted capacitors 1e-8, the periodic solution 3e-8
        assert!(
            (found / wanted - 1.0).abs() < 1e-7,
            "{what}: {found} against {wanted}"
        );
        if let Some(apart) = apart {
            assert!(
                naive / found - 1.0 > apart,
                "{what}: RC·IC/VT is {naive}, found {found}"
            );
        }
    }
}

fn parallel(a: f64, b: f64) -> f64 {
    a * b / (a + b)
}

#[test]
fn the_gain_is_rc_ic_over_vt_where_it_must_be() {
    let stage = stage(BYPASSED, NO_LOAD, "");
    let (ic, _) = bias(&stage);
    check("ideal", &stage, RC * ic / VT, None);
}

#[test]
fn a_load_stands_in_parallel_with_the_collector_resistor() {
    let stage = stage(BYPASSED, "[load]\nresistance = \"10k\"", "");
    let (ic, _) = bias(&stage);
    check("loaded", &stage, parallel(RC, 10e3) * ic / VT, Some(0.3));
}

#[test]
fn an_emitter_resistor_degenerates_the_gain() {
    let emitter = r#"R4 = { resistor = "1k", pins = ["emit", "gnd"] }"#;
    let stage = stage(emitter, NO_LOAD, "");
    let (ic, _) = bias(&stage);
    let gm = ic / VT;
    let wanted = RC * gm / (1.0 + gm * 1e3 * (1.0 + 1.0 / 200.0));
    check("degenerated", &stage, wanted, Some(10.0));
}

#[test]
fn the_early_effect_lowers_the_gain_by_the_output_resistance() {
    let stage = stage(BYPASSED, NO_LOAD, "forward_early_voltage = \"40\"");
    let (ic, vcb) = bias(&stage);
    // IC = If·d with d = 1 + VCB/Vf: ∂IC/∂VBE at constant VCB is IC/VT, ∂IC/∂VCB = If/Vf
    let (gm, go) = (ic / VT, ic / (40.0 + vcb));
    let rc = RC;
    check(
        "Early",
        &stage,
        rc * (gm - go) / (1.0 + rc * go),
        Some(0.05),
    );
}
