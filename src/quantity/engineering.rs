//! Engineering text: SI prefixes, and the marks of IEC 60062 in place of the decimal point.
//!
//! `4k7`, `4.7k`, `4.7 kΩ`, `4K7`, `4700`, `4.7e3` are one value. The digits are kept as decimal text and the prefix
//! shifts their exponent, so the result is the `f64` nearest to what was typed: one rounding, whatever the spelling.
//! A prefix is read by its case (`m` milli, `M` mega, `f` femto), but `K` is kilo as IEC 60062 writes it. After a number
//! the bare unit is tried before the prefix: `10F` on a capacitor is ten farads, `10f` ten femtofarads.

use super::{Decimal, Unit, ValueError};

/// The prefixes read, with their power of ten. Micro has two characters, the sign and the Greek letter.
const PREFIXES: [(char, i64); 11] = [
    ('f', -15),
    ('p', -12),
    ('n', -9),
    ('u', -6),
    ('\u{b5}', -6),
    ('\u{3bc}', -6),
    ('m', -3),
    ('k', 3),
    ('K', 3),
    ('M', 6),
    ('G', 9),
];

/// Reads `text` as a finite value in the base unit of `unit`.
pub fn parse(text: &str, unit: Unit) -> Result<f64, ValueError> {
    let value = parse_decimal(text, unit)?.to_f64();
    if value.is_finite() {
        Ok(value)
    } else {
        Err(ValueError::NotFinite {
            found: text.trim().to_owned(),
        })
    }
}

/// Reads `text` as the decimal number it says, in the base unit of `unit`.
pub fn parse_decimal(text: &str, unit: Unit) -> Result<Decimal, ValueError> {
    let text = text.trim();
    if text.is_empty() {
        return Err(ValueError::Empty {
            wanted: unit.wanted(),
        });
    }
    if text.contains(',') {
        return Err(comma(text, unit));
    }
    let number = Number::scan(text);
    if let Some(decimal) = marked(&number, unit) {
        return refuse_mega_capacitor(decimal, text, unit);
    }
    let Some(decimal) = number.decimal() else {
        return Err(ValueError::NotANumber {
            found: text.to_owned(),
            wanted: unit.wanted(),
        });
    };
    match suffix_power(number.rest.trim_start(), unit) {
        Some(power) => refuse_mega_capacitor(decimal.shifted(power), text, unit),
        None => Err(bad_suffix(text, number.rest.trim(), unit)),
    }
}

/// The numeric beginning of a text, and what follows it.
struct Number<'t> {
    negative: bool,
    whole: &'t str,
    fraction: Option<&'t str>,
    exponent: Option<i64>,
    rest: &'t str,
}

impl<'t> Number<'t> {
    fn scan(text: &'t str) -> Self {
        let (negative, rest) = sign(text);
        let (whole, rest) = digits(rest);
        let (fraction, rest) = match rest.strip_prefix('.') {
            Some(after) => {
                let (fraction, rest) = digits(after);
                (Some(fraction), rest)
            }
            None => (None, rest),
        };
        let (exponent, rest) = exponent(rest);
        Number {
            negative,
            whole,
            fraction,
            exponent,
            rest,
        }
    }

    /// The number itself; `None` where there is not a single digit.
    fn decimal(&self) -> Option<Decimal> {
        self.with_fraction(self.fraction.unwrap_or(""))
            .map(|d| d.shifted(self.exponent.unwrap_or(0)))
    }

    fn with_fraction(&self, fraction: &str) -> Option<Decimal> {
        let digits = format!("{}{fraction}", self.whole);
        (!digits.is_empty()).then(|| Decimal {
            negative: self.negative,
            digits,
            exponent: -(fraction.len() as i64),
        })
    }
}

/// A leading sign; the typographic minus U+2212 comes with text copied from a page.
fn sign(text: &str) -> (bool, &str) {
    match text.strip_prefix(['-', '\u{2212}']) {
        Some(rest) => (true, rest),
        None => (false, text.strip_prefix('+').unwrap_or(text)),
    }
}

fn digits(text: &str) -> (&str, &str) {
    let end = text
        .find(|c: char| !c.is_ascii_digit())
        .unwrap_or(text.len());
    text.split_at(end)
}

/// A decimal exponent. An `e` without digits behind it is none: `1.1eV` is in electron volts.
fn exponent(text: &str) -> (Option<i64>, &str) {
    let Some(after) = text.strip_prefix(['e', 'E']) else {
        return (None, text);
    };
    let (negative, after) = sign(after);
    let (power, rest) = digits(after);
    if power.is_empty() {
        return (None, text);
    }
    // Beyond a billion every value is zero or infinite anyway.
    let power = power.parse::<i64>().unwrap_or(i64::MAX).min(1_000_000_000);
    (Some(if negative { -power } else { power }), rest)
}

