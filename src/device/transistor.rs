//! The transistor: Gummel–Poon charge-control model, transport form (H. K. Gummel and H. C. Poon, "An integral charge
//! control model of bipolar transistors", Bell Syst. Tech. J. 49, 1970), reduced to its two junction ports.
//!
//! ```text
//! If  = Is·(exp(vbe/(nf·VT)) − 1)                 Ir  = Is·(exp(vbc/(nr·VT)) − 1)
//! Ibe = If/βf + Le·(exp(vbe/(ne·VT)) − 1) − Ie0·exp(−(vbe + Ve0)/VT)
//! Ibc = Ir/βr + Lc·(exp(vbc/(nc·VT)) − 1)
//! d   = 1 − vbc/Vf − vbe/Vr                       below 0.1 continued as 0.1·exp((d − 0.1)/0.1)
//! qb  = (1 + sqrt(1 + 4·(If/Kf + Ir/Kr)))/(2·d)
//! port be:  current Ibe + (If − Ir)/qb, charge τf·If/qb + depletion(vbe)
//! port bc:  current Ibc − (If − Ir)/qb, charge τr·Ir + depletion(vbc)
//! ```
//! The port currents flow from base to emitter and from base to collector: IB is their sum, IC the negative of the
//! second, IE the negative of the first. A PNP is the same law with its ports turned round, so the law itself knows no
//! polarity. `vbe`, `vbc` are internal junction voltages, behind the ohmic resistances.

use super::TransistorParameters;
use super::junction::{Depletion, DepletionAnchor, Exponential, ExponentialAnchor};
use super::temperature::transistor_at;
use crate::numeric::Lane;
use crate::quantity::constants::thermal_voltage;

/// Where the denominator of the base charge leaves its straight line.
const EARLY_FLOOR: f64 = 0.1;

/// The law of one transistor at one temperature.
#[derive(Clone, Debug)]
pub struct TransistorLaw<L> {
    forward: Exponential<L>,
    reverse: Exponential<L>,
    emitter_leakage: Option<Exponential<L>>,
    collector_leakage: Option<Exponential<L>>,
    breakdown: Option<Exponential<L>>,
    inverse_forward_gain: L,
    inverse_reverse_gain: L,
    inverse_forward_early: L,
    inverse_reverse_early: L,
    inverse_forward_knee: L,
    inverse_reverse_knee: L,
    has_early: bool,
    has_knee: bool,
    forward_transit_time: L,
    reverse_transit_time: L,
    emitter_depletion: Depletion<L>,
    collector_depletion: Depletion<L>,
    stores_charge: bool,
    thermal_voltage: L,
    breakdown_voltage: L,
}

/// The law at the voltages it is measured from.
#[derive(Clone, Debug)]
pub struct TransistorAnchor<L> {
    /// Port voltages (be, bc), V.
    voltage: [L; 2],
    forward: ExponentialAnchor<L>,
    reverse: ExponentialAnchor<L>,
    emitter_leakage: Option<ExponentialAnchor<L>>,
    collector_leakage: Option<ExponentialAnchor<L>>,
    breakdown: Option<ExponentialAnchor<L>>,
    emitter_depletion: DepletionAnchor<L>,
    collector_depletion: DepletionAnchor<L>,
    /// If and Ir at the anchor, A.
    forward_current: L,
    reverse_current: L,
    /// d after its continuation, the root, and 1/qb at the anchor.
    early: L,
    root: L,
    inverse_charge: L,
}

/// Port currents and charges as differences from the anchor, with their derivatives.
/// Rows are the ports (be, bc), columns the port voltages (be, bc).
#[derive(Clone, Copy, Debug, Default)]
pub struct TransistorState<L> {
    /// Port currents, A.
    pub current: [L; 2],
    /// ∂current/∂voltage, S.
    pub conductance: [[L; 2]; 2],
    /// Port charges, C.
    pub charge: [L; 2],
    /// ∂charge/∂voltage, F.
    pub capacitance: [[L; 2]; 2],
}

