//! The keys of a device: name, unit and allowed range of every parameter, once for the stage file, the built-in
//! classes and the command line.

use super::{DiodeParameters, Ratings, TransistorParameters};
use crate::quantity::Unit;

/// The range a value may have.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Range {
    /// Above 0.
    Positive,
    /// 0 or above.
    NotNegative,
    /// 0 or above, below 1.
    BelowOne,
    /// From 0 to 1, both included.
    ZeroToOne,
    /// Any finite value.
    Any,
}

impl Range {
    /// Whether `value` lies in the range; NaN and infinity never do.
    pub fn holds(self, value: f64) -> bool {
        value.is_finite()
            && match self {
                Range::Positive => value > 0.0,
                Range::NotNegative => value >= 0.0,
                Range::BelowOne => (0.0..1.0).contains(&value),
                Range::ZeroToOne => (0.0..=1.0).contains(&value),
                Range::Any => true,
            }
    }

    /// `must be above 0 Ω`, for messages.
    pub fn demand(self, unit: Unit) -> String {
        let zero = if unit.symbol().is_empty() {
            "0".to_owned()
        } else {
            format!("0 {}", unit.symbol())
        };
        match self {
            Range::Positive => format!("must be above {zero}"),
            Range::NotNegative => format!("must be {zero} or above"),
            Range::BelowOne => "must be 0 or above and below 1".to_owned(),
            Range::ZeroToOne => "must be from 0 to 1".to_owned(),
            Range::Any => "must be a finite number".to_owned(),
        }
    }
}

/// One parameter of `P`.
#[derive(Debug)]
pub struct Key<P: 'static> {
    /// Its name in a stage file.
    pub name: &'static str,
    /// Its unit.
    pub unit: Unit,
    /// Its range.
    pub range: Range,
    /// Puts a value into a parameter set.
    pub set: fn(&mut P, f64),
}

impl<P> Key<P> {
    /// The key of that name.
    pub fn find<'k>(keys: &'k [Key<P>], name: &str) -> Option<&'k Key<P>> {
        keys.iter().find(|key| key.name == name)
    }
}

macro_rules! key {
    ($name:ident, $unit:ident, $range:ident) => {
        Key {
            name: stringify!($name),
            unit: Unit::$unit,
            range: Range::$range,
            set: |set, value| set.$name = value,
        }
    };
}

macro_rules! optional {
    ($name:ident, $unit:ident) => {
        Key {
            name: stringify!($name),
            unit: Unit::$unit,
            range: Range::Positive,
            set: |set, value| set.$name = Some(value),
        }
    };
}

/// The parameters of a transistor.
pub const TRANSISTOR: &[Key<TransistorParameters>] = &[
    key!(saturation_current, Ampere, Positive),
    key!(forward_gain, Plain, Positive),
    key!(reverse_gain, Plain, Positive),
    key!(forward_ideality, Plain, Positive),
    key!(reverse_ideality, Plain, Positive),
    key!(forward_early_voltage, Volt, Positive),
    key!(reverse_early_voltage, Volt, Positive),
    key!(forward_knee_current, Ampere, Positive),
    key!(reverse_knee_current, Ampere, Positive),
    key!(emitter_leakage_current, Ampere, NotNegative),
    key!(emitter_leakage_ideality, Plain, Positive),
    key!(collector_leakage_current, Ampere, NotNegative),
    key!(collector_leakage_ideality, Plain, Positive),
    optional!(emitter_breakdown_voltage, Volt),
    key!(emitter_breakdown_current, Ampere, Positive),
    key!(base_resistance, Ohm, NotNegative),
    key!(emitter_resistance, Ohm, NotNegative),
    key!(collector_resistance, Ohm, NotNegative),
    key!(forward_transit_time, Second, NotNegative),
    key!(reverse_transit_time, Second, NotNegative),
    key!(emitter_junction_capacitance, Farad, NotNegative),
    key!(emitter_potential, Volt, Positive),
    key!(emitter_grading, Plain, BelowOne),
    key!(collector_junction_capacitance, Farad, NotNegative),
    key!(collector_potential, Volt, Positive),
    key!(collector_grading, Plain, BelowOne),
    key!(bandgap, ElectronVolt, Positive),
    key!(saturation_temperature_exponent, Plain, Any),
    key!(gain_temperature_exponent, Plain, Any),
    key!(flicker_coefficient, Plain, NotNegative),
    key!(flicker_exponent, Plain, Positive),
];

