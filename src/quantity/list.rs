//! Lists `10mV,20mV,50mV` and ranges `1mV..1V/60` (log spaced, both ends exact), in any mixture.

use std::str::FromStr;

use super::ValueError;

/// The most points a list may have; beyond it a slip of the keyboard is likelier than an intention.
const MOST_POINTS: usize = 100_000;

/// What a list may hold.
pub trait Element: Copy {
    /// Reads one element.
    fn parse(text: &str) -> Result<Self, ValueError>;
    /// Its value in base units.
    fn value(self) -> f64;
    /// The element of a value in base units.
    fn from_value(value: f64) -> Self;
    /// Whether a list may hold a bare whole number straight before a value with a unit. Where it may not, a decimal
    /// comma is caught.
    const MIXES_UNITS: bool = true;
}

/// A list of at least one element, in the order typed.
#[derive(Clone, Debug, PartialEq)]
pub struct List<T>(pub Vec<T>);

impl<T: Element> FromStr for List<T> {
    type Err = ValueError;

    fn from_str(text: &str) -> Result<Self, ValueError> {
        let mut elements = Vec::new();
        if !T::MIXES_UNITS && has_decimal_comma(text) {
            return Err(ValueError::OutOfRange {
                found: text.to_owned(),
                must: "has what looks like a decimal comma; write 0.2V, or give every value of the list its unit",
            });
        }
        for item in text.split(',') {
            match item.split_once("..") {
                Some((from, rest)) => elements.extend(range::<T>(item, from, rest)?),
                None => elements.push(T::parse(item)?),
            }
            if elements.len() > MOST_POINTS {
                return Err(ValueError::OutOfRange {
                    found: text.to_owned(),
                    must: "has more than 100000 points",
                });
            }
        }
        Ok(List(elements))
    }
}

/// A bare whole number straight before a value with a unit: `0,2V` is rarely meant as 0 V and 2 V.
fn has_decimal_comma(text: &str) -> bool {
    let items: Vec<&str> = text.split(',').map(str::trim).collect();
    let bare = |item: &str| !item.is_empty() && item.bytes().all(|byte| byte.is_ascii_digit());
    let united = |item: &str| {
        item.starts_with(|first: char| first.is_ascii_digit())
            && item.ends_with(|last: char| !last.is_ascii_digit())
    };
    items
        .windows(2)
        .any(|pair| bare(pair[0]) && united(pair[1]))
}

fn range<T: Element>(item: &str, from: &str, rest: &str) -> Result<Vec<T>, ValueError> {
    let refuse = |must| ValueError::OutOfRange {
        found: item.trim().to_owned(),
        must,
    };
    let (to, points) = rest
        .split_once('/')
        .ok_or_else(|| refuse("says not how many points; write 1mV..1V/60"))?;
    let points: usize = points
        .trim()
        .parse()
        .map_err(|_| refuse("needs a whole number of points after the slash"))?;
    if !(2..=MOST_POINTS).contains(&points) {
        return Err(refuse("must have 2 to 100000 points"));
    }
    let (first, last) = (T::parse(from)?, T::parse(to)?);
    if first.value() <= 0.0 || last.value() <= 0.0 {
        return Err(refuse(
            "is spaced in equal ratios and cannot start or end at 0",
        ));
    }
    Ok(log_spaced(first, last, points))
}

fn log_spaced<T: Element>(first: T, last: T, points: usize) -> Vec<T> {
    let (start, span) = (first.value().ln(), last.value().ln() - first.value().ln());
    let inner = (1..points - 1)
        .map(|index| T::from_value((start + span * index as f64 / (points - 1) as f64).exp()));
    std::iter::once(first)
        .chain(inner)
        .chain(std::iter::once(last))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::super::{Frequency, Level, Percent};
    use super::*;

    #[test]
    fn a_decimal_comma_in_a_list_of_levels_is_caught() {
        assert!("0,2V".parse::<List<crate::quantity::Level>>().is_err());
        assert!("2,2mV".parse::<List<crate::quantity::Level>>().is_err());
        assert!("0.001,0.01".parse::<List<crate::quantity::Level>>().is_ok());
        assert!("1mV..1V/60".parse::<List<crate::quantity::Level>>().is_ok());
        assert!(
            "1mV,10mV..1V/3"
                .parse::<List<crate::quantity::Level>>()
                .is_ok()
        );
    }

    #[test]
    fn a_list_keeps_its_order_and_exact_values() {
        let list: List<Level> = "10mV,50mV, 20mV".parse().unwrap();
        assert_eq!(
            list.0.iter().map(|l| l.rms).collect::<Vec<_>>(),
            [0.01, 0.05, 0.02]
        );
        let thd: List<Percent> = "0.1,1%".parse().unwrap();
        assert_eq!(
            thd.0.iter().map(|p| p.ratio).collect::<Vec<_>>(),
            [0.001, 0.01]
        );
    }

    #[test]
    fn a_range_has_equal_ratios_and_exact_ends() {
        let list: List<Level> = "1mV..1V/61".parse().unwrap();
        assert_eq!(
            (list.0.len(), list.0[0].rms, list.0[60].rms),
            (61, 1e-3, 1.0)
        );
        for pair in list.0.windows(2) {
            // Sixty steps of 1 dB; exp of a sum near 7 loses a few units of the last place.
            assert!((20.0 * (pair[1].rms / pair[0].rms).log10() - 1.0).abs() < 1e-13);
        }
        let falling: List<Frequency> = "20kHz..20Hz/4,1k".parse().unwrap();
        assert_eq!(
            (falling.0[0].hertz, falling.0[3].hertz, falling.0[4].hertz),
            (20e3, 20.0, 1e3)
        );
    }

    #[test]
    fn a_range_that_cannot_be_spaced_is_refused() {
        let refusal = |text: &str| text.parse::<List<Level>>().unwrap_err().to_string();
        assert_eq!(
            refusal("1mV..1V"),
            "\"1mV..1V\" says not how many points; write 1mV..1V/60"
        );
        assert_eq!(
            refusal("1mV..1V/1"),
            "\"1mV..1V/1\" must have 2 to 100000 points"
        );
        assert_eq!(
            refusal("1mV..1V/x"),
            "\"1mV..1V/x\" needs a whole number of points after the slash"
        );
        assert_eq!(
            refusal("0..1V/9"),
            "\"0..1V/9\" is spaced in equal ratios and cannot start or end at 0"
        );
        assert_eq!(
            refusal("1mV,,2mV"),
            "nothing given, needs a level such as 20mV, 28.3mVpk, 56.6mVpp, -34dBV or -31.8dBu"
        );
        assert!(
            "1mV..1V/60000,1mV..1V/60000"
                .parse::<List<Level>>()
                .is_err()
        );
    }
}
