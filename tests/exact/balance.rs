//! Charge and energy over one steady period of a clipping stage.
//!
//! The unreduced nodal equations are solved here at every collocation point with the port currents of the solution as
//! sources; what they give back must be the solution's own port voltages and output, and must balance.

use super::*;
use cleanswing::engine::bank::Evaluation;
use cleanswing::engine::periodic::PeriodicOptions;
use cleanswing::engine::scheme::Radau;
use cleanswing::engine::{OperatingPoint, PeriodicSolution, PeriodicSolver, PortBank};
use cleanswing::network::{Assembly, Network, Place};
use nalgebra::{DMatrix, DVector};
use std::collections::HashMap;
use std::f64::consts::TAU;

const FREQUENCY: f64 = 1e3;

/// Stages with a level that drives them well into clipping, V rms.
const CLIPPING: [(&str, f64); 8] = [
    ("a_plain_common_emitter", 0.03),
    ("b_split_emitter", 0.51),
    ("c_collector_feedback", 0.12),
    ("d_emitter_follower", 2.6),
    ("e_series_feedback_pair", 0.31),
    ("f_complementary_pair", 0.46),
    ("g_long_tailed_pair", 0.21),
    ("h_diode_clipper", 0.058),
];

struct Period {
    network: Network,
    point: OperatingPoint,
    bank: PortBank<f64>,
    solution: PeriodicSolution,
    peak: f64,
}

fn period(name: &str, rms: f64) -> Period {
    let network = Network::of(&open(name));
    let point = OperatingPoint::of(&network).unwrap();
    let peak = rms * std::f64::consts::SQRT_2;
    let solution = PeriodicSolver::new(&network, &point, FREQUENCY, PeriodicOptions::default())
        .unwrap()
        .sine(peak, None);
    Period {
        solution: solution.unwrap_or_else(|error| panic!("{name}: {error}")),
        bank: point.bank(&network),
        network,
        point,
        peak,
    }
}

impl Period {
    fn ports(&self) -> usize {
        self.bank.ports()
    }

    /// Deviations of the ports at sample `k`.
    fn at(&self, k: usize) -> Evaluation<f64> {
        let mut evaluation = Evaluation::for_bank(&self.bank);
        let ports = self.ports();
        self.bank.evaluate(
            &self.solution.ports[k * ports..(k + 1) * ports],
            &mut evaluation,
        );
        evaluation
    }

    fn emf(&self, phase: f64) -> f64 {
        self.peak * (TAU * phase).sin()
    }
}

#[test]
fn the_mean_current_of_every_capacitor_is_zero() {
    for (name, rms) in CLIPPING {
        let p = period(name, rms);
        let ports = p.ports();
        let (mut volts, mut amperes) = (vec![0.0; ports], vec![0.0; ports]);
        for (k, weight) in p.solution.weights.iter().enumerate() {
            let evaluation = p.at(k);
            for port in 0..ports {
                volts[port] += weight * p.solution.ports[k * ports + port];
                amperes[port] += weight * evaluation.current[port];
            }
        }
        // no capacitor carries a mean current exactly if the means obey the network with every capacitor left out
        let assembly = Assembly::of(&p.network, 0.0);
        let probes = assembly.port_probes(&p.network);
        let mut right = DVector::zeros(assembly.size());
        for (probe, current) in probes.iter().zip(&amperes) {
            right -= &probe.unknowns * *current;
        }
        let means = assembly.conductance.clone().lu().solve(&right).unwrap();
        let largest = volts.iter().fold(0.0f64, |a, v| a.max(v.abs()));
        for (port, probe) in probes.iter().enumerate() {
            let found = probe.unknowns.dot(&means);
            // collocation conserves charge exactly; the shooting closes the period to 1e-11, which a coupling
            // capacitor of many periods' time constant turns into as much of a mean current times that ratio
            let error = (found - volts[port]).abs() / largest;
            assert!(
                error < 1e-9,
                "{name}: mean of port {port} is {}, its resistors say {found}",
                volts[port]
            );
        }
        let mean: f64 = p
            .solution
            .weights
            .iter()
            .zip(&p.solution.outputs)
            .map(|(w, y)| w * y)
            .sum();
        let wanted = assembly
            .probe(&p.network, p.network.output, 0)
            .unknowns
            .dot(&means);
        println!(
            "{name}: mean of the output {mean:.2e} V of {:.3} V rms",
            p.solution.rms()
        );
        assert!(
            (mean - wanted).abs() < 1e-9 * p.solution.rms(),
            "{name}: output {mean} against {wanted}"
        );
    }
}

