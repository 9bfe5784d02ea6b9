//! From the checked stage to numbered elements.

use super::elements::*;
use crate::device::{DiodeLaw, TransistorLaw};
use crate::quantity::constants::REFERENCE_TEMPERATURE;
use crate::stage::{Condition, Part, PartKind, Stage, TrackLaw};
use std::collections::HashMap;

/// Smallest share of a potentiometer's track a section may have (end resistance).
const END_RESISTANCE: f64 = 1e-4;
/// Base of the audio track law: 15 % of the track at half turn.
const AUDIO_BASE: f64 = 32.1;

impl Network {
    /// The numbered network of `stage`.
    pub fn of(stage: &Stage) -> Network {
        let mut builder = Builder::new(stage);
        builder.add_source(stage);
        for part in &stage.parts {
            if part.condition == Condition::Fitted {
                builder.add_part(stage, part);
            }
        }
        builder.add_load(stage);
        builder.finish()
    }
}

struct Builder {
    network: Network,
    numbers: HashMap<String, usize>,
    known: HashMap<usize, usize>,
}

impl Builder {
    fn new(stage: &Stage) -> Self {
        let mut builder = Builder {
            network: Network {
                nodes: vec!["gnd".to_string()],
                named_nodes: 1,
                places: Vec::new(),
                unknowns: 0,
                drives: vec![Drive {
                    name: "emf".to_string(),
                    rest: 0.0,
                }],
                conductances: Vec::new(),
                capacitors: Vec::new(),
                inductors: Vec::new(),
                current_sources: Vec::new(),
                transistors: Vec::new(),
                diodes: Vec::new(),
                input: 0,
                output: 0,
                rails: Vec::new(),
                temperature: stage.temperature,
            },
            numbers: HashMap::from([("gnd".to_string(), 0)]),
            known: HashMap::new(),
        };
        builder.number_nodes(stage);
        builder.add_rails(stage);
        builder
    }

    /// Number every node the file names, in the order it first appears; bridged parts make one node of two.
    fn number_nodes(&mut self, stage: &Stage) {
        let mut bridges: HashMap<&str, &str> = HashMap::new();
        for part in &stage.parts {
            if part.condition == Condition::Short
                && let [a, b] = pins_of(&part.kind)[..]
            {
                let (a, b) = (representative(&bridges, a), representative(&bridges, b));
                if a == "gnd" {
                    bridges.insert(b, a);
                } else if a != b {
                    bridges.insert(a, b);
                }
            }
        }
        let fitted = stage
            .parts
            .iter()
            .filter(|part| part.condition != Condition::Open);
        let names = std::iter::once(stage.input.as_str())
            .chain(fitted.flat_map(|part| pins_of(&part.kind)))
            .chain(std::iter::once(stage.output.as_str()))
            .chain(stage.rails.iter().map(|rail| rail.name.as_str()));
        for name in names {
            let leader = representative(&bridges, name);
            let number = self.node(leader);
            self.numbers.insert(name.to_string(), number);
        }
        self.network.named_nodes = self.network.nodes.len();
        self.network.input = self.numbers[&stage.input];
        self.network.output = self.numbers[&stage.output];
    }

    fn node(&mut self, name: &str) -> usize {
        if let Some(&number) = self.numbers.get(name) {
            return number;
        }
        self.network.nodes.push(name.to_string());
        self.numbers
            .insert(name.to_string(), self.network.nodes.len() - 1);
        self.network.nodes.len() - 1
    }

    fn inner_node(&mut self, part: &str, terminal: &str) -> usize {
        self.network.nodes.push(format!("{part}.{terminal}"));
        self.network.nodes.len() - 1
    }

    /// The node behind an ohmic resistance; no resistance makes no node.
    fn behind(&mut self, part: &str, terminal: &str, outer: usize, ohms: f64) -> usize {
        if ohms == 0.0 {
            return outer;
        }
        let inner = self.inner_node(part, terminal);
        self.resistor(part, [outer, inner], ohms);
        inner
    }

    fn resistor(&mut self, name: &str, pins: [usize; 2], ohms: f64) {
        if pins[0] != pins[1] {
            self.network.conductances.push(Conductance {
                name: name.to_string(),
                pins,
                siemens: 1.0 / ohms,
            });
        }
    }