/// The parameters of a diode.
pub const DIODE: &[Key<DiodeParameters>] = &[
    key!(saturation_current, Ampere, Positive),
    key!(ideality, Plain, Positive),
    key!(series_resistance, Ohm, NotNegative),
    optional!(breakdown_voltage, Volt),
    key!(breakdown_current, Ampere, Positive),
    key!(breakdown_ideality, Plain, Positive),
    key!(transit_time, Second, NotNegative),
    key!(junction_capacitance, Farad, NotNegative),
    key!(potential, Volt, Positive),
    key!(grading, Plain, BelowOne),
    key!(bandgap, ElectronVolt, Positive),
    key!(saturation_temperature_exponent, Plain, Any),
    key!(flicker_coefficient, Plain, NotNegative),
    key!(flicker_exponent, Plain, Positive),
];

/// The ratings of a transistor.
pub const TRANSISTOR_RATINGS: &[Key<Ratings>] = &[
    optional!(collector_emitter_volts, Volt),
    optional!(collector_current, Ampere),
    optional!(emitter_base_volts, Volt),
    optional!(dissipation, Watt),
];

/// The ratings of a diode.
pub const DIODE_RATINGS: &[Key<Ratings>] = &[
    optional!(forward_current, Ampere),
    optional!(reverse_volts, Volt),
    optional!(dissipation, Watt),
];

/// The rating of a resistor or a potentiometer.
pub const RESISTOR_RATINGS: &[Key<Ratings>] = &[optional!(watts, Watt)];

/// The rating of a capacitor.
pub const CAPACITOR_RATINGS: &[Key<Ratings>] = &[optional!(volts, Volt)];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_transistor_key_sets_the_parameter_of_its_name() {
        let mut set = TransistorParameters::exponential(1e-14, 100.0);
        for (index, key) in TRANSISTOR.iter().enumerate() {
            (key.set)(&mut set, 1000.0 + index as f64);
        }
        // The derived debug form names every field, so a key wired to its neighbour shows; all 31 are there.
        let debug = format!("{set:?}").replace("Some(", "").replace(')', "");
        for (index, key) in TRANSISTOR.iter().enumerate() {
            assert!(
                debug.contains(&format!("{}: {}", key.name, 1000 + index)),
                "{} in {debug}",
                key.name
            );
        }
        assert_eq!(debug.matches(": ").count(), TRANSISTOR.len());
    }

    #[test]
    fn a_diode_key_sets_the_parameter_of_its_name() {
        let mut set = DiodeParameters::exponential(1e-14);
        for (index, key) in DIODE.iter().enumerate() {
            (key.set)(&mut set, 1000.0 + index as f64);
        }
        let debug = format!("{set:?}").replace("Some(", "").replace(')', "");
        for (index, key) in DIODE.iter().enumerate() {
            assert!(
                debug.contains(&format!("{}: {}", key.name, 1000 + index)),
                "{} in {debug}",
                key.name
            );
        }
        assert_eq!(debug.matches(": ").count(), DIODE.len());
    }

    #[test]
    fn ranges_refuse_what_is_not_finite() {
        for range in [
            Range::Positive,
            Range::NotNegative,
            Range::BelowOne,
            Range::ZeroToOne,
            Range::Any,
        ] {
            assert!(
                !range.holds(f64::NAN) && !range.holds(f64::INFINITY),
                "{range:?}"
            );
        }
        assert!(!Range::Positive.holds(0.0) && Range::NotNegative.holds(0.0));
        assert!(Range::ZeroToOne.holds(1.0) && !Range::BelowOne.holds(1.0));
    }
}