impl TransistorLaw<f64> {
    /// The law of `parameters` (given at 25 °C) at `temperature` in K.
    pub fn new(parameters: &TransistorParameters, temperature: f64) -> Self {
        let p = transistor_at(parameters, temperature);
        let vt = thermal_voltage(temperature);
        let exponential = |scale: f64, ideality: f64| Exponential {
            scale,
            inverse_width: 1.0 / (ideality * vt),
            offset: 0.0,
        };
        let leakage =
            |scale: f64, ideality: f64| (scale > 0.0).then(|| exponential(scale, ideality));
        let emitter_depletion = Depletion::new(
            p.emitter_junction_capacitance,
            p.emitter_potential,
            p.emitter_grading,
        );
        let collector_depletion = Depletion::new(
            p.collector_junction_capacitance,
            p.collector_potential,
            p.collector_grading,
        );
        TransistorLaw {
            forward: exponential(p.saturation_current, p.forward_ideality),
            reverse: exponential(p.saturation_current, p.reverse_ideality),
            emitter_leakage: leakage(p.emitter_leakage_current, p.emitter_leakage_ideality),
            collector_leakage: leakage(p.collector_leakage_current, p.collector_leakage_ideality),
            // in the variable −vbe, so that it is a rising exponential like the others
            breakdown: p.emitter_breakdown_voltage.map(|volts| Exponential {
                scale: p.emitter_breakdown_current,
                inverse_width: 1.0 / vt,
                offset: volts / vt,
            }),
            inverse_forward_gain: 1.0 / p.forward_gain,
            inverse_reverse_gain: 1.0 / p.reverse_gain,
            inverse_forward_early: 1.0 / p.forward_early_voltage,
            inverse_reverse_early: 1.0 / p.reverse_early_voltage,
            inverse_forward_knee: 1.0 / p.forward_knee_current,
            inverse_reverse_knee: 1.0 / p.reverse_knee_current,
            has_early: p.forward_early_voltage.is_finite() || p.reverse_early_voltage.is_finite(),
            has_knee: p.forward_knee_current.is_finite() || p.reverse_knee_current.is_finite(),
            forward_transit_time: p.forward_transit_time,
            reverse_transit_time: p.reverse_transit_time,
            stores_charge: emitter_depletion.is_present()
                || collector_depletion.is_present()
                || p.forward_transit_time > 0.0
                || p.reverse_transit_time > 0.0,
            emitter_depletion,
            collector_depletion,
            thermal_voltage: vt,
            breakdown_voltage: p.emitter_breakdown_voltage.unwrap_or(f64::INFINITY),
        }
    }

    /// The same law in every lane.
    pub fn splat<L: Lane>(&self) -> TransistorLaw<L> {
        let leakage = |law: &Option<Exponential<f64>>| law.map(|law| law.splat());
        TransistorLaw {
            forward: self.forward.splat(),
            reverse: self.reverse.splat(),
            emitter_leakage: leakage(&self.emitter_leakage),
            collector_leakage: leakage(&self.collector_leakage),
            breakdown: leakage(&self.breakdown),
            inverse_forward_gain: L::splat(self.inverse_forward_gain),
            inverse_reverse_gain: L::splat(self.inverse_reverse_gain),
            inverse_forward_early: L::splat(self.inverse_forward_early),
            inverse_reverse_early: L::splat(self.inverse_reverse_early),
            inverse_forward_knee: L::splat(self.inverse_forward_knee),
            inverse_reverse_knee: L::splat(self.inverse_reverse_knee),
            has_early: self.has_early,
            has_knee: self.has_knee,
            forward_transit_time: L::splat(self.forward_transit_time),
            reverse_transit_time: L::splat(self.reverse_transit_time),
            emitter_depletion: self.emitter_depletion.splat(),
            collector_depletion: self.collector_depletion.splat(),
            stores_charge: self.stores_charge,
            thermal_voltage: L::splat(self.thermal_voltage),
            breakdown_voltage: L::splat(self.breakdown_voltage),
        }
    }
}

impl<L: Lane> TransistorLaw<L> {
    /// Whether the law has any charge; without, every charge and capacitance is zero.
    pub fn stores_charge(&self) -> bool {
        self.stores_charge
    }

    /// The voltage scale of each junction's exponential, n·VT, V, (be, bc).
    pub fn widths(&self) -> [f64; 2] {
        [
            1.0 / self.forward.inverse_width.largest(),
            1.0 / self.reverse.inverse_width.largest(),
        ]
    }

    /// The scale current of each junction, A, (be, bc).
    pub fn scales(&self) -> [f64; 2] {
        [self.forward.scale.largest(), self.reverse.scale.largest()]
    }

    /// Emitter breakdown voltage, V; infinite for none.
    pub fn breakdown_voltage(&self) -> f64 {
        self.breakdown_voltage.smallest()
    }

    /// VT at the device's temperature, V.
    pub fn thermal_voltage(&self) -> L {
        self.thermal_voltage
    }

    /// Whether the denominator d has left its straight line at port voltages (be, bc) in V.
    pub fn beyond_early_range(&self, voltage: [L; 2]) -> bool {
        self.has_early && self.straight_early(voltage).smallest() < EARLY_FLOOR
    }

    fn straight_early(&self, voltage: [L; 2]) -> L {
        L::one() - voltage[1] * self.inverse_forward_early - voltage[0] * self.inverse_reverse_early
    }

