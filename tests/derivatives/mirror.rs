//! A stage with every polarity, rail and source turned round is the same stage with every voltage negated.

use cleanswing::device::Polarity;
use cleanswing::engine::{OperatingPoint, UniformTransient};
use cleanswing::network::Network;
use cleanswing::stage::{PartKind, Stage};
use proptest::prelude::*;
use std::path::PathBuf;

const STAGES: [&str; 8] = [
    "a_plain_common_emitter",
    "b_split_emitter",
    "c_collector_feedback",
    "d_emitter_follower",
    "e_series_feedback_pair",
    "f_complementary_pair",
    "g_long_tailed_pair",
    "h_diode_clipper",
];

fn open_stage(name: &str) -> Stage {
    let path = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("tests/expected/open");
    Stage::read(&path.join(format!("{name}.toml"))).unwrap().0
}

/// `stage` with each resistor scaled by the next of `factors`.
fn scaled(mut stage: Stage, factors: &[f64]) -> Stage {
    let resistors = stage
        .parts
        .iter_mut()
        .filter_map(|part| match &mut part.kind {
            PartKind::Resistor { ohms, .. } => Some(ohms),
            _ => None,
        });
    for (ohms, factor) in resistors.zip(factors.iter().cycle()) {
        *ohms *= factor;
    }
    stage
}

fn mirrored(mut stage: Stage) -> Stage {
    for rail in &mut stage.rails {
        rail.volts = -rail.volts;
    }
    for part in &mut stage.parts {
        match &mut part.kind {
            PartKind::Transistor { polarity, .. } => {
                *polarity = match polarity {
                    Polarity::Npn => Polarity::Pnp,
                    Polarity::Pnp => Polarity::Npn,
                }
            }
            PartKind::Diode { anode, cathode, .. } => std::mem::swap(anode, cathode),
            PartKind::CurrentSource { amperes, .. } => *amperes = -*amperes,
            _ => {}
        }
    }
    stage
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 64, ..ProptestConfig::default() })]

    #[test]
    fn a_mirrored_stage_has_the_negated_bias_and_output(
        which in 0..STAGES.len(),
        factors in prop::collection::vec(0.7..1.4f64, 11),
        level in 0.01..0.5f64,
    ) {
        let stage = scaled(open_stage(STAGES[which]), &factors);
        let networks = [Network::of(&stage), Network::of(&mirrored(stage))];
        let points = networks.each_ref().map(OperatingPoint::of);
        let [Ok(point), Ok(mirror)] = points else {
            let [a, b] = points;
            prop_assert_eq!(a.is_err(), b.is_err());
            return Ok(());
        };
        for (node, (a, b)) in point.nodes.iter().zip(&mirror.nodes).enumerate() {
            // the polished Newton solution of rails up to 24 V, to a few hundred roundings
            prop_assert!((a + b).abs() < 1e-12, "{}: node {node} is {a} and {b}", STAGES[which]);
        }
        let step = 1.0 / 384e3;
        let mut a = UniformTransient::new(&networks[0], &point, step).unwrap();
        let mut b = UniformTransient::new(&networks[1], &mirror, step).unwrap();
        for k in 0..400 {
            let drive = level * (std::f64::consts::TAU * 3e3 * step * k as f64).sin();
            let (y, z) = (a.advance(drive).unwrap(), b.advance(-drive).unwrap());
            // a step is accepted with 2.5e-10 V left over at a junction, which a gain of some hundred carries out
            prop_assert!((y + z).abs() < 1e-7 * (1.0 + y.abs()), "{}: {y} and {z}", STAGES[which]);
        }
    }
}
