//! The ideal emitter-coupled pair: `i = (I_tail/2)·tanh(v/(2·VT))`.

use super::*;

/// What the pair's 1 mA tail, a resistor of 1 GΩ, may add: it moves by the base voltage over 1 MV.
const TAIL: f64 = 3e-7;

#[test]
fn harmonics_of_the_pair_are_those_of_the_hyperbolic_tangent() {
    let stage = open("exact_pair");
    for set in closed_forms()["tanh_pair"].as_array().unwrap() {
        let x = set["x"].as_f64().unwrap();
        let point = driven(&stage, x * VT);
        let fundamental = point.harmonics[0].rms * std::f64::consts::SQRT_2;
        // out = vcc − 1 Ω·IC2, and IC2 falls with the input: in phase. Half the tail: its 1 MV less the emitters' VBE
        let half_tail = 0.5e-9 * (1e6 - 0.6);
        let wanted = set["fundamental_amplitude_over_half_tail"]
            .as_f64()
            .unwrap()
            * half_tail;
        assert!(
            (fundamental / wanted - 1.0).abs() < TAIL,
            "x = {x}: {fundamental}, expected {wanted}"
        );
        let ratios = set["signed_Hn_over_H1"].as_object().unwrap();
        for harmonic in point.harmonics.iter().skip(1) {
            let found = harmonic.rms / point.harmonics[0].rms;
            let wanted = match ratios.get(&harmonic.n.to_string()) {
                Some(ratio) => ratio.as_f64().unwrap().abs(),
                None if harmonic.n % 2 == 0 => 0.0,
                None => continue,
            };
            let error = (found - wanted).abs();
            assert!(
                error < TAIL,
                "x = {x}, H{}: {found}, expected {wanted}",
                harmonic.n
            );
        }
    }
}

#[test]
fn a_small_drive_of_the_pair_has_a_third_harmonic_of_x_squared_over_48_and_no_even_ones() {
    let stage = open("exact_pair");
    for x in [1e-3, 1e-2, 3e-2] {
        let point = driven(&stage, x * VT);
        let ratio = |n: usize| point.harmonics[n - 1].rms / point.harmonics[0].rms;
        let wanted = x * x / 48.0;
        // tanh(u) = u − u³/3 + 2u⁵/15: the next term is x²/8 of it (from the series); the tail adds 1e-6 of its own
        // to each, and the floor is 3e-13
        let error = (ratio(3) - wanted).abs();
        assert!(
            error < wanted * (x * x / 4.0 + 1e-6) + 3e-13,
            "x = {x}: {} against {wanted}",
            ratio(3)
        );
        for n in [2, 4, 6] {
            // what the tail's movement of x·VT/2 over 1 MV makes even
            assert!(
                ratio(n) < 3e-13 + x * VT / 1e6,
                "x = {x}: H{n} at {:e}",
                ratio(n)
            );
        }
    }
}
