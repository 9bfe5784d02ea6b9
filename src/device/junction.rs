//! The two building blocks of a junction: its exponential current and its depletion charge.
//!
//! ```text
//! current:    s·(exp(v/w) − 1)                     w = n·VT
//! depletion:  v ≤ φ/2 : C·φ/(1−m)·(1 − (1 − v/φ)^(1−m))
//!             v > φ/2 : Q(φ/2) + C·2^m·(x + m·x²/φ),  x = v − φ/2
//! ```
//! Both are returned as differences from an anchor voltage v0, formed without cancellation:
//! `exp(v/w) − exp(v0/w) = exp(v0/w)·expm1((v − v0)/w)` and likewise for the power of the depletion law.

use crate::numeric::Lane;

/// An exponential of slope 1/`width`: `scale·exp(v/width − offset)`.
#[derive(Clone, Copy, Debug)]
pub struct Exponential<L> {
    /// Scale current, A.
    pub scale: L,
    /// 1/(n·VT), 1/V.
    pub inverse_width: L,
    /// Exponent at which the current is the scale: 0 for a junction, the breakdown voltage over its width for a
    /// breakdown, whose value at zero volts would underflow.
    pub offset: L,
}

/// An exponential at its anchor.
#[derive(Clone, Copy, Debug)]
pub struct ExponentialAnchor<L> {
    /// Exponent at the anchor.
    exponent: L,
    /// `scale·exp(exponent)`, A.
    value: L,
    /// Far in reverse, where the anchor's own value is nothing beside any current that matters.
    deep: bool,
}

impl<L: Lane> ExponentialAnchor<L> {
    /// The exponential's value at the anchor, A.
    pub fn value(&self) -> L {
        self.value
    }
}

/// Below this exponent the anchor's value (1e-13 of the scale current) no longer needs a relative difference, and the
/// product `exp(v0)·expm1(v − v0)` could meet zero times infinity.
const DEEP: f64 = -30.0;

impl Exponential<f64> {
    /// The same law in every lane.
    pub fn splat<L: Lane>(&self) -> Exponential<L> {
        Exponential {
            scale: L::splat(self.scale),
            inverse_width: L::splat(self.inverse_width),
            offset: L::splat(self.offset),
        }
    }
}

impl<L: Lane> Exponential<L> {
    /// The anchor at `v` volts.
    pub fn anchor(&self, v: L) -> ExponentialAnchor<L> {
        let exponent = v * self.inverse_width - self.offset;
        ExponentialAnchor {
            exponent,
            value: self.scale * exponent.exp(),
            deep: exponent.largest() < DEEP,
        }
    }

    /// Difference from the anchor's value, and slope in A/V, at `delta` volts from the anchor.
    #[inline(always)]
    pub fn deviation(&self, anchor: &ExponentialAnchor<L>, delta: L) -> (L, L) {
        let step = delta * self.inverse_width;
        let difference = if anchor.deep {
            self.scale * (anchor.exponent + step).exp() - anchor.value
        } else {
            anchor.value * step.exp_m1()
        };
        (difference, (anchor.value + difference) * self.inverse_width)
    }
}

/// Terms of the binomial series of the depletion law near its anchor.
const BINOMIAL_TERMS: usize = 9;
/// Relative distance from the anchor below which that many terms reach rounding: 0.02⁹ is 5e-16.
const BINOMIAL_REACH: f64 = 0.02;

/// The depletion charge of a junction.
#[derive(Clone, Copy, Debug)]
pub struct Depletion<L> {
    /// Capacitance at zero bias, F.
    capacitance: L,
    /// Half the junction potential φ, V: where the law changes.
    half: L,
    /// 1/φ, 1/V.
    inverse_potential: L,
    /// Grading exponent m, below 1.
    grading: L,
    /// C·φ/(1 − m), C, and its inverse.
    scale: L,
    inverse_scale: L,
    /// C·2^m, the slope at the joint, F.
    steep: L,
    /// Q(φ/2), C.
    joint: L,
    /// Binomial coefficients of (1 + u)^(1−m) from the first power on.
    binomial: [L; BINOMIAL_TERMS],
}

