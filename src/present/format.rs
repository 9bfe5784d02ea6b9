//! Numbers as the trade writes them: engineering prefixes, decibels, percent.
//!
//! `dBV = 20·log10(V)`, `dBu = 20·log10(V/√0.6)`: 0 dBu is 1 mW in 600 Ω, √0.6 V = 0.7746 V rms (physics.md, levels).

/// What stands where a value lies at the arithmetic floor.
pub(super) const FLOOR: &str = "floor";

/// Volts rms of 0 dBu, squared: 1 mW × 600 Ω.
const ZERO_DBU_SQUARED: f64 = 0.6;

/// Prefixes from 10⁻¹⁵ up, a step of 10³ each.
const PREFIXES: [&str; 9] = ["f", "p", "n", "µ", "m", "", "k", "M", "G"];
/// Power of ten of the first prefix.
const LOWEST_POWER: i32 = -15;

/// A measured value with four significant digits and a prefix: `12.34 mV`, `600.0 Ω`.
pub(super) fn measured(value: f64, unit: &str) -> String {
    engineering(value, unit, 4, false)
}

/// A value somebody typed, with the digits it needs and at most six: `47 kΩ`, `15.625 kHz`.
pub(super) fn stated(value: f64, unit: &str) -> String {
    engineering(value, unit, 6, true)
}

fn engineering(value: f64, unit: &str, digits: usize, trim: bool) -> String {
    if value == 0.0 {
        return format!("0 {unit}");
    }
    if !value.is_finite() {
        return format!("not finite, {unit}");
    }
    let (mantissa, power) = split(value, digits);
    let group = power.div_euclid(3) * 3;
    let prefix = usize::try_from((group - LOWEST_POWER) / 3)
        .ok()
        .filter(|_| group >= LOWEST_POWER)
        .and_then(|index| PREFIXES.get(index));
    let Some(prefix) = prefix else {
        return format!("{mantissa}e{power} {unit}");
    };
    let shift = power - group;
    let decimals = digits.saturating_sub(1 + shift as usize);
    let number = format!("{:.decimals$}", mantissa * 10f64.powi(shift));
    let number = if trim { trimmed(&number) } else { &number };
    format!("{number} {prefix}{unit}")
}

/// `value` rounded to `digits` significant digits, as mantissa in [1, 10) and power of ten. Splitting the printed
/// form lets 999.96 carry into the next prefix.
fn split(value: f64, digits: usize) -> (f64, i32) {
    let printed = format!("{:.*e}", digits.saturating_sub(1), value);
    let (mantissa, power) = printed.split_once('e').unwrap_or((&printed, "0"));
    (
        mantissa.parse().unwrap_or(value),
        power.parse().unwrap_or(0),
    )
}

/// A decimal without its trailing zeros.
pub(super) fn trimmed(number: &str) -> &str {
    if number.contains('.') {
        number.trim_end_matches('0').trim_end_matches('.')
    } else {
        number
    }
}

/// 20·log10 of a ratio; `None` where there is no logarithm to give.
pub(super) fn decibels(ratio: f64) -> Option<f64> {
    (ratio > 0.0 && ratio.is_finite()).then(|| 20.0 * ratio.log10())
}

/// V rms in dBV.
pub(super) fn dbv(volts: f64) -> Option<f64> {
    decibels(volts)
}

/// V rms in dBu.
pub(super) fn dbu(volts: f64) -> Option<f64> {
    decibels(volts / ZERO_DBU_SQUARED.sqrt())
}

/// A number with `decimals` places, or `floor`.
pub(super) fn or_floor(value: Option<f64>, decimals: usize) -> String {
    match value {
        Some(value) if value.is_finite() => format!("{value:.decimals$}"),
        _ => FLOOR.to_string(),
    }
}