/// Node voltages and inductor currents (deviations, n unknowns) at every collocation point, by the unreduced equations
/// with the current of every capacitor as one more unknown: `v_i − Σ Tij·i_j/C = v0`, `L·Σ αij·(i_j − i0) + R·i = va − vb`.
fn nodes(p: &Period) -> Vec<DVector<f64>> {
    let assembly = Assembly::of(&p.network, 0.0);
    let radau = Radau::new(p.solution.stages);
    let (n, stages) = (assembly.size(), p.solution.stages);
    let capacitors = &p.network.capacitors;
    let size = n + capacitors.len();
    let ports = assembly.port_probes(&p.network);
    let charges = assembly.state_probes(&p.network);
    let incidence = assembly.state_incidence(&p.network);
    let emf_g = assembly.drive_conductance.column(0).clone_owned();
    assert!(p.network.inductors.is_empty(), "the stages here have none");

    let mut volts: Vec<f64> = capacitors
        .iter()
        .zip(&p.solution.start.linear)
        .map(|(capacitor, charge)| charge / capacitor.farads)
        .collect();
    let mut factored = HashMap::new();
    let mut found = Vec::new();
    let currents = port_charge_currents(p);
    for (element, (start, length)) in p.solution.elements.iter().enumerate() {
        let rates = radau.scheme(length / FREQUENCY).rates;
        let times = DMatrix::from_fn(stages, stages, |i, k| rates[(i, k)])
            .try_inverse()
            .unwrap();
        let lu = factored.entry(length.to_bits()).or_insert_with(|| {
            let mut matrix = DMatrix::zeros(size * stages, size * stages);
            for (i, k) in (0..stages).flat_map(|i| (0..stages).map(move |k| (i, k))) {
                let mut block = DMatrix::zeros(size, size);
                for (c, capacitor) in capacitors.iter().enumerate() {
                    block[(n + c, n + c)] = -times[(i, k)] / capacitor.farads;
                    if i == k {
                        let across = &charges[c].unknowns / capacitor.farads;
                        block
                            .view_mut((n + c, 0), (1, n))
                            .copy_from(&across.transpose());
                        block.view_mut((0, n + c), (n, 1)).copy_from(&incidence[c]);
                    }
                }
                if i == k {
                    block
                        .view_mut((0, 0), (n, n))
                        .copy_from(&assembly.conductance);
                }
                matrix
                    .view_mut((i * size, k * size), (size, size))
                    .copy_from(&block);
            }
            matrix.full_piv_lu()
        });
        let mut right = DVector::zeros(size * stages);
        for i in 0..stages {
            let k = element * stages + i;
            let emf = p.emf(start + radau.nodes[i] * length);
            let mut row = &emf_g * emf;
            let conducted = p.at(k).current;
            for (port, probe) in ports.iter().enumerate() {
                row -= &probe.unknowns * (conducted[port] + currents[k][port]);
            }
            right.rows_mut(i * size, n).copy_from(&row);
            for (c, capacitor) in capacitors.iter().enumerate() {
                right[i * size + n + c] = volts[c] - charges[c].drives[0] / capacitor.farads * emf;
            }
        }
        let solution = lu.solve(&right).unwrap();
        for (c, capacitor) in capacitors.iter().enumerate() {
            let moved: f64 = (0..stages)
                .map(|k| times[(stages - 1, k)] * solution[k * size + n + c])
                .sum();
            volts[c] += moved / capacitor.farads;
        }
        found.extend((0..stages).map(|i| solution.rows(i * size, n).clone_owned()));
    }
    found
}

