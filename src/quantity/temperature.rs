//! Temperatures as typed: `25C`, `-10 °C`, `298.15K`.

use super::constants::ZERO_CELSIUS;
use super::engineering::parse_decimal;
use super::{Unit, ValueError};

const WANTED: &str = "a temperature such as 25C, -10C or 298.15K";

/// Reads a temperature in kelvin; a bare number is in degrees Celsius, as data sheets are.
pub fn parse_temperature(text: &str) -> Result<f64, ValueError> {
    let text = text.trim();
    let celsius = ["°C", "℃", "C"]
        .iter()
        .find_map(|unit| text.strip_suffix(unit));
    let (number, zero) = match (celsius, text.strip_suffix('K')) {
        (Some(number), _) => (number, ZERO_CELSIUS),
        (None, Some(number)) => (number, 0.0),
        (None, None) => (text, ZERO_CELSIUS),
    };
    let kelvin = match parse_decimal(number, Unit::Plain) {
        Ok(decimal) => decimal.to_f64() + zero,
        Err(ValueError::Empty { .. }) if text.is_empty() => {
            return Err(ValueError::Empty { wanted: WANTED });
        }
        Err(comma @ ValueError::CommaForPoint { .. }) => return Err(comma),
        Err(_) => {
            return Err(ValueError::NotANumber {
                found: text.to_owned(),
                wanted: WANTED,
            });
        }
    };
    let found = || text.to_owned();
    match kelvin {
        _ if !kelvin.is_finite() => Err(ValueError::NotFinite { found: found() }),
        _ if kelvin <= 0.0 => Err(ValueError::OutOfRange {
            found: found(),
            must: "must be above absolute zero, -273.15C",
        }),
        _ => Ok(kelvin),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn celsius_is_the_default_and_kelvin_is_read() {
        for (text, kelvin) in [
            ("25C", 298.15),
            ("25", 298.15),
            ("25 °C", 298.15),
            ("-10C", 263.15),
            ("60C", 333.15),
            ("298.15K", 298.15),
        ] {
            assert_eq!(parse_temperature(text), Ok(kelvin), "{text}");
        }
    }

    #[test]
    fn nothing_is_colder_than_absolute_zero() {
        assert_eq!(
            parse_temperature("-300C").unwrap_err().to_string(),
            "\"-300C\" must be above absolute zero, -273.15C"
        );
        assert_eq!(
            parse_temperature("warm").unwrap_err().to_string(),
            "\"warm\" is not a temperature such as 25C, -10C or 298.15K"
        );
    }
}
