//! Design of the low-pass stages.
//!
//! Windowed sinc, h(j) = sinc(2·fc·j)·w(j) up to a factor, with the window of J. F. Kaiser,
//! "Nonrecursive digital filter design using the I0-sinh window function", Proc. IEEE Int. Symp.
//! Circuits and Systems, 1974:
//!
//! ```text
//! w(t) = I0(β·√(1 − t²))/I0(β),  |t| < 1        β = 0.1102·(A − 8.7)
//! taps − 1 ≥ (A − 7.95)/(2.285·Δω)              Δω the transition in radians per sample
//! ```
//!
//! for ripples of 10^(−A/20) in both bands. The first stage cuts between [`PASSBAND`] and
//! [`STOPBAND`]. After it nothing stands between one half of the base rate and its mirror image
//! r − ½ (r the rate relative to the base), so the later stages may cut symmetrically about half
//! their own input rate. Their sinc then vanishes at every factor-th tap, and given samples pass
//! unchanged (Nyquist filters: P. P. Vaidyanathan, "Multirate Systems and Filter Banks", 1993, §4.6).

use super::kernel::LANES;
use super::{PASSBAND, STOPBAND};
use std::f64::consts::PI;

/// Attenuation of the first stage in dB: 10 dB below the promise of −120 dB, because the promise
/// of ±0.00002 dB is shared with up to six later stages and holds each way.
const FIRST_ATTENUATION_DB: f64 = 130.0;
/// Attenuation of the later stages in dB; they are short, so the margin is cheap.
const LATER_ATTENUATION_DB: f64 = 140.0;

/// One stage: `factor` branches of 2·`half` taps.
#[derive(Clone, Debug)]
pub(super) struct StageDesign {
    /// Ratio of its high to its low rate.
    pub factor: usize,
    /// Half length in samples at its low rate.
    pub half: usize,
    /// Tap t of branch p is h(p + (half − 1 − t)·factor): newest sample last. Each sums to 1, so
    /// that a constant stays one.
    pub branches: Vec<Vec<f64>>,
    /// Branch 0 is a single tap of 1: given samples pass unchanged.
    pub passes_samples: bool,
}

/// The stages for `factor`, from the base rate upward: smallest prime factors first, because the
/// first stage is the long one.
pub(super) fn plan(factor: usize) -> Vec<StageDesign> {
    let mut rate = 1;
    prime_factors(factor)
        .into_iter()
        .map(|m| {
            let stage = if rate == 1 {
                first_stage(m)
            } else {
                later_stage(rate, m)
            };
            rate *= m;
            stage
        })
        .collect()
}

fn prime_factors(mut n: usize) -> Vec<usize> {
    let mut factors = Vec::new();
    let mut p = 2;
    while n > 1 {
        while n.is_multiple_of(p) {
            factors.push(p);
            n /= p;
        }
        p += 1;
    }
    factors
}

fn first_stage(factor: usize) -> StageDesign {
    let cutoff = (PASSBAND + STOPBAND) / 2.0;
    StageDesign::new(factor, cutoff, STOPBAND - PASSBAND, FIRST_ATTENUATION_DB)
}

fn later_stage(rate: usize, factor: usize) -> StageDesign {
    let transition = (rate - 1) as f64 / rate as f64;
    let mut stage = StageDesign::new(factor, 0.5, transition, LATER_ATTENUATION_DB);
    // What is left of the sinc at its zeros is rounding.
    stage.branches[0].fill(0.0);
    stage.branches[0][stage.half - 1] = 1.0;
    stage.passes_samples = true;
    stage
}

impl StageDesign {
    /// `cutoff` and `transition` as shares of the stage's low rate.
    fn new(factor: usize, cutoff: f64, transition: f64, attenuation_db: f64) -> Self {
        let taps = (attenuation_db - 7.95) / (2.285 * 2.0 * PI * transition);
        let half = (taps.ceil() as usize).next_multiple_of(LANES) / 2;
        let beta = 0.1102 * (attenuation_db - 8.7);
        let tap = |p: usize, t: usize| {
            let time = p as f64 / factor as f64 + half as f64 - 1.0 - t as f64;
            sinc(2.0 * cutoff * time) * kaiser(time / half as f64, beta)
        };
        let branches = (0..factor)
            .map(|p| unit_sum((0..2 * half).map(|t| tap(p, t)).collect()))
            .collect();
        Self {
            factor,
            half,
            branches,
            passes_samples: false,
        }
    }

    /// Gain at `frequency`, a share of the stage's high rate.
    pub fn response(&self, frequency: f64) -> f64 {
        let mut sum = 0.0;
        for (p, branch) in self.branches.iter().enumerate() {
            for (t, h) in branch.iter().enumerate() {
                let j = p as f64 + (self.half as f64 - 1.0 - t as f64) * self.factor as f64;
                sum += h * (2.0 * PI * frequency * j).cos();
            }
        }
        sum / self.factor as f64
    }
}

fn unit_sum(mut taps: Vec<f64>) -> Vec<f64> {
    let sum: f64 = taps.iter().sum();
    taps.iter_mut().for_each(|h| *h /= sum);
    taps
}

fn sinc(x: f64) -> f64 {
    if x == 0.0 {
        1.0
    } else {
        (PI * x).sin() / (PI * x)
    }
}

/// Kaiser's window at `t` in units of its half length; zero from there on.
fn kaiser(t: f64, beta: f64) -> f64 {
    if t.abs() >= 1.0 {
        0.0
    } else {
        bessel_i0(beta * (1.0 - t * t).sqrt()) / bessel_i0(beta)
    }
}

/// Modified Bessel function of the first kind and order zero, Σ ((x/2)ᵏ/k!)²; all terms are
/// positive, so the series loses nothing.
fn bessel_i0(x: f64) -> f64 {
    let quarter = x * x / 4.0;
    let (mut term, mut sum, mut k) = (1.0, 1.0, 1.0);
    while term > sum * f64::EPSILON {
        term *= quarter / (k * k);
        sum += term;
        k += 1.0;
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn bessel_i0_agrees_with_its_integral() {
        // I0(x) = 1/π ∫₀^π exp(x·cos θ) dθ (Abramowitz and Stegun, 9.6.16). The trapezoidal rule
        // converges faster than any power on it: 64 intervals leave rounding, here of 65 terms.
        for x in [0.0, 0.5, 1.0, 5.0, 13.4, 14.5] {
            let value = |k: u32| (x * (PI * f64::from(k) / 64.0).cos()).exp();
            let integral = ((value(0) + value(64)) / 2.0 + (1..64).map(value).sum::<f64>()) / 64.0;
            let found = bessel_i0(x);
            assert!(
                (found / integral - 1.0).abs() < 1e-14,
                "x = {x}: {found}, expected {integral}"
            );
        }
    }

    #[test]
    fn prime_factors_rise_and_multiply_back() {
        for n in 1..=128 {
            let factors = prime_factors(n);
            assert_eq!(factors.iter().product::<usize>(), n);
            assert!(factors.is_sorted());
        }
    }
}