    /// The law seen from port voltages (be, bc) in V.
    pub fn anchor(&self, voltage: [L; 2]) -> TransistorAnchor<L> {
        let [vbe, vbc] = voltage;
        let forward = self.forward.anchor(vbe);
        let reverse = self.reverse.anchor(vbc);
        // s·(exp(x) − 1), formed from zero so that a junction near zero volts keeps its digits
        let from_zero = |law: &Exponential<L>, v: L| law.deviation(&law.anchor(L::zero()), v).0;
        let forward_current = from_zero(&self.forward, vbe);
        let reverse_current = from_zero(&self.reverse, vbc);
        let (early, _) = self.early_at(voltage);
        let filling = forward_current * self.inverse_forward_knee
            + reverse_current * self.inverse_reverse_knee;
        let root = (L::one() + L::splat(4.0) * filling).sqrt();
        TransistorAnchor {
            voltage,
            forward,
            reverse,
            emitter_leakage: self.emitter_leakage.map(|law| law.anchor(vbe)),
            collector_leakage: self.collector_leakage.map(|law| law.anchor(vbc)),
            breakdown: self.breakdown.map(|law| law.anchor(-vbe)),
            emitter_depletion: self.emitter_depletion.anchor(vbe),
            collector_depletion: self.collector_depletion.anchor(vbc),
            forward_current,
            reverse_current,
            early,
            root,
            inverse_charge: L::splat(2.0) * early / (L::one() + root),
        }
    }

    /// d after its continuation, and its derivative with respect to the straight line.
    #[inline(always)]
    fn early_at(&self, voltage: [L; 2]) -> (L, L) {
        let straight = self.straight_early(voltage);
        let floor = L::splat(EARLY_FLOOR);
        let low = straight.below(floor);
        let early = L::choose(
            low,
            || floor * ((straight - floor) / floor).exp(),
            || straight,
        );
        (early, L::choose(low, || early / floor, L::one))
    }

    /// Port currents and charges at the anchor itself, not as a difference.
    pub fn at_anchor(&self, anchor: &TransistorAnchor<L>) -> ([L; 2], [L; 2]) {
        let zero = self.anchor([L::zero(); 2]);
        let state = self.deviation(&zero, anchor.voltage);
        let rest = zero
            .breakdown
            .map_or(L::zero(), |breakdown| breakdown.value());
        ([state.current[0] - rest, state.current[1]], state.charge)
    }

    /// Port currents, charges and derivatives at `delta` volts (be, bc) from the anchor.
    #[inline(always)]
    pub fn deviation(&self, anchor: &TransistorAnchor<L>, delta: [L; 2]) -> TransistorState<L> {
        let (forward, forward_slope) = self.forward.deviation(&anchor.forward, delta[0]);
        let (reverse, reverse_slope) = self.reverse.deviation(&anchor.reverse, delta[1]);
        let (scale, scale_difference, scale_slope) = self.inverse_charge(
            anchor,
            delta,
            (forward, forward_slope),
            (reverse, reverse_slope),
        );

        let anchored_transport = anchor.forward_current - anchor.reverse_current;
        let transport_difference = forward - reverse;
        let transport = anchored_transport + transport_difference;
        let through = transport_difference * scale + anchored_transport * scale_difference;
        let through_slope = [
            forward_slope * scale + transport * scale_slope[0],
            transport * scale_slope[1] - reverse_slope * scale,
        ];

        let (emitter, emitter_slope) =
            self.emitter_current(anchor, delta[0], forward, forward_slope);
        let (collector, collector_slope) =
            self.collector_current(anchor, delta[1], reverse, reverse_slope);
        let mut state = TransistorState {
            current: [emitter + through, collector - through],
            conductance: [
                [emitter_slope + through_slope[0], through_slope[1]],
                [-through_slope[0], collector_slope - through_slope[1]],
            ],
            ..TransistorState::default()
        };
        if self.stores_charge {
            self.add_charges(
                anchor,
                delta,
                (forward, forward_slope),
                (reverse, reverse_slope),
                (scale, scale_difference, scale_slope),
                &mut state,
            );
        }
        state
    }