/// A ratio in percent with at most four significant digits and no more than an `error` of the ratio leaves; `~`
/// before a figure that is smaller than its own error.
pub(super) fn percent(ratio: f64, error: f64) -> String {
    let (digits, mark) = trusted_digits(ratio, error);
    let percent = ratio * 100.0;
    if percent != 0.0 && percent.abs() < 1e-4 {
        return format!("{mark}{:.*e}", digits - 1, percent);
    }
    let (_, power) = split(percent, digits);
    let decimals = usize::try_from(digits as i32 - 1 - power).unwrap_or(0);
    format!("{mark}{percent:.decimals$}")
}

/// How many digits of `value` lie above `error`, 1 to 4, and the mark of a value that has none.
fn trusted_digits(value: f64, error: f64) -> (usize, &'static str) {
    let certain = (value / error).abs();
    if !(certain.is_finite() && error > 0.0) {
        return (4, "");
    }
    if certain < 1.0 {
        return (1, "~");
    }
    ((certain.log10().floor() as usize + 1).clamp(1, 4), "")
}

/// Kelvin in °C, without the digits the subtraction leaves behind.
pub(super) fn celsius(kelvin: f64) -> f64 {
    ((kelvin - crate::quantity::constants::ZERO_CELSIUS) * 1e9).round() / 1e9
}

/// Text from a stage file on one line, without control characters: they would move a terminal's cursor and are not
/// allowed in SVG.
pub(super) fn plain(text: &str) -> String {
    text.chars()
        .map(|c| if c.is_control() { ' ' } else { c })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn four_digits_and_the_fitting_prefix() {
        assert_eq!(measured(0.012345, "V"), "12.35 mV");
        assert_eq!(measured(600.0, "Ω"), "600.0 Ω");
        assert_eq!(measured(-1.0e-9, "A"), "-1.000 nA");
        assert_eq!(measured(0.0, "V"), "0 V");
        assert_eq!(measured(4.7e6, "Ω"), "4.700 MΩ");
    }

    #[test]
    fn rounding_up_carries_into_the_next_prefix() {
        assert_eq!(measured(0.99996, "V"), "1.000 V");
        assert_eq!(measured(999.96e3, "Hz"), "1.000 MHz");
    }

    #[test]
    fn beyond_the_prefixes_the_power_is_written() {
        assert_eq!(measured(3.2e-17, "V"), "3.2e-17 V");
        assert_eq!(measured(1e13, "Ω"), "1e13 Ω");
    }

    #[test]
    fn a_stated_value_keeps_only_the_digits_it_needs() {
        assert_eq!(stated(47e3, "Ω"), "47 kΩ");
        assert_eq!(stated(15_625.0, "Hz"), "15.625 kHz");
        assert_eq!(stated(100e-12, "F"), "100 pF");
    }

    #[test]
    fn the_decibel_references_are_one_volt_and_the_root_of_six_tenths() {
        assert_eq!(or_floor(dbv(0.02), 2), "-33.98");
        // 0.775 V, the level at which both meters of a line-up panel read zero: 20·log10(0.775/0.77460) = 0.005.
        assert_eq!(or_floor(dbu(0.775), 2), "0.00");
        assert_eq!(or_floor(dbu(0.0), 2), FLOOR);
    }

    #[test]
    fn a_percentage_shows_no_digit_below_its_error() {
        assert_eq!(percent(0.012345, 0.0), "1.234");
        assert_eq!(percent(0.012345, 1e-3), "1.2");
        assert_eq!(percent(0.0000345, 1e-9), "0.003450");
        assert_eq!(percent(1.2e-9, 1e-15), "1.200e-7");
        assert_eq!(percent(1.2e-9, 1e-8), "~1e-7");
        assert_eq!(percent(0.99999, 1e-9), "100.0");
    }

    #[test]
    fn celsius_is_free_of_subtraction_noise() {
        assert_eq!(celsius(333.15), 60.0);
        assert_eq!(celsius(298.15), 25.0);
    }

    #[test]
    fn control_characters_do_not_reach_the_terminal() {
        assert_eq!(plain("a\u{1b}[31m\nb"), "a [31m b");
    }
}
