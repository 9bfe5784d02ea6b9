//! The data a checked stage file holds. All values in SI base units; temperatures in kelvin.

pub use crate::device::Ratings;
use crate::device::{DiodeParameters, Polarity, TransistorParameters};

/// A whole checked stage.
#[derive(Clone, Debug, PartialEq)]
pub struct Stage {
    /// `title`: what the stage is called in every output.
    pub title: String,
    /// `input`: the node driven by the source.
    pub input: String,
    /// `output`: the node measured against `gnd`.
    pub output: String,
    /// `temperature` of every device, K.
    pub temperature: f64,
    /// `[source]`: what stands between the EMF and the input node.
    pub source: Source,
    /// `[load]`: what hangs from the output node to `gnd`.
    pub load: Load,
    /// `[rails]`, in file order.
    pub rails: Vec<Rail>,
    /// `[parts]`, in file order; parts with `fitted = false` are kept and marked.
    pub parts: Vec<Part>,
    /// `[nominal] input`: the working level as an EMF, V rms.
    pub nominal_input: Option<f64>,
    /// `[targets]`, in file order.
    pub targets: Vec<Target>,
    /// Overrides already applied (`--set`), as typed, for the conditions line.
    pub overrides: Vec<String>,
}

/// `[source]`: an ideal EMF behind a series resistance and inductance, shunted at the input node by a capacitance.
#[derive(Clone, Debug, PartialEq)]
pub struct Source {
    /// Series resistance, Ω; 0 by default.
    pub resistance: f64,
    /// Series inductance, H; 0 by default.
    pub inductance: f64,
    /// Shunt capacitance from the input node to `gnd`, F; 0 by default.
    pub capacitance: f64,
    /// Whether the file states the source at all (otherwise the ideal source is an assumption).
    pub stated: bool,
}

/// `[load]`: what hangs from the output node to `gnd`.
#[derive(Clone, Debug, PartialEq)]
pub struct Load {
    /// Resistance, Ω; `None` for none.
    pub resistance: Option<f64>,
    /// Capacitance, F; 0 by default.
    pub capacitance: f64,
    /// Whether the file states the load at all.
    pub stated: bool,
}

/// One supply rail; the node of its name is the circuit side of its resistance.
#[derive(Clone, Debug, PartialEq)]
pub struct Rail {
    /// Rail and node name.
    pub name: String,
    /// DC volts against `gnd`.
    pub volts: f64,
    /// Series resistance, Ω; 0 by default.
    pub resistance: f64,
    /// Rise time from 0 V at turn-on, s; 0 by default.
    pub rise: f64,
    /// Ripple, V rms; 0 by default.
    pub ripple: f64,
    /// Ripple frequency, Hz; 100 by default.
    pub ripple_frequency: f64,
}

/// One part, keyed by its reference designator.
#[derive(Clone, Debug, PartialEq)]
pub struct Part {
    /// Reference designator.
    pub name: String,
    /// What it is and where it goes.
    pub kind: PartKind,
    /// Relative tolerance (0.05 for 5 %); `None` where not stated.
    pub tolerance: Option<f64>,
    /// Temperature coefficient, 1/K; 0 by default.
    pub tempco: f64,
    /// Ratings of this part (from the part, its device, or `[ratings.NAME]`).
    pub ratings: Ratings,
    /// Fitted, left out, or bridged.
    pub condition: Condition,
    /// `match`: name of the group whose spread moves together.
    pub matched: Option<String>,
    /// Line in the stage file (1-based), for messages; 0 where the part has none.
    pub line: usize,
}

/// Whether a part is in the circuit.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Condition {
    /// In the circuit.
    Fitted,
    /// Left out: `fitted = false`, or overridden with `open`.
    Open,
    /// Bridged by a wire: overridden with `short` (two-terminal parts only).
    Short,
}