    /// 1/qb, its difference from the anchor, and its slopes against vbe and vbc.
    #[inline(always)]
    fn inverse_charge(
        &self,
        anchor: &TransistorAnchor<L>,
        delta: [L; 2],
        (forward, forward_slope): (L, L),
        (reverse, reverse_slope): (L, L),
    ) -> (L, L, [L; 2]) {
        let one = L::one();
        let two = L::splat(2.0);
        if !self.has_early && !self.has_knee {
            return (one, L::zero(), [L::zero(); 2]);
        }
        let (early, early_difference, early_slope) = self.early_deviation(anchor, delta);
        if !self.has_knee {
            let slopes = [
                -early_slope * self.inverse_reverse_early,
                -early_slope * self.inverse_forward_early,
            ];
            return (early, early_difference, slopes);
        }
        let filling = forward * self.inverse_forward_knee + reverse * self.inverse_reverse_knee;
        let root = (anchor.root * anchor.root + L::splat(4.0) * filling).sqrt();
        let root_difference = L::splat(4.0) * filling / (root + anchor.root);
        let above = one + root;
        let scale = two * early / above;
        let difference = two
            * (early_difference * (one + anchor.root) - anchor.early * root_difference)
            / (above * (one + anchor.root));
        // d(2·d/(1 + s)) = 2·d′/(1 + s) − (2·d/(1 + s))·s′/(1 + s), with s′ = 2·filling′/s
        let along_root = scale / above * two / root;
        let slopes = [
            -two * early_slope * self.inverse_reverse_early / above
                - along_root * forward_slope * self.inverse_forward_knee,
            -two * early_slope * self.inverse_forward_early / above
                - along_root * reverse_slope * self.inverse_reverse_knee,
        ];
        (scale, difference, slopes)
    }

    #[inline(always)]
    fn early_deviation(&self, anchor: &TransistorAnchor<L>, delta: [L; 2]) -> (L, L, L) {
        let straight_difference =
            -delta[1] * self.inverse_forward_early - delta[0] * self.inverse_reverse_early;
        let voltage = [anchor.voltage[0] + delta[0], anchor.voltage[1] + delta[1]];
        let (early, slope) = self.early_at(voltage);
        let floor = L::splat(EARLY_FLOOR);
        let straight = early.min(anchor.early).below(floor);
        let difference = L::choose(straight, || early - anchor.early, || straight_difference);
        (early, difference, slope)
    }

    #[inline(always)]
    fn emitter_current(
        &self,
        anchor: &TransistorAnchor<L>,
        delta: L,
        forward: L,
        forward_slope: L,
    ) -> (L, L) {
        let mut current = forward * self.inverse_forward_gain;
        let mut slope = forward_slope * self.inverse_forward_gain;
        if let (Some(law), Some(at)) = (&self.emitter_leakage, &anchor.emitter_leakage) {
            let (leakage, leakage_slope) = law.deviation(at, delta);
            current += leakage;
            slope += leakage_slope;
        }
        if let (Some(law), Some(at)) = (&self.breakdown, &anchor.breakdown) {
            let (reverse, reverse_slope) = law.deviation(at, -delta);
            current -= reverse;
            slope += reverse_slope;
        }
        (current, slope)
    }

    #[inline(always)]
    fn collector_current(
        &self,
        anchor: &TransistorAnchor<L>,
        delta: L,
        reverse: L,
        reverse_slope: L,
    ) -> (L, L) {
        let mut current = reverse * self.inverse_reverse_gain;
        let mut slope = reverse_slope * self.inverse_reverse_gain;
        if let (Some(law), Some(at)) = (&self.collector_leakage, &anchor.collector_leakage) {
            let (leakage, leakage_slope) = law.deviation(at, delta);
            current += leakage;
            slope += leakage_slope;
        }
        (current, slope)
    }

    #[inline(always)]
    fn add_charges(
        &self,
        anchor: &TransistorAnchor<L>,
        delta: [L; 2],
        (forward, forward_slope): (L, L),
        (reverse, reverse_slope): (L, L),
        (scale, scale_difference, scale_slope): (L, L, [L; 2]),
        state: &mut TransistorState<L>,
    ) {
        let transit = self.forward_transit_time;
        let whole_forward = anchor.forward_current + forward;
        state.charge = [
            transit * (forward * scale + anchor.forward_current * scale_difference),
            self.reverse_transit_time * reverse,
        ];
        state.capacitance = [
            [
                transit * (forward_slope * scale + whole_forward * scale_slope[0]),
                transit * whole_forward * scale_slope[1],
            ],
            [L::zero(), self.reverse_transit_time * reverse_slope],
        ];
        if self.emitter_depletion.is_present() {
            let (charge, capacitance) = self
                .emitter_depletion
                .deviation(&anchor.emitter_depletion, delta[0]);
            state.charge[0] += charge;
            state.capacitance[0][0] += capacitance;
        }
        if self.collector_depletion.is_present() {
            let (charge, capacitance) = self
                .collector_depletion
                .deviation(&anchor.collector_depletion, delta[1]);
            state.charge[1] += charge;
            state.capacitance[1][1] += capacitance;
        }
    }

    /// 1/qb at the anchor.
    pub fn anchored_inverse_charge(anchor: &TransistorAnchor<L>) -> L {
        anchor.inverse_charge
    }
}
