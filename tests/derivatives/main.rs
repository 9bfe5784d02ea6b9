//! The device laws against automatic differentiation, against the equations written out plainly, and against their own
//! symmetries, over everything a clipping stage visits.

#![allow(clippy::unwrap_used, clippy::expect_used)]

mod dual;
mod mirror;
mod plain;

use cleanswing::device::classes::{self, ClassParameters};
use cleanswing::device::{DiodeLaw, DiodeParameters, TransistorLaw, TransistorParameters};
use cleanswing::numeric::Lane;
use dual::Dual;

const TEMPERATURES: [f64; 3] = [263.15, 298.15, 333.15];
/// Base–emitter voltages, V: reverse beyond breakdown up to hard conduction, both sides of every joint of the laws.
const BASE_EMITTER: [f64; 16] = [
    -15.0, -7.1, -6.4, -3.0, -0.5, -0.02, 0.0, 1e-6, 0.2, 0.33, 0.4, 0.55, 0.65, 0.71, 0.8, 0.9,
];
/// Base–collector voltages, V.
const BASE_COLLECTOR: [f64; 13] = [
    -40.0, -18.0, -5.0, -1.0, -0.1, 0.0, 1e-6, 0.25, 0.28, 0.37, 0.5, 0.65, 0.8,
];
/// Voltages (be, bc) the laws are seen from: biases, saturation, cutoff, reverse, deep reverse.
const ANCHORS: [[f64; 2]; 8] = [
    [0.0, 0.0],
    [0.65, -5.0],
    [0.62, -40.0],
    [0.75, 0.6],
    [0.9, 0.8],
    [-3.0, 0.55],
    [-15.0, -40.0],
    [0.2, -0.3],
];

/// Rounding of the terms a number is formed from. An exponent of up to 1763 (40 V over VT at −10 °C) is itself rounded
/// to 1.1e-13, twice where the step to it is a difference, and each of the two ways to the number has that once.
const RELATIVE: f64 = 1e-12;
/// Below this an exponential underflows and has no relative accuracy.
const UNDERFLOW: f64 = 1e-290;

fn exponential() -> TransistorParameters {
    TransistorParameters::exponential(1.4e-14, 200.0)
}

fn whole() -> TransistorParameters {
    TransistorParameters {
        reverse_gain: 5.5,
        forward_ideality: 1.01,
        reverse_ideality: 1.03,
        forward_early_voltage: 85.0,
        reverse_early_voltage: 18.0,
        forward_knee_current: 0.12,
        reverse_knee_current: 0.04,
        emitter_leakage_current: 3.4e-14,
        emitter_leakage_ideality: 1.6,
        collector_leakage_current: 5e-14,
        collector_leakage_ideality: 1.9,
        emitter_breakdown_voltage: Some(6.5),
        forward_transit_time: 4.2e-10,
        reverse_transit_time: 7e-8,
        emitter_junction_capacitance: 9e-12,
        emitter_potential: 0.72,
        emitter_grading: 0.35,
        collector_junction_capacitance: 4.2e-12,
        collector_potential: 0.58,
        collector_grading: 0.32,
        gain_temperature_exponent: 1.4,
        ..exponential()
    }
}

/// One optional part of the model after the other, all together, and the built-in classes.
fn transistors() -> Vec<(String, TransistorParameters)> {
    let full = whole();
    let base = exponential();
    let own = [
        ("exponential", base.clone()),
        (
            "idealities",
            TransistorParameters {
                forward_ideality: 1.02,
                reverse_ideality: 1.1,
                reverse_gain: 4.0,
                ..base.clone()
            },
        ),
        (
            "forward Early",
            TransistorParameters {
                forward_early_voltage: 74.0,
                ..base.clone()
            },
        ),
        (
            "both Early, forward floor reached",
            TransistorParameters {
                forward_early_voltage: 0.7,
                reverse_early_voltage: 18.0,
                ..base.clone()
            },
        ),
        (
            "both Early, reverse floor reached",
            TransistorParameters {
                forward_early_voltage: 74.0,
                reverse_early_voltage: 0.8,
                forward_knee_current: 0.1,
                ..base.clone()
            },
        ),
        (
            "knees",
            TransistorParameters {
                forward_knee_current: 0.09,
                reverse_knee_current: 0.02,
                ..base.clone()
            },
        ),
        (
            "leakage",
            TransistorParameters {
                emitter_leakage_current: 4e-14,
                collector_leakage_current: 5e-14,
                emitter_leakage_ideality: 1.55,
                gain_temperature_exponent: 1.5,
                ..base.clone()
            },
        ),
        (
            "breakdown",
            TransistorParameters {
                emitter_breakdown_voltage: Some(6.5),
                ..base.clone()
            },
        ),
        (
            "charges alone",
            TransistorParameters {
                forward_early_voltage: f64::INFINITY,
                reverse_early_voltage: f64::INFINITY,
                forward_knee_current: f64::INFINITY,
                reverse_knee_current: f64::INFINITY,
                emitter_leakage_current: 0.0,
                collector_leakage_current: 0.0,
                emitter_breakdown_voltage: None,
                ..full.clone()
            },
        ),
        ("whole", full),
    ];
    let built_in = classes::all()
        .iter()
        .filter_map(|class| match &class.parameters {
            ClassParameters::Transistor(_, p) => Some((class.name.clone(), (**p).clone())),
            ClassParameters::Diode(_) => None,
        });
    own.into_iter()
        .map(|(name, p)| (name.to_string(), p))
        .chain(built_in)
        .collect()
}

