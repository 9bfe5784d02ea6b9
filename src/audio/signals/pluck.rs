//! A phrase on plucked strings, made from decaying partials.
//!
//! A stiff string of fundamental f₀ plucked at the share β of its length, heard through a magnetic
//! pickup (which answers to velocity) at the share p (N. H. Fletcher, T. D. Rossing, "The Physics
//! of Musical Instruments", chapters 2 and 9):
//!
//! ```text
//! fₙ = n·f₀·√(1 + B·n²)      aₙ = sin(nπβ)·sin(nπp)/n · 1/√(1 + (fₙ/fₚ)²)
//! 1/τₙ = d₀ + d₂·fₙ²
//! ```
//!
//! each partial a damped sine that begins at zero. A string moves in two directions that differ
//! slightly in tension and damping: two such sets, a cent apart, give the slow beating and the
//! two-stage decay of a real one. A string struck again is stopped by the finger first. Values of
//! the constants are by ear and common practice; the tune is the project's own.

use std::f64::consts::{PI, TAU};

use super::Level;
use crate::audio::random::Random;

/// Length of the phrase in seconds.
const LENGTH: f64 = 6.0;
/// Length of an eighth note in seconds: 100 quarters a minute.
const EIGHTH: f64 = 0.3;
/// Stiffness B of a wound guitar string, from memory of published orders of magnitude.
const STIFFNESS: f64 = 6e-5;
/// Decay that all partials share, per second.
const DECAY: f64 = 0.9;
/// Decay that grows with frequency, per second and Hz².
const DECAY_SQUARE: f64 = 2.6e-7;
/// Where the pickup sits, as a share of the string.
const PICKUP: f64 = 0.19;
/// Where the pickup's resonance and cable take the treble, in Hz.
const PICKUP_CORNER: f64 = 4500.0;
/// Partials end here at the latest, in Hz, and below 0.4 of the rate.
const HIGHEST: f64 = 15_000.0;
/// Level relative to the loudest partial at which one is no longer heard: −120 dB.
const INAUDIBLE: f64 = 1e-6;
/// Seconds in which a finger takes hold of the string, and of the fade at the very end.
const ATTACK: f64 = 0.0015;
const STOP: f64 = 0.03;
const FADE: f64 = 0.5;

/// A note: when in eighths, how long in eighths, semitones above A4 = 440 Hz, how hard.
struct Note(f64, f64, i32, f64);

/// A line over two bass notes, a third, a rolled chord of five strings. A little over 0.02 s
/// between the strings of the chord.
const PHRASE: [Note; 19] = [
    Note(0.0, 6.0, -19, 1.0),
    Note(1.0, 5.0, -12, 0.7),
    Note(2.0, 1.0, -7, 0.75),
    Note(3.0, 1.0, -4, 0.85),
    Note(4.0, 1.5, -5, 0.8),
    Note(5.5, 0.5, -7, 0.65),
    Note(6.0, 4.0, -21, 0.95),
    Note(7.0, 3.0, -14, 0.7),
    Note(8.0, 1.0, -5, 0.8),
    Note(9.0, 1.0, -2, 0.9),
    Note(10.0, 2.0, -23, 0.95),
    Note(10.0, 1.9, 3, 0.75),
    Note(10.06, 1.85, 0, 0.75),
    Note(11.0, 1.0, -7, 0.6),
    Note(12.0, 8.0, -19, 1.0),
    Note(12.08, 7.9, -12, 0.8),
    Note(12.15, 7.8, -4, 0.8),
    Note(12.23, 7.7, 0, 0.8),
    Note(12.31, 7.6, 7, 0.9),
];

/// Six seconds of single notes, a third and a rolled chord at `rate` hertz, at `level`. `seed`
/// varies touch and timing a little, as a hand would; the same seed gives the same samples.
pub fn plucked_phrase(rate: u32, level: Level, seed: u64) -> Vec<f64> {
    let mut samples = vec![0.0; (LENGTH * f64::from(rate)).round() as usize];
    for (i, note) in PHRASE.iter().enumerate() {
        add_note(
            &mut samples,
            f64::from(rate),
            note,
            &mut Random::stream(seed, i as u64),
        );
    }
    fade_out(&mut samples, (FADE * f64::from(rate)) as usize);
    level.apply(&mut samples);
    samples
}

