//! THD and harmonics of a periodic steady state.
//!
//! `THD = sqrt(Σ Hn², n = 2…N)/H1`, N = floor(bandwidth/f·(1 + 1e-9)); relative to the total it is
//! `sqrt(Σ Hn²)/sqrt(H1² + Σ Hn²)` (the form of IEC 60268-3, from memory). The first harmonics are fitted to the
//! collocation points. What lies above them matters in hard clipping only: the collocation polynomials themselves are
//! integrated against each further harmonic exactly, and where harmonics run into the hundreds the rest comes from the
//! discrete Fourier transform of the polynomials on an even grid.

use super::report::Harmonic;
use crate::engine::PeriodicSolution;
use crate::numeric::fourier::{Moments, Spectrum, UnevenPeriod, oscillating_moments};
use rustfft::{FftPlanner, num_complex::Complex};

/// Harmonics always reported.
pub const REPORTED: usize = 20;
/// Harmonics integrated one by one before the transform takes over.
const INTEGRATED: usize = 512;
/// Harmonics this far below H1 are rounding.
pub const FLOOR: f64 = 3e-13;
/// A share of the distortion power that no longer moves the THD's seventh digit.
const NEGLIGIBLE: f64 = 1e-9;
/// Slack for a bandwidth that is a whole multiple of the frequency.
const BANDWIDTH_SLACK: f64 = 1e-9;
/// Most points of the even grid.
const LARGEST_GRID: usize = 1 << 18;

/// Harmonics, THD and mean of one period.
#[derive(Clone, Debug)]
pub struct Distortion {
    /// H1, V rms.
    pub fundamental: f64,
    /// Mean, V.
    pub mean: f64,
    /// Harmonics 1…20.
    pub harmonics: Vec<Harmonic>,
    /// THD relative to the fundamental; `None` with a reason.
    pub thd: Result<f64, String>,
    /// THD relative to the total.
    pub of_total: Option<f64>,
    /// Highest harmonic in the THD.
    pub highest: usize,
}

/// The highest harmonic within `bandwidth` in Hz (no limit where `None`) of a tone of `frequency` in Hz.
pub fn highest_harmonic(bandwidth: Option<f64>, frequency: f64) -> usize {
    match bandwidth {
        Some(bandwidth) => (bandwidth / frequency * (1.0 + BANDWIDTH_SLACK)).floor() as usize,
        None => usize::MAX,
    }
}

/// Harmonics and THD of `solution` at `frequency` in Hz within `bandwidth` in Hz.
pub fn distortion(
    solution: &PeriodicSolution,
    frequency: f64,
    bandwidth: Option<f64>,
) -> Distortion {
    let highest = highest_harmonic(bandwidth, frequency);
    let points = UnevenPeriod::new(&solution.phases, solution.weights.clone());
    let spectrum = points.spectrum(&solution.outputs, REPORTED);
    let power = distortion_power(solution, &spectrum, highest);
    let fundamental = spectrum.harmonics[0].peak() / std::f64::consts::SQRT_2;
    let rms = solution.rms();
    let thd = if highest < 2 {
        Err(format!(
            "no harmonic of {frequency} Hz lies within the bandwidth"
        ))
    } else if fundamental <= 1e-12 * rms || fundamental == 0.0 {
        Err("the fundamental is at the arithmetic floor".to_string())
    } else {
        Ok(power.sqrt() / fundamental)
    };
    Distortion {
        fundamental,
        mean: spectrum.mean,
        harmonics: reported(&spectrum, fundamental),
        of_total: thd.as_ref().ok().map(|thd| thd / (1.0 + thd * thd).sqrt()),
        thd,
        highest,
    }
}

