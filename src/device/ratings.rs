//! What a part can stand.

/// Ratings a part may carry; `None` where not stated.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Ratings {
    /// Resistor dissipation, W.
    pub watts: Option<f64>,
    /// Capacitor voltage, V.
    pub volts: Option<f64>,
    /// Transistor collector–emitter voltage, V.
    pub collector_emitter_volts: Option<f64>,
    /// Transistor collector current, A.
    pub collector_current: Option<f64>,
    /// Reverse emitter–base voltage, V.
    pub emitter_base_volts: Option<f64>,
    /// Diode forward current, A.
    pub forward_current: Option<f64>,
    /// Diode reverse voltage, V.
    pub reverse_volts: Option<f64>,
    /// Device dissipation, W.
    pub dissipation: Option<f64>,
}

impl Ratings {
    /// These ratings with those stated in `over` put over them.
    pub fn overlaid(&self, over: &Ratings) -> Ratings {
        Ratings {
            watts: over.watts.or(self.watts),
            volts: over.volts.or(self.volts),
            collector_emitter_volts: over
                .collector_emitter_volts
                .or(self.collector_emitter_volts),
            collector_current: over.collector_current.or(self.collector_current),
            emitter_base_volts: over.emitter_base_volts.or(self.emitter_base_volts),
            forward_current: over.forward_current.or(self.forward_current),
            reverse_volts: over.reverse_volts.or(self.reverse_volts),
            dissipation: over.dissipation.or(self.dissipation),
        }
    }
}
