//! Values for people: `4.70 kΩ`, `12.3 µA`.

/// Prefixes printed, from 10^−18 to 10^12.
const PREFIXES: [&str; 11] = ["a", "f", "p", "n", "µ", "m", "", "k", "M", "G", "T"];
const LOWEST_POWER: i32 = -18;

/// `value` with `digits` significant digits (at least 1), the SI prefix that leaves one to three digits before the
/// point, and `unit`: `engineering(4700.0, "Ω", 3)` is `4.70 kΩ`.
pub fn engineering(value: f64, unit: &str, digits: usize) -> String {
    if !value.is_finite() || value == 0.0 {
        return plain(value, unit);
    }
    // Rounding comes first: 999.96 to four digits is 1.000 k, not 1000.
    let (mantissa, power) = rounded(value, digits.max(1));
    let group = power.div_euclid(3).clamp(
        LOWEST_POWER / 3,
        LOWEST_POWER / 3 + PREFIXES.len() as i32 - 1,
    );
    let prefix = PREFIXES[(group - LOWEST_POWER / 3) as usize];
    let sign = if value < 0.0 { "-" } else { "" };
    with_unit(
        &format!("{sign}{}", placed(&mantissa, power - 3 * group)),
        &format!("{prefix}{unit}"),
    )
}

/// The significant digits of `value` and the power of ten of the first of them.
fn rounded(value: f64, digits: usize) -> (String, i32) {
    let text = format!("{:.*e}", digits - 1, value.abs());
    let (mantissa, power) = text.split_once('e').unwrap_or((&text, "0"));
    (mantissa.replace('.', ""), power.parse().unwrap_or(0))
}

/// The digits with the point put behind the one of power zero.
fn placed(digits: &str, power: i32) -> String {
    if power < 0 {
        return format!("0.{}{digits}", "0".repeat((-power - 1) as usize));
    }
    let whole = power as usize + 1;
    if digits.len() <= whole {
        return format!("{digits}{}", "0".repeat(whole - digits.len()));
    }
    format!("{}.{}", &digits[..whole], &digits[whole..])
}

fn plain(value: f64, unit: &str) -> String {
    let number = match value {
        _ if value.is_nan() => "undefined",
        _ if value == 0.0 => "0",
        _ if value > 0.0 => "∞",
        _ => "-∞",
    };
    with_unit(number, unit)
}

fn with_unit(number: &str, unit: &str) -> String {
    if unit.is_empty() {
        number.to_owned()
    } else {
        format!("{number} {unit}")
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn the_prefix_leaves_one_to_three_digits_before_the_point() {
        for (value, digits, text) in [
            (4700.0, 3, "4.70 kΩ"),
            (47_000.0, 3, "47.0 kΩ"),
            (470_000.0, 3, "470 kΩ"),
            (470_000.0, 2, "470 kΩ"),
            (0.47, 3, "470 mΩ"),
            (1.23e-5, 3, "12.3 µΩ"),
            (-1.23e-5, 2, "-12 µΩ"),
            (999.96, 4, "1.000 kΩ"),
            (0.0, 3, "0 Ω"),
            (1e15, 3, "1000 TΩ"),
            (1e-20, 3, "0.0100 aΩ"),
            (f64::INFINITY, 3, "∞ Ω"),
        ] {
            assert_eq!(engineering(value, "Ω", digits), text);
        }
        assert_eq!(engineering(120.0, "", 3), "120");
    }

    proptest! {
        #[test]
        fn what_is_printed_reads_back_to_half_a_digit(value in 1e-14f64..1e11, digits in 1usize..12) {
            let read = super::super::engineering::parse(&engineering(value, "V", digits), super::super::Unit::Volt);
            // Half a unit of the last digit printed, against the smallest mantissa 1; one part in 1e15 for binary rounding.
            let bound = 0.5 * 10f64.powi(1 - digits as i32) + 1e-15;
            prop_assert!((read.unwrap() / value - 1.0).abs() <= bound);
        }
    }
}
