//! Bias: node voltages, currents, region, small-signal parameters, supply, static swing.

use super::conditions_of;
use super::report::{BiasReport, DiodeBias, RailBias, Region, TransistorBias};
use super::swing::StaticSweep;
use crate::engine::bank::limits_of;
use crate::engine::{EngineError, Linearised, OperatingPoint, PortBank};
use crate::network::{Network, TransistorElement};
use crate::stage::Stage;

/// Small-signal gain is stated at this frequency, Hz.
const REFERENCE_FREQUENCY: f64 = 1000.0;

/// The bias of `stage`.
///
/// # Errors
/// Where there is no single stable operating point.
pub fn bias(stage: &Stage) -> Result<BiasReport, EngineError> {
    let network = Network::of(stage);
    let point = OperatingPoint::of(&network)?;
    let bank = point.bank(&network);
    let (currents, _) = bank.at_anchor();
    let linearised = Linearised::at(&network, &point);
    let gain = linearised
        .gain(REFERENCE_FREQUENCY)
        .ok_or(EngineError::Undetermined)?;
    let sweep = StaticSweep::new(&network, &point, gain.norm())?;
    let static_swing = sweep.swing();
    Ok(BiasReport {
        title: stage.title.clone(),
        conditions: conditions_of(stage),
        nodes: (1..network.nodes.len())
            .filter(|&node| node < network.named_nodes || is_device_node(&network, node))
            .map(|node| (network.nodes[node].clone(), point.nodes[node]))
            .collect(),
        transistors: (0..network.transistors.len())
            .map(|k| transistor(&network, &point, &bank, &currents, &linearised, k))
            .collect(),
        diodes: diodes(&network, &point, &currents),
        supply: supply(&network, &point, &currents),
        transfer: sweep.transfer(&static_swing),
        static_swing,
        gain_at_1khz: (gain.norm(), gain.arg().to_degrees()),
        output_bias: point.nodes[network.output],
        cautions: cautions(&network, &bank),
    })
}

fn is_device_node(network: &Network, node: usize) -> bool {
    network
        .transistors
        .iter()
        .any(|element| element.inner.contains(&node))
        || network
            .diodes
            .iter()
            .any(|element| element.inner.contains(&node))
}

fn cautions(network: &Network, bank: &PortBank<f64>) -> Vec<String> {
    let mut cautions = Vec::new();
    if bank.beyond_early_range(&vec![0.0; bank.ports()]) {
        cautions.push(
            "a transistor works beyond the range of its Early voltages; its gain there is an extrapolation".to_string(),
        );
    }
    for (k, element) in network.transistors.iter().enumerate() {
        let region = region(network, bank.anchor(), k);
        if region != Region::Active {
            cautions.push(format!(
                "{} is biased in {}, not in its active region",
                element.name,
                region.word()
            ));
        }
    }
    cautions
}

/// Region of transistor number `k` at port voltages `ports` in V.
pub fn region(network: &Network, ports: &[f64], k: usize) -> Region {
    let limits = limits_of(network);
    let on = |port: usize| ports[port] > limits[port].on_voltage();
    match (on(2 * k), on(2 * k + 1)) {
        (true, false) => Region::Active,
        (true, true) => Region::Saturation,
        (false, true) => Region::Reverse,
        (false, false) => Region::Cutoff,
    }
}

/// Currents into collector, base and emitter of transistor number `k`, A.
fn terminal_currents(element: &TransistorElement, currents: &[f64], k: usize) -> [f64; 3] {
    let sign = element.polarity.sign();
    let (to_emitter, to_collector) = (sign * currents[2 * k], sign * currents[2 * k + 1]);
    [-to_collector, to_emitter + to_collector, -to_emitter]
}

fn transistor(
    network: &Network,
    point: &OperatingPoint,
    bank: &PortBank<f64>,
    currents: &[f64],
    linearised: &Linearised,
    k: usize,
) -> TransistorBias {
    let element = &network.transistors[k];
    let [collector_current, base_current, _] = terminal_currents(element, currents, k);
    let [collector, base, emitter] = element.outer.map(|node| point.nodes[node]);
    let [g11, g12, g21, g22] =
        [0, 1, 2, 3].map(|entry| linearised.slopes().conductance[4 * k + entry]);
    // at constant VCE both junction voltages move with VBE; IC is the negative of the collector port's current
    let transconductance = -(g21 + g22);
    let base_conductance = g11 + g12 + g21 + g22;
    let positive = |conductance: f64| (conductance > 0.0).then(|| 1.0 / conductance);
    TransistorBias {
        name: element.name.clone(),
        collector_current,
        base_current,
        base_emitter: base - emitter,
        collector_emitter: collector - emitter,
        region: region(network, bank.anchor(), k),
        dissipation: (collector - emitter) * collector_current + (base - emitter) * base_current,
        transconductance,
        input_resistance: positive(base_conductance),
        // below rounding of the derivative the output resistance is infinite
        output_resistance: positive(g22).filter(|_| g22 > 1e-14 * transconductance.abs()),
    }
}

fn diodes(network: &Network, point: &OperatingPoint, currents: &[f64]) -> Vec<DiodeBias> {
    let first = 2 * network.transistors.len();
    network
        .diodes
        .iter()
        .enumerate()
        .map(|(k, element)| DiodeBias {
            name: element.name.clone(),
            current: currents[first + k],
            voltage: point.nodes[element.outer[0]] - point.nodes[element.outer[1]],
        })
        .collect()
}

/// What each rail delivers: the sum of the currents that leave its EMF node.
fn supply(network: &Network, point: &OperatingPoint, currents: &[f64]) -> Vec<RailBias> {
    network
        .rails
        .iter()
        .map(|(name, _, drive)| {
            let volts = network.drives[*drive].rest;
            let emf = (0..network.nodes.len())
                .find(|&node| network.places[node] == crate::network::Place::Known(*drive))
                .unwrap_or(0);
            let current = current_out_of(network, point, currents, emf);
            RailBias {
                name: name.clone(),
                volts,
                current,
                power: volts * current,
            }
        })
        .collect()
}

fn current_out_of(network: &Network, point: &OperatingPoint, currents: &[f64], node: usize) -> f64 {
    let side = |pins: [usize; 2]| (pins[0] == node) as i32 as f64 - (pins[1] == node) as i32 as f64;
    let resistive: f64 = network
        .conductances
        .iter()
        .map(|element| {
            let drop = point.nodes[element.pins[0]] - point.nodes[element.pins[1]];
            side(element.pins) * element.siemens * drop
        })
        .sum();
    let inductive: f64 = network
        .inductors
        .iter()
        .zip(&point.inductor_currents)
        .map(|(element, i)| side(element.pins) * i)
        .sum();
    let sourced: f64 = network
        .current_sources
        .iter()
        .map(|element| side(element.pins) * network.drives[element.drive].rest)
        .sum();
    let junctions: f64 = network
        .ports()
        .iter()
        .zip(currents)
        .map(|(port, current)| side([port.plus, port.minus]) * current)
        .sum();
    resistive + inductive + sourced + junctions
}