/// A depletion charge at its anchor.
#[derive(Clone, Copy, Debug)]
pub struct DepletionAnchor<L> {
    /// Anchor voltage, V.
    voltage: L,
    /// Charge at the anchor, C.
    charge: L,
    /// 1/(φ·(1 − v0/φ)), 1/V.
    inverse_base: L,
    /// C·φ/(1 − m)·(1 − v0/φ)^(1−m), C; the joint's where the anchor lies beyond it.
    power: L,
}

impl<L: Lane> DepletionAnchor<L> {
    /// The charge at the anchor, C.
    pub fn charge(&self) -> L {
        self.charge
    }
}

impl Depletion<f64> {
    /// The same law in every lane.
    pub fn splat<L: Lane>(&self) -> Depletion<L> {
        Depletion {
            capacitance: L::splat(self.capacitance),
            half: L::splat(self.half),
            inverse_potential: L::splat(self.inverse_potential),
            grading: L::splat(self.grading),
            scale: L::splat(self.scale),
            inverse_scale: L::splat(self.inverse_scale),
            steep: L::splat(self.steep),
            joint: L::splat(self.joint),
            binomial: self.binomial.map(L::splat),
        }
    }
}

impl<L: Lane> Depletion<L> {
    /// The law for a capacitance in F, a potential in V and a grading exponent in [0, 1).
    pub fn new(capacitance: L, potential: L, grading: L) -> Self {
        let steep = capacitance * (grading * L::splat(std::f64::consts::LN_2)).exp();
        let rest = L::one() - grading;
        let half_power = (rest * L::splat(-std::f64::consts::LN_2)).exp();
        let mut binomial = [rest; BINOMIAL_TERMS];
        for k in 1..BINOMIAL_TERMS {
            let order = L::splat(k as f64);
            binomial[k] = binomial[k - 1] * (rest - order) / (order + L::one());
        }
        let scale = capacitance * potential / rest;
        Depletion {
            capacitance,
            half: potential * L::splat(0.5),
            inverse_potential: L::one() / potential,
            grading,
            scale,
            inverse_scale: L::one() / scale,
            steep,
            joint: scale * (L::one() - half_power),
            binomial,
        }
    }

    /// Whether there is any charge at all.
    pub fn is_present(&self) -> bool {
        self.capacitance.largest() > 0.0
    }

    /// The anchor at `v` volts.
    pub fn anchor(&self, v: L) -> DepletionAnchor<L> {
        let half = self.half;
        let low = v.min(half);
        let base = L::one() - low * self.inverse_potential;
        let power = ((L::one() - self.grading) * base.ln()).exp();
        let below = self.scale * (L::one() - power);
        let charge = L::choose(
            half.below(v),
            || self.joint + self.beyond(v - half),
            || below,
        );
        DepletionAnchor {
            voltage: v,
            charge,
            inverse_base: self.inverse_potential / base,
            power: self.scale * power,
        }
    }

    /// Charge difference from the anchor in C, and capacitance in F, at `delta` volts from the anchor.
    #[inline(always)]
    pub fn deviation(&self, anchor: &DepletionAnchor<L>, delta: L) -> (L, L) {
        let v = anchor.voltage + delta;
        let half = self.half;
        let beyond = half.below(v);
        let anchored_beyond = half.below(anchor.voltage);
        let charge = L::choose(
            beyond,
            || {
                L::choose(
                    anchored_beyond,
                    || self.beyond_difference(anchor, delta),
                    || self.joint - anchor.charge + self.beyond(v - half),
                )
            },
            || {
                L::choose(
                    anchored_beyond,
                    || self.scale * (L::one() - self.power_at(v)) - anchor.charge,
                    || self.below_difference(anchor, delta),
                )
            },
        );
        let capacitance = L::choose(
            beyond,
            || {
                let x = v - half;
                self.steep * (L::one() + L::splat(2.0) * self.grading * x * self.inverse_potential)
            },
            || {
                // C·(1 − v/φ)^(−m) = C·power/base, with the power recovered from the charge just found
                let power = L::one() - (anchor.charge + charge) * self.inverse_scale;
                self.capacitance * power / (L::one() - v * self.inverse_potential)
            },
        );
        (charge, capacitance)
    }

    #[inline(always)]
    fn power_at(&self, v: L) -> L {
        ((L::one() - self.grading) * (L::one() - v * self.inverse_potential).ln()).exp()
    }

    #[inline(always)]
    fn beyond(&self, x: L) -> L {
        self.steep * x * (L::one() + self.grading * x * self.inverse_potential)
    }