    fn capacitor(&mut self, name: &str, pins: [usize; 2], farads: f64) {
        if pins[0] != pins[1] && farads > 0.0 {
            self.network.capacitors.push(Capacitor {
                name: name.to_string(),
                pins,
                farads,
            });
        }
    }

    fn drive(&mut self, name: &str, rest: f64) -> usize {
        self.network.drives.push(Drive {
            name: name.to_string(),
            rest,
        });
        self.network.drives.len() - 1
    }

    fn add_rails(&mut self, stage: &Stage) {
        for rail in &stage.rails {
            let node = self.numbers[&rail.name];
            let drive = self.drive(&rail.name, rail.volts);
            self.network.rails.push((rail.name.clone(), node, drive));
            let emf = self.behind(&rail.name, "emf", node, rail.resistance);
            self.known.insert(emf, drive);
        }
    }

    fn add_source(&mut self, stage: &Stage) {
        let input = self.network.input;
        let source = &stage.source;
        if source.inductance > 0.0 {
            let emf = self.inner_node(SOURCE, "emf");
            self.known.insert(emf, EMF);
            self.network.inductors.push(Inductor {
                name: SOURCE.to_string(),
                pins: [emf, input],
                henries: source.inductance,
                ohms: source.resistance,
            });
        } else {
            let emf = self.behind(SOURCE, "emf", input, source.resistance);
            self.known.insert(emf, EMF);
        }
        self.capacitor(SOURCE, [input, 0], source.capacitance);
    }

    fn add_load(&mut self, stage: &Stage) {
        let output = self.network.output;
        if let Some(ohms) = stage.load.resistance {
            self.resistor(LOAD, [output, 0], ohms);
        }
        self.capacitor(LOAD, [output, 0], stage.load.capacitance);
    }

    fn add_part(&mut self, stage: &Stage, part: &Part) {
        let name = part.name.as_str();
        let drift = 1.0 + part.tempco * (stage.temperature - REFERENCE_TEMPERATURE);
        match &part.kind {
            PartKind::Resistor { ohms, pins } => {
                let pins = self.pair(pins);
                self.resistor(name, pins, ohms * drift);
            }
            PartKind::Capacitor {
                farads,
                pins,
                series_resistance,
                leakage,
                ..
            } => {
                let [plus, minus] = self.pair(pins);
                if plus == minus {
                    return;
                }
                let inner = self.behind(name, "plate", plus, *series_resistance);
                self.capacitor(name, [inner, minus], farads * drift);
                if let Some(ohms) = leakage {
                    self.resistor(name, [inner, minus], *ohms);
                }
            }
            PartKind::Inductor {
                henries,
                pins,
                resistance,
            } => {
                let pins = self.pair(pins);
                if pins[0] != pins[1] {
                    self.network.inductors.push(Inductor {
                        name: name.to_string(),
                        pins,
                        henries: henries * drift,
                        ohms: *resistance,
                    });
                }
            }
            PartKind::Potentiometer {
                ohms,
                clockwise,
                wiper,
                anticlockwise,
                turn,
                law,
                gang,
            } => {
                let turn = gang
                    .as_deref()
                    .map_or(*turn, |leader| turn_of(stage, leader, *turn));
                let share = track_share(*law, turn);
                let track = ohms * drift;
                let [top, wiper, bottom] =
                    [clockwise, wiper, anticlockwise].map(|node| self.numbers[node]);
                self.resistor(name, [bottom, wiper], track * share.max(END_RESISTANCE));
                self.resistor(
                    name,
                    [wiper, top],
                    track * (1.0 - share).max(END_RESISTANCE),
                );
            }
            PartKind::Diode {
                parameters,
                anode,
                cathode,
                ..
            } => {
                let outer = [self.numbers[anode], self.numbers[cathode]];
                let inner = self.behind(name, "anode", outer[0], parameters.series_resistance);
                self.network.diodes.push(DiodeElement {
                    name: name.to_string(),
                    law: DiodeLaw::new(parameters, stage.temperature),
                    inner: [inner, outer[1]],
                    outer,
                });
            }
            PartKind::Transistor {
                polarity,
                parameters,
                collector,
                base,
                emitter,
                ..
            } => {
                let outer = [collector, base, emitter].map(|node| self.numbers[node]);
                let inner = [
                    self.behind(name, "collector", outer[0], parameters.collector_resistance),
                    self.behind(name, "base", outer[1], parameters.base_resistance),
                    self.behind(name, "emitter", outer[2], parameters.emitter_resistance),
                ];
                self.network.transistors.push(TransistorElement {
                    name: name.to_string(),
                    polarity: *polarity,
                    law: TransistorLaw::new(parameters, stage.temperature),
                    inner,
                    outer,
                });
            }
            PartKind::CurrentSource { amperes, from, to } => {
                let pins = [self.numbers[from], self.numbers[to]];
                let drive = self.drive(name, *amperes);
                self.network.current_sources.push(CurrentSource {
                    name: name.to_string(),
                    pins,
                    drive,
                });
            }
        }
    }

