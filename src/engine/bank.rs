//! All junction ports of a stage, evaluated together as deviations from an anchor.

use crate::device::{DiodeAnchor, DiodeLaw, TransistorAnchor, TransistorLaw};
use crate::network::Network;
use crate::numeric::{Lane, Matrix};

/// Laws and anchors of every port: (base–emitter, base–collector) of each transistor, then the diodes.
#[derive(Clone, Debug)]
pub struct PortBank<L> {
    transistors: Vec<(TransistorLaw<L>, TransistorAnchor<L>)>,
    diodes: Vec<(DiodeLaw<L>, DiodeAnchor<L>)>,
    anchor: Vec<L>,
    limits: Vec<JunctionLimits>,
    stores_charge: bool,
}

/// The voltages that rule how far a junction may move in one Newton step.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct JunctionLimits {
    /// n·VT, V.
    pub width: f64,
    /// Forward voltage above which the exponential runs away, V.
    pub knee: f64,
    /// Breakdown voltage, V; infinite for none.
    pub breakdown: f64,
    /// Voltage scale of the breakdown exponential, V.
    pub breakdown_width: f64,
    /// Scale current of the junction, A.
    pub scale: f64,
}

impl JunctionLimits {
    fn new(width: f64, scale: f64, breakdown: f64, breakdown_width: f64) -> Self {
        // where the exponential's radius of curvature is smallest, for a conductance of 1 S
        let knee = width * (width / (std::f64::consts::SQRT_2 * scale)).ln().max(1.0);
        JunctionLimits {
            width,
            knee,
            breakdown,
            breakdown_width,
            scale,
        }
    }

    /// 1/(2·width), by which the square of a correction becomes what it leaves over.
    #[inline(always)]
    pub fn half_inverse_width(&self) -> f64 {
        0.5 / self.width
    }

    /// The forward voltage from which a junction counts as on (the region rule of the project's definitions): the
    /// smaller of 0.3 V and the voltage of max(1 nA, 10·Is).
    pub fn on_voltage(&self) -> f64 {
        let current = (10.0 * self.scale).max(1e-9);
        0.3f64.min(self.width * (current / self.scale).ln_1p())
    }
}

/// What the ports do at one set of voltages; reused from call to call.
#[derive(Clone, Debug)]
pub struct Evaluation<L> {
    /// Port currents, A, as deviations.
    pub current: Vec<L>,
    /// Port charges, C, as deviations.
    pub charge: Vec<L>,
    /// ∂current/∂voltage: a 2×2 block a transistor, row-major, then one entry a diode.
    pub conductance: Vec<L>,
    /// ∂charge/∂voltage, likewise.
    pub capacitance: Vec<L>,
}

impl<L: Lane> Evaluation<L> {
    /// Storage for `bank`.
    pub fn for_bank(bank: &PortBank<L>) -> Self {
        let ports = bank.ports();
        let blocks = 4 * bank.transistors.len() + bank.diodes.len();
        Evaluation {
            current: vec![L::zero(); ports],
            charge: vec![L::zero(); ports],
            conductance: vec![L::zero(); blocks],
            capacitance: vec![L::zero(); blocks],
        }
    }
}

impl PortBank<f64> {
    /// The ports of `network` anchored at `voltages` in V, one a port.
    pub fn anchored(network: &Network, voltages: &[f64]) -> Self {
        let paired = 2 * network.transistors.len();
        let transistors: Vec<_> = network
            .transistors
            .iter()
            .zip(voltages.chunks_exact(2))
            .map(|(element, pair)| (element.law.clone(), element.law.anchor([pair[0], pair[1]])))
            .collect();
        let diodes: Vec<_> = network
            .diodes
            .iter()
            .zip(&voltages[paired..])
            .map(|(element, v)| (element.law.clone(), element.law.anchor(*v)))
            .collect();
        PortBank {
            limits: limits_of(network),
            stores_charge: network
                .transistors
                .iter()
                .any(|element| element.law.stores_charge())
                || network
                    .diodes
                    .iter()
                    .any(|element| element.law.stores_charge()),
            transistors,
            diodes,
            anchor: voltages.to_vec(),
        }
    }

    /// Currents in A and charges in C at the anchor itself, absolute.
    pub fn at_anchor(&self) -> (Vec<f64>, Vec<f64>) {
        let mut currents = Vec::with_capacity(self.ports());
        let mut charges = Vec::with_capacity(self.ports());
        for (law, anchor) in &self.transistors {
            let (current, charge) = law.at_anchor(anchor);
            currents.extend(current);
            charges.extend(charge);
        }
        for (law, anchor) in &self.diodes {
            let (current, charge) = law.at_anchor(anchor);
            currents.push(current);
            charges.push(charge);
        }
        (currents, charges)
    }
}

impl<L: Lane> PortBank<L> {
    /// Number of ports.
    pub fn ports(&self) -> usize {
        self.anchor.len()
    }

    /// Whether any device stores charge.
    pub fn stores_charge(&self) -> bool {
        self.stores_charge
    }

    /// The same ports with every charge left out.
    pub fn without_charge(mut self) -> Self {
        self.stores_charge = false;
        self
    }

    /// Anchor voltages, V.
    pub fn anchor(&self) -> &[L] {
        &self.anchor
    }

    /// Limits of each port's junction.
    pub fn limits(&self) -> &[JunctionLimits] {
        &self.limits
    }

    /// Whether any transistor's base-charge denominator has left its straight line at `delta` volts from the anchor.
    pub fn beyond_early_range(&self, delta: &[L]) -> bool {
        self.transistors.iter().enumerate().any(|(k, (law, _))| {
            let at = |port: usize| self.anchor[port] + delta[port];
            law.beyond_early_range([at(2 * k), at(2 * k + 1)])
        })
    }

