//! `demo`: everything at once, in its own folder.

use hound::WavReader;

use crate::support::Bench;

const FILES: [&str; 8] = [
    "distortion.png",
    "harmonics.png",
    "input.wav",
    "output-clean.wav",
    "output-crushed.wav",
    "output-edge.wav",
    "stage.toml",
    "transfer.png",
];

fn samples(bench: &Bench, name: &str) -> Vec<f64> {
    let mut reader = WavReader::open(bench.path(&format!("cleanswing-demo/{name}"))).unwrap();
    assert_eq!(
        (reader.spec().channels, reader.spec().sample_rate),
        (1, 48_000)
    );
    let full_scale = f64::from(1 << 23);
    reader
        .samples::<i32>()
        .map(|sample| f64::from(sample.unwrap()) / full_scale)
        .collect()
}

#[test]
fn demo_writes_a_stage_its_sound_and_its_pictures_and_no_other_file_is_touched() {
    let bench = Bench::new();
    std::fs::create_dir(bench.path("cleanswing-demo")).unwrap();
    bench.write("cleanswing-demo/mine.txt", b"my own work");
    let run = bench.run("demo").ends_with(0);
    for words in [
        "static swing",
        "gain at 1 kHz",
        "THD %",
        "volume down",
        "cleanswing bias cleanswing-demo/stage.toml",
    ] {
        assert!(
            run.stdout.contains(words),
            "{words:?} is missing:\n{}",
            run.stdout
        );
    }
    assert_eq!(bench.names(), ["cleanswing-demo"]);
    assert_eq!(bench.read("cleanswing-demo/mine.txt"), b"my own work");
    for name in FILES {
        assert!(!bench.read(&format!("cleanswing-demo/{name}")).is_empty());
    }

    let input = samples(&bench, "input.wav");
    // As many samples, none at full scale, and aligned: an inverting stage gives the input's negative at once.
    for name in ["output-clean.wav", "output-edge.wav", "output-crushed.wav"] {
        let output = samples(&bench, name);
        assert_eq!(output.len(), input.len(), "{name}");
        let peak = output.iter().fold(0.0_f64, |peak, x| peak.max(x.abs()));
        assert!((0.3..0.95).contains(&peak), "{name}: peak {peak}");
    }
    let correlation = correlation(&input, &samples(&bench, "output-clean.wav"));
    assert!(correlation < -0.99, "{correlation}");

    // A second run replaces its own files.
    bench.write("cleanswing-demo/stage.toml", b"broken");
    bench.run("demo").ends_with(0);
    bench
        .run("bias cleanswing-demo/stage.toml --set R4=100")
        .ends_with(0);
}

fn correlation(a: &[f64], b: &[f64]) -> f64 {
    let product = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
    product(a, b) / (product(a, a) * product(b, b)).sqrt()
}

#[test]
fn demo_says_why_where_its_folder_cannot_be() {
    let bench = Bench::new();
    bench.write("cleanswing-demo", b"a file");
    bench.run("demo").ends_with(2).says("cleanswing-demo");
    assert_eq!(bench.read("cleanswing-demo"), b"a file");
}
