//! Whether the parts of a stage make a circuit that can have a bias at all.
//!
//! Every node needs a DC path to `gnd` (resistors, inductors, junctions, rails, the source, the load's resistance; not
//! capacitors, not current sources), every base something that biases it, and no loop may consist of ideal voltages and
//! zero ohms alone: its current would be undetermined.

use std::collections::HashMap;

use super::description::{Condition, Part, PartKind, Stage};
use super::faults::Faults;
use super::groups::Groups;
use super::loops::{Forest, Stiff, loop_message};
use super::names;
use super::terminals::Terminal;
use crate::quantity::quoted;

/// What a fault of the network is about.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum NetworkPlace {
    /// The `input` key.
    Input,
    /// The `output` key.
    Output,
    /// A rail.
    Rail(String),
    /// A part as a whole.
    Part(String),
    /// One terminal of a part.
    Terminal {
        /// The part.
        part: String,
        /// The key of its terminal.
        key: &'static str,
        /// Its place in `pins`.
        index: usize,
    },
}

/// A fault of the network: the parts do not make a circuit.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct NetworkFault {
    /// What it is about.
    pub place: NetworkPlace,
    /// What was found and what to do.
    pub message: String,
}

impl Stage {
    /// Every fault of the network, at most 50 with their messages; empty for a circuit that can have a bias.
    pub fn check_network(&self) -> Vec<NetworkFault> {
        let faults = network_faults(self);
        faults
            .into_found()
            .map(|(place, message)| NetworkFault { place, message })
            .collect()
    }
}

pub(super) fn network_faults(stage: &Stage) -> Faults<NetworkPlace> {
    let mut network = Network::of(stage);
    let mut faults = Faults::default();
    let meant = network.check_ends(&mut faults);
    let dangling = network.check_dangling(&mut faults, &meant);
    network.check_dc_paths(&mut faults, &dangling);
    network.check_bases(&mut faults);
    network.check_loops(&mut faults);
    faults
}

const GND: usize = 0;

/// The nodes of a stage by number, `gnd` first.
struct Network<'s> {
    stage: &'s Stage,
    nodes: Vec<&'s str>,
    numbers: HashMap<&'s str, usize>,
    /// Terminals of each part, with node numbers.
    terminals: Vec<Vec<(Terminal<'s>, usize)>>,
    /// Nodes at one DC potential reference: what a direct current can reach from where.
    dc: Groups,
}

impl<'s> Network<'s> {
    fn of(stage: &'s Stage) -> Self {
        let mut network = Network {
            stage,
            nodes: Vec::new(),
            numbers: HashMap::new(),
            terminals: Vec::new(),
            dc: Groups::of_singles(0),
        };
        network.number("gnd");
        for rail in &stage.rails {
            network.number(&rail.name);
        }
        for part in &stage.parts {
            let numbered = part
                .terminals()
                .into_iter()
                .map(|terminal| (terminal, network.number(terminal.node)));
            let numbered = numbered.collect();
            network.terminals.push(numbered);
        }
        network.number(&stage.input);
        network.number(&stage.output);
        network.dc = network.dc_groups(|part, terminals| {
            if part.passes_dc() {
                terminals.iter().map(|(_, node)| *node).collect()
            } else {
                Vec::new()
            }
        });
        network
    }

    fn number(&mut self, node: &'s str) -> usize {
        let next = self.nodes.len();
        let number = *self.numbers.entry(node).or_insert(next);
        if number == next {
            self.nodes.push(node);
        }
        number
    }

    fn input(&self) -> usize {
        self.numbers[self.stage.input.as_str()]
    }

    fn output(&self) -> usize {
        self.numbers[self.stage.output.as_str()]
    }

