//! Ratios: percent, parts per million, and temperature coefficients.

use super::engineering::parse_decimal;
use super::{Element, Unit, ValueError};

const WANTED_RATIO: &str = "a ratio such as 5%, 100ppm or 0.05";
const WANTED_PERCENT: &str = "a percentage such as 0.1% or 1";

/// `5%` → 0.05, `100ppm` → 1e-4, a bare number is the ratio itself.
pub fn parse_ratio(text: &str) -> Result<f64, ValueError> {
    scaled(text, 0, WANTED_RATIO)
}

/// `1%` and a bare `1` → 0.01, for options that ask for a percentage.
pub fn parse_percent(text: &str) -> Result<f64, ValueError> {
    scaled(text, -2, WANTED_PERCENT)
}

/// A temperature coefficient in 1/K: `100ppm`, `-50ppm/K`, `0.4%/°C`, or a bare number in 1/K.
pub fn parse_tempco(text: &str) -> Result<f64, ValueError> {
    let text = text.trim();
    let per_kelvin = ["/K", "/°C", "/C"]
        .iter()
        .find_map(|unit| text.strip_suffix(unit));
    scaled(
        per_kelvin.unwrap_or(text),
        0,
        "a temperature coefficient such as 100ppm or -50ppm/K",
    )
}

fn scaled(text: &str, bare_power: i64, wanted: &'static str) -> Result<f64, ValueError> {
    let text = text.trim();
    let (number, power) = if let Some(number) = text.strip_suffix('%') {
        (number, -2)
    } else if let Some(number) = text.strip_suffix("ppm") {
        (number, -6)
    } else {
        (text, bare_power)
    };
    let value = match parse_decimal(number, Unit::Plain) {
        Ok(decimal) => decimal.shifted(power).to_f64(),
        Err(comma @ ValueError::CommaForPoint { .. }) => return Err(comma),
        Err(_) => {
            return Err(ValueError::NotANumber {
                found: text.to_owned(),
                wanted,
            });
        }
    };
    if value.is_finite() {
        Ok(value)
    } else {
        Err(ValueError::NotFinite {
            found: text.to_owned(),
        })
    }
}

/// A percentage above zero, held as a ratio: an element of `--thd 0.1,1%`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Percent {
    /// The ratio: 0.01 for 1 %.
    pub ratio: f64,
}

impl Element for Percent {
    fn parse(text: &str) -> Result<Self, ValueError> {
        let ratio = parse_percent(text)?;
        if ratio > 0.0 {
            Ok(Percent { ratio })
        } else {
            Err(ValueError::OutOfRange {
                found: text.trim().to_owned(),
                must: "must be above 0 %",
            })
        }
    }

    fn value(self) -> f64 {
        self.ratio
    }

    fn from_value(ratio: f64) -> Self {
        Percent { ratio }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn percent_and_ppm_shift_the_decimal_exactly() {
        assert_eq!(parse_ratio("5%"), Ok(0.05));
        assert_eq!(parse_ratio("0.1 %"), Ok(0.001));
        assert_eq!(parse_ratio("0.05"), Ok(0.05));
        assert_eq!(parse_percent("0.1"), Ok(0.001));
        assert_eq!(parse_percent("0.1%"), Ok(0.001));
        assert_eq!(parse_tempco("100ppm"), Ok(1e-4));
        assert_eq!(parse_tempco("-50ppm/K"), Ok(-5e-5));
        assert_eq!(parse_tempco("0.4%/°C"), Ok(0.004));
    }

    #[test]
    fn a_ratio_that_is_none_is_refused_with_an_example() {
        assert_eq!(
            parse_ratio("5V").unwrap_err().to_string(),
            "\"5V\" is not a ratio such as 5%, 100ppm or 0.05"
        );
        assert_eq!(
            parse_percent("0,1%").unwrap_err().to_string(),
            "\"0,1\" has a comma; write 0.1 with a point"
        );
        assert_eq!(
            Percent::parse("0").unwrap_err().to_string(),
            "\"0\" must be above 0 %"
        );
    }
}
