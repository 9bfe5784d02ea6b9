//! `NAME=VALUE`: one value of the file changed for one run.

use std::fmt;
use std::str::FromStr;

use super::check::NetworkFault;
use super::description::Stage;
use super::settings;
use crate::failure::FailureKind;
use crate::quantity::quoted;

/// One override, as typed after `--set`: `RC=2k2`, `P1.turn=0.7`, `Q1.forward_gain=120`, `R6=open`.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Override {
    /// As typed.
    pub text: String,
    /// What is named before the equals sign, split at its points: `Q1`, `forward_gain`.
    pub path: Vec<String>,
    /// What stands behind the equals sign.
    pub value: String,
}

/// Why an override does not apply.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum OverrideError {
    /// Not of the form `NAME=VALUE`.
    Malformed {
        /// As typed.
        text: String,
    },
    /// It names nothing the stage has.
    Unknown {
        /// As typed.
        text: String,
        /// What was not found, with the nearest name.
        reason: String,
    },
    /// The value does not suit what is named.
    Unsuitable {
        /// As typed.
        text: String,
        /// What was found and what would be right.
        reason: String,
    },
    /// With it the parts no longer make a circuit that can have a bias.
    Network {
        /// Every override of the run, as typed.
        texts: Vec<String>,
        /// What is wrong with the network, at least one.
        faults: Vec<NetworkFault>,
    },
}

impl OverrideError {
    /// A wrong override is a fault of the request.
    pub fn kind(&self) -> FailureKind {
        FailureKind::BadRequest
    }
}

impl fmt::Display for OverrideError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            OverrideError::Malformed { text } => {
                write!(
                    f,
                    "--set {}: must be NAME=VALUE such as R1=4k7 or Q1.forward_gain=120",
                    quoted(text)
                )
            }
            OverrideError::Unknown { text, reason }
            | OverrideError::Unsuitable { text, reason } => {
                write!(f, "--set {}: {reason}", bare(text))
            }
            OverrideError::Network { texts, faults } => {
                let set: Vec<String> = texts
                    .iter()
                    .map(|text| format!("--set {}", bare(text)))
                    .collect();
                for (index, fault) in faults.iter().enumerate() {
                    let separator = if index == 0 { "" } else { "\n" };
                    write!(f, "{separator}with {}: {}", set.join(" "), fault.message)?;
                }
                Ok(())
            }
        }
    }
}

impl std::error::Error for OverrideError {}

/// As typed where that is harmless, quoted otherwise.
fn bare(text: &str) -> String {
    let shown = quoted(text);
    let inner = &shown[1..shown.len() - 1];
    if inner == text {
        text.to_owned()
    } else {
        shown
    }
}

impl FromStr for Override {
    type Err = OverrideError;

    fn from_str(text: &str) -> Result<Self, OverrideError> {
        let malformed = || OverrideError::Malformed {
            text: text.to_owned(),
        };
        let (name, value) = text.split_once('=').ok_or_else(malformed)?;
        let path: Vec<String> = name.split('.').map(|step| step.trim().to_owned()).collect();
        if path.iter().any(String::is_empty) || value.trim().is_empty() {
            return Err(malformed());
        }
        Ok(Override {
            text: text.trim().to_owned(),
            path,
            value: value.trim().to_owned(),
        })
    }
}

impl Override {
    pub(super) fn unknown(&self, reason: String) -> OverrideError {
        OverrideError::Unknown {
            text: self.text.clone(),
            reason,
        }
    }

    pub(super) fn unsuitable(&self, reason: impl fmt::Display) -> OverrideError {
        OverrideError::Unsuitable {
            text: self.text.clone(),
            reason: reason.to_string(),
        }
    }
}

impl Stage {
    /// This stage with one value changed; the circuit is checked anew.
    pub fn with(&self, change: &Override) -> Result<Stage, OverrideError> {
        self.with_all(std::slice::from_ref(change))
    }

