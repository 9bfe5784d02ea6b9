//! A number exactly as typed: decimal digits and a power of ten.

/// `±digits · 10^exponent`, without any binary rounding.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Decimal {
    /// Whether a minus sign stood before it.
    pub negative: bool,
    /// Decimal digits, at least one, leading zeros kept as typed.
    pub digits: String,
    /// Power of ten that multiplies the digits.
    pub exponent: i64,
}

impl Decimal {
    /// The same number times `10^power`.
    pub fn shifted(mut self, power: i64) -> Self {
        self.exponent = self.exponent.saturating_add(power);
        self
    }

    /// The nearest `f64`, rounded once; infinite where the number is out of range.
    pub fn to_f64(&self) -> f64 {
        // The standard library rounds decimal text correctly; multiplying by a power of ten would round twice.
        let text = format!(
            "{}{}e{}",
            if self.negative { "-" } else { "" },
            self.digits,
            self.exponent
        );
        text.parse().unwrap_or(f64::NAN)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_shift_costs_no_rounding() {
        let tenth = Decimal {
            negative: false,
            digits: "01".into(),
            exponent: -1,
        };
        assert_eq!(tenth.clone().to_f64(), 0.1);
        assert_eq!(tenth.shifted(3).to_f64(), 100.0);
        let small = Decimal {
            negative: true,
            digits: "33".into(),
            exponent: -1,
        };
        assert_eq!(small.shifted(-12).to_f64(), -3.3e-12);
    }

    #[test]
    fn out_of_range_is_infinite_or_zero_never_a_panic() {
        let huge = Decimal {
            negative: false,
            digits: "1".into(),
            exponent: i64::MAX,
        };
        assert_eq!(huge.shifted(9).to_f64(), f64::INFINITY);
        let tiny = Decimal {
            negative: false,
            digits: "1".into(),
            exponent: i64::MIN,
        };
        assert_eq!(tiny.shifted(-9).to_f64(), 0.0);
    }
}
