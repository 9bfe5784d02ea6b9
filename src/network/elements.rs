//! Numbered elements of one stage at its temperature.

use crate::device::{DiodeLaw, Polarity, TransistorLaw};

/// Where a terminal goes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Place {
    /// Node 0.
    Ground,
    /// A node whose voltage is drive number `0`.
    Known(usize),
    /// An unknown node voltage, by its number.
    Unknown(usize),
}

/// A conductance between two nodes.
#[derive(Clone, Debug)]
pub struct Conductance {
    /// Part it belongs to.
    pub name: String,
    /// Nodes.
    pub pins: [usize; 2],
    /// S.
    pub siemens: f64,
}

/// A capacitance between two nodes; its charge counts positive with the first node positive.
#[derive(Clone, Debug)]
pub struct Capacitor {
    /// Part it belongs to.
    pub name: String,
    /// Nodes.
    pub pins: [usize; 2],
    /// F.
    pub farads: f64,
}

/// An inductance with its winding resistance; its current counts from the first node to the second.
#[derive(Clone, Debug)]
pub struct Inductor {
    /// Part it belongs to.
    pub name: String,
    /// Nodes.
    pub pins: [usize; 2],
    /// H.
    pub henries: f64,
    /// Ω in series, 0 allowed.
    pub ohms: f64,
}

/// A constant current through the part from the first node to the second.
#[derive(Clone, Debug)]
pub struct CurrentSource {
    /// Part it belongs to.
    pub name: String,
    /// Nodes.
    pub pins: [usize; 2],
    /// Number of its drive, which carries the amperes.
    pub drive: usize,
}

/// A transistor between its internal nodes.
#[derive(Clone, Debug)]
pub struct TransistorElement {
    /// Reference designator.
    pub name: String,
    /// NPN or PNP.
    pub polarity: Polarity,
    /// Its law at the stage's temperature.
    pub law: TransistorLaw<f64>,
    /// Internal nodes: collector, base, emitter.
    pub inner: [usize; 3],
    /// Terminals outside the ohmic resistances: collector, base, emitter.
    pub outer: [usize; 3],
}

/// A diode between its internal nodes.
#[derive(Clone, Debug)]
pub struct DiodeElement {
    /// Reference designator.
    pub name: String,
    /// Its law at the stage's temperature.
    pub law: DiodeLaw<f64>,
    /// Internal nodes: anode, cathode.
    pub inner: [usize; 2],
    /// Terminals: anode, cathode.
    pub outer: [usize; 2],
}

/// A pair of nodes across which a junction stands; its current flows from the first to the second.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Port {
    /// Positive node.
    pub plus: usize,
    /// Negative node.
    pub minus: usize,
}

/// A known voltage or current that drives the network. Number 0 is always the EMF.
#[derive(Clone, Debug)]
pub struct Drive {
    /// `emf`, a rail's or a current source's name.
    pub name: String,
    /// Value at rest, V or A.
    pub rest: f64,
}

/// The numbered network of one stage.
#[derive(Clone, Debug)]
pub struct Network {
    /// Node names; number 0 is `gnd`. Internal nodes are called `Q1.base` and the like.
    pub nodes: Vec<String>,
    /// How many of `nodes` are named by the file (they come first, `gnd` included).
    pub named_nodes: usize,
    /// Where each node's voltage comes from.
    pub places: Vec<Place>,
    /// Number of unknown node voltages.
    pub unknowns: usize,
    /// Known voltages and currents.
    pub drives: Vec<Drive>,
    /// Resistive branches.
    pub conductances: Vec<Conductance>,
    /// Capacitances.
    pub capacitors: Vec<Capacitor>,
    /// Inductances.
    pub inductors: Vec<Inductor>,
    /// Current sources.
    pub current_sources: Vec<CurrentSource>,
    /// Transistors.
    pub transistors: Vec<TransistorElement>,
    /// Diodes.
    pub diodes: Vec<DiodeElement>,
    /// Node driven by the source.
    pub input: usize,
    /// Node measured.
    pub output: usize,
    /// Rails: name, node, drive number.
    pub rails: Vec<(String, usize, usize)>,
    /// Temperature, K.
    pub temperature: f64,
}

/// Name of the conductance and capacitance of the load.
pub const LOAD: &str = "load";
/// Name of everything in `[source]`.
pub const SOURCE: &str = "source";
/// Drive number of the EMF.
pub const EMF: usize = 0;

impl Network {
    /// The junction ports: (base–emitter, base–collector) of each transistor, then the diodes. A PNP's are turned round.
    pub fn ports(&self) -> Vec<Port> {
        let mut ports = Vec::with_capacity(self.port_count());
        for transistor in &self.transistors {
            let [collector, base, emitter] = transistor.inner;
            for other in [emitter, collector] {
                ports.push(match transistor.polarity {
                    Polarity::Npn => Port {
                        plus: base,
                        minus: other,
                    },
                    Polarity::Pnp => Port {
                        plus: other,
                        minus: base,
                    },
                });
            }
        }
        ports.extend(self.diodes.iter().map(|diode| Port {
            plus: diode.inner[0],
            minus: diode.inner[1],
        }));
        ports
    }

    /// Number of junction ports.
    pub fn port_count(&self) -> usize {
        2 * self.transistors.len() + self.diodes.len()
    }

    /// What to call a port in a message: its part.
    pub fn port_name(&self, port: usize) -> &str {
        let paired = 2 * self.transistors.len();
        if port < paired {
            &self.transistors[port / 2].name
        } else {
            &self.diodes[port - paired].name
        }
    }

    /// Number of linear states: capacitor charges, then inductor fluxes.
    pub fn linear_states(&self) -> usize {
        self.capacitors.len() + self.inductors.len()
    }

    /// The same network without anything that stands outside it on the output side.
    pub fn without_load(&self) -> Network {
        let mut network = self.clone();
        network.conductances.retain(|element| element.name != LOAD);
        network.capacitors.retain(|element| element.name != LOAD);
        network
    }
}
