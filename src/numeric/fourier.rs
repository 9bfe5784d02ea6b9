//! Fourier coefficients of samples at uneven phases.
//!
//! With weights that integrate smooth functions over the period, `2·Σ w·y·cos nθ` is nearly the coefficient of cos nθ.
//! What it leaves over is read again (iterative refinement of the weighted least-squares fit), the fundamental first,
//! so that the error of a small harmonic is relative to the distortion and not to the fundamental.

/// Most readings of all harmonics together.
const MOST_READINGS: usize = 8;
/// A move this small beside the fundamental is rounding.
const SETTLED: f64 = 1e-16;

/// Sample points over one period with quadrature weights that sum to one.
#[derive(Clone, Debug, Default)]
pub struct UnevenPeriod {
    cosine: Vec<f64>,
    sine: Vec<f64>,
    weights: Vec<f64>,
}

/// One harmonic as `cosine·cos nθ + sine·sin nθ`, peak values.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Coefficient {
    /// Coefficient of cos nθ.
    pub cosine: f64,
    /// Coefficient of sin nθ.
    pub sine: f64,
}

impl Coefficient {
    /// Peak amplitude.
    pub fn peak(&self) -> f64 {
        self.cosine.hypot(self.sine)
    }

    /// φ in √2·H·sin(nθ + φ), degrees in (−180, 180].
    pub fn phase_deg(&self) -> f64 {
        let degrees = self.cosine.atan2(self.sine).to_degrees();
        if degrees <= -180.0 {
            degrees + 360.0
        } else {
            degrees
        }
    }

    /// Peak of the difference from another coefficient.
    pub fn distance(&self, other: &Coefficient) -> f64 {
        (self.cosine - other.cosine).hypot(self.sine - other.sine)
    }
}

/// The spectrum of one period and what it leaves over.
#[derive(Clone, Debug)]
pub struct Spectrum {
    /// Mean.
    pub mean: f64,
    /// Harmonics 1, 2, ….
    pub harmonics: Vec<Coefficient>,
    /// Samples minus mean and harmonics.
    pub residual: Vec<f64>,
    /// Mean square of the residual.
    pub residual_power: f64,
}

impl UnevenPeriod {
    /// Points at `phases` in [0, 1] of the period.
    pub fn new(phases: &[f64], weights: Vec<f64>) -> Self {
        let angle = |phase: &f64| std::f64::consts::TAU * phase;
        UnevenPeriod {
            cosine: phases.iter().map(|phase| angle(phase).cos()).collect(),
            sine: phases.iter().map(|phase| angle(phase).sin()).collect(),
            weights,
        }
    }

    /// Mean and harmonics 1…`count` of `values`.
    pub fn spectrum(&self, values: &[f64], count: usize) -> Spectrum {
        let mut spectrum = Spectrum {
            mean: 0.0,
            harmonics: vec![Coefficient::default(); count],
            residual: values.to_vec(),
            residual_power: 0.0,
        };
        for _ in 0..2 {
            self.refine(&mut spectrum, 1.min(count));
        }
        // each reading leaves over what the points' unevenness mixes between harmonics, a hundredth or less
        for _ in 0..MOST_READINGS {
            let moved = self.refine(&mut spectrum, count);
            let reference = spectrum.harmonics.first().map_or(0.0, Coefficient::peak);
            if moved <= SETTLED * reference {
                break;
            }
        }
        spectrum.residual_power = self
            .weights
            .iter()
            .zip(&spectrum.residual)
            .map(|(w, r)| w * r * r)
            .sum();
        spectrum
    }

    /// Read mean and harmonics 1…`orders` of the residual and move them from it into the coefficients; returns the
    /// largest move of a harmonic above the first.
    fn refine(&self, spectrum: &mut Spectrum, orders: usize) -> f64 {
        let mut moved = 0.0f64;
        let residual = &mut spectrum.residual;
        let weighted: Vec<f64> = self
            .weights
            .iter()
            .zip(residual.iter())
            .map(|(w, r)| w * r)
            .collect();
        let mean: f64 = weighted.iter().sum();
        spectrum.mean += mean;
        for value in residual.iter_mut() {
            *value -= mean;
        }
        let mut turning = (self.cosine.clone(), self.sine.clone());
        for (k, coefficient) in spectrum.harmonics.iter_mut().take(orders).enumerate() {
            let (cosine, sine) = (
                2.0 * dot(&weighted, &turning.0),
                2.0 * dot(&weighted, &turning.1),
            );
            coefficient.cosine += cosine;
            coefficient.sine += sine;
            if k > 0 {
                moved = moved.max(cosine.abs()).max(sine.abs());
            }
            for ((value, c), s) in residual.iter_mut().zip(&turning.0).zip(&turning.1) {
                *value -= cosine * c + sine * s;
            }
            self.turn(&mut turning);
        }
        moved
    }

