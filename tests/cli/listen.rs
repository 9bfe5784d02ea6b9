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

fn peak(bench: &Bench, name: &str) -> f64 {
    let mut reader = WavReader::open(bench.path(name)).unwrap();
    reader.samples::<f32>().fold(0.0, |peak, sample| {
        peak.max(f64::from(sample.unwrap()).abs())
    })
}

#[test]
fn without_options_the_full_scale_is_assumed_and_the_output_fitted() {
    let bench = bench(1);
    bench
        .run("listen stage.toml in.wav -o out.wav --format f32")
        .ends_with(0)
        .says("1 V peak (assumed")
        .says("fit")
        .says("8 times oversampled (384 kHz)")
        .says("times real time");
    // The true peak lies at -1 dBTP, 0.891; the samples of a clipped 440 Hz tone pass close by it.
    let found = peak(&bench, "out.wav");
    assert!((0.85..0.8913).contains(&found), "{found}");
}

#[test]
fn the_internal_rate_follows_the_files_rate_unless_stated() {
    let bench = bench(1);
    let mut slow = tone(1);
    slow[24..28].copy_from_slice(&44_100_u32.to_le_bytes());
    slow[28..32].copy_from_slice(&88_200_u32.to_le_bytes());
    bench.write("slow.wav", &slow);
    bench
        .run(&format!("listen stage.toml slow.wav -o a.wav {WORDS}"))
        .ends_with(0)
        .says("9 times oversampled (396.9 kHz)");
    bench
        .run(&format!(
            "listen stage.toml slow.wav -o b.wav {WORDS} --oversample 2"
        ))
        .ends_with(0)
        .says("2 times oversampled (88.2 kHz)");
}

#[test]
fn a_full_scale_in_dbu_is_the_rms_of_a_full_scale_sine() {
    let bench = bench(1);
    // -20 dBu is 77.46 mV rms, 109.545 mV peak.
    for (name, words) in [
        ("a", "-20dBu"),
        ("b", "109.54451mVpk"),
        ("c", "77.459667mV"),
    ] {
        let words = format!("--full-scale {words} --output-full-scale 10Vpk --format f32");
        bench
            .run(&format!("listen stage.toml in.wav -o {name}.wav {words}"))
            .ends_with(0);
    }
    let peaks = ["a.wav", "b.wav", "c.wav"].map(|name| peak(&bench, name));
    // Eight digits were typed, and samples are stored in 24 bits.
    for other in &peaks[1..] {
        assert!((other / peaks[0] - 1.0).abs() < 3e-7, "{peaks:?}");
    }
}

#[test]
fn a_silent_file_comes_out_silent_and_is_told() {
    let bench = bench(1);
    let mut silent = tone(1);
    silent[44..].fill(0);
    bench.write("silent.wav", &silent);
    bench
        .run("listen stage.toml silent.wav -o out.wav --format f32")
        .ends_with(0)
        .says("caution: the input is silent");
    assert_eq!(peak(&bench, "out.wav"), 0.0);
}

#[test]
fn an_offset_and_a_clipped_output_are_told() {
    let bench = bench(1);
    let mut shifted = tone(1);
    for sample in shifted[44..].chunks_exact_mut(2) {
        let value = i16::from_le_bytes([sample[0], sample[1]]) + 6000;
        sample.copy_from_slice(&value.to_le_bytes());
    }
    bench.write("shifted.wav", &shifted);
    bench
        .run(&format!("listen stage.toml shifted.wav -o out.wav {WORDS}"))
        .ends_with(0)
        .says("DC offset of 18.");
    bench
        .run("listen stage.toml in.wav -o out.wav --overwrite --full-scale 1Vpk --output-full-scale 1Vpk")
        .ends_with(0)
        .says("samples were held at digital full scale");
    // A float keeps what lies beyond full scale, and says so.
    bench
        .run("listen stage.toml in.wav -o float.wav --format f32 --full-scale 1Vpk --output-full-scale 1Vpk")
        .ends_with(0)
        .says("passes full scale");
    assert!(peak(&bench, "float.wav") > 1.0);
}

#[test]
fn a_pipe_is_refused_where_a_sound_file_is_needed() {
    let bench = bench(1);
    bench
        .run("listen stage.toml - -o out.wav")
        .ends_with(2)
        .says("ordinary file");
    bench
        .run("listen stage.toml in.wav -o -")
        .ends_with(2)
        .says("ordinary file");
    assert_eq!(bench.names(), ["in.wav", "stage.toml"]);
}

#[cfg(unix)]
#[test]
fn ctrl_c_leaves_no_half_file_and_ends_with_130() {
    let bench = Bench::with_stage("b_split_emitter");
    let spec = WavSpec {
        channels: 1,
        sample_rate: RATE,
        bits_per_sample: 16,
        sample_format: SampleFormat::Int,
    };
    let mut writer = WavWriter::create(bench.path("long.wav"), spec).unwrap();
    for frame in 0..RATE * 120 {
        writer
            .write_sample((8000.0 * (0.05 * f64::from(frame)).sin()) as i16)
            .unwrap();
    }
    writer.finalize().unwrap();
    let mut child = std::process::Command::new(env!("CARGO_BIN_EXE_cleanswing"))
        .args(["listen", "stage.toml", "long.wav", "-o", "out.wav"])
        .current_dir(bench.path("."))
        .stderr(std::process::Stdio::null())
        .spawn()
        .unwrap();
    // Two minutes of sound take seconds; its temporary appears at once.
    for _ in 0..500 {
        if bench.names().len() > 2 {
            break;
        }
        std::thread::sleep(std::time::Duration::from_millis(10));
    }
    assert!(bench.names().len() > 2, "rendering did not begin");
    let signalled = std::process::Command::new("kill")
        .args(["-INT", &child.id().to_string()])
        .status()
        .unwrap();
    assert!(signalled.success());
    assert_eq!(child.wait().unwrap().code(), Some(130));
    assert_eq!(bench.names(), ["long.wav", "stage.toml"]);
}

#[test]
fn what_the_command_reads_is_never_its_output() {
    let bench = bench(1);
    let input = bench.read("in.wav");
    let stage = bench.read("stage.toml");
    bench
        .run(&format!(
            "listen stage.toml in.wav -o in.wav {WORDS} --overwrite"
        ))
        .ends_with(2)
        .says("in.wav")
        .says("another output file");
    bench
        .run(&format!(
            "listen stage.toml in.wav -o stage.toml {WORDS} --overwrite"
        ))
        .ends_with(2)
        .says(".wav");
    assert_eq!(bench.read("in.wav"), input);
    assert_eq!(bench.read("stage.toml"), stage);
}
