//! Static swing and transfer curve: the mid-band load line.
//!
//! Every inductor is held at its bias current (a winding in the source passes the signal) and every capacitor that is a
//! short at mid-band at its bias voltage, load connected; device charges are left out. Which capacitors is decided from
//! the largest down: one whose time constant with the resistance it sees lies beyond 1/(2π·1 kHz) is held. (Holding a picofarad
//! load or compensation capacitor too would pin the output, which no one means by mid-band.)

use super::report::{Region, StaticSwing, TransferPoint};
use crate::engine::bias::OperatingPoint;
use crate::engine::linear::Linearised;
use crate::engine::step::{Acceptance, State, StepSolver};
use crate::engine::{EngineError, PortBank};
use crate::network::elements::{EMF, SOURCE};
use crate::network::{Network, Place, Reduction, Scheme};
use crate::numeric::Matrix;
use std::f64::consts::TAU;

/// Mid-band, Hz.
const MID_BAND: f64 = 1000.0;
/// The EMF is swept up to this, V.
const LARGEST_EMF: f64 = 1000.0;
/// Ratio between neighbouring sweep points.
const STRIDE: f64 = 1.1;
/// Points of the transfer curve.
const CURVE_POINTS: usize = 241;

/// The static network, ready to be swept.
pub struct StaticSweep {
    network: Network,
    bank: PortBank<f64>,
    reduction: Reduction<f64>,
    output_bias: f64,
    gain: f64,
}

/// A point of a sweep.
struct Point {
    v: Vec<f64>,
    output: f64,
}

/// Where a sweep ended.
struct End {
    emf: f64,
    output: f64,
    part: String,
    region: Region,
}

impl StaticSweep {
    /// The mid-band static network of `network` at `point`, whose small-signal gain is about `gain`.
    ///
    /// # Errors
    /// Where holding the capacitors leaves a singular network.
    pub fn new(network: &Network, point: &OperatingPoint, gain: f64) -> Result<Self, EngineError> {
        let held = mid_band(network, point);
        let scheme = Scheme {
            rates: Matrix::zero(1, 1),
        };
        let reduction =
            Reduction::of(&held, EMF, &scheme).map_err(|_| EngineError::Undetermined)?;
        Ok(StaticSweep {
            bank: point.bank(network).without_charge(),
            network: held,
            reduction,
            output_bias: point.nodes[network.output],
            gain,
        })
    }

    /// How far the output can go each way before a transistor leaves its active region.
    pub fn swing(&self) -> StaticSwing {
        let mut ends = [self.sweep(1.0), self.sweep(-1.0)];
        // an inverting stage swings down on a rising EMF
        ends.sort_by(|a, b| {
            let output = |end: &Option<End>| end.as_ref().map_or(0.0, |end| end.output);
            output(b).total_cmp(&output(a))
        });
        let [up, down] = ends;
        let (up, down) = match (up, down) {
            (Some(a), Some(b)) => (Some(a), Some(b)),
            (Some(a), None) | (None, Some(a)) if a.output >= 0.0 => (Some(a), None),
            (a, b) => (None, a.or(b)),
        };
        StaticSwing {
            up_emf: up.as_ref().map(|end| end.emf),
            down_emf: down.as_ref().map(|end| end.emf),
            up: up.as_ref().map(|end| end.output.max(0.0)),
            down: down.as_ref().map(|end| (-end.output).max(0.0)),
            up_limited_by: up.map(|end| (end.part, end.region)),
            down_limited_by: down.map(|end| (end.part, end.region)),
        }
    }

    /// Raise the EMF in the direction of `sign` until a transistor that is active at the bias no longer is.
    fn sweep(&self, sign: f64) -> Option<End> {
        let rest = self.rest();
        let mut emf = 1e-3 * 0.025 / (1.0 + self.gain);
        let mut last = (0.0, rest);
        while emf < LARGEST_EMF {
            let next = self.approach(&last, sign * emf)?;
            if self.left_active(&next.v).is_some() {
                return self.narrow(last, sign * emf);
            }
            last = (sign * emf, next);
            emf *= STRIDE;
        }
        None
    }

    /// The EMF between `good` and `bad` where the first transistor leaves its active region.
    fn narrow(&self, mut good: (f64, Point), mut bad: f64) -> Option<End> {
        let mut end = None;
        for _ in 0..50 {
            let middle = 0.5 * (good.0 + bad);
            let point = self.approach(&good, middle)?;
            match self.left_active(&point.v) {
                Some((part, region)) => {
                    bad = middle;
                    end = Some(End {
                        emf: middle,
                        output: point.output,
                        part,
                        region,
                    });
                }
                None => good = (middle, point),
            }
        }
        end.or_else(|| {
            let point = self.solve(bad, &good.1.v)?;
            let (part, region) = self.left_active(&point.v)?;
            Some(End {
                emf: bad,
                output: point.output,
                part,
                region,
            })
        })
    }

    /// The point at `emf` from a neighbouring one, in smaller strides where one is too wide for Newton's method.
    fn approach(&self, from: &(f64, Point), emf: f64) -> Option<Point> {
        for strides in [1, 4, 16, 64] {
            let mut v = from.1.v.clone();
            let mut reached = None;
            for k in 1..=strides {
                let at = from.0 + (emf - from.0) * f64::from(k) / f64::from(strides);
                reached = self.solve(at, &v);
                match &reached {
                    Some(point) => v.clone_from(&point.v),
                    None => break,
                }
            }
            if reached.is_some() {
                return reached;
            }
        }
        None
    }

    fn rest(&self) -> Point {
        Point {
            v: vec![0.0; self.bank.ports()],
            output: 0.0,
        }
    }