    /// From nθ to (n + 1)θ at every point.
    fn turn(&self, (cosine, sine): &mut (Vec<f64>, Vec<f64>)) {
        for (((c, s), c1), s1) in cosine
            .iter_mut()
            .zip(sine.iter_mut())
            .zip(&self.cosine)
            .zip(&self.sine)
        {
            (*c, *s) = (*c * c1 - *s * s1, *s * c1 + *c * s1);
        }
    }
}

/// The first four moments of an oscillation, as (real, imaginary).
pub type Moments = [(f64, f64); 4];

/// Moments `½·∫ τ^m·e^(−iθτ) dτ` over τ in [−1, 1] for m = 0…3, as (real, imaginary).
///
/// By parts from m = 0 upwards for large θ, where that is stable, and by the power series for small θ
/// (L. N. G. Filon, "On a quadrature formula for trigonometric integrals", Proc. R. Soc. Edinburgh 49, 1928).
pub fn oscillating_moments(theta: f64) -> Moments {
    if theta.abs() < 2.0 {
        return std::array::from_fn(|power| series_moment(power, theta));
    }
    let (sine, cosine) = theta.sin_cos();
    // even moments are real, odd ones imaginary
    let m0 = sine / theta;
    let m1 = (cosine - m0) / theta;
    let m2 = (sine + 2.0 * m1) / theta;
    let m3 = (cosine - 3.0 * m2) / theta;
    [(m0, 0.0), (0.0, m1), (m2, 0.0), (0.0, m3)]
}

fn series_moment(power: usize, theta: f64) -> (f64, f64) {
    // Σ (−iθ)^k/k!·½·∫ τ^(m+k) dτ; only even m + k remain, each 1/(m + k + 1)
    let mut sum = 0.0;
    let mut term = if power.is_multiple_of(2) { 1.0 } else { -theta };
    let mut k = power % 2;
    while k < 40 {
        sum += term / (power + k + 1) as f64;
        term *= -theta * theta / ((k + 1) * (k + 2)) as f64;
        k += 2;
    }
    if power.is_multiple_of(2) {
        (sum, 0.0)
    } else {
        (0.0, sum)
    }
}

/// Inner product with four running sums, which the compiler can keep in one vector register.
fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut sums = [0.0; 4];
    let chunks = a.chunks_exact(4).zip(b.chunks_exact(4));
    for (a, b) in chunks {
        for k in 0..4 {
            sums[k] += a[k] * b[k];
        }
    }
    let done = a.len() - a.len() % 4;
    let rest: f64 = a[done..].iter().zip(&b[done..]).map(|(a, b)| a * b).sum();
    (sums[0] + sums[1]) + (sums[2] + sums[3]) + rest
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn both_forms_of_the_moments_agree_where_they_meet() {
        for theta in [2.0f64, 2.5, 4.0] {
            for (power, moment) in oscillating_moments(theta).into_iter().enumerate() {
                let series = series_moment(power, theta);
                // the series loses a digit or two by cancellation here
                assert!((moment.0 - series.0).abs() < 1e-14 && (moment.1 - series.1).abs() < 1e-14);
            }
        }
    }

    #[test]
    fn harmonics_on_uneven_points_are_found_to_rounding() {
        // two halves of the period with different steps; mid-point weights
        let mut phases = Vec::new();
        let mut weights = Vec::new();
        for (start, count) in [(0.0, 300), (0.5, 500)] {
            for k in 0..count {
                phases.push(start + 0.5 * (k as f64 + 0.5) / count as f64);
                weights.push(0.5 / count as f64);
            }
        }
        let points = UnevenPeriod::new(&phases, weights);
        let value = |phase: &f64| {
            let angle = std::f64::consts::TAU * phase;
            0.25 + (angle + 0.3).sin() + 1e-6 * (2.0 * angle).cos() + 1e-9 * (7.0 * angle).sin()
        };
        let values: Vec<f64> = phases.iter().map(value).collect();
        let spectrum = points.spectrum(&values, 20);
        // refinement leaves rounding of the samples only
        assert!((spectrum.mean - 0.25).abs() < 1e-14);
        assert!((spectrum.harmonics[0].peak() - 1.0).abs() < 1e-14);
        assert!((spectrum.harmonics[0].phase_deg() - 0.3f64.to_degrees()).abs() < 1e-12);
        assert!((spectrum.harmonics[1].cosine - 1e-6).abs() < 1e-15);
        assert!((spectrum.harmonics[6].sine - 1e-9).abs() < 1e-15);
        assert!(spectrum.residual_power < 1e-30);
    }
}
