//! Frequencies: `1k`, `20Hz`, `15.7kHz`, `1000`.

use super::{Element, Unit, ValueError, engineering};

/// A frequency above zero.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Frequency {
    /// Hz.
    pub hertz: f64,
}

impl Element for Frequency {
    fn parse(text: &str) -> Result<Self, ValueError> {
        let hertz = engineering::parse(text, Unit::Hertz)?;
        if hertz > 0.0 {
            Ok(Frequency { hertz })
        } else {
            Err(ValueError::OutOfRange {
                found: text.trim().to_owned(),
                must: "must be above 0 Hz",
            })
        }
    }

    fn value(self) -> f64 {
        self.hertz
    }

    fn from_value(hertz: f64) -> Self {
        Frequency { hertz }
    }
}

impl std::str::FromStr for Frequency {
    type Err = ValueError;

    fn from_str(text: &str) -> Result<Self, ValueError> {
        Frequency::parse(text)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn frequencies_read_with_and_without_unit() {
        for (text, hertz) in [
            ("1k", 1000.0),
            ("20Hz", 20.0),
            ("15.7kHz", 15700.0),
            ("1000", 1000.0),
            ("15000.0", 15000.0),
        ] {
            assert_eq!(Frequency::parse(text), Ok(Frequency { hertz }), "{text}");
        }
    }

    #[test]
    fn zero_and_negative_frequencies_are_refused() {
        assert_eq!(
            Frequency::parse("0").unwrap_err().to_string(),
            "\"0\" must be above 0 Hz"
        );
        assert!(Frequency::parse("-1k").is_err());
    }
}