    fn pair(&self, pins: &[String; 2]) -> [usize; 2] {
        [self.numbers[&pins[0]], self.numbers[&pins[1]]]
    }

    fn finish(mut self) -> Network {
        let network = &mut self.network;
        for node in 0..network.nodes.len() {
            let place = match self.known.get(&node) {
                _ if node == 0 => Place::Ground,
                Some(&drive) => Place::Known(drive),
                None => {
                    network.unknowns += 1;
                    Place::Unknown(network.unknowns - 1)
                }
            };
            network.places.push(place);
        }
        self.network
    }
}

fn representative<'a>(bridges: &HashMap<&'a str, &'a str>, name: &'a str) -> &'a str {
    let mut name = name;
    while let Some(next) = bridges.get(name) {
        name = next;
    }
    name
}

/// The nodes of a part's terminals.
fn pins_of(kind: &PartKind) -> Vec<&str> {
    match kind {
        PartKind::Resistor { pins, .. }
        | PartKind::Capacitor { pins, .. }
        | PartKind::Inductor { pins, .. } => {
            vec![&pins[0], &pins[1]]
        }
        PartKind::Potentiometer {
            clockwise,
            wiper,
            anticlockwise,
            ..
        } => vec![clockwise, wiper, anticlockwise],
        PartKind::Diode { anode, cathode, .. } => vec![anode, cathode],
        PartKind::Transistor {
            collector,
            base,
            emitter,
            ..
        } => vec![collector, base, emitter],
        PartKind::CurrentSource { from, to, .. } => vec![from, to],
    }
}

/// The turn of the potentiometer called `leader`, following its own gang; `fallback` where there is none.
fn turn_of(stage: &Stage, leader: &str, fallback: f64) -> f64 {
    let mut leader = leader;
    for _ in 0..=stage.parts.len() {
        let part = stage.parts.iter().find(|part| part.name == leader);
        match part.map(|part| &part.kind) {
            Some(PartKind::Potentiometer {
                gang: Some(next), ..
            }) => leader = next,
            Some(PartKind::Potentiometer { turn, .. }) => return *turn,
            _ => return fallback,
        }
    }
    fallback
}

/// Share of the track between the anticlockwise end and the wiper.
fn track_share(law: TrackLaw, turn: f64) -> f64 {
    let audio = |turn: f64| (AUDIO_BASE.powf(turn) - 1.0) / (AUDIO_BASE - 1.0);
    match law {
        TrackLaw::Linear => turn,
        TrackLaw::Audio => audio(turn),
        TrackLaw::ReverseAudio => 1.0 - audio(1.0 - turn),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_audio_track_has_fifteen_percent_at_half_turn() {
        assert!((track_share(TrackLaw::Audio, 0.5) - 0.15).abs() < 5e-4);
        assert!((track_share(TrackLaw::ReverseAudio, 0.5) - 0.85).abs() < 5e-4);
        for law in [TrackLaw::Linear, TrackLaw::Audio, TrackLaw::ReverseAudio] {
            assert_eq!(track_share(law, 0.0), 0.0);
            assert_eq!(track_share(law, 1.0), 1.0);
        }
    }
}
