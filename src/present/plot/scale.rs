//! Axis scales: where a value lies, and which ticks a scale carries.

/// A scale from one end of an axis to the other.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Scale {
    /// Equal steps, `from` below `to`.
    Linear { from: f64, to: f64 },
    /// Equal ratios; both ends above zero.
    Log { from: f64, to: f64 },
}

/// One tick; only major ones carry a label.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Tick {
    pub(super) value: f64,
    pub(super) major: bool,
}

impl Scale {
    /// A linear scale around values, with `margin` of their span free at both ends.
    pub(super) fn around(values: impl Iterator<Item = f64> + Clone, margin: f64) -> Self {
        let low = values.clone().fold(f64::INFINITY, f64::min);
        let high = values.fold(f64::NEG_INFINITY, f64::max);
        let span = if high > low {
            high - low
        } else {
            high.abs().max(1e-9)
        };
        Scale::Linear {
            from: low - margin * span,
            to: high + margin * span,
        }
    }

    /// Where `value` lies: 0 at the start of the axis, 1 at its end, beyond them outside.
    pub(super) fn share(&self, value: f64) -> f64 {
        match *self {
            Scale::Linear { from, to } => (value - from) / (to - from),
            Scale::Log { from, to } => (value / from).ln() / (to / from).ln(),
        }
    }

    /// The ticks within the ends, ascending. `most` bounds the labels of a linear scale.
    pub(super) fn ticks(&self, most: usize) -> Vec<Tick> {
        match *self {
            Scale::Linear { from, to } => linear_ticks(from, to, most),
            Scale::Log { from, to } => log_ticks(from, to, most),
        }
    }
}

/// Ticks at 1, 2 or 5 times a power of ten.
fn linear_ticks(from: f64, to: f64, most: usize) -> Vec<Tick> {
    let wanted = (to - from) / most as f64;
    let power = 10f64.powf(wanted.log10().floor());
    let step = [1.0, 2.0, 5.0, 10.0]
        .iter()
        .map(|k| k * power)
        .find(|step| *step >= wanted * (1.0 - 1e-9));
    let step = step.unwrap_or(10.0 * power);
    let (first, last) = (
        (from / step - 1e-9).ceil() as i64,
        (to / step + 1e-9).floor() as i64,
    );
    (first..=last)
        .map(|k| Tick {
            value: k as f64 * step,
            major: true,
        })
        .collect()
}

/// Decades with their nine parts. Below two decades 1, 2 and 5 have labels; above `most` decades only some have.
fn log_ticks(from: f64, to: f64, most: usize) -> Vec<Tick> {
    let decades = (to / from).log10();
    let every = (decades / most as f64).ceil().max(1.0) as i32;
    let (first, last) = (from.log10().floor() as i32, to.log10().ceil() as i32);
    let all = (first..=last).flat_map(|power| (1..10).map(move |k| (power, k)));
    let tick = |(power, k): (i32, i32)| Tick {
        // A negative power is divided out, so that 0.001 prints as such.
        value: if power < 0 {
            f64::from(k) / 10f64.powi(-power)
        } else {
            f64::from(k) * 10f64.powi(power)
        },
        major: (k == 1 && power.rem_euclid(every) == 0) || (decades < 2.0 && matches!(k, 2 | 5)),
    };
    let within = |tick: &Tick| tick.value >= from * (1.0 - 1e-9) && tick.value <= to * (1.0 + 1e-9);
    all.map(tick).filter(within).collect()
}

/// The power of ten at or below a value above zero.
pub(super) fn decade_below(value: f64) -> f64 {
    10f64.powf((value.log10() + 1e-9).floor())
}

/// The power of ten at or above a value above zero.
pub(super) fn decade_above(value: f64) -> f64 {
    10f64.powf((value.log10() - 1e-9).ceil())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn labelled(scale: Scale, most: usize) -> Vec<f64> {
        scale
            .ticks(most)
            .into_iter()
            .filter(|tick| tick.major)
            .map(|tick| tick.value)
            .collect()
    }

    #[test]
    fn a_log_scale_labels_its_decades() {
        let scale = Scale::Log {
            from: 1e-3,
            to: 1.0,
        };
        assert_eq!(labelled(scale, 8), [0.001, 0.01, 0.1, 1.0]);
        assert_eq!(scale.ticks(8).len(), 3 * 9 + 1);
        assert!(
            (scale.share(0.1) - 2.0 / 3.0).abs() < 1e-12,
            "a logarithm's rounding"
        );
    }

    #[test]
    fn a_short_log_scale_labels_one_two_and_five() {
        assert_eq!(
            labelled(
                Scale::Log {
                    from: 0.02,
                    to: 0.5
                },
                8
            ),
            [0.02, 0.05, 0.1, 0.2, 0.5]
        );
    }

    #[test]
    fn a_long_log_scale_leaves_labels_out() {
        assert_eq!(
            labelled(
                Scale::Log {
                    from: 1e-4,
                    to: 1e2
                },
                3
            ),
            [1e-4, 1e-2, 1.0, 1e2]
        );
    }

    #[test]
    fn a_linear_scale_steps_by_one_two_or_five() {
        assert_eq!(
            labelled(
                Scale::Linear {
                    from: -0.3,
                    to: 0.3
                },
                6
            ),
            [
                -0.30000000000000004,
                -0.2,
                -0.1,
                0.0,
                0.1,
                0.2,
                0.30000000000000004
            ]
        );
        assert_eq!(
            labelled(
                Scale::Linear {
                    from: 0.0,
                    to: 12.0
                },
                6
            ),
            [0.0, 2.0, 4.0, 6.0, 8.0, 10.0, 12.0]
        );
    }

    #[test]
    fn a_flat_curve_still_has_a_scale() {
        let Scale::Linear { from, to } = Scale::around([5.0, 5.0].into_iter(), 0.1) else {
            return;
        };
        assert!(from < 5.0 && to > 5.0);
    }
}
