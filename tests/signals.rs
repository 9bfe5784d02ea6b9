//! The files of `signals/` are what this project's own code makes, to the byte.

// The lint's leave for tests does not reach their helper functions.
#![allow(clippy::unwrap_used)]

use std::path::{Path, PathBuf};

use cleanswing::audio::levels::{LevelMeter, LoudnessMeter};
use cleanswing::audio::signals::{Level, SteppedTone, plucked_phrase};
use cleanswing::audio::wav::{SampleFormat, WavOptions, WavReader, WavWriter};

const RATE: u32 = 48_000;

/// The signals by file name; `signals/README.md` states the same levels and seeds.
fn signals() -> [(&'static str, Vec<f64>); 2] {
    [
        (
            "plucked-phrase.wav",
            plucked_phrase(RATE, Level::PeakDbfs(-6.0), 1),
        ),
        (
            "stepped-tone.wav",
            SteppedTone::default().samples().unwrap(),
        ),
    ]
}

fn committed(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("signals")
        .join(name)
}

fn write(path: &Path, samples: &[f64]) {
    let options = WavOptions {
        overwrite: true,
        seed: 1,
        ..WavOptions::new(RATE, 1, SampleFormat::S24)
    };
    let mut writer = WavWriter::create(path, options).unwrap();
    writer.write_block(&[samples]).unwrap();
    assert_eq!(writer.finish().unwrap().clipped_samples, 0);
}

fn read(path: &Path) -> Vec<f64> {
    WavReader::open(path).unwrap().read_all().unwrap().remove(0)
}

#[test]
fn the_committed_signals_are_made_anew_to_the_byte() {
    let folder = tempfile::tempdir().unwrap();
    for (name, samples) in signals() {
        let path = folder.path().join(name);
        write(&path, &samples);
        let (found, kept) = (read(&path), read(&committed(name)));
        assert_eq!(found.len(), kept.len(), "{name}");
        // Sines and exponentials come from the platform's mathematical library; where its last
        // bit differs, a sample on the edge between two codes may fall the other way.
        let step = 1.0 / f64::from(1 << 23);
        let worst = found
            .iter()
            .zip(&kept)
            .map(|(a, b)| (a - b).abs())
            .fold(0.0, f64::max);
        assert!(worst <= step, "{name}: {} steps", worst / step);
        if cfg!(all(
            target_os = "linux",
            target_env = "gnu",
            target_arch = "x86_64"
        )) {
            assert!(
                std::fs::read(&path).unwrap() == std::fs::read(committed(name)).unwrap(),
                "{name}: bytes differ"
            );
        }
    }
}

#[test]
fn the_committed_signals_have_the_levels_their_readme_states() {
    let readme = std::fs::read_to_string(committed("README.md")).unwrap();
    for name in ["plucked-phrase.wav", "stepped-tone.wav"] {
        let samples = read(&committed(name));
        let meter = LevelMeter::of(&samples);
        let mut loudness = LoudnessMeter::new(1, RATE).unwrap();
        loudness.push(&[&samples]).unwrap();
        let (peak, rms) = (meter.peak_dbfs().unwrap(), meter.rms_dbfs().unwrap());
        // Rounding to the table's digits also takes up the last step of 24 bits.
        let row = format!(
            "| `{name}` | {:.2} s | {} dBFS | {} dBFS | {} LUFS |",
            samples.len() as f64 / f64::from(RATE),
            one_place(peak),
            one_place(rms),
            one_place(loudness.lufs().unwrap()),
        );
        assert!(
            readme.contains(&row),
            "signals/README.md must have the row\n{row}"
        );
    }
}

/// One decimal, with the trade's minus sign and no negative zero.
fn one_place(level: f64) -> String {
    let text = format!("{:.1}", level.abs());
    if level < 0.0 && text != "0.0" {
        format!("−{text}")
    } else {
        text
    }
}

#[test]
#[ignore = "writes signals/ anew; see signals/README.md"]
fn write_the_signals_anew() {
    for (name, samples) in signals() {
        write(&committed(name), &samples);
    }
}