fn add_note(samples: &mut [f64], rate: f64, note: &Note, hand: &mut Random) {
    let Note(at, length, semitones, strength) = *note;
    let delay = 0.008 * hand.uniform();
    let pluck = 0.13 + 0.06 * hand.uniform();
    let strength = strength * (0.9 + 0.2 * hand.uniform());
    let start = ((at * EIGHTH + delay) * rate) as usize;
    let sounding = ((length * EIGHTH + STOP) * rate) as usize;
    let end = samples.len().min(start + sounding);
    let fundamental = 440.0 * 2.0_f64.powf(f64::from(semitones) / 12.0);
    let mut sound = vec![0.0; end - start];
    // Across the top of the body, and at right angles to it: a cent higher and sooner gone.
    add_string(&mut sound, rate, fundamental, pluck, strength, 1.0);
    add_string(
        &mut sound,
        rate,
        fundamental * 1.0006,
        pluck,
        0.5 * strength,
        2.2,
    );
    shape_ends(
        &mut sound,
        (ATTACK * rate) as usize,
        if end == samples.len() {
            0
        } else {
            (STOP * rate) as usize
        },
    );
    samples[start..end]
        .iter_mut()
        .zip(&sound)
        .for_each(|(y, x)| *y += x);
}

/// A damped sine: amplitude, and the frequency and decay as one step of rotation.
struct Partial {
    amplitude: f64,
    turn: f64,
    shrink: f64,
}

fn add_string(
    sound: &mut [f64],
    rate: f64,
    fundamental: f64,
    pluck: f64,
    strength: f64,
    damping: f64,
) {
    let partials = partials(rate, fundamental, pluck, strength, damping);
    partials
        .chunks(LANES)
        .for_each(|group| add_partials(sound, group));
}

fn partials(rate: f64, fundamental: f64, pluck: f64, strength: f64, damping: f64) -> Vec<Partial> {
    let highest = HIGHEST.min(0.4 * rate);
    (1..)
        .map(f64::from)
        .map(|n| (n, n * fundamental * (1.0 + STIFFNESS * n * n).sqrt()))
        .take_while(|(_, frequency)| *frequency < highest)
        .map(|(n, frequency)| {
            let comb = (n * PI * pluck).sin() * (n * PI * PICKUP).sin() / n;
            let decay = damping * (DECAY + DECAY_SQUARE * frequency * frequency);
            Partial {
                amplitude: strength * comb / (1.0 + (frequency / PICKUP_CORNER).powi(2)).sqrt(),
                turn: TAU * frequency / rate,
                shrink: (-decay / rate).exp(),
            }
        })
        .collect()
}

/// Partials turned at once: independent chains of arithmetic keep the processor busy.
const LANES: usize = 8;

/// Adds up to [`LANES`] partials, each a vector that turns and shrinks by a constant step.
fn add_partials(sound: &mut [f64], group: &[Partial]) {
    let [mut re, mut im, mut c, mut s] = [[0.0; LANES]; 4];
    let mut audible = 0.0_f64;
    for (lane, partial) in group.iter().enumerate() {
        re[lane] = partial.amplitude;
        c[lane] = partial.shrink * partial.turn.cos();
        s[lane] = partial.shrink * partial.turn.sin();
        let fall = (INAUDIBLE / partial.amplitude.abs()).min(1.0).ln();
        audible = audible.max(fall / partial.shrink.ln());
    }
    for y in sound.iter_mut().take(audible as usize) {
        let mut sum = 0.0;
        for lane in 0..LANES {
            sum += im[lane];
            let turned = re[lane] * c[lane] - im[lane] * s[lane];
            im[lane] = re[lane] * s[lane] + im[lane] * c[lane];
            re[lane] = turned;
        }
        *y += sum;
    }
}

/// Raised cosines over the first `attack` and the last `stop` samples.
fn shape_ends(sound: &mut [f64], attack: usize, stop: usize) {
    let ramp = |i: usize, length: usize| 0.5 - 0.5 * (PI * i as f64 / length as f64).cos();
    sound
        .iter_mut()
        .take(attack)
        .enumerate()
        .for_each(|(i, x)| *x *= ramp(i, attack));
    sound
        .iter_mut()
        .rev()
        .take(stop)
        .enumerate()
        .for_each(|(i, x)| *x *= ramp(i, stop));
}

