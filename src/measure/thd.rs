//! THD and harmonics of a periodic steady state.
//!
//! `THD = sqrt(Σ Hn², n = 2…N)/H1`, N = floor(bandwidth/f·(1 + 1e-9)); relative to the total it is
//! `sqrt(Σ Hn²)/sqrt(H1² + Σ Hn²)` (the form of IEC 60268-3, from memory). The first harmonics are fitted to the
//! collocation points; what lies above them comes from the discrete Fourier transform of the collocation polynomial
//! on an even grid, and only where it matters.

use super::report::Harmonic;
use crate::engine::PeriodicSolution;
use crate::numeric::fourier::{Spectrum, UnevenPeriod};
use rustfft::{FftPlanner, num_complex::Complex};

/// Harmonics always reported.
pub const REPORTED: usize = 20;
/// Harmonics fitted one by one before the transform takes over.
const FITTED: usize = 64;
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
    let mut spectrum = points.spectrum(&solution.outputs, REPORTED);
    let power = distortion_power(solution, &points, &mut spectrum, highest);
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
fn distortion_power(
    solution: &PeriodicSolution,
    points: &UnevenPeriod,
    spectrum: &mut Spectrum,
    highest: usize,
) -> f64 {
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
    points.extend(spectrum, FITTED.min(highest));
    let fitted = squares(spectrum, FITTED.min(highest));
    if highest <= FITTED || spectrum.residual_power <= NEGLIGIBLE * fitted {
        return fitted;
    }
    if highest == usize::MAX {
        return fitted + spectrum.residual_power;
    }
    fitted + power_between(solution, FITTED + 1, highest)
}

/// Σ Hn² for n = `from`…`to` from an even grid, V².
fn power_between(solution: &PeriodicSolution, from: usize, to: usize) -> f64 {
    let size = (8 * to).next_power_of_two().clamp(1024, LARGEST_GRID);
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
