//! The diode:
//!
//! ```text
//! I = Is·(exp(v/(n·VT)) − 1) − Iz·(exp(−(v + Vz)/(nz·VT)) − exp(−Vz/(nz·VT)))
//! Q = τ·Is·(exp(v/(n·VT)) − 1) + depletion(v; C, φ, m)
//! ```
//! W. Shockley, "The theory of p-n junctions in semiconductors", Bell Syst. Tech. J. 28 (1949), with an ideality; the
//! second term only where a breakdown voltage is given. `v` is the junction voltage, behind the series resistance.

use super::DiodeParameters;
use super::junction::{Depletion, DepletionAnchor, Exponential, ExponentialAnchor};
use super::temperature::diode_at;
use crate::numeric::Lane;
use crate::quantity::constants::thermal_voltage;

/// The law of one diode at one temperature.
#[derive(Clone, Debug)]
pub struct DiodeLaw<L> {
    forward: Exponential<L>,
    breakdown: Option<Exponential<L>>,
    transit_time: L,
    depletion: Depletion<L>,
    stores_charge: bool,
    breakdown_voltage: L,
    breakdown_width: L,
}

/// The law at the voltage it is measured from.
#[derive(Clone, Debug)]
pub struct DiodeAnchor<L> {
    voltage: L,
    forward: ExponentialAnchor<L>,
    breakdown: Option<ExponentialAnchor<L>>,
    depletion: DepletionAnchor<L>,
}

/// Current and charge as differences from the anchor, with their derivatives.
#[derive(Clone, Copy, Debug, Default)]
pub struct DiodeState<L> {
    /// Current from anode to cathode, A.
    pub current: L,
    /// ∂current/∂voltage, S.
    pub conductance: L,
    /// Charge, C.
    pub charge: L,
    /// ∂charge/∂voltage, F.
    pub capacitance: L,
}

impl DiodeLaw<f64> {
    /// The law of `parameters` (given at 25 °C) at `temperature` in K.
    pub fn new(parameters: &DiodeParameters, temperature: f64) -> Self {
        let p = diode_at(parameters, temperature);
        let vt = thermal_voltage(temperature);
        let depletion = Depletion::new(p.junction_capacitance, p.potential, p.grading);
        let breakdown_width = p.breakdown_ideality * vt;
        DiodeLaw {
            forward: Exponential {
                scale: p.saturation_current,
                inverse_width: 1.0 / (p.ideality * vt),
                offset: 0.0,
            },
            // in the variable −v, so that it is a rising exponential like the other
            breakdown: p.breakdown_voltage.map(|volts| Exponential {
                scale: p.breakdown_current,
                inverse_width: 1.0 / breakdown_width,
                offset: volts / breakdown_width,
            }),
            transit_time: p.transit_time,
            stores_charge: depletion.is_present() || p.transit_time > 0.0,
            depletion,
            breakdown_voltage: p.breakdown_voltage.unwrap_or(f64::INFINITY),
            breakdown_width,
        }
    }

    /// The same law in every lane.
    pub fn splat<L: Lane>(&self) -> DiodeLaw<L> {
        DiodeLaw {
            forward: self.forward.splat(),
            breakdown: self.breakdown.map(|law| law.splat()),
            transit_time: L::splat(self.transit_time),
            depletion: self.depletion.splat(),
            stores_charge: self.stores_charge,
            breakdown_voltage: L::splat(self.breakdown_voltage),
            breakdown_width: L::splat(self.breakdown_width),
        }
    }
}

impl<L: Lane> DiodeLaw<L> {
    /// Whether the law has any charge.
    pub fn stores_charge(&self) -> bool {
        self.stores_charge
    }

    /// The voltage scale of the exponential, n·VT, V.
    pub fn width(&self) -> f64 {
        1.0 / self.forward.inverse_width.largest()
    }

    /// The scale current, A.
    pub fn scale(&self) -> f64 {
        self.forward.scale.largest()
    }

    /// Breakdown voltage, V; infinite for none.
    pub fn breakdown_voltage(&self) -> f64 {
        self.breakdown_voltage.smallest()
    }

    /// The voltage scale of the breakdown exponential, nz·VT, V.
    pub fn breakdown_width(&self) -> f64 {
        self.breakdown_width.largest()
    }

    /// The law seen from `voltage` in V.
    pub fn anchor(&self, voltage: L) -> DiodeAnchor<L> {
        DiodeAnchor {
            voltage,
            forward: self.forward.anchor(voltage),
            breakdown: self.breakdown.map(|law| law.anchor(-voltage)),
            depletion: self.depletion.anchor(voltage),
        }
    }

    /// Current in A and charge in C at the anchor itself, not as a difference.
    pub fn at_anchor(&self, anchor: &DiodeAnchor<L>) -> (L, L) {
        let zero = self.anchor(L::zero());
        let state = self.deviation(&zero, anchor.voltage);
        (state.current, state.charge)
    }

    /// Current, charge and derivatives at `delta` volts from the anchor.
    #[inline(always)]
    pub fn deviation(&self, anchor: &DiodeAnchor<L>, delta: L) -> DiodeState<L> {
        let (forward, forward_slope) = self.forward.deviation(&anchor.forward, delta);
        let mut state = DiodeState {
            current: forward,
            conductance: forward_slope,
            charge: self.transit_time * forward,
            capacitance: self.transit_time * forward_slope,
        };
        if let (Some(law), Some(at)) = (&self.breakdown, &anchor.breakdown) {
            let (reverse, reverse_slope) = law.deviation(at, -delta);
            state.current -= reverse;
            state.conductance += reverse_slope;
        }
        if self.depletion.is_present() {
            let (charge, capacitance) = self.depletion.deviation(&anchor.depletion, delta);
            state.charge += charge;
            state.capacitance += capacitance;
        }
        state
    }
}
