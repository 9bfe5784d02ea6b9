//! Bracketing of a root of a function of one variable.

/// The root of `f` between `low` and `high`, where its sign must change, by bisection until the bracket is narrower
/// than `relative` times its larger end, or as narrow as `f64` allows. `None` where the sign does not change.
pub fn bisect(
    mut low: f64,
    mut high: f64,
    relative: f64,
    mut f: impl FnMut(f64) -> f64,
) -> Option<f64> {
    let at_low = f(low);
    let at_high = f(high);
    if at_low == 0.0 {
        return Some(low);
    }
    if at_high == 0.0 {
        return Some(high);
    }
    if at_low.signum() == at_high.signum() || !at_low.is_finite() || !at_high.is_finite() {
        return None;
    }
    while (high - low).abs() > relative * low.abs().max(high.abs()) {
        let middle = 0.5 * (low + high);
        if middle == low || middle == high {
            break;
        }
        let value = f(middle);
        if value == 0.0 {
            return Some(middle);
        }
        if value.signum() == at_low.signum() {
            low = middle;
        } else {
            high = middle;
        }
    }
    Some(0.5 * (low + high))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_bracketed_root_is_found_to_rounding() {
        let root = bisect(0.0, 2.0, 0.0, |x| x * x - 2.0).unwrap();
        assert!((root - 2f64.sqrt()).abs() <= 2.0 * f64::EPSILON);
    }

    #[test]
    fn no_sign_change_is_no_root() {
        assert_eq!(bisect(1.0, 2.0, 1e-9, |x| x * x), None);
    }
}