    fn left_active(&self, v: &[f64]) -> Option<(String, Region)> {
        let at_bias = self.bank.anchor();
        let now: Vec<f64> = v
            .iter()
            .zip(at_bias)
            .map(|(v, anchor)| v + anchor)
            .collect();
        (0..self.network.transistors.len()).find_map(|k| {
            let region = super::bias::region(&self.network, &now, k);
            let was_active = super::bias::region(&self.network, at_bias, k) == Region::Active;
            (was_active && region != Region::Active)
                .then(|| (self.network.transistors[k].name.clone(), region))
        })
    }

    fn solve(&self, emf: f64, guess: &[f64]) -> Option<Point> {
        let mut stepper = StepSolver::new(&self.bank, 1);
        let state = State::at_bias(self.network.linear_states(), self.bank.ports());
        let mut v = guess.to_vec();
        let acceptance = Acceptance { leftover: 1e-13 };
        stepper
            .solve(
                &self.bank,
                &self.reduction,
                &state,
                &[emf],
                &mut v,
                acceptance,
            )
            .ok()?;
        let mut output = [0.0];
        stepper.outputs(&self.reduction, &state, &[emf], &mut output);
        Some(Point {
            v,
            output: output[0],
        })
    }

    /// The transfer curve, a little beyond the swing on both sides.
    pub fn transfer(&self, swing: &StaticSwing) -> Vec<TransferPoint> {
        let reach = |emf: Option<f64>| emf.map(f64::abs);
        let (a, b) = (reach(swing.up_emf), reach(swing.down_emf));
        let fallback = a.or(b).unwrap_or(1.0);
        let up_is_positive = swing.up_emf.map_or_else(
            || swing.down_emf.is_some_and(|emf| emf < 0.0),
            |emf| emf > 0.0,
        );
        let (positive, negative) = if up_is_positive { (a, b) } else { (b, a) };
        let high = 1.4 * positive.unwrap_or(fallback);
        let low = -1.4 * negative.unwrap_or(fallback);
        let mut points = self.branch(low);
        points.reverse();
        points.extend(self.branch(high).into_iter().skip(1));
        points
    }

    /// From the bias to `end`.
    fn branch(&self, end: f64) -> Vec<TransferPoint> {
        let half = CURVE_POINTS / 2;
        let mut v = vec![0.0; self.bank.ports()];
        let mut points = Vec::with_capacity(half + 1);
        for k in 0..=half {
            let emf = end * k as f64 / half as f64;
            let Some(point) = self.solve(emf, &v) else {
                break;
            };
            points.push(TransferPoint {
                emf,
                output: self.output_bias + point.output,
            });
            v = point.v;
        }
        points
    }
}

/// The network with mid-band shorts merged and mid-band opens left out, as seen by deviations from the bias.
fn mid_band(network: &Network, point: &OperatingPoint) -> Network {
    let mut now = network.clone();
    let mut capacitors: Vec<_> = std::mem::take(&mut now.capacitors);
    let inductors: Vec<_> = std::mem::take(&mut now.inductors);
    capacitors.sort_by(|a, b| b.farads.total_cmp(&a.farads));
    let longest = 1.0 / (TAU * MID_BAND);
    for inductor in inductors {
        // a winding in the source carries the signal; any other holds its bias current and is left out
        if inductor.name == SOURCE {
            join(&mut now, inductor.pins, inductor.ohms);
        }
    }
    for capacitor in capacitors {
        if resistance_between(&now, point, capacitor.pins) * capacitor.farads > longest {
            merge(&mut now, capacitor.pins);
        }
    }
    now
}

/// The small-signal resistance between two nodes at DC, every drive at rest.
fn resistance_between(network: &Network, point: &OperatingPoint, pins: [usize; 2]) -> f64 {
    Linearised::at(network, point)
        .impedance_between(pins[0], pins[1], 0.0)
        .map_or(f64::INFINITY, |impedance| impedance.re.abs())
}

fn join(network: &mut Network, pins: [usize; 2], ohms: f64) {
    if ohms > 0.0 {
        network.conductances.push(crate::network::Conductance {
            name: String::new(),
            pins,
            siemens: 1.0 / ohms,
        });
    } else {
        merge(network, pins);
    }
}

/// Make one node of two. In deviations every rail is ground; the EMF keeps its node.
fn merge(network: &mut Network, pins: [usize; 2]) {
    let fixed = |node: usize| !matches!(network.places[node], Place::Unknown(_));
    let [keep, gone] = if fixed(pins[1]) {
        [pins[1], pins[0]]
    } else {
        pins
    };
    if keep == gone || fixed(gone) {
        return;
    }
    let rename = |node: &mut usize| {
        if *node == gone {
            *node = keep;
        }
    };
    network
        .conductances
        .iter_mut()
        .flat_map(|e| &mut e.pins)
        .for_each(rename);
    network
        .current_sources
        .iter_mut()
        .flat_map(|e| &mut e.pins)
        .for_each(rename);
    network
        .inductors
        .iter_mut()
        .flat_map(|e| &mut e.pins)
        .for_each(rename);
    network
        .transistors
        .iter_mut()
        .flat_map(|e| e.inner.iter_mut().chain(&mut e.outer))
        .for_each(rename);
    network
        .diodes
        .iter_mut()
        .flat_map(|e| e.inner.iter_mut().chain(&mut e.outer))
        .for_each(rename);
    rename(&mut network.input);
    rename(&mut network.output);
    network
        .conductances
        .retain(|element| element.pins[0] != element.pins[1]);
    network.places[gone] = Place::Ground;
    network.unknowns = 0;
    for place in &mut network.places {
        if let Place::Unknown(number) = place {
            *number = network.unknowns;
            network.unknowns += 1;
        }
    }
}