    /// Evaluate every port at `delta` volts from the anchor.
    #[inline(always)]
    pub fn evaluate(&self, delta: &[L], into: &mut Evaluation<L>) {
        for (k, (law, anchor)) in self.transistors.iter().enumerate() {
            let state = law.deviation(anchor, [delta[2 * k], delta[2 * k + 1]]);
            for port in 0..2 {
                into.current[2 * k + port] = state.current[port];
                into.charge[2 * k + port] = state.charge[port];
                for other in 0..2 {
                    into.conductance[4 * k + 2 * port + other] = state.conductance[port][other];
                    into.capacitance[4 * k + 2 * port + other] = state.capacitance[port][other];
                }
            }
        }
        let paired = 2 * self.transistors.len();
        let blocks = 4 * self.transistors.len();
        for (k, (law, anchor)) in self.diodes.iter().enumerate() {
            let state = law.deviation(anchor, delta[paired + k]);
            into.current[paired + k] = state.current;
            into.charge[paired + k] = state.charge;
            into.conductance[blocks + k] = state.conductance;
            into.capacitance[blocks + k] = state.capacitance;
        }
    }

    /// `matrix[:, first…] += left[:, first…]·B` where B holds `blocks` on its diagonal (a device's derivatives) and
    /// `first` is the column of the first port.
    #[inline(always)]
    pub fn add_times_blocks(
        &self,
        left: &Matrix<L>,
        blocks: &[L],
        first: usize,
        matrix: &mut Matrix<L>,
    ) {
        let paired = 2 * self.transistors.len();
        let singles = &blocks[4 * self.transistors.len()..];
        for row in 0..matrix.rows() {
            let source = &left.row(row)[first..first + self.ports()];
            let target = &mut matrix.row_mut(row)[first..first + self.ports()];
            for (k, block) in blocks[..4 * self.transistors.len()]
                .chunks_exact(4)
                .enumerate()
            {
                let (a, b) = (source[2 * k], source[2 * k + 1]);
                target[2 * k] += a * block[0] + b * block[2];
                target[2 * k + 1] += a * block[1] + b * block[3];
            }
            for (k, single) in singles.iter().enumerate() {
                target[paired + k] += source[paired + k] * *single;
            }
        }
    }

    /// [`PortBank::add_times_blocks`] for a number of ports known to the compiler.
    #[inline(always)]
    pub fn add_times_blocks_small<const P: usize>(
        &self,
        left: &[[L; P]; P],
        blocks: &[L],
        matrix: &mut [[L; P]; P],
    ) {
        let transistors = self.transistors.len();
        for (k, block) in blocks[..4 * transistors].chunks_exact(4).enumerate() {
            for (target, source) in matrix.iter_mut().zip(left) {
                let (a, b) = (source[2 * k], source[2 * k + 1]);
                target[2 * k] += a * block[0] + b * block[2];
                target[2 * k + 1] += a * block[1] + b * block[3];
            }
        }
        for (port, single) in (2 * transistors..P).zip(&blocks[4 * transistors..]) {
            for (target, source) in matrix.iter_mut().zip(left) {
                target[port] += source[port] * *single;
            }
        }
    }

    /// The block-diagonal B of [`PortBank::add_times_blocks`] written out into a zero matrix.
    #[inline(always)]
    pub fn expand_blocks<const P: usize>(&self, blocks: &[L], matrix: &mut [[L; P]; P]) {
        let transistors = self.transistors.len();
        for (k, block) in blocks[..4 * transistors].chunks_exact(4).enumerate() {
            matrix[2 * k][2 * k] = block[0];
            matrix[2 * k][2 * k + 1] = block[1];
            matrix[2 * k + 1][2 * k] = block[2];
            matrix[2 * k + 1][2 * k + 1] = block[3];
        }
        for (port, single) in (2 * transistors..P).zip(&blocks[4 * transistors..]) {
            matrix[port][port] = *single;
        }
    }

    /// `into[p] += (B·x)[p]` with the block-diagonal B of [`PortBank::add_times_blocks`].
    #[inline(always)]
    pub fn add_blocks_times(&self, blocks: &[L], x: &[L], into: &mut [L]) {
        let paired = 2 * self.transistors.len();
        let singles = &blocks[4 * self.transistors.len()..];
        for (k, block) in blocks[..4 * self.transistors.len()]
            .chunks_exact(4)
            .enumerate()
        {
            let (a, b) = (x[2 * k], x[2 * k + 1]);
            into[2 * k] += block[0] * a + block[1] * b;
            into[2 * k + 1] += block[2] * a + block[3] * b;
        }
        for (k, single) in singles.iter().enumerate() {
            into[paired + k] += *single * x[paired + k];
        }
    }
}

/// The limits of every port of `network`.
pub fn limits_of(network: &Network) -> Vec<JunctionLimits> {
    let mut limits = Vec::with_capacity(network.port_count());
    for element in &network.transistors {
        let law = &element.law;
        let [emitter_width, collector_width] = law.widths();
        let [emitter_scale, collector_scale] = law.scales();
        limits.push(JunctionLimits::new(
            emitter_width,
            emitter_scale,
            law.breakdown_voltage(),
            law.thermal_voltage(),
        ));
        limits.push(JunctionLimits::new(
            collector_width,
            collector_scale,
            f64::INFINITY,
            collector_width,
        ));
    }
    for element in &network.diodes {
        let law = &element.law;
        limits.push(JunctionLimits::new(
            law.width(),
            law.scale(),
            law.breakdown_voltage(),
            law.breakdown_width(),
        ));
    }
    limits
}
