//! The nodal equations of the linear part.
//!
//! With x = (unknown node voltages, inductor currents), u the known voltages and currents, j the port currents:
//!
//! ```text
//! G·x + C·dx/dt + P·j = Gu·u + Cu·du/dt
//! ```
//! Rows are Kirchhoff's current law (currents leaving the node), then one row R·i + L·di/dt − (va − vb) = 0 for each
//! inductor.

use super::elements::{Network, Place, Port};
use nalgebra::{DMatrix, DVector};

/// The matrices of the linear part, without the devices.
#[derive(Clone, Debug)]
pub struct Assembly {
    /// G, n × n.
    pub conductance: DMatrix<f64>,
    /// C, n × n.
    pub capacitance: DMatrix<f64>,
    /// Gu, n × drives.
    pub drive_conductance: DMatrix<f64>,
    /// Cu, n × drives.
    pub drive_capacitance: DMatrix<f64>,
    /// Number of unknown node voltages; inductor currents follow them in x.
    pub nodes: usize,
}

/// A voltage difference as a row over x and a row over u.
#[derive(Clone, Debug)]
pub struct Probe {
    /// Coefficients of x, n.
    pub unknowns: DVector<f64>,
    /// Coefficients of u, drives.
    pub drives: DVector<f64>,
}

impl Assembly {
    /// The matrices of `network`, with `port_conductance` in S put across every junction port.
    pub fn of(network: &Network, port_conductance: f64) -> Self {
        let size = network.unknowns + network.inductors.len();
        let drives = network.drives.len();
        let mut assembly = Assembly {
            conductance: DMatrix::zeros(size, size),
            capacitance: DMatrix::zeros(size, size),
            drive_conductance: DMatrix::zeros(size, drives),
            drive_capacitance: DMatrix::zeros(size, drives),
            nodes: network.unknowns,
        };
        for element in &network.conductances {
            let pins = element.pins.map(|node| network.places[node]);
            stamp(
                &mut assembly.conductance,
                &mut assembly.drive_conductance,
                pins,
                element.siemens,
            );
        }
        for port in network.ports() {
            let pins = [network.places[port.plus], network.places[port.minus]];
            stamp(
                &mut assembly.conductance,
                &mut assembly.drive_conductance,
                pins,
                port_conductance,
            );
        }
        for element in &network.capacitors {
            let pins = element.pins.map(|node| network.places[node]);
            stamp(
                &mut assembly.capacitance,
                &mut assembly.drive_capacitance,
                pins,
                element.farads,
            );
        }
        assembly.add_inductors(network);
        assembly.add_current_sources(network);
        assembly
    }

    /// Number of unknowns n.
    pub fn size(&self) -> usize {
        self.conductance.nrows()
    }

    fn add_inductors(&mut self, network: &Network) {
        for (k, inductor) in network.inductors.iter().enumerate() {
            let row = self.nodes + k;
            self.conductance[(row, row)] = inductor.ohms;
            self.capacitance[(row, row)] = inductor.henries;
            for (node, sign) in inductor.pins.into_iter().zip([1.0, -1.0]) {
                match network.places[node] {
                    Place::Ground => {}
                    Place::Known(drive) => self.drive_conductance[(row, drive)] += sign,
                    Place::Unknown(unknown) => {
                        self.conductance[(row, unknown)] -= sign;
                        self.conductance[(unknown, row)] += sign;
                    }
                }
            }
        }
    }

    fn add_current_sources(&mut self, network: &Network) {
        for source in &network.current_sources {
            for (node, sign) in source.pins.into_iter().zip([-1.0, 1.0]) {
                if let Place::Unknown(unknown) = network.places[node] {
                    self.drive_conductance[(unknown, source.drive)] += sign;
                }
            }
        }
    }

    /// The voltage of `plus` against `minus`.
    pub fn probe(&self, network: &Network, plus: usize, minus: usize) -> Probe {
        let mut probe = Probe {
            unknowns: DVector::zeros(self.size()),
            drives: DVector::zeros(network.drives.len()),
        };
        for (node, sign) in [(plus, 1.0), (minus, -1.0)] {
            match network.places[node] {
                Place::Ground => {}
                Place::Known(drive) => probe.drives[drive] += sign,
                Place::Unknown(unknown) => probe.unknowns[unknown] += sign,
            }
        }
        probe
    }

    /// Port voltages as probes, in port order.
    pub fn port_probes(&self, network: &Network) -> Vec<Probe> {
        network
            .ports()
            .iter()
            .map(|&Port { plus, minus }| self.probe(network, plus, minus))
            .collect()
    }

    /// The linear states (charges in C, fluxes in Wb) as probes, capacitors first.
    pub fn state_probes(&self, network: &Network) -> Vec<Probe> {
        let charges = network.capacitors.iter().map(|capacitor| {
            let mut probe = self.probe(network, capacitor.pins[0], capacitor.pins[1]);
            probe.unknowns *= capacitor.farads;
            probe.drives *= capacitor.farads;
            probe
        });
        let fluxes = network.inductors.iter().enumerate().map(|(k, inductor)| {
            let mut probe = self.probe(network, 0, 0);
            probe.unknowns[self.nodes + k] = inductor.henries;
            probe
        });
        charges.chain(fluxes).collect()
    }

    /// The incidence of each state's rate of change on the equations, n, in the order of [`Assembly::state_probes`]:
    /// dq/dt leaves the first node and enters the second; dφ/dt stands in the inductor's own row.
    pub fn state_incidence(&self, network: &Network) -> Vec<DVector<f64>> {
        let charges = network.capacitors.iter().map(|capacitor| {
            self.probe(network, capacitor.pins[0], capacitor.pins[1])
                .unknowns
        });
        let fluxes = (0..network.inductors.len()).map(|k| {
            let mut column = DVector::zeros(self.size());
            column[self.nodes + k] = 1.0;
            column
        });
        charges.chain(fluxes).collect()
    }
}

fn stamp(matrix: &mut DMatrix<f64>, drives: &mut DMatrix<f64>, pins: [Place; 2], value: f64) {
    for (here, there) in [(pins[0], pins[1]), (pins[1], pins[0])] {
        if let Place::Unknown(row) = here {
            matrix[(row, row)] += value;
            match there {
                Place::Ground => {}
                Place::Known(drive) => drives[(row, drive)] += value,
                Place::Unknown(column) => matrix[(row, column)] -= value,
            }
        }
    }
}
