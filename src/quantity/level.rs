//! Levels as the trade writes them, held as volts rms.
//!
//! For a sine: peak = √2·rms, peak to peak = 2·√2·rms. 0 dBV = 1 V rms; 0 dBu = √0.6 V rms, 1 mW in 600 Ω
//! (IEC 60268-2 calls the latter's reference 0.775 V, rounded; from memory).

use std::f64::consts::SQRT_2;

use super::engineering::{self, parse_decimal};
use super::{Element, Unit, ValueError, format_engineering};

const WANTED: &str = "a level such as 20mV, 28.3mVpk, 56.6mVpp, -34dBV or -31.8dBu";

/// A level in volts rms, zero or above.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Level {
    /// V rms.
    pub rms: f64,
}

/// The voltage of 0 dBu, V rms.
pub fn dbu_reference() -> f64 {
    0.6f64.sqrt()
}

impl Level {
    /// Peak of the sine of this level, V.
    pub fn peak(self) -> f64 {
        self.rms * SQRT_2
    }

    /// Peak to peak of the sine of this level, V.
    pub fn peak_to_peak(self) -> f64 {
        2.0 * self.peak()
    }

    /// dB relative to 1 V rms; −∞ for zero.
    pub fn dbv(self) -> f64 {
        20.0 * self.rms.log10()
    }

    /// dB relative to √0.6 V rms; −∞ for zero.
    pub fn dbu(self) -> f64 {
        20.0 * (self.rms / dbu_reference()).log10()
    }

    /// `20.0 mV rms` with `digits` significant digits.
    pub fn text(self, digits: usize) -> String {
        format!("{} rms", format_engineering(self.rms, "V", digits))
    }
}

impl Element for Level {
    const MIXES_UNITS: bool = false;

    fn parse(text: &str) -> Result<Self, ValueError> {
        let text = text.trim();
        let rms = if let Some(number) = text.strip_suffix("dBV") {
            decibels(number, text)?
        } else if let Some(number) = text.strip_suffix("dBu") {
            decibels(number, text)? * dbu_reference()
        } else {
            volts(text)?
        };
        match rms {
            _ if !rms.is_finite() => Err(ValueError::NotFinite {
                found: text.to_owned(),
            }),
            _ if rms < 0.0 => Err(ValueError::OutOfRange {
                found: text.to_owned(),
                must: "is negative; a level in volts is 0 or above",
            }),
            _ => Ok(Level { rms }),
        }
    }

    fn value(self) -> f64 {
        self.rms
    }

    fn from_value(rms: f64) -> Self {
        Level { rms }
    }
}

impl std::str::FromStr for Level {
    type Err = ValueError;

    fn from_str(text: &str) -> Result<Self, ValueError> {
        Level::parse(text)
    }
}

/// The ratio of a number of decibels.
fn decibels(number: &str, text: &str) -> Result<f64, ValueError> {
    match parse_decimal(number, Unit::Plain) {
        Ok(decimal) => Ok(10f64.powf(decimal.to_f64() / 20.0)),
        Err(comma @ ValueError::CommaForPoint { .. }) => Err(comma),
        Err(_) => Err(ValueError::NotANumber {
            found: text.to_owned(),
            wanted: WANTED,
        }),
    }
}

/// Volts, rms unless a form follows the unit.
fn volts(text: &str) -> Result<f64, ValueError> {
    if text.is_empty() {
        return Err(ValueError::Empty { wanted: WANTED });
    }
    if text.to_ascii_lowercase().contains("db") {
        return Err(ValueError::Misspelt {
            found: text.to_owned(),
            right: "write decibels as dBV (1 V) or dBu (0.7746 V)",
        });
    }
    let (number, divisor) = if let Some(number) = text.strip_suffix("pk") {
        (number, SQRT_2)
    } else if let Some(number) = text.strip_suffix("pp") {
        (number, 2.0 * SQRT_2)
    } else {
        (text.strip_suffix("rms").unwrap_or(text), 1.0)
    };
    match engineering::parse(number, Unit::Volt) {
        Ok(volts) => Ok(volts / divisor),
        Err(comma @ ValueError::CommaForPoint { .. }) => Err(comma),
        Err(ValueError::WrongUnit { unit, .. }) => Err(ValueError::WrongUnit {
            found: text.to_owned(),
            unit,
            wanted: WANTED,
        }),
        Err(_) => Err(ValueError::NotANumber {
            found: text.to_owned(),
            wanted: WANTED,
        }),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn rms(text: &str) -> f64 {
        Level::parse(text)
            .unwrap_or_else(|error| panic!("{text}: {error}"))
            .rms
    }

    #[test]
    fn volts_are_rms_and_exact() {
        for (text, value) in [
            ("20mV", 0.02),
            ("20mVrms", 0.02),
            ("20m", 0.02),
            ("0.02", 0.02),
            ("1.2e-05V", 1.2e-5),
            ("1000", 1000.0),
        ] {
            assert_eq!(rms(text), value, "{text}");
        }
    }

    #[test]
    fn the_five_spellings_of_the_manual_are_one_level() {
        // Half a unit of the last digit typed: 0.05 of 28.3 or 56.6, and 0.05 dB.
        let half_of_tenth_db = 10f64.powf(0.05 / 20.0) - 1.0;
        for (text, bound) in [
            ("28.3mVpk", 0.05 / 28.3),
            ("56.6mVpp", 0.05 / 56.6),
            ("-34dBV", half_of_tenth_db),
            ("-31.8dBu", half_of_tenth_db),
        ] {
            let error = rms(text) / 0.02 - 1.0;
            assert!(error.abs() < bound, "{text} is off by {error}");
        }
    }

    #[test]
    fn decibels_read_back_as_typed() {
        let level = Level {
            rms: rms("-31.8dBu"),
        };
        assert!((level.dbu() + 31.8).abs() < 1e-13, "{}", level.dbu());
        assert!(
            (Level {
                rms: rms("-34 dBV")
            }
            .dbv()
                + 34.0)
                .abs()
                < 1e-13
        );
        // 1 mW in 600 Ω.
        assert!((rms("0dBu").powi(2) / 600.0 - 1e-3).abs() < 1e-18);
        assert!((level.peak_to_peak() - 2.0 * level.peak()).abs() < 1e-18);
    }

    #[test]
    fn refusals_name_the_right_spelling() {
        let refusal = |text: &str| Level::parse(text).unwrap_err().to_string();
        assert_eq!(
            refusal("-20mV"),
            "\"-20mV\" is negative; a level in volts is 0 or above"
        );
        assert_eq!(
            refusal("-34dB"),
            "\"-34dB\": write decibels as dBV (1 V) or dBu (0.7746 V)"
        );
        assert_eq!(
            refusal("loud"),
            "\"loud\" is not a level such as 20mV, 28.3mVpk, 56.6mVpp, -34dBV or -31.8dBu"
        );
        assert_eq!(refusal("1e9dBV"), "\"1e9dBV\" is not a finite number");
        assert!(refusal("20mA").starts_with("\"20mA\" is in amperes"));
    }

    #[test]
    fn a_level_prints_with_a_prefix() {
        assert_eq!(Level { rms: 0.02 }.text(3), "20.0 mV rms");
    }
}