fn fade_out(samples: &mut [f64], length: usize) {
    shape_ends(samples, 0, length);
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::audio::levels::LevelMeter;
    use rustfft::{FftPlanner, num_complex::Complex};

    fn phrase() -> Vec<f64> {
        plucked_phrase(48_000, Level::PeakDbfs(-6.0), 1)
    }

    /// Power in bands of `edges` in Hz, in dB relative to the whole; the Hann window keeps strong
    /// low partials out of the bands above.
    fn band_levels(samples: &[f64], rate: f64, edges: &[f64]) -> Vec<f64> {
        let window = |i: usize| 0.5 - 0.5 * (TAU * i as f64 / samples.len() as f64).cos();
        let mut spectrum: Vec<Complex<f64>> = samples
            .iter()
            .enumerate()
            .map(|(i, x)| Complex::new(x * window(i), 0.0))
            .collect();
        FftPlanner::new()
            .plan_fft_forward(spectrum.len())
            .process(&mut spectrum);
        let power = |from: f64, to: f64| -> f64 {
            let bin = |f: f64| (f / rate * samples.len() as f64) as usize;
            spectrum[bin(from)..bin(to)]
                .iter()
                .map(Complex::norm_sqr)
                .sum()
        };
        let whole = power(0.0, rate / 2.0);
        edges
            .windows(2)
            .map(|e| 10.0 * (power(e[0], e[1]) / whole).log10())
            .collect()
    }

    #[test]
    fn the_phrase_has_its_length_and_level_and_repeats() {
        let samples = phrase();
        assert_eq!(samples.len(), 288_000);
        assert!((LevelMeter::of(&samples).peak_dbfs().unwrap() + 6.0).abs() < 1e-12);
        assert_eq!(samples, phrase());
        assert_ne!(samples, plucked_phrase(48_000, Level::PeakDbfs(-6.0), 2));
        let quiet = plucked_phrase(44_100, Level::RmsDbfs(-30.0), 1);
        assert!((LevelMeter::of(&quiet).rms_dbfs().unwrap() + 30.0).abs() < 1e-12);
    }

    #[test]
    fn it_begins_and_ends_in_silence_without_dc() {
        let samples = phrase();
        assert_eq!((samples[0], samples[287_999]), (0.0, 0.0));
        let mean = samples.iter().sum::<f64>() / 288_000.0;
        // A damped sine that begins at zero has a mean of its own; 74 dB below the peak is enough.
        assert!(mean.abs() < 1e-4, "{mean}");
    }

    #[test]
    fn it_sounds_throughout_and_dies_away_at_the_end() {
        let samples = phrase();
        for (i, half_second) in samples.chunks(24_000).enumerate() {
            let level = LevelMeter::of(half_second).rms_dbfs().unwrap();
            assert!(
                (-50.0..-6.0).contains(&level),
                "half second {i}: {level} dBFS"
            );
        }
        let last = LevelMeter::of(&samples[286_000..]).rms_dbfs().unwrap();
        assert!(last < -60.0, "{last}");
    }

    #[test]
    fn its_energy_lies_where_strings_have_it_and_none_is_near_half_the_rate() {
        for rate in [32_000.0, 48_000.0, 96_000.0] {
            let samples = plucked_phrase(rate as u32, Level::PeakDbfs(0.0), 1);
            let top = rate * 0.45;
            let levels = band_levels(
                &samples,
                rate,
                &[20.0, 100.0, 2000.0, 8000.0, top, rate / 2.0 - 1.0],
            );
            assert!(
                levels[0] < -25.0 && levels[1] > -1.0 && levels[2] > -40.0,
                "{rate}: {levels:?}"
            );
            // Above 0.45 of the rate there is no partial: only what the onsets spread.
            assert!(levels[4] < -80.0, "{rate}: {levels:?}");
        }
    }

    #[test]
    fn a_single_string_is_in_tune_and_its_treble_dies_first() {
        let rate = 48_000.0;
        let mut sound = vec![0.0; 96_000];
        add_string(&mut sound, rate, 220.0, 0.16, 1.0, 1.0);
        let level = |from: usize, band: [f64; 2]| {
            let part = &sound[from..from + 24_000];
            band_levels(part, rate, &band)[0] + LevelMeter::of(part).rms_dbfs().unwrap()
        };
        let near_fundamental = level(0, [210.0, 230.0]);
        assert!(near_fundamental > level(0, [230.0, 430.0]) + 20.0);
        let (early, late) = (level(0, [4000.0, 6000.0]), level(72_000, [4000.0, 6000.0]));
        let (low_early, low_late) = (near_fundamental, level(72_000, [210.0, 230.0]));
        // The fundamental falls by 8.69·(0.9 + 0.0126)·1.5 s = 11.9 dB.
        assert!(
            (low_early - low_late - 11.9).abs() < 0.5,
            "{low_early} {low_late}"
        );
        assert!(early - late > 40.0, "{early} {late}");
    }

    #[test]
    #[ignore = "prints a time, asserts nothing of it"]
    fn time_to_make_the_phrase() {
        let start = std::time::Instant::now();
        let samples = phrase();
        println!(
            "{} samples in {:.1} ms",
            samples.len(),
            start.elapsed().as_secs_f64() * 1e3
        );
    }
}