/// Σ Hn² for n = 2…`highest`, V².
fn distortion_power(solution: &PeriodicSolution, spectrum: &Spectrum, highest: usize) -> f64 {
    let squares = |spectrum: &Spectrum, up_to: usize| -> f64 {
        spectrum
            .harmonics
            .iter()
            .take(up_to)
            .skip(1)
            .map(|c| 0.5 * c.peak() * c.peak())
            .sum()
    };
    if highest <= REPORTED {
        return squares(spectrum, highest);
    }
    if spectrum.residual_power <= NEGLIGIBLE * squares(spectrum, REPORTED) {
        return squares(spectrum, REPORTED);
    }
    if highest == usize::MAX {
        return squares(spectrum, REPORTED) + spectrum.residual_power;
    }
    let near = highest.min(INTEGRATED);
    let mut power = squares(spectrum, REPORTED) + integrated_power(solution, REPORTED + 1, near);
    if highest > near {
        power += power_between(solution, near + 1, highest);
    }
    power
}

/// Σ Hn² for n = `from`…`to`, each coefficient the exact integral of the collocation polynomials, V².
fn integrated_power(solution: &PeriodicSolution, from: usize, to: usize) -> f64 {
    let mut sums = vec![Complex::new(0.0, 0.0); to + 1 - from];
    let mut moments: Vec<(f64, Vec<Moments>)> = Vec::new();
    for (start, length, cubic) in solution.cubics() {
        // a dyadic mesh has a handful of lengths
        let known = moments
            .iter()
            .position(|(known, _)| *known == length)
            .unwrap_or_else(|| {
                let angle = |n: usize| std::f64::consts::PI * n as f64 * length;
                moments.push((
                    length,
                    (from..=to).map(|n| oscillating_moments(angle(n))).collect(),
                ));
                moments.len() - 1
            });
        let middle = std::f64::consts::TAU * (start + 0.5 * length);
        let turn = Complex::from_polar(1.0, -middle);
        let mut phase = Complex::from_polar(length, -middle * from as f64);
        for (sum, moment) in sums.iter_mut().zip(&moments[known].1) {
            let real = cubic[0] * moment[0].0 + cubic[2] * moment[2].0;
            let imaginary = cubic[1] * moment[1].1 + cubic[3] * moment[3].1;
            *sum += phase * Complex::new(real, imaginary);
            phase *= turn;
        }
    }
    sums.iter().map(|half| 2.0 * half.norm_sqr()).sum()
}

/// Σ Hn² for n = `from`…`to` from an even grid, V².
fn power_between(solution: &PeriodicSolution, from: usize, to: usize) -> f64 {
    let size = (16 * to).next_power_of_two().clamp(1 << 14, LARGEST_GRID);
    let spectrum = even_spectrum(solution, size);
    spectrum[from..=to.min(size / 2 - 1)]
        .iter()
        .map(|bin| 2.0 * bin.norm_sqr())
        .sum()
}

/// The discrete Fourier transform of one period on `size` even points, scaled so that bin n holds half the peak of
/// harmonic n.
pub fn even_spectrum(solution: &PeriodicSolution, size: usize) -> Vec<Complex<f64>> {
    let mut buffer: Vec<Complex<f64>> = solution
        .even_grid(size)
        .into_iter()
        .map(|value| Complex::new(value, 0.0))
        .collect();
    FftPlanner::new()
        .plan_fft_forward(size)
        .process(&mut buffer);
    for bin in &mut buffer {
        *bin /= size as f64;
    }
    buffer
}

fn reported(spectrum: &Spectrum, fundamental: f64) -> Vec<Harmonic> {
    spectrum
        .harmonics
        .iter()
        .take(REPORTED)
        .enumerate()
        .map(|(k, coefficient)| {
            let rms = coefficient.peak() / std::f64::consts::SQRT_2;
            let heard = rms > FLOOR * fundamental && rms > 0.0;
            Harmonic {
                n: k + 1,
                rms,
                phase_deg: heard.then(|| coefficient.phase_deg()),
                relative_db: heard.then(|| 20.0 * (rms / fundamental).log10()),
            }
        })
        .collect()
}