    /// This stage with several values changed, in order; the circuit is checked anew at the end.
    pub fn with_all(&self, changes: &[Override]) -> Result<Stage, OverrideError> {
        let mut stage = self.clone();
        for change in changes {
            settings::apply(&mut stage, change)?;
            stage.overrides.push(change.text.clone());
        }
        let faults = stage.check_network();
        if changes.is_empty() || faults.is_empty() {
            Ok(stage)
        } else {
            Err(OverrideError::Network {
                texts: changes.iter().map(|change| change.text.clone()).collect(),
                faults,
            })
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn stage() -> Stage {
        let text = r#"
            input = "in"
            output = "out"
            [source]
            resistance = "600"
            [load]
            resistance = "47k"
            [rails]
            vcc = "12"
            [parts]
            R1 = { resistor = "82k", pins = ["vcc", "base"] }
            R2 = { resistor = "18k", pins = ["base", "gnd"] }
            RC = { resistor = "3k3", pins = ["vcc", "coll"] }
            RE = { resistor = "1k", pins = ["emit", "gnd"] }
            C1 = { capacitor = "10u", plus = "base", minus = "in" }
            C3 = { capacitor = "4u7", pins = ["coll", "out"] }
            P1 = { potentiometer = "10k", clockwise = "out", wiper = "tap", anticlockwise = "gnd", turn = 0.5 }
            P2 = { potentiometer = "10k", clockwise = "tap", wiper = "end", anticlockwise = "gnd", gang = "P1" }
            R9 = { resistor = "1M", pins = ["end", "gnd"] }
            Q1 = { npn = "npn-small-signal", collector = "coll", base = "base", emitter = "emit" }
            Q2 = { npn = "mine", collector = "vcc", base = "coll", emitter = "e2" }
            R8 = { resistor = "1k", pins = ["e2", "gnd"] }
            C5 = { capacitor = "1u", pins = ["out", "far"] }
            C6 = { capacitor = "1n", pins = ["far", "gnd"] }
            R6 = { resistor = "1M", pins = ["far", "gnd"] }
            [devices.mine]
            like = "npn-small-signal"
            [targets]
            gain = { at = "1kHz", min = "33dB" }
        "#;
        Stage::from_text("t.toml", text)
            .unwrap_or_else(|error| panic!("{error}"))
            .0
    }

    fn with(text: &str) -> Stage {
        stage()
            .with(&text.parse().unwrap())
            .unwrap_or_else(|error| panic!("{error}"))
    }

    fn refusal(text: &str) -> String {
        match text
            .parse::<Override>()
            .and_then(|change| stage().with(&change))
        {
            Ok(_) => panic!("{text} was accepted"),
            Err(error) => error.to_string(),
        }
    }

    fn part<'s>(stage: &'s Stage, name: &str) -> &'s super::super::PartKind {
        &stage
            .parts
            .iter()
            .find(|part| part.name == name)
            .unwrap()
            .kind
    }

    /// Gain of a transistor, through the description.
    fn gain(stage: &Stage, name: &str) -> f64 {
        match part(stage, name) {
            super::super::PartKind::Transistor { parameters, .. } => parameters.forward_gain,
            other => panic!("{other:?}"),
        }
    }

    fn turn(stage: &Stage, name: &str) -> f64 {
        match part(stage, name) {
            super::super::PartKind::Potentiometer { turn, .. } => *turn,
            other => panic!("{other:?}"),
        }
    }

    #[test]
    fn an_override_changes_one_value_and_remembers_itself() {
        let changed = with("RC=2k2");
        assert_eq!(changed.overrides, ["RC=2k2"]);
        let mut back = changed.with(&"RC.resistor=3k3".parse().unwrap()).unwrap();
        assert_eq!(back.overrides.split_off(0), ["RC=2k2", "RC.resistor=3k3"]);
        assert_eq!(back, stage());
    }

    #[test]
    fn every_section_can_be_overridden() {
        assert_eq!(with("vcc=6").rails[0].volts, 6.0);
        assert_eq!(with("vcc.resistance=10").rails[0].resistance, 10.0);
        assert_eq!(
            with("vcc.ripple=14.142135623730951mVpk").rails[0].ripple,
            0.01
        );
        assert_eq!(with("load.resistance=10k").load.resistance, Some(10e3));
        assert_eq!(with("load.capacitance=1n").load.capacitance, 1e-9);
        assert_eq!(with("source.resistance=0").source.resistance, 0.0);
        assert_eq!(with("temperature=60C").temperature, 333.15);
        assert_eq!(
            with("nominal.input=-50dBV").nominal_input,
            Some(10f64.powf(-2.5))
        );
        assert_eq!(with("output=coll").output, "coll");
        assert_eq!(
            with("targets.gain.min=30dB").targets[0].entries[1].value,
            30.0
        );
        assert_eq!(with("C1.series_resistance=1").parts[4], {
            let mut part = stage().parts[4].clone();
            if let super::super::PartKind::Capacitor {
                series_resistance, ..
            } = &mut part.kind
            {
                *series_resistance = 1.0;
            }
            part
        });
    }