    #[inline(always)]
    fn beyond_difference(&self, anchor: &DepletionAnchor<L>, delta: L) -> L {
        let x0 = anchor.voltage - self.half;
        self.steep * delta * (L::one() + self.grading * (x0 + x0 + delta) * self.inverse_potential)
    }

    #[inline(always)]
    fn below_difference(&self, anchor: &DepletionAnchor<L>, delta: L) -> L {
        let u = -delta * anchor.inverse_base;
        let near = u.abs().below(L::splat(BINOMIAL_REACH));
        -anchor.power
            * L::choose(
                near,
                || {
                    let mut sum = self.binomial[BINOMIAL_TERMS - 1];
                    for coefficient in self.binomial[..BINOMIAL_TERMS - 1].iter().rev() {
                        sum = sum * u + *coefficient;
                    }
                    sum * u
                },
                || ((L::one() - self.grading) * u.ln_1p()).exp_m1(),
            )
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The formulas of the module head, written out plainly.
    fn plain_charge(c: f64, phi: f64, m: f64, v: f64) -> f64 {
        if v <= phi / 2.0 {
            c * phi / (1.0 - m) * (1.0 - (1.0 - v / phi).powf(1.0 - m))
        } else {
            let x = v - phi / 2.0;
            plain_charge(c, phi, m, phi / 2.0) + c * 2f64.powf(m) * (x + m * x * x / phi)
        }
    }

    #[test]
    fn the_depletion_charge_is_the_plain_formula_from_any_anchor() {
        let law = Depletion::new(9e-12, 0.72, 0.35);
        for anchor in [-15.0, -0.3, 0.2, 0.35, 0.37, 0.68] {
            let at = law.anchor(anchor);
            for v in [-20.0, -3.0, -0.1, 0.0, 0.3, 0.36, 0.40, 0.7, 0.9] {
                let (charge, _) = law.deviation(&at, v - anchor);
                let wanted =
                    plain_charge(9e-12, 0.72, 0.35, v) - plain_charge(9e-12, 0.72, 0.35, anchor);
                // a few roundings of charges up to 1e-10 C
                assert!(
                    (charge - wanted).abs() < 1e-25,
                    "{anchor} to {v}: {charge} against {wanted}"
                );
            }
        }
    }

    #[test]
    fn a_tiny_step_keeps_its_relative_accuracy() {
        let law = Depletion::new(9e-12, 0.72, 0.35);
        for anchor in [-15.0, 0.2, 0.68] {
            let at = law.anchor(anchor);
            let (charge, capacitance) = law.deviation(&at, 1e-12);
            // the next term of the series is 1e-12 of the first
            assert!(
                (charge / (capacitance * 1e-12) - 1.0).abs() < 1e-11,
                "{anchor}"
            );
        }
        let law = Exponential {
            scale: 1e-14,
            inverse_width: 1.0 / 0.0257,
            offset: 0.0,
        };
        let at = law.anchor(0.65);
        let (difference, slope) = law.deviation(&at, 1e-12);
        assert!((difference / (slope * 1e-12) - 1.0).abs() < 1e-9);
    }

    #[test]
    fn a_deep_anchor_still_reaches_forward_current() {
        let law = Exponential {
            scale: 1e-14,
            inverse_width: 1.0 / 0.025,
            offset: 0.0,
        };
        let at = law.anchor(-30.0);
        let (difference, _) = law.deviation(&at, 30.6);
        // exp(24)·1e-14; the exponent carries the rounding of 1200 and more
        assert!((difference / (1e-14 * 24f64.exp()) - 1.0).abs() < 1e-12);
        assert_eq!(law.deviation(&at, 0.0).0, 0.0);
    }

    #[test]
    fn a_breakdown_far_above_the_exponent_range_is_no_current_before_it() {
        // 110 V over 25.7 mV is an exponent of 4281, where the value at zero volts is less than any number
        let law = Exponential {
            scale: 1e-4,
            inverse_width: 1.0 / 0.0257,
            offset: 110.0 / 0.0257,
        };
        let at = law.anchor(0.0);
        for v in [0.0, 18.3, 60.0, 100.0] {
            let (difference, slope) = law.deviation(&at, v);
            assert!(difference.is_finite() && difference.abs() < 1e-4 && slope.is_finite());
        }
        assert!((law.deviation(&at, 110.0).0 / 1e-4 - 1.0).abs() < 1e-12);
    }
}