    fn parts(&self) -> impl Iterator<Item = (&'s Part, &[(Terminal<'s>, usize)])> {
        self.stage
            .parts
            .iter()
            .zip(self.terminals.iter().map(Vec::as_slice))
    }

    /// Groups of nodes joined by whatever `joins` says of each part, beside rails, source and load to `gnd`.
    fn dc_groups(&self, joins: impl Fn(&Part, &[(Terminal, usize)]) -> Vec<usize>) -> Groups {
        let mut groups = Groups::of_singles(self.nodes.len());
        for rail in &self.stage.rails {
            groups.join(GND, self.numbers[rail.name.as_str()]);
        }
        groups.join(GND, self.input());
        if self.stage.load.resistance.is_some() {
            groups.join(GND, self.output());
        }
        for (part, terminals) in self.parts() {
            for pair in joins(part, terminals).windows(2) {
                groups.join(pair[0], pair[1]);
            }
        }
        groups
    }

    /// Input and output must be nodes of the circuit, and not `gnd`. Returns the nodes that were probably meant.
    fn check_ends(&self, faults: &mut Faults<NetworkPlace>) -> Vec<usize> {
        let mut meant = Vec::new();
        let mut on_network = vec![false; self.nodes.len()];
        for rail in &self.stage.rails {
            on_network[self.numbers[rail.name.as_str()]] = true;
        }
        for (_, terminals) in self
            .parts()
            .filter(|(part, _)| part.condition != Condition::Open)
        {
            terminals
                .iter()
                .for_each(|(_, node)| on_network[*node] = true);
        }
        let ends = [
            (NetworkPlace::Input, "input", self.input()),
            (NetworkPlace::Output, "output", self.output()),
        ];
        for (place, key, node) in ends {
            if node == GND {
                faults.add(place, || {
                    format!("{key} is gnd itself; name the node {key} is at")
                });
            } else if !on_network[node] {
                let candidates = self
                    .nodes
                    .iter()
                    .zip(&on_network)
                    .filter(|(_, on)| **on)
                    .map(|(node, _)| *node);
                let near = names::nearest(self.nodes[node], candidates);
                meant.extend(near.map(|near| self.numbers[near]));
                let hint = near
                    .map(|near| format!("; did you mean {}?", quoted(near)))
                    .unwrap_or_default();
                faults.add(place, || {
                    format!(
                        "{key} node {} is not on the network{hint}",
                        quoted(self.nodes[node])
                    )
                });
            }
        }
        meant
    }

    /// Returns the nodes that have their message already. A pin no other part touches is a slip of the pen. A part left out still marks where its pins belong.
    fn check_dangling(&self, faults: &mut Faults<NetworkPlace>, meant: &[usize]) -> Vec<bool> {
        let mut first: Vec<Option<usize>> = vec![None; self.nodes.len()];
        let mut shared = vec![false; self.nodes.len()];
        for rail in &self.stage.rails {
            shared[self.numbers[rail.name.as_str()]] = true;
        }
        for node in [GND, self.input(), self.output()].iter().chain(meant) {
            shared[*node] = true;
        }
        for (index, terminals) in self.terminals.iter().enumerate() {
            for (_, node) in terminals {
                shared[*node] |= first[*node].is_some_and(|other| other != index);
                first[*node] = Some(index);
            }
        }
        let lone = |node: usize, part: &Part| !shared[node] && part.condition != Condition::Open;
        let mut dangling = vec![false; self.nodes.len()];
        meant.iter().for_each(|node| dangling[*node] = true);
        for (part, terminals) in self.parts() {
            for (terminal, node) in terminals.iter().filter(|(_, node)| lone(*node, part)) {
                if !std::mem::replace(&mut dangling[*node], true) {
                    faults.add(place_of(part, terminal), || {
                        self.dangling_message(part, terminal, *node)
                    });
                }
            }
        }
        dangling
    }

    fn dangling_message(&self, part: &Part, terminal: &Terminal, node: usize) -> String {
        let pin = if terminal.key == "pins" {
            String::new()
        } else {
            format!("{} ", terminal.key)
        };
        // Between names of one or two letters everything is near; only the case of a letter is a likely slip there.
        let likely = |other: &&str| {
            terminal.node.chars().count() > 2 || other.eq_ignore_ascii_case(terminal.node)
        };
        let others = self
            .nodes
            .iter()
            .enumerate()
            .filter(|(other, _)| *other != node)
            .map(|(_, name)| *name);
        let hint = names::hint(terminal.node, others.filter(likely));
        format!(
            "{}: {pin}node {} has no other connection{hint}",
            part.name,
            quoted(terminal.node)
        )
    }

    fn check_dc_paths(&mut self, faults: &mut Faults<NetworkPlace>, dangling: &[bool]) {
        let mut floating: Vec<(usize, Vec<usize>, NetworkPlace)> = Vec::new();
        let mut group_of_root: HashMap<usize, usize> = HashMap::new();
        let mut seen = vec![false; self.nodes.len()];
        for (part, terminals) in self.stage.parts.iter().zip(&self.terminals) {
            for (terminal, node) in terminals
                .iter()
                .filter(|_| part.condition != Condition::Open)
            {
                let root = self.dc.root(*node);
                if root == GND || std::mem::replace(&mut seen[*node], true) {
                    continue;
                }
                let group = *group_of_root.entry(root).or_insert_with(|| {
                    floating.push((root, Vec::new(), place_of(part, terminal)));
                    floating.len() - 1
                });
                floating[group].1.push(*node);
            }
        }
        for (_, nodes, place) in floating {
            // A pin that hangs in the air has its own message.
            if !nodes.iter().all(|node| dangling[*node]) {
                self.add_floating(faults, &nodes, place);
            }
        }
    }

    fn add_floating(
        &self,
        faults: &mut Faults<NetworkPlace>,
        nodes: &[usize],
        place: NetworkPlace,
    ) {
        if nodes.contains(&self.output()) {
            faults.add(NetworkPlace::Output, || {
                format!(
                    "output node {} has no DC path to gnd; add [load] with a resistance, such as resistance = \"47k\"",
                    quoted(&self.stage.output)
                )
            });
            return;
        }
        faults.add(place, || {
            let shown: Vec<String> = nodes.iter().take(4).map(|node| quoted(self.nodes[*node])).collect();
            let more = if nodes.len() > 4 { format!(" and {} more", nodes.len() - 4) } else { String::new() };
            let (noun, verb) = if nodes.len() == 1 { ("node", "has") } else { ("nodes", "have") };
            let shown = shown.join(", ");
            format!("{noun} {shown}{more} {verb} no DC path to gnd; capacitors and current sources are none")
        });
    }

    /// A base is biased by what it hangs on, not by its own junctions nor by another base beside it: a transistor
    /// counts as a path from collector to emitter alone. A current source feeds a base.
    fn check_bases(&mut self, faults: &mut Faults<NetworkPlace>) {
        let mut feeds = self.dc_groups(|part, terminals| match (&part.kind, part.condition) {
            (PartKind::Transistor { .. }, Condition::Fitted) => {
                vec![terminals[0].1, terminals[2].1]
            }
            (PartKind::CurrentSource { .. }, Condition::Fitted) => {
                vec![terminals[0].1, GND, terminals[1].1]
            }
            _ if part.passes_dc() => terminals.iter().map(|(_, node)| *node).collect(),
            _ => Vec::new(),
        });
        for (part, terminals) in self.stage.parts.iter().zip(&self.terminals) {
            if !matches!(part.kind, PartKind::Transistor { .. })
                || part.condition != Condition::Fitted
            {
                continue;
            }
            let (terminal, base) = &terminals[1];
            // Without any DC path the node has its own message.
            if self.dc.are_joined(GND, *base) && !feeds.are_joined(GND, *base) {
                faults.add(place_of(part, terminal), || {
                    format!(
                        "{}: nothing biases base node {}; connect a resistor to it",
                        part.name,
                        quoted(terminal.node)
                    )
                });
            }
        }
    }

    fn check_loops(&self, faults: &mut Faults<NetworkPlace>) {
        let mut wires = Groups::of_singles(self.nodes.len());
        for (_, terminals) in self
            .parts()
            .filter(|(part, _)| part.condition == Condition::Short)
        {
            terminals
                .windows(2)
                .for_each(|pair| _ = wires.join(pair[0].1, pair[1].1));
        }
        let mut forest = Forest::of(self.nodes.len());
        for stiff in self.stiff_edges() {
            let ends = [wires.root(stiff.ends[0]), wires.root(stiff.ends[1])];
            if !forest.add(ends, stiff.name.clone()) {
                faults.add(stiff.place, || loop_message(&stiff.name, forest.path(ends)));
            }
        }
    }

    /// The branches that hold a voltage whatever the current: ideal rails, the ideal source, zero-ohm inductors.
    fn stiff_edges(&self) -> Vec<Stiff> {
        let rails = self
            .stage
            .rails
            .iter()
            .filter(|rail| rail.resistance == 0.0)
            .map(|rail| Stiff {
                ends: [self.numbers[rail.name.as_str()], GND],
                name: format!("rail {}", rail.name),
                place: NetworkPlace::Rail(rail.name.clone()),
            });
        // Its inductance has zero ohms too.
        let source = (self.stage.source.resistance == 0.0).then(|| Stiff {
            ends: [self.input(), GND],
            name: "the ideal source".to_owned(),
            place: NetworkPlace::Input,
        });
        let inductors = self
            .parts()
            .filter(|(part, _)| part.is_zero_ohm_inductor())
            .map(|(part, terminals)| Stiff {
                ends: [terminals[0].1, terminals[1].1],
                name: format!("{} (0 Ω)", part.name),
                place: NetworkPlace::Part(part.name.clone()),
            });
        rails.chain(source).chain(inductors).collect()
    }
}

fn place_of(part: &Part, terminal: &Terminal) -> NetworkPlace {
    NetworkPlace::Terminal {
        part: part.name.clone(),
        key: terminal.key,
        index: terminal.index,
    }
}