/// `4k7`, `R47`, `3V3`: a mark in place of the point, the unit may follow. `None` where the text is not of that form.
fn marked(number: &Number, unit: Unit) -> Option<Decimal> {
    if number.fraction.is_some() || number.exponent.is_some() {
        return None;
    }
    let mark = number.rest.chars().next()?;
    let power = match prefix_power(mark) {
        Some(power) => power,
        None if unit.mark() == Some(mark) => 0,
        None => return None,
    };
    let (fraction, after) = digits(&number.rest[mark.len_utf8()..]);
    let after = after.trim_start();
    let unit_follows = after.is_empty() || unit.spellings().contains(&after);
    if fraction.is_empty() || !unit_follows {
        return None;
    }
    number.with_fraction(fraction).map(|d| d.shifted(power))
}

fn prefix_power(prefix: char) -> Option<i64> {
    PREFIXES
        .iter()
        .find(|(letter, _)| *letter == prefix)
        .map(|(_, power)| *power)
}

/// The power of ten of an optional prefix and an optional unit.
fn suffix_power(suffix: &str, unit: Unit) -> Option<i64> {
    let is_unit = |text: &str| text.is_empty() || unit.spellings().contains(&text);
    if is_unit(suffix) {
        return Some(0);
    }
    let prefix = suffix.chars().next()?;
    let power = prefix_power(prefix)?;
    is_unit(suffix[prefix.len_utf8()..].trim_start()).then_some(power)
}

fn comma(text: &str, unit: Unit) -> ValueError {
    let right = text.replacen(',', ".", 1);
    if parse_decimal(&right, unit).is_ok() {
        ValueError::CommaForPoint {
            found: text.to_owned(),
            right,
        }
    } else {
        ValueError::NotANumber {
            found: text.to_owned(),
            wanted: unit.wanted(),
        }
    }
}

fn bad_suffix(text: &str, suffix: &str, unit: Unit) -> ValueError {
    let other = Unit::WITH_SYMBOL
        .into_iter()
        .filter(|other| *other != unit)
        .find(|other| {
            // A bare prefix fits every unit and so tells nothing.
            suffix_power(suffix, *other).is_some() || marked(&Number::scan(text), *other).is_some()
        });
    match other {
        Some(other) => ValueError::WrongUnit {
            found: text.to_owned(),
            unit: other.name(),
            wanted: unit.wanted(),
        },
        None => ValueError::UnknownSuffix {
            found: text.to_owned(),
            suffix: suffix.to_owned(),
            wanted: unit.wanted(),
        },
    }
}

