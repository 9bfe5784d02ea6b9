//! `listen`: what it takes in, what it writes, and that a fault leaves the target as it was.

use hound::{SampleFormat, WavReader, WavSpec, WavWriter};

use crate::support::Bench;

const RATE: u32 = 48_000;
const FRAMES: u32 = 4_800;
const WORDS: &str = "--full-scale 200mVpk --output-full-scale 10Vpk";

/// A tenth of a second of 440 Hz at −12 dBFS peak, 660 Hz on the right, faded in so that it starts gently.
fn tone(channels: u16) -> Vec<u8> {
    let spec = WavSpec {
        channels,
        sample_rate: RATE,
        bits_per_sample: 16,
        sample_format: SampleFormat::Int,
    };
    let mut bytes = std::io::Cursor::new(Vec::new());
    let mut writer = WavWriter::new(&mut bytes, spec).unwrap();
    for frame in 0..FRAMES {
        for channel in 0..channels {
            let t = f64::from(frame) / f64::from(RATE);
            let angle = 2.0 * std::f64::consts::PI * (440.0 + 220.0 * f64::from(channel)) * t;
            let fade = (f64::from(frame) / 480.0).min(1.0);
            writer
                .write_sample((8192.0 * fade * angle.sin()).round() as i16)
                .unwrap();
        }
    }
    writer.finalize().unwrap();
    bytes.into_inner()
}

fn bench(channels: u16) -> Bench {
    let bench = Bench::with_stage("b_split_emitter");
    bench.write("in.wav", &tone(channels));
    bench
}

#[test]
fn the_output_has_the_format_asked_for_and_as_many_samples_as_the_input() {
    let bench = bench(1);
    let formats = [
        ("s16", 16, SampleFormat::Int),
        ("s24", 24, SampleFormat::Int),
        ("s32", 32, SampleFormat::Int),
        ("f32", 32, SampleFormat::Float),
    ];
    for (name, bits, format) in formats {
        bench
            .run(&format!(
                "listen stage.toml in.wav -o {name}.wav {WORDS} --format {name}"
            ))
            .ends_with(0);
        let reader = WavReader::open(bench.path(&format!("{name}.wav"))).unwrap();
        let spec = WavSpec {
            channels: 1,
            sample_rate: RATE,
            bits_per_sample: bits,
            sample_format: format,
        };
        assert_eq!(reader.spec(), spec, "{name}");
        assert_eq!(reader.duration(), FRAMES, "{name}");
    }
}

#[test]
fn both_channels_of_a_stereo_file_come_out() {
    let bench = bench(2);
    bench
        .run(&format!(
            "listen stage.toml in.wav -o out.wav {WORDS} --format f32"
        ))
        .ends_with(0);
    let mut reader = WavReader::open(bench.path("out.wav")).unwrap();
    assert_eq!((reader.spec().channels, reader.duration()), (2, FRAMES));
    let samples: Vec<f32> = reader.samples::<f32>().map(Result::unwrap).collect();
    for channel in 0..2 {
        let peak = samples
            .iter()
            .skip(channel)
            .step_by(2)
            .fold(0.0_f32, |p, s| p.max(s.abs()));
        // 50 mV peak times a gain near 29 over 10 V full scale.
        assert!(
            (0.12..0.17).contains(&peak),
            "channel {channel}: peak {peak}"
        );
    }
    assert!(
        samples
            .chunks(2)
            .any(|frame| (frame[0] - frame[1]).abs() > 0.05),
        "two channels, not one twice"
    );
}

#[test]
fn an_existing_output_is_kept_unless_told_to_overwrite() {
    let bench = bench(1);
    bench.write("out.wav", b"my own work");
    bench
        .run(&format!("listen stage.toml in.wav -o out.wav {WORDS}"))
        .ends_with(2)
        .says("out.wav")
        .says("--overwrite");
    assert_eq!(bench.read("out.wav"), b"my own work");
    bench
        .run(&format!(
            "listen stage.toml in.wav -o out.wav {WORDS} --overwrite"
        ))
        .ends_with(0);
    assert!(bench.read("out.wav").starts_with(b"RIFF"));
    assert_eq!(
        bench.names(),
        ["in.wav", "out.wav", "stage.toml"],
        "nothing temporary left behind"
    );
}