    #[test]
    fn a_transistor_is_overridden_alone_and_a_class_with_all_its_parts() {
        let alone = with("Q1.forward_gain=120");
        assert_eq!(
            (gain(&alone, "Q1"), gain(&alone, "Q2")),
            (120.0, gain(&stage(), "Q2"))
        );
        let class = with("mine.forward_gain=77");
        assert_eq!(
            (gain(&class, "Q1"), gain(&class, "Q2")),
            (gain(&stage(), "Q1"), 77.0)
        );
        let other = with("Q2=npn-small-signal");
        assert_eq!(gain(&other, "Q2"), gain(&stage(), "Q1"));
    }

    #[test]
    fn a_ganged_turn_follows_and_cannot_be_set_itself() {
        let turned = with("P1.turn=0.7");
        assert_eq!((turn(&turned, "P1"), turn(&turned, "P2")), (0.7, 0.7));
        assert_eq!(
            refusal("P2.turn=0.1"),
            "--set P2.turn=0.1: P2 follows P1; set P1.turn"
        );
    }

    #[test]
    fn open_and_short_are_conditions_of_a_part() {
        use super::super::Condition;
        let condition = |stage: Stage, name: &str| {
            stage
                .parts
                .iter()
                .find(|p| p.name == name)
                .unwrap()
                .condition
        };
        assert_eq!(condition(with("C6=open"), "C6"), Condition::Open);
        assert_eq!(condition(with("C1=short"), "C1"), Condition::Short);
        assert_eq!(condition(with("R9.fitted=false"), "R9"), Condition::Open);
        assert_eq!(with("load=open").load.resistance, None);
        assert_eq!(
            refusal("Q1=short"),
            "--set Q1=short: only a part with two terminals can be short"
        );
    }

    #[test]
    fn a_network_broken_by_an_override_says_which() {
        assert_eq!(
            refusal("R6=open"),
            "with --set R6=open: node \"far\" has no DC path to gnd; capacitors and current sources are none"
        );
        let both = ["R1=open", "R2=open"].map(|text| text.parse().unwrap());
        assert_eq!(
            stage().with_all(&both).unwrap_err().to_string(),
            "with --set R1=open --set R2=open: Q1: nothing biases base node \"base\"; connect a resistor to it"
        );
        assert!(
            stage().with(&both[0]).is_ok(),
            "R2 alone still ties the base to gnd"
        );
    }

    #[test]
    fn refusals_name_the_override_and_the_nearest_name() {
        for (text, message) in [
            (
                "RC",
                "--set \"RC\": must be NAME=VALUE such as R1=4k7 or Q1.forward_gain=120",
            ),
            (
                "RC=",
                "--set \"RC=\": must be NAME=VALUE such as R1=4k7 or Q1.forward_gain=120",
            ),
            (
                "rc=2k2",
                "--set rc=2k2: the stage has no \"rc\"; did you mean \"RC\"?",
            ),
            (
                "RC=2,2k",
                "--set RC=2,2k: \"2,2k\" has a comma; write 2.2k with a point",
            ),
            ("RC=0", "--set RC=0: must be above 0 Ω"),
            (
                "RC.turn=1",
                "--set RC.turn=1: RC has no \"turn\"; it has resistor, tolerance, tempco, fitted, watts",
            ),
            (
                "Q1.forward_gian=1",
                "--set Q1.forward_gian=1: Q1 has no \"forward_gian\"; did you mean \"forward_gain\"?",
            ),
            (
                "Q1=silicon-switching",
                "--set Q1=silicon-switching: \"silicon-switching\" is a diode, Q1 needs an NPN transistor",
            ),
            (
                "Q1=npn-smal-signal",
                "--set Q1=npn-smal-signal: unknown device \"npn-smal-signal\"; did you mean \"npn-small-signal\"?",
            ),
            ("P1.turn=1.5", "--set P1.turn=1.5: must be from 0 to 1"),
            (
                "load.resistence=1",
                "--set load.resistence=1: load has no \"resistence\"; did you mean \"resistance\"?",
            ),
            (
                "temperature=-300C",
                "--set temperature=-300C: \"-300C\" must be above absolute zero, -273.15C",
            ),
            (
                "load=10k",
                "--set load=10k: name one of its values, such as load.KEY=VALUE",
            ),
            (
                "vcc.volts.x=1",
                "--set vcc.volts.x=1: the stage has no \"vcc.volts.x\"",
            ),
        ] {
            assert_eq!(refusal(text), message);
        }
    }
}
