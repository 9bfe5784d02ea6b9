//! What the measurements return: plain values in SI units, ready to be shown by `present`.

/// The circumstances a figure holds under.
#[derive(Clone, Debug, PartialEq)]
pub struct Conditions {
    /// Device temperature, K.
    pub temperature: f64,
    /// Source resistance, Ω.
    pub source_resistance: f64,
    /// Source inductance, H.
    pub source_inductance: f64,
    /// Source shunt capacitance, F.
    pub source_capacitance: f64,
    /// Load resistance, Ω; `None` for no resistive load.
    pub load_resistance: Option<f64>,
    /// Load capacitance, F.
    pub load_capacitance: f64,
    /// Rails: name and DC volts.
    pub rails: Vec<(String, f64)>,
    /// What was assumed because the file does not say, in words: `0 Ω source`, `no load`.
    pub assumed: Vec<String>,
    /// Overrides from the command line, as typed: `RC=2k2`.
    pub overrides: Vec<String>,
}

/// Where a transistor works.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Region {
    /// Neither junction on.
    Cutoff,
    /// Emitter junction on, collector junction off.
    Active,
    /// Both junctions on.
    Saturation,
    /// Collector junction alone on.
    Reverse,
}

impl Region {
    /// The word used in every output.
    pub fn word(self) -> &'static str {
        match self {
            Region::Cutoff => "cutoff",
            Region::Active => "active",
            Region::Saturation => "saturation",
            Region::Reverse => "reverse",
        }
    }
}

/// One transistor at its bias. Currents into the terminals; voltages between terminals, outside the ohmic resistances.
#[derive(Clone, Debug, PartialEq)]
pub struct TransistorBias {
    /// Reference designator.
    pub name: String,
    /// Collector current, A.
    pub collector_current: f64,
    /// Base current, A.
    pub base_current: f64,
    /// Base–emitter voltage, V.
    pub base_emitter: f64,
    /// Collector–emitter voltage, V.
    pub collector_emitter: f64,
    /// Region.
    pub region: Region,
    /// Dissipation, W.
    pub dissipation: f64,
    /// Transconductance gm, S.
    pub transconductance: f64,
    /// Input resistance rπ, Ω; `None` where the base passes no small-signal current.
    pub input_resistance: Option<f64>,
    /// Output resistance ro, Ω; `None` where infinite.
    pub output_resistance: Option<f64>,
}

/// One diode at its bias.
#[derive(Clone, Debug, PartialEq)]
pub struct DiodeBias {
    /// Reference designator.
    pub name: String,
    /// Current from anode to cathode, A.
    pub current: f64,
    /// Voltage anode to cathode between the terminals, V.
    pub voltage: f64,
}

/// What one rail delivers at bias.
#[derive(Clone, Debug, PartialEq)]
pub struct RailBias {
    /// Rail name.
    pub name: String,
    /// Rail EMF, V.
    pub volts: f64,
    /// Current delivered into the circuit, A.
    pub current: f64,
    /// Power delivered, W.
    pub power: f64,
}

/// How far the output can swing on the mid-band load line: what is a short or open at mid-band held at its bias.
#[derive(Clone, Debug, PartialEq)]
pub struct StaticSwing {
    /// Upward from the bias, V; `None` where nothing limits it.
    pub up: Option<f64>,
    /// Downward from the bias, V (positive number); `None` where nothing limits it.
    pub down: Option<f64>,
    /// EMF at the end of the upward swing, V.
    pub up_emf: Option<f64>,
    /// EMF at the end of the downward swing, V.
    pub down_emf: Option<f64>,
    /// Part that limits the upward swing and its region there.
    pub up_limited_by: Option<(String, Region)>,
    /// Part that limits the downward swing and its region there.
    pub down_limited_by: Option<(String, Region)>,
}

/// One point of the static transfer curve.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TransferPoint {
    /// EMF, V.
    pub emf: f64,
    /// Output, V, as an absolute node voltage.
    pub output: f64,
}

/// Everything `bias` prints.
#[derive(Clone, Debug, PartialEq)]
pub struct BiasReport {
    /// Stage title.
    pub title: String,
    /// Conditions.
    pub conditions: Conditions,
    /// Node name and volts, file order; internal nodes of devices as `Q1.base`, last.
    pub nodes: Vec<(String, f64)>,
    /// Transistors in file order.
    pub transistors: Vec<TransistorBias>,
    /// Diodes in file order.
    pub diodes: Vec<DiodeBias>,
    /// Rails in file order.
    pub supply: Vec<RailBias>,
    /// Static swing at the output.
    pub static_swing: StaticSwing,
    /// The static transfer curve around the bias (for the plot), ascending in EMF.
    pub transfer: Vec<TransferPoint>,
    /// Small-signal gain from the EMF to the output at 1 kHz: magnitude, and phase in degrees.
    pub gain_at_1khz: (f64, f64),
    /// Output node voltage at bias, V.
    pub output_bias: f64,
    /// Cautions in words.
    pub cautions: Vec<String>,
}

/// One harmonic of the output.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Harmonic {
    /// Order, from 1.
    pub n: usize,
    /// rms, V.
    pub rms: f64,
    /// φn in Σ √2·Hn·sin(2πnft + φn), degrees in (−180, 180]; `None` below the floor.
    pub phase_deg: Option<f64>,
    /// Relative to H1, dB; `None` where H1 or Hn is at the floor.
    pub relative_db: Option<f64>,
}

/// One level at one frequency.
#[derive(Clone, Debug, PartialEq)]
pub struct DistortionPoint {
    /// Drive frequency, Hz.
    pub frequency: f64,
    /// EMF, V rms.
    pub level: f64,
    /// H1 of the output, V rms.
    pub output: f64,
    /// H1 over the EMF, dB; `None` at the floor.
    pub gain_db: Option<f64>,
    /// THD relative to the fundamental, as a ratio; `None` with `thd_reason`.
    pub thd: Option<f64>,
    /// Why there is no THD.
    pub thd_reason: Option<String>,
    /// THD relative to the total, as a ratio.
    pub thd_of_total: Option<f64>,
    /// Bandwidth of the THD, Hz; `None` for no limit.
    pub bandwidth: Option<f64>,
    /// Highest harmonic in the THD.
    pub harmonics_in_thd: usize,
    /// Mean of the output minus its bias, V.
    pub dc_shift: f64,
    /// Harmonics 1…20.
    pub harmonics: Vec<Harmonic>,
    /// Largest change of H1…H20 relative to H1 when every time element is bisected: the solution's own error estimate.
    pub error_estimate: f64,
    /// Points in time the steady state was solved at.
    pub samples: usize,
    /// Whether some transistor left the straight line of its Early voltages on the way.
    pub beyond_early_range: bool,
    /// One period of the output's deviation from bias on a uniform grid, V (for the plots).
    pub waveform: Vec<f64>,
}

/// Everything `distortion` prints.
#[derive(Clone, Debug, PartialEq)]
pub struct DistortionReport {
    /// Stage title.
    pub title: String,
    /// Conditions.
    pub conditions: Conditions,
    /// Points, frequencies outer, levels inner.
    pub points: Vec<DistortionPoint>,
    /// Cautions in words.
    pub cautions: Vec<String>,
}
