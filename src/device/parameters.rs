//! The parameters a device is described by, at the reference temperature of 25 °C.
//!
//! Field names are the keys of a stage file's `[devices.…]` table.

/// Which way round a transistor is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Polarity {
    /// Collector and base positive against the emitter in normal operation.
    Npn,
    /// The same with every voltage and current negated.
    Pnp,
}

impl Polarity {
    /// +1 for NPN, −1 for PNP.
    pub fn sign(self) -> f64 {
        match self {
            Polarity::Npn => 1.0,
            Polarity::Pnp => -1.0,
        }
    }
}

/// Parameters of the charge-control transistor model (Gummel & Poon 1970, transport form).
/// `f64::INFINITY` stands for an Early voltage or a knee current that is left out.
#[derive(Clone, Debug, PartialEq)]
pub struct TransistorParameters {
    /// Saturation current Is, A.
    pub saturation_current: f64,
    /// Ideal forward current gain βf.
    pub forward_gain: f64,
    /// Ideal reverse current gain βr.
    pub reverse_gain: f64,
    /// Forward ideality nf.
    pub forward_ideality: f64,
    /// Reverse ideality nr.
    pub reverse_ideality: f64,
    /// Forward Early voltage Vf, V (infinite where left out).
    pub forward_early_voltage: f64,
    /// Reverse Early voltage Vr, V (infinite where left out).
    pub reverse_early_voltage: f64,
    /// Forward knee current Kf, A (infinite where left out).
    pub forward_knee_current: f64,
    /// Reverse knee current Kr, A (infinite where left out).
    pub reverse_knee_current: f64,
    /// Emitter junction leakage saturation current Le, A.
    pub emitter_leakage_current: f64,
    /// Its ideality ne.
    pub emitter_leakage_ideality: f64,
    /// Collector junction leakage saturation current Lc, A.
    pub collector_leakage_current: f64,
    /// Its ideality nc.
    pub collector_leakage_ideality: f64,
    /// Emitter junction breakdown voltage Ve0, V; `None` for no breakdown.
    pub emitter_breakdown_voltage: Option<f64>,
    /// Emitter current at the breakdown voltage Ie0, A.
    pub emitter_breakdown_current: f64,
    /// Ohmic base resistance rb, Ω.
    pub base_resistance: f64,
    /// Ohmic emitter resistance re, Ω.
    pub emitter_resistance: f64,
    /// Ohmic collector resistance rc, Ω.
    pub collector_resistance: f64,
    /// Forward transit time τf, s.
    pub forward_transit_time: f64,
    /// Reverse transit time τr, s.
    pub reverse_transit_time: f64,
    /// Emitter junction capacitance at zero bias Ce, F.
    pub emitter_junction_capacitance: f64,
    /// Emitter junction potential φe, V.
    pub emitter_potential: f64,
    /// Emitter grading exponent me.
    pub emitter_grading: f64,
    /// Collector junction capacitance at zero bias Cc, F.
    pub collector_junction_capacitance: f64,
    /// Collector junction potential φc, V.
    pub collector_potential: f64,
    /// Collector grading exponent mc.
    pub collector_grading: f64,
    /// Bandgap Eg, eV.
    pub bandgap: f64,
    /// Temperature exponent of the saturation current ps.
    pub saturation_temperature_exponent: f64,
    /// Temperature exponent of the current gains pβ.
    pub gain_temperature_exponent: f64,
    /// Flicker noise coefficient f1, A^(2−a1).
    pub flicker_coefficient: f64,
    /// Flicker noise exponent a1.
    pub flicker_exponent: f64,
}

impl TransistorParameters {
    /// The exponential law: every optional parameter left out.
    /// `saturation_current` in A, `forward_gain` as a ratio.
    pub fn exponential(saturation_current: f64, forward_gain: f64) -> Self {
        TransistorParameters {
            saturation_current,
            forward_gain,
            reverse_gain: 1.0,
            forward_ideality: 1.0,
            reverse_ideality: 1.0,
            forward_early_voltage: f64::INFINITY,
            reverse_early_voltage: f64::INFINITY,
            forward_knee_current: f64::INFINITY,
            reverse_knee_current: f64::INFINITY,
            emitter_leakage_current: 0.0,
            emitter_leakage_ideality: 2.0,
            collector_leakage_current: 0.0,
            collector_leakage_ideality: 2.0,
            emitter_breakdown_voltage: None,
            emitter_breakdown_current: 1e-5,
            base_resistance: 0.0,
            emitter_resistance: 0.0,
            collector_resistance: 0.0,
            forward_transit_time: 0.0,
            reverse_transit_time: 0.0,
            emitter_junction_capacitance: 0.0,
            emitter_potential: 0.7,
            emitter_grading: 0.4,
            collector_junction_capacitance: 0.0,
            collector_potential: 0.7,
            collector_grading: 0.4,
            bandgap: 1.17,
            saturation_temperature_exponent: 3.0,
            gain_temperature_exponent: 0.0,
            flicker_coefficient: 0.0,
            flicker_exponent: 1.0,
        }
    }
}

/// Parameters of the diode law.
#[derive(Clone, Debug, PartialEq)]
pub struct DiodeParameters {
    /// Saturation current Is, A.
    pub saturation_current: f64,
    /// Ideality n.
    pub ideality: f64,
    /// Ohmic series resistance, Ω.
    pub series_resistance: f64,
    /// Breakdown voltage Vz, V; `None` for no breakdown.
    pub breakdown_voltage: Option<f64>,
    /// Breakdown current Iz at that voltage, A.
    pub breakdown_current: f64,
    /// Breakdown ideality nz.
    pub breakdown_ideality: f64,
    /// Transit time τ, s.
    pub transit_time: f64,
    /// Junction capacitance at zero bias C, F.
    pub junction_capacitance: f64,
    /// Junction potential φ, V.
    pub potential: f64,
    /// Grading exponent m.
    pub grading: f64,
    /// Bandgap Eg, eV.
    pub bandgap: f64,
    /// Temperature exponent of the saturation current ps.
    pub saturation_temperature_exponent: f64,
    /// Flicker noise coefficient f1, A^(2−a1).
    pub flicker_coefficient: f64,
    /// Flicker noise exponent a1.
    pub flicker_exponent: f64,
}

impl DiodeParameters {
    /// A plain junction: every optional parameter left out. `saturation_current` in A.
    pub fn exponential(saturation_current: f64) -> Self {
        DiodeParameters {
            saturation_current,
            ideality: 1.0,
            series_resistance: 0.0,
            breakdown_voltage: None,
            breakdown_current: 1e-3,
            breakdown_ideality: 1.0,
            transit_time: 0.0,
            junction_capacitance: 0.0,
            potential: 0.7,
            grading: 0.4,
            bandgap: 1.17,
            saturation_temperature_exponent: 3.0,
            flicker_coefficient: 0.0,
            flicker_exponent: 1.0,
        }
    }
}