fn diodes() -> Vec<(String, DiodeParameters)> {
    let base = DiodeParameters::exponential(2.6e-9);
    let own = [
        ("exponential", base.clone()),
        (
            "whole",
            DiodeParameters {
                ideality: 1.8,
                breakdown_voltage: Some(5.6),
                breakdown_ideality: 4.0,
                transit_time: 5e-9,
                junction_capacitance: 4e-12,
                ..base
            },
        ),
    ];
    let built_in = classes::all()
        .iter()
        .filter_map(|class| match &class.parameters {
            ClassParameters::Diode(p) => Some((class.name.clone(), (**p).clone())),
            ClassParameters::Transistor(..) => None,
        });
    own.into_iter()
        .map(|(name, p)| (name.to_string(), p))
        .chain(built_in)
        .collect()
}

/// `found` against `wanted`, both with the scale of their terms.
fn agree(
    place: &str,
    what: &str,
    (found, found_size): (f64, f64),
    (wanted, wanted_size): (f64, f64),
) {
    let allowed = RELATIVE * (found_size + wanted_size) + UNDERFLOW;
    let error = (found - wanted).abs();
    assert!(
        error <= allowed,
        "{place}: {what} is {found:e}, expected {wanted:e}, off by {error:e}, allowed {allowed:e}"
    );
}

/// Every (parameters, temperature, anchor, voltages) of the transistors.
fn each_transistor_point(
    mut check: impl FnMut(&str, &TransistorParameters, f64, [f64; 2], [f64; 2]),
) {
    for (name, p) in transistors() {
        for t in TEMPERATURES {
            for anchor in ANCHORS {
                for be in BASE_EMITTER {
                    for bc in BASE_COLLECTOR {
                        let delta = [be - anchor[0], bc - anchor[1]];
                        let place = format!("{name} at {t} K, ({be}, {bc}) V seen from {anchor:?}");
                        check(&place, &p, t, anchor, delta);
                    }
                }
            }
        }
    }
}

fn variables(v: [f64; 2]) -> [Dual; 2] {
    [Dual::variable(v[0], 0), Dual::variable(v[1], 1)]
}

#[test]
fn transistor_derivatives_are_those_of_its_own_currents_and_charges() {
    each_transistor_point(|place, p, t, anchor, delta| {
        let law = TransistorLaw::new(p, t).splat::<Dual>();
        let state = law.deviation(&law.anchor(anchor.map(Dual::splat)), variables(delta));
        for port in 0..2 {
            for k in 0..2 {
                for (what, value, slope) in [
                    (
                        "conductance",
                        state.current[port],
                        state.conductance[port][k],
                    ),
                    (
                        "capacitance",
                        state.charge[port],
                        state.capacitance[port][k],
                    ),
                ] {
                    agree(
                        place,
                        &format!("{what} {port}{k}"),
                        (slope.v, slope.size),
                        (value.d[k], value.slope_size[k]),
                    );
                }
            }
        }
    });
}

#[test]
fn transistor_currents_charges_and_derivatives_are_the_plain_equations_from_every_anchor() {
    each_transistor_point(|place, p, t, anchor, delta| {
        let law = TransistorLaw::new(p, t).splat::<Dual>();
        let state = law.deviation(&law.anchor(anchor.map(Dual::splat)), variables(delta));
        let there = variables([anchor[0] + delta[0], anchor[1] + delta[1]]);
        let (currents, charges) = plain::transistor(p, t, there);
        let (anchored, stored) = plain::transistor(p, t, anchor.map(Dual::splat));
        for port in 0..2 {
            let pairs = [
                (
                    "current",
                    state.current[port],
                    currents[port] - anchored[port],
                ),
                ("charge", state.charge[port], charges[port] - stored[port]),
            ];
            for (what, found, wanted) in pairs {
                agree(
                    place,
                    &format!("{what} {port}"),
                    (found.v, found.size),
                    (wanted.v, wanted.size),
                );
            }
            for k in 0..2 {
                for (what, slope, wanted) in [
                    ("conductance", state.conductance[port][k], currents[port]),
                    ("capacitance", state.capacitance[port][k], charges[port]),
                ] {
                    agree(
                        place,
                        &format!("{what} {port}{k} beside the plain one"),
                        (slope.v, slope.size),
                        (wanted.d[k], wanted.slope_size[k]),
                    );
                }
            }
        }
    });
}