/// Inputs that are no sound, each with the name it is stored under.
fn bad_inputs() -> Vec<(&'static str, Vec<u8>)> {
    let whole = tone(1);
    let mut lies = whole.clone();
    lies[20..22].copy_from_slice(&7_u16.to_le_bytes()); // a sample format of which we know nothing
    vec![
        ("empty.wav", Vec::new()),
        ("header-cut.wav", whole[..20].to_vec()),
        ("samples-cut.wav", whole[..whole.len() / 2].to_vec()),
        ("sample-cut.wav", whole[..whole.len() - 1].to_vec()),
        (
            "text.wav",
            b"This is a shopping list, not a sound.\n".repeat(40),
        ),
        ("strange.wav", lies),
    ]
}

#[test]
fn input_that_is_no_sound_is_refused_by_name_and_the_target_stays_as_it_was() {
    for (name, bytes) in bad_inputs() {
        let bench = Bench::with_stage("b_split_emitter");
        bench.write(name, &bytes);
        bench.write("kept.wav", b"an earlier rendering");
        let run = bench.run(&format!(
            "listen stage.toml {name} -o kept.wav {WORDS} --overwrite"
        ));
        let run = run.ends_with(2).says(name);
        assert!(run.stdout.is_empty(), "{name}: {:?}", run.stdout);
        assert_eq!(bench.read("kept.wav"), b"an earlier rendering", "{name}");

        bench
            .run(&format!("listen stage.toml {name} -o new.wav {WORDS}"))
            .ends_with(2)
            .says(name);
        let mut left = vec![
            name.to_owned(),
            "kept.wav".to_owned(),
            "stage.toml".to_owned(),
        ];
        left.sort();
        assert_eq!(
            bench.names(),
            left,
            "{name}: no new file, nothing temporary"
        );
    }
}

#[test]
fn a_missing_recording_is_named() {
    let bench = Bench::with_stage("b_split_emitter");
    bench
        .run("listen stage.toml gone.wav -o out.wav")
        .ends_with(2)
        .says("gone.wav");
    assert_eq!(bench.names(), ["stage.toml"]);
}

#[test]
fn options_that_mean_nothing_are_refused_as_typed() {
    let bench = bench(1);
    for (option, value) in [
        ("--format", "s17"),
        ("--oversample", "0"),
        ("--oversample", "-3"),
        ("--oversample", "many"),
        ("--full-scale", "0V"),
        ("--full-scale", "-1V"),
        ("--full-scale", "loud"),
        ("--output-full-scale", "0V"),
    ] {
        bench
            .run(&format!(
                "listen stage.toml in.wav -o out.wav {option} {value}"
            ))
            .ends_with(2)
            .says(value);
    }
    assert_eq!(bench.names(), ["in.wav", "stage.toml"]);
}

#[test]
fn more_oversampling_changes_a_clean_rendering_by_next_to_nothing() {
    let bench = bench(1);
    let rendering = |oversample: u32| -> Vec<f32> {
        let words = format!(
            "listen stage.toml in.wav -o {oversample}.wav {WORDS} --format f32 --oversample {oversample}"
        );
        bench.run(&words).ends_with(0);
        let mut reader = WavReader::open(bench.path(&format!("{oversample}.wav"))).unwrap();
        reader.samples::<f32>().map(Result::unwrap).collect()
    };
    let (fine, coarse) = (rendering(32), rendering(8));
    let energy = |a: &[f32]| a.iter().map(|s| f64::from(*s).powi(2)).sum::<f64>();
    let off: Vec<f32> = fine.iter().zip(&coarse).map(|(a, b)| a - b).collect();
    // Below 1 % distortion the engine is good to -94 dB at 8x; the margin of 14 dB is for the tone's abrupt end.
    let decibels = 10.0 * (energy(&off) / energy(&fine)).log10();
    assert!(decibels < -80.0, "8x differs from 32x by {decibels:.1} dB");
}