#[test]
fn the_unreduced_nodal_equations_give_back_the_solution() {
    for (name, rms) in CLIPPING {
        let p = period(name, rms);
        let assembly = Assembly::of(&p.network, 0.0);
        let probes = assembly.port_probes(&p.network);
        let output = assembly.probe(&p.network, p.network.output, 0);
        let largest = p.solution.ports.iter().fold(0.0f64, |a, v| a.max(v.abs()));
        let mut worst = 0.0f64;
        for (k, x) in nodes(&p).iter().enumerate() {
            let emf = p.emf(p.solution.phases[k]);
            for (port, probe) in probes.iter().enumerate() {
                let v = probe.unknowns.dot(x) + probe.drives[0] * emf;
                worst = worst.max((v - p.solution.ports[k * p.ports() + port]).abs());
            }
            let y = output.unknowns.dot(x) + output.drives[0] * emf;
            worst = worst.max((y - p.solution.outputs[k]).abs());
        }
        println!(
            "{name}: nodal equations within {:.1e} of the largest voltage",
            worst / largest
        );
        // Newton leaves 1e-15 of the linear swing at a port, the shortest elements amplify rounding of the capacitor
        // conductances by some decades
        assert!(
            worst < 1e-10 * largest,
            "{name}: off by {worst:e} V of {largest}"
        );
    }
}

/// Mean power delivered by rails and EMF and mean power dissipated, W.
fn powers(p: &Period) -> (f64, f64) {
    let network = &p.network;
    let (currents, _) = p.bank.at_anchor();
    let charge_rates = port_charge_currents(p);
    let (mut delivered, mut dissipated) = (0.0, 0.0);
    for (k, (x, weight)) in nodes(p).iter().zip(&p.solution.weights).enumerate() {
        let emf = p.emf(p.solution.phases[k]);
        let volts = |node: usize| match network.places[node] {
            Place::Ground => 0.0,
            Place::Known(0) => emf,
            Place::Known(_) => p.point.nodes[node],
            Place::Unknown(number) => p.point.nodes[node] + x[number],
        };
        let known = |node: usize| matches!(network.places[node], Place::Known(_));
        for element in &network.conductances {
            let [a, b] = element.pins;
            let current = element.siemens * (volts(a) - volts(b));
            dissipated += weight * current * (volts(a) - volts(b));
            for (node, current) in [(a, current), (b, -current)] {
                if known(node) {
                    delivered += weight * current * volts(node);
                }
            }
        }
        let evaluation = p.at(k);
        for (number, port) in network.ports().iter().enumerate() {
            let conducted = currents[number] + evaluation.current[number];
            let voltage = volts(port.plus) - volts(port.minus);
            dissipated += weight * conducted * voltage;
            let whole = conducted + charge_rates[k][number];
            for (node, current) in [(port.plus, whole), (port.minus, -whole)] {
                if known(node) {
                    delivered += weight * current * volts(node);
                }
            }
        }
        // no capacitor of these stages stands at the EMF; one at a rail carries no mean current at constant volts
    }
    (delivered, dissipated)
}

/// dQ/dt of every port at every point.
fn port_charge_currents(p: &Period) -> Vec<Vec<f64>> {
    let stages = p.solution.stages;
    let radau = Radau::new(stages);
    let mut start = p.solution.start.charge.clone();
    let mut result = Vec::new();
    for (element, (_, length)) in p.solution.elements.iter().enumerate() {
        let rates = radau.scheme(length / FREQUENCY).rates;
        let points: Vec<_> = (0..stages)
            .map(|k| p.at(element * stages + k).charge)
            .collect();
        for i in 0..stages {
            let rate = |port: usize| -> f64 {
                (0..stages)
                    .map(|k| rates[(i, k)] * (points[k][port] - start[port]))
                    .sum()
            };
            result.push((0..p.ports()).map(rate).collect());
        }
        start = points[stages - 1].clone();
    }
    result
}

#[test]
fn the_power_delivered_is_the_power_dissipated() {
    for (name, rms) in CLIPPING {
        let p = period(name, rms);
        let (delivered, dissipated) = powers(&p);
        let rest: f64 = {
            let report = cleanswing::measure::bias::bias(&open(name)).unwrap();
            report.supply.iter().map(|rail| rail.power).sum()
        };
        println!(
            "{name}: {:.9} mW delivered, {:.9} mW dissipated, {:.3} mW at rest, apart {:.1e}",
            1e3 * delivered,
            1e3 * dissipated,
            1e3 * rest,
            delivered / dissipated - 1.0
        );
        // v·dq/dt of a capacitor has one degree more than the quadrature is exact for: the sixth power of the step,
        // which the mesh keeps below the solver's 3e-8 of H1
        assert!(
            (delivered / dissipated - 1.0).abs() < 1e-10,
            "{name}: {delivered} W against {dissipated} W"
        );
    }
}
