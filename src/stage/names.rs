//! Names of parts, rails and nodes, and the nearest name to a misspelt one.

use crate::quantity::quoted;

/// The longest name, in characters.
const LONGEST: usize = 64;

/// Names a part or a rail cannot have: an override could not tell it from the section.
const RESERVED: [&str; 9] = [
    "gnd",
    "source",
    "load",
    "temperature",
    "nominal",
    "targets",
    "title",
    "input",
    "output",
];

/// Whether `name` may name a part, a rail, a node or a device; otherwise what is wrong with it.
pub(super) fn check(name: &str) -> Result<(), String> {
    if name.is_empty() {
        return Err("a name cannot be empty".to_owned());
    }
    if name.chars().count() > LONGEST {
        return Err(format!(
            "the name {} is longer than {LONGEST} characters",
            quoted(name)
        ));
    }
    let allowed = |c: char| c.is_alphanumeric() || matches!(c, '_' | '+' | '-');
    if name.chars().all(allowed) {
        Ok(())
    } else {
        Err(format!(
            "the name {} may have only letters, digits, _ + and -",
            quoted(name)
        ))
    }
}

/// As `check`, for a part or a rail.
pub(super) fn check_designator(name: &str) -> Result<(), String> {
    check(name)?;
    if RESERVED.contains(&name) {
        return Err(format!("the name {} is reserved", quoted(name)));
    }
    Ok(())
}

/// The candidate most like `name`, where one is near enough to be meant; of equals one with the same first
/// letter (Q2 means Q1 sooner than R2), then the first of the alphabet, so that the candidates' order does not matter.
pub fn nearest<'c>(name: &str, candidates: impl IntoIterator<Item = &'c str>) -> Option<&'c str> {
    let length = name.chars().count();
    if length > LONGEST {
        return None;
    }
    // A third of the letters may differ; at least one, so that R1 suggests R2 but not C7.
    let limit = (length / 3).max(1);
    let lower = name.to_lowercase();
    let distance = |candidate: &str| strsim::osa_distance(&lower, &candidate.to_lowercase());
    let same_first = |candidate: &str| candidate.chars().next() == name.chars().next();
    candidates
        .into_iter()
        .filter(|candidate| *candidate != name && candidate.len() <= 4 * LONGEST)
        .filter(|candidate| candidate.chars().count().abs_diff(length) <= limit)
        .map(|candidate| (distance(candidate), !same_first(candidate), candidate))
        .filter(|(distance, ..)| *distance <= limit)
        .min()
        .map(|(.., candidate)| candidate)
}

/// `; did you mean "x"?`, or nothing.
pub(super) fn hint<'c>(name: &str, candidates: impl IntoIterator<Item = &'c str>) -> String {
    nearest(name, candidates)
        .map(|near| format!("; did you mean {}?", quoted(near)))
        .unwrap_or_default()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_slip_suggests_the_name_meant_and_a_stranger_suggests_none() {
        let names = ["resistor", "pins", "tolerance", "Q1"];
        assert_eq!(nearest("resistr", names), Some("resistor"));
        assert_eq!(nearest("pnis", names), Some("pins"));
        assert_eq!(nearest("q1", names), Some("Q1"));
        assert_eq!(nearest("voltage", names), None);
        assert_eq!(nearest(&"r".repeat(100_000), names), None);
    }

    #[test]
    fn names_are_letters_digits_and_three_signs() {
        for good in ["R1", "v+", "v-", "out_2", "Übertrager", "1"] {
            assert_eq!(check(good), Ok(()), "{good}");
        }
        for bad in ["", "a b", "a.b", "a\u{7}", &"n".repeat(65)] {
            assert!(check(bad).is_err(), "{bad}");
        }
        assert_eq!(
            check_designator("load").unwrap_err(),
            "the name \"load\" is reserved"
        );
    }
}