#[test]
fn diode_derivatives_are_those_of_its_law_and_of_the_plain_equations() {
    let voltages = [
        -15.0, -6.1, -5.6, -5.0, -1.0, -0.01, 0.0, 1e-6, 0.2, 0.34, 0.36, 0.6, 0.7, 0.8, 0.9,
    ];
    for (name, p) in diodes() {
        for t in TEMPERATURES {
            for anchor in [-15.0, -5.5, -0.4, 0.0, 0.3, 0.37, 0.65, 0.9] {
                for v in voltages {
                    let place = format!("{name} at {t} K, {v} V seen from {anchor} V");
                    let law = DiodeLaw::new(&p, t).splat::<Dual>();
                    let delta = v - anchor;
                    let at = law.anchor(Dual::splat(anchor));
                    let state = law.deviation(&at, Dual::variable(delta, 0));
                    let (current, charge) = plain::diode(&p, t, Dual::variable(anchor + delta, 0));
                    let (rest, stored) = plain::diode(&p, t, Dual::splat(anchor));
                    for (what, value, slope, wanted) in [
                        ("current", state.current, state.conductance, current - rest),
                        ("charge", state.charge, state.capacitance, charge - stored),
                    ] {
                        agree(&place, what, (value.v, value.size), (wanted.v, wanted.size));
                        let slope = (slope.v, slope.size);
                        agree(
                            &place,
                            &format!("slope of the {what}"),
                            slope,
                            (value.d[0], value.slope_size[0]),
                        );
                        agree(
                            &place,
                            &format!("plain slope of the {what}"),
                            slope,
                            (wanted.d[0], wanted.slope_size[0]),
                        );
                    }
                }
            }
        }
    }
}

#[test]
fn the_scale_of_the_terms_is_no_loose_tolerance_at_a_bias() {
    let p = whole();
    for bias in [[0.65, -5.0], [0.72, 0.3], [0.55, -40.0]] {
        let law = TransistorLaw::new(&p, 298.15).splat::<Dual>();
        let anchor = law.anchor(bias.map(Dual::splat));
        let state = law.deviation(&anchor, variables([0.01, -0.02]));
        for slope in [
            state.conductance[0][0],
            state.conductance[1][0],
            state.capacitance[0][0],
            state.capacitance[1][1],
        ] {
            // a difference from the anchor and back, and powers recovered from charges: tens of roundings, 1e-10 in all
            assert!(slope.size < 100.0 * slope.v.abs(), "{bias:?}: {slope:?}");
        }
    }
}

/// Largest relative jump of the currents and charges between points a hair apart around `v`, against what their slope
/// makes of that hair.
fn jump(p: &TransistorParameters, v: [f64; 2], port: usize) -> f64 {
    let hair = 1e-9;
    let law = TransistorLaw::new(p, 298.15);
    let anchor = law.anchor([0.1, -0.2]);
    let at = |sign: f64| {
        let mut delta = [v[0] - 0.1, v[1] + 0.2];
        delta[port] += sign * hair;
        law.deviation(&anchor, delta)
    };
    let (below, above) = (at(-1.0), at(1.0));
    (0..2)
        .flat_map(|row| {
            [
                (
                    below.current[row],
                    above.current[row],
                    below.conductance[row][port],
                ),
                (
                    below.charge[row],
                    above.charge[row],
                    below.capacitance[row][port],
                ),
            ]
        })
        .map(|(a, b, slope)| {
            let expected = 2.0 * hair * slope;
            (b - a - expected).abs() / (a.abs() + b.abs() + expected.abs()).max(1e-30)
        })
        .fold(0.0, f64::max)
}

#[test]
fn currents_and_charges_and_their_slopes_pass_every_joint_without_a_step() {
    let p = whole();
    let floor = TransistorParameters {
        forward_early_voltage: 0.5,
        reverse_early_voltage: f64::INFINITY,
        ..whole()
    };
    let reverse_floor = TransistorParameters {
        forward_early_voltage: f64::INFINITY,
        reverse_early_voltage: 0.7,
        ..whole()
    };
    let joints = [
        ("emitter depletion at φ/2", &p, [0.36, -1.0], 0),
        ("collector depletion at φ/2", &p, [0.2, 0.29], 1),
        ("forward Early floor at d = 0.1", &floor, [0.6, 0.45], 1),
        (
            "reverse Early floor at d = 0.1",
            &reverse_floor,
            [0.63, -1.0],
            0,
        ),
    ];
    for (what, p, v, port) in joints {
        // 2e-9 V of the steepest exponential leave (2e-9/VT)² = 6e-15 of curvature; rounding adds 1e-15
        let step = jump(p, v, port);
        assert!(step < 5e-14, "{what}: a step of {step:e}");
    }
}
