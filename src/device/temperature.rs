//! How device parameters move with temperature, with t = T/T0:
//!
//! ```text
//! Is(T) = Is·t^ps·exp((q·Eg/k)·(1/T0 − 1/T))        (a diode: the whole factor to the power 1/n)
//! β(T)  = β·t^pβ
//! L(T)  = L·t^(−pβ)·(Is(T)/Is)^(1/n)
//! φ(T)  = φ·t − 3·VT(T)·ln t − Eg·(t − 1)
//! C(T)  = C·(1 + m·(4e-4·(T − T0) + 1 − φ(T)/φ))
//! ```
//! Resistances, Early voltages, knee currents, transit times, idealities and breakdown stay as they are.
//! Source of the saturation-current law: S. M. Sze, *Physics of Semiconductor Devices* (ni² ∝ T³·exp(−Eg/kT)), from
//! memory; the junction laws are the usual ones for an abrupt-to-graded junction.

use super::{DiodeParameters, TransistorParameters};
use crate::quantity::constants::{
    BOLTZMANN, ELEMENTARY_CHARGE, REFERENCE_TEMPERATURE, thermal_voltage,
};

/// Is(T)/Is of a junction with the given exponent and bandgap in eV, at `temperature` in K.
pub fn saturation_factor(exponent: f64, bandgap: f64, temperature: f64) -> f64 {
    let t = temperature / REFERENCE_TEMPERATURE;
    let slope = ELEMENTARY_CHARGE * bandgap / BOLTZMANN;
    (exponent * t.ln() + slope * (1.0 / REFERENCE_TEMPERATURE - 1.0 / temperature)).exp()
}

/// φ(T) in V of a junction of potential `potential` in V and bandgap in eV, at `temperature` in K.
pub fn junction_potential(potential: f64, bandgap: f64, temperature: f64) -> f64 {
    let t = temperature / REFERENCE_TEMPERATURE;
    potential * t - 3.0 * thermal_voltage(temperature) * t.ln() - bandgap * (t - 1.0)
}

/// C(T) in F of a junction of zero-bias capacitance `capacitance` in F.
pub fn junction_capacitance(
    capacitance: f64,
    grading: f64,
    potential: f64,
    potential_now: f64,
    temperature: f64,
) -> f64 {
    let drift = 4e-4 * (temperature - REFERENCE_TEMPERATURE) + 1.0 - potential_now / potential;
    capacitance * (1.0 + grading * drift)
}

/// The transistor's parameters at `temperature` in K.
pub fn transistor_at(parameters: &TransistorParameters, temperature: f64) -> TransistorParameters {
    let p = parameters;
    let t = temperature / REFERENCE_TEMPERATURE;
    let factor = saturation_factor(p.saturation_temperature_exponent, p.bandgap, temperature);
    let gain_factor = t.powf(p.gain_temperature_exponent);
    let leakage = |current: f64, ideality: f64| current / gain_factor * factor.powf(1.0 / ideality);
    let emitter_potential = junction_potential(p.emitter_potential, p.bandgap, temperature);
    let collector_potential = junction_potential(p.collector_potential, p.bandgap, temperature);
    TransistorParameters {
        saturation_current: p.saturation_current * factor,
        forward_gain: p.forward_gain * gain_factor,
        reverse_gain: p.reverse_gain * gain_factor,
        emitter_leakage_current: leakage(p.emitter_leakage_current, p.emitter_leakage_ideality),
        collector_leakage_current: leakage(
            p.collector_leakage_current,
            p.collector_leakage_ideality,
        ),
        emitter_junction_capacitance: junction_capacitance(
            p.emitter_junction_capacitance,
            p.emitter_grading,
            p.emitter_potential,
            emitter_potential,
            temperature,
        ),
        collector_junction_capacitance: junction_capacitance(
            p.collector_junction_capacitance,
            p.collector_grading,
            p.collector_potential,
            collector_potential,
            temperature,
        ),
        emitter_potential,
        collector_potential,
        ..parameters.clone()
    }
}

/// The diode's parameters at `temperature` in K.
pub fn diode_at(parameters: &DiodeParameters, temperature: f64) -> DiodeParameters {
    let p = parameters;
    let factor = saturation_factor(p.saturation_temperature_exponent, p.bandgap, temperature);
    let potential = junction_potential(p.potential, p.bandgap, temperature);
    DiodeParameters {
        saturation_current: p.saturation_current * factor.powf(1.0 / p.ideality),
        junction_capacitance: junction_capacitance(
            p.junction_capacitance,
            p.grading,
            p.potential,
            potential,
            temperature,
        ),
        potential,
        ..parameters.clone()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nothing_moves_at_the_reference_temperature() {
        let p = TransistorParameters {
            emitter_leakage_current: 1e-13,
            emitter_junction_capacitance: 9e-12,
            ..TransistorParameters::exponential(1e-14, 200.0)
        };
        assert_eq!(transistor_at(&p, REFERENCE_TEMPERATURE), p);
    }

    #[test]
    fn a_silicon_junction_loses_about_two_millivolts_a_kelvin() {
        // VBE at constant current: VT·ln(IC/Is(T)); 2.0–2.2 mV/K near 0.65 V is common practice
        let current = 1e-3;
        let vbe = |temperature: f64| {
            let scale = 1e-14 * saturation_factor(3.0, 1.17, temperature);
            thermal_voltage(temperature) * (current / scale).ln()
        };
        let slope = (vbe(308.15) - vbe(288.15)) / 20.0;
        assert!((-2.2e-3..-1.8e-3).contains(&slope), "{slope}");
    }

    #[test]
    fn the_potential_falls_with_temperature() {
        // d φ/dT = (φ − Eg)/T0 − 3·k/q at T0, from the formula
        let slope =
            (junction_potential(0.7, 1.17, 298.65) - junction_potential(0.7, 1.17, 297.65)) / 1.0;
        let wanted = (0.7 - 1.17) / REFERENCE_TEMPERATURE - 3.0 * BOLTZMANN / ELEMENTARY_CHARGE;
        assert!((slope - wanted).abs() < 1e-6, "{slope} against {wanted}");
    }
}