/// On a capacitor `M` is a habit from old schematics, where it meant micro: it is never guessed at.
fn refuse_mega_capacitor(value: Decimal, text: &str, unit: Unit) -> Result<Decimal, ValueError> {
    if unit == Unit::Farad && text.contains('M') {
        return Err(ValueError::MegaOnCapacitor {
            found: text.to_owned(),
            milli: text.replace('M', "m"),
            micro: text.replace('M', "u"),
        });
    }
    Ok(value)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn ohms(text: &str) -> f64 {
        parse(text, Unit::Ohm).unwrap_or_else(|error| panic!("{text}: {error}"))
    }

    fn refusal(text: &str, unit: Unit) -> String {
        parse(text, unit)
            .map(|value| panic!("{text} was read as {value}"))
            .unwrap_err()
            .to_string()
    }

    #[test]
    fn every_spelling_of_one_resistance_is_the_same_number() {
        for text in [
            "4k7", "4K7", "4.7k", "4.7K", "4.7 kΩ", "4.7kohm", "4k7Ω", "4k7 ohm", "4700", "4.7e3",
            "4.7E+3Ω", "+4700R",
        ] {
            assert_eq!(ohms(text), 4700.0, "{text}");
        }
    }

    #[test]
    fn marks_stand_where_the_point_would() {
        // IEC 60062, the examples of its letter code for resistance and capacitance (from memory).
        for (text, value) in [
            ("R47", 0.47),
            ("4R7", 4.7),
            ("47R", 47.0),
            ("4k7", 4.7e3),
            ("4M7", 4.7e6),
            ("4G7", 4.7e9),
            ("k33", 330.0),
        ] {
            assert_eq!(ohms(text), value, "{text}");
        }
        for (text, value) in [
            ("p33", 0.33e-12),
            ("3p3", 3.3e-12),
            ("2u2", 2.2e-6),
            ("2µ2", 2.2e-6),
            ("2μ2F", 2.2e-6),
            ("4m7", 4.7e-3),
            ("1F5", 1.5),
        ] {
            assert_eq!(parse(text, Unit::Farad), Ok(value), "{text}");
        }
        assert_eq!(parse("3V3", Unit::Volt), Ok(3.3));
    }

    #[test]
    fn case_decides_between_milli_and_mega_and_between_femto_and_farad() {
        assert_eq!(parse("-700m", Unit::Volt), Ok(-0.7));
        assert_eq!(parse("-1M", Unit::Volt), Ok(-1e6));
        assert_eq!(parse("10f", Unit::Farad), Ok(10e-15));
        assert_eq!(parse("10F", Unit::Farad), Ok(10.0));
        assert_eq!(parse("10fF", Unit::Farad), Ok(10e-15));
        assert_eq!(parse("14f", Unit::Ampere), Ok(14e-15));
    }

    #[test]
    fn a_prefix_never_rounds_twice() {
        // 0.1·1000 and 3.3·1e-12 in binary differ from these in the last place.
        assert_eq!(parse("3p3", Unit::Farad), Ok("3.3e-12".parse().unwrap()));
        assert_eq!(parse("1.2e-05V", Unit::Volt), Ok(1.2e-5));
        assert_eq!(parse("0.0000000000000000001G", Unit::Volt), Ok(1e-10));
        assert_eq!(parse("1.11eV", Unit::ElectronVolt), Ok(1.11));
    }

    #[test]
    fn refusals_say_what_was_found_and_what_would_be_right() {
        assert_eq!(
            refusal("2,2k", Unit::Ohm),
            "\"2,2k\" has a comma; write 2.2k with a point"
        );
        assert_eq!(
            refusal("4M7", Unit::Farad),
            "\"4M7\": M is mega; write 4u7 for microfarads or 4m7 for millifarads"
        );
        assert_eq!(
            refusal("10MF", Unit::Farad),
            "\"10MF\": M is mega; write 10uF for microfarads or 10mF for millifarads"
        );
        assert_eq!(
            refusal("100nF", Unit::Ohm),
            "\"100nF\" is in farads; needs a resistance such as 4k7, 4R7 or 4.7kΩ"
        );
        assert_eq!(
            refusal("4R7", Unit::Farad),
            "\"4R7\" is in ohms; needs a capacitance such as 4u7, 100n or 220pF"
        );
        assert_eq!(
            refusal("", Unit::Volt),
            "nothing given, needs a voltage such as 12, 700m or 1.5V"
        );
        assert_eq!(
            refusal("many", Unit::Volt),
            "\"many\" is not a voltage such as 12, 700m or 1.5V"
        );
        assert_eq!(
            refusal("1e400", Unit::Ohm),
            "\"1e400\" is not a finite number"
        );
        assert_eq!(
            refusal("12x", Unit::Ohm),
            "\"12x\": \"x\" is neither a prefix (f p n u m k M G) nor the unit; needs a resistance such as 4k7, 4R7 or 4.7kΩ"
        );
        for text in [
            "inf", "nan", "NaN", "-", ".", "e5", "1..2", "--1", "4k7k", "4k7.2", "1e5e5", "0x10",
        ] {
            refusal(text, Unit::Ohm);
        }
    }

    proptest! {
        #[test]
        fn text_of_any_number_reads_back_exactly(value in proptest::num::f64::NORMAL) {
            for unit in [Unit::Ohm, Unit::Volt, Unit::Plain] {
                prop_assert_eq!(parse(&format!("{value}"), unit), Ok(value));
                prop_assert_eq!(parse(&format!("{value:e}{}", unit.symbol()), unit), Ok(value));
            }
        }

        #[test]
        fn mark_point_and_exponent_spell_the_same_value(whole in 0u32..100_000, fraction in "[0-9]{1,9}", prefix in 0..PREFIXES.len()) {
            let (letter, power) = PREFIXES[prefix];
            let exact: f64 = format!("{whole}.{fraction}e{power}").parse().unwrap();
            prop_assert_eq!(ohms(&format!("{whole}{letter}{fraction}")), exact);
            prop_assert_eq!(ohms(&format!("{whole}.{fraction}{letter}")), exact);
            prop_assert_eq!(ohms(&format!("-{whole}.{fraction} {letter}Ω")), -exact);
        }

        #[test]
        fn no_text_makes_it_panic(text in "\\PC{0,40}") {
            for unit in Unit::WITH_SYMBOL {
                let _ = parse(&text, unit).map_err(|error| error.to_string());
            }
        }
    }
}