/// What a part is, its value and the nodes of its terminals.
#[derive(Clone, Debug, PartialEq)]
pub enum PartKind {
    /// A resistor of `ohms`.
    Resistor {
        /// Ω, above 0.
        ohms: f64,
        /// The two nodes.
        pins: [String; 2],
    },
    /// A capacitor of `farads`.
    Capacitor {
        /// F, above 0.
        farads: f64,
        /// The two nodes; the first is `plus` where polarised.
        pins: [String; 2],
        /// Whether the file gave `plus` and `minus`.
        polarised: bool,
        /// Series resistance, Ω; 0 by default.
        series_resistance: f64,
        /// Leakage resistance across the capacitance, Ω; `None` for none.
        leakage: Option<f64>,
    },
    /// An inductor of `henries`.
    Inductor {
        /// H, above 0.
        henries: f64,
        /// The two nodes.
        pins: [String; 2],
        /// Series resistance, Ω; 0 by default.
        resistance: f64,
    },
    /// A potentiometer of `ohms` total track.
    Potentiometer {
        /// Total track resistance, Ω, above 0.
        ohms: f64,
        /// Node at the clockwise end.
        clockwise: String,
        /// Node at the wiper.
        wiper: String,
        /// Node at the anticlockwise end.
        anticlockwise: String,
        /// 0 (wiper on the anticlockwise end) to 1; follows `gang` where that is given.
        turn: f64,
        /// Track law.
        law: TrackLaw,
        /// `gang`: name of the potentiometer whose turn this one follows.
        gang: Option<String>,
    },
    /// A diode.
    Diode {
        /// Name of its device class.
        device: String,
        /// Its parameters, overrides applied.
        parameters: Box<DiodeParameters>,
        /// Anode node.
        anode: String,
        /// Cathode node.
        cathode: String,
    },
    /// A transistor.
    Transistor {
        /// NPN or PNP.
        polarity: Polarity,
        /// Name of its device class.
        device: String,
        /// Its parameters, overrides applied.
        parameters: Box<TransistorParameters>,
        /// `gain_range` of its device: lowest and highest forward gain.
        gain_range: Option<[f64; 2]>,
        /// Collector node.
        collector: String,
        /// Base node.
        base: String,
        /// Emitter node.
        emitter: String,
    },
    /// A constant current of `amperes` flowing through the part from `from` to `to`.
    CurrentSource {
        /// A; either sign.
        amperes: f64,
        /// Node the current leaves the circuit at.
        from: String,
        /// Node the current enters the circuit at.
        to: String,
    },
}

/// How the track of a potentiometer divides with its turn.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum TrackLaw {
    /// The anticlockwise section is `turn` of the track.
    Linear,
    /// `(b^turn − 1)/(b − 1)` with b = 32.1: 15 % of the track at half turn.
    Audio,
    /// The audio law from the other end: `1 − audio(1 − turn)`.
    ReverseAudio,
}

impl TrackLaw {
    /// The law of that name in a stage file: `linear`, `audio`, `reverse-audio`.
    pub fn of_name(name: &str) -> Option<TrackLaw> {
        match name {
            "linear" => Some(TrackLaw::Linear),
            "audio" => Some(TrackLaw::Audio),
            "reverse-audio" => Some(TrackLaw::ReverseAudio),
            _ => None,
        }
    }
}

/// One entry of `[targets]`.
#[derive(Clone, Debug, PartialEq)]
pub struct Target {
    /// Its key: `gain`, `clean_input`, ….
    pub name: String,
    /// Its entries, numbers in base units (`at`, `from`, `to` in Hz, `min`, `max` in the figure's unit), kept with
    /// their text.
    pub entries: Vec<TargetEntry>,
}

/// One key of a target, with the text as typed and its value in base units.
#[derive(Clone, Debug, PartialEq)]
pub struct TargetEntry {
    /// Key.
    pub key: String,
    /// As typed.
    pub text: String,
    /// Value: volts rms for levels, Hz, ratio for `%`, dB as the plain number.
    pub value: f64,
}
