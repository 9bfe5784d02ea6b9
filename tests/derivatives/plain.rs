//! The device equations written out plainly, absolute and not as differences: Gummel & Poon, Bell Syst. Tech. J. 49
//! (1970), in transport form; Shockley, Bell Syst. Tech. J. 28 (1949); the usual temperature laws. Nothing here is
//! taken from the engine.

use crate::dual::Dual;
use cleanswing::device::{DiodeParameters, TransistorParameters};
use cleanswing::numeric::Lane;

/// k and q of the SI of 2019.
const K: f64 = 1.380649e-23;
const Q: f64 = 1.602176634e-19;
const T0: f64 = 298.15;

fn number(v: f64) -> Dual {
    Dual::splat(v)
}

/// s·(exp(v/w) − 1).
fn junction(s: f64, v: Dual, w: f64) -> Dual {
    number(s) * ((v / number(w)).exp() - number(1.0))
}

fn growth(exponent: f64, bandgap: f64, t: f64) -> f64 {
    (t / T0).powf(exponent) * (Q * bandgap / K * (1.0 / T0 - 1.0 / t)).exp()
}

fn potential(phi: f64, bandgap: f64, t: f64) -> f64 {
    phi * t / T0 - 3.0 * K * t / Q * (t / T0).ln() - bandgap * (t / T0 - 1.0)
}

/// Charge of a depletion layer given at 25 °C, at `t` kelvin.
fn depletion(v: Dual, (c, phi, m): (f64, f64, f64), bandgap: f64, t: f64) -> Dual {
    let now = potential(phi, bandgap, t);
    let c = c * (1.0 + m * (4e-4 * (t - T0) + 1.0 - now / phi));
    let low = |v: Dual| {
        let power = (number(1.0 - m) * (number(1.0) - v / number(now)).ln()).exp();
        number(c * now / (1.0 - m)) * (number(1.0) - power)
    };
    if v.v <= now / 2.0 {
        return low(v);
    }
    let x = v - number(now / 2.0);
    low(number(now / 2.0)) + number(c * 2f64.powf(m)) * (x + number(m / now) * x * x)
}

/// Port currents and charges (be, bc) of a transistor at junction voltages (be, bc).
pub fn transistor(
    p: &TransistorParameters,
    t: f64,
    [vbe, vbc]: [Dual; 2],
) -> ([Dual; 2], [Dual; 2]) {
    let vt = K * t / Q;
    let grown = growth(p.saturation_temperature_exponent, p.bandgap, t);
    let gain = (t / T0).powf(p.gain_temperature_exponent);
    let is = p.saturation_current * grown;
    let forward = junction(is, vbe, p.forward_ideality * vt);
    let reverse = junction(is, vbc, p.reverse_ideality * vt);
    let leakage = |s: f64, n: f64, v: Dual| junction(s / gain * grown.powf(1.0 / n), v, n * vt);
    let mut base_emitter = forward / number(p.forward_gain * gain)
        + leakage(p.emitter_leakage_current, p.emitter_leakage_ideality, vbe);
    if let Some(volts) = p.emitter_breakdown_voltage {
        base_emitter -=
            number(p.emitter_breakdown_current) * (-(vbe + number(volts)) / number(vt)).exp();
    }
    let base_collector = reverse / number(p.reverse_gain * gain)
        + leakage(
            p.collector_leakage_current,
            p.collector_leakage_ideality,
            vbc,
        );
    let mut d = number(1.0)
        - vbc * number(1.0 / p.forward_early_voltage)
        - vbe * number(1.0 / p.reverse_early_voltage);
    if d.v < 0.1 {
        d = number(0.1) * ((d - number(0.1)) / number(0.1)).exp();
    }
    let filling = forward * number(1.0 / p.forward_knee_current)
        + reverse * number(1.0 / p.reverse_knee_current);
    let qb = (number(1.0) + (number(1.0) + number(4.0) * filling).sqrt()) / (number(2.0) * d);
    let through = (forward - reverse) / qb;
    let emitter = (
        p.emitter_junction_capacitance,
        p.emitter_potential,
        p.emitter_grading,
    );
    let collector = (
        p.collector_junction_capacitance,
        p.collector_potential,
        p.collector_grading,
    );
    let charges = [
        number(p.forward_transit_time) * forward / qb + depletion(vbe, emitter, p.bandgap, t),
        number(p.reverse_transit_time) * reverse + depletion(vbc, collector, p.bandgap, t),
    ];
    ([base_emitter + through, base_collector - through], charges)
}

/// Current and charge of a diode at a junction voltage.
pub fn diode(p: &DiodeParameters, t: f64, v: Dual) -> (Dual, Dual) {
    let vt = K * t / Q;
    let grown = growth(p.saturation_temperature_exponent, p.bandgap, t).powf(1.0 / p.ideality);
    let forward = junction(p.saturation_current * grown, v, p.ideality * vt);
    let mut current = forward;
    if let Some(volts) = p.breakdown_voltage {
        let w = p.breakdown_ideality * vt;
        let at = |v: Dual| (-(v + number(volts)) / number(w)).exp();
        current -= number(p.breakdown_current) * (at(v) - at(number(0.0)));
    }
    let layer = (p.junction_capacitance, p.potential, p.grading);
    let charge = number(p.transit_time) * forward + depletion(v, layer, p.bandgap, t);
    (current, charge)
}
