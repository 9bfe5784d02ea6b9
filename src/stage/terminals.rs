//! The terminals of a part, and which of them pass direct current between each other.

use super::description::{Condition, Part, PartKind};

/// One terminal of a part.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Terminal<'p> {
    /// The key that names its node in the stage file: `pins`, `plus`, `collector`, ….
    pub key: &'static str,
    /// Its place in the list of `pins`; 0 for every other key.
    pub index: usize,
    /// Its node.
    pub node: &'p str,
}

impl Part {
    /// Its terminals in the order of the file format.
    pub fn terminals(&self) -> Vec<Terminal<'_>> {
        let one = |key, node| Terminal {
            key,
            index: 0,
            node,
        };
        match &self.kind {
            PartKind::Capacitor {
                pins: [plus, minus],
                polarised: true,
                ..
            } => {
                vec![one("plus", plus), one("minus", minus)]
            }
            PartKind::Resistor { pins, .. }
            | PartKind::Capacitor { pins, .. }
            | PartKind::Inductor { pins, .. } => pins
                .iter()
                .enumerate()
                .map(|(index, node)| Terminal {
                    key: "pins",
                    index,
                    node,
                })
                .collect(),
            PartKind::Potentiometer {
                clockwise,
                wiper,
                anticlockwise,
                ..
            } => {
                vec![
                    one("clockwise", clockwise),
                    one("wiper", wiper),
                    one("anticlockwise", anticlockwise),
                ]
            }
            PartKind::Diode { anode, cathode, .. } => {
                vec![one("anode", anode), one("cathode", cathode)]
            }
            PartKind::Transistor {
                collector,
                base,
                emitter,
                ..
            } => {
                vec![
                    one("collector", collector),
                    one("base", base),
                    one("emitter", emitter),
                ]
            }
            PartKind::CurrentSource { from, to, .. } => vec![one("from", from), one("to", to)],
        }
    }

    /// Whether it joins its terminals by a DC path: a capacitor only by its leakage, a current source never.
    pub(super) fn passes_dc(&self) -> bool {
        match (self.condition, &self.kind) {
            (Condition::Open, _) => false,
            (Condition::Short, _) => true,
            (Condition::Fitted, PartKind::Capacitor { leakage, .. }) => leakage.is_some(),
            (Condition::Fitted, PartKind::CurrentSource { .. }) => false,
            (Condition::Fitted, _) => true,
        }
    }

    /// Whether it has a resistance of exactly zero between its two ends, which holds them at one voltage at DC.
    pub(super) fn is_zero_ohm_inductor(&self) -> bool {
        self.condition == Condition::Fitted
            && matches!(self.kind, PartKind::Inductor { resistance, .. } if resistance == 0.0)
    }
}
