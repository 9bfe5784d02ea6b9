//! `distortion`: levels as the trade writes them, grids, JSON, CSV, the plot.

use crate::support::{Bench, Run};
use serde_json::Value;

fn points(run: &Run) -> Vec<Value> {
    run.document("distortion")["points"]
        .as_array()
        .unwrap()
        .clone()
}

#[test]
fn distortion_json_has_every_promised_key_and_twenty_harmonics() {
    let bench = Bench::with_stage("b_split_emitter");
    let points = points(
        &bench
            .run("distortion stage.toml --frequency 1kHz --level 20mV --json")
            .ends_with(0),
    );
    assert_eq!(points.len(), 1);
    let keys = [
        "frequency_hz",
        "level_v_rms",
        "output_v_rms",
        "gain_db",
        "thd_percent",
        "thd_db",
        "thd_of_total_percent",
        "bandwidth_hz",
        "harmonics_in_thd",
        "dc_shift_v",
    ];
    for key in keys {
        assert!(points[0][key].is_number(), "{key}: {}", points[0]);
    }
    let harmonics = points[0]["harmonics"].as_array().unwrap();
    for (index, harmonic) in harmonics.iter().enumerate() {
        assert_eq!(harmonic["n"], index + 1);
        assert!(harmonic["v_rms"].is_number(), "{harmonic}");
        assert!(
            harmonic["phase_deg"]
                .as_f64()
                .is_none_or(|d| d > -180.0 && d <= 180.0),
            "{harmonic}"
        );
    }
    assert_eq!(harmonics.len(), 20);
    assert_eq!(points[0]["harmonics_in_thd"], 80);
    assert_eq!(points[0]["output_v_rms"], harmonics[0]["v_rms"]);
}

#[test]
fn one_level_written_in_five_ways_gives_one_answer() {
    let bench = Bench::with_stage("a_plain_common_emitter");
    let typed = "20mV,28.2842712474619mVpk,56.5685424949238mVpp,-33.97940008672037dBV,-31.760912590556813dBu";
    let points = points(
        &bench
            .run(&format!("distortion stage.toml --level {typed} --json"))
            .ends_with(0),
    );
    assert_eq!(points.len(), 5);
    for point in &points {
        // 15 digits were typed of each, and THD follows the level about in proportion.
        let off = point["level_v_rms"].as_f64().unwrap() / 0.02 - 1.0;
        assert!(off.abs() < 1e-13, "{point}");
        let ratio =
            point["thd_percent"].as_f64().unwrap() / points[0]["thd_percent"].as_f64().unwrap();
        assert!((ratio - 1.0).abs() < 1e-9, "{point}");
    }
}

#[test]
fn a_negative_level_after_an_option_is_a_level() {
    let bench = Bench::with_stage("b_split_emitter");
    for words in ["--level -34dBV", "--level=-34dBV"] {
        let run = bench
            .run(&format!("distortion stage.toml {words} --json"))
            .ends_with(0);
        let level = points(&run)[0]["level_v_rms"].as_f64().unwrap();
        assert!((20.0 * level.log10() + 34.0).abs() < 1e-12, "{level} V");
    }
}

#[test]
fn levels_and_frequencies_make_a_grid_with_exactly_the_typed_values() {
    let bench = Bench::with_stage("b_split_emitter");
    let words = "distortion stage.toml --frequency 100,1k,10kHz --level 1.2e-05V,10mV,0.05 --json";
    let grid: Vec<(f64, f64)> = points(&bench.run(words).ends_with(0))
        .iter()
        .map(|p| {
            (
                p["frequency_hz"].as_f64().unwrap(),
                p["level_v_rms"].as_f64().unwrap(),
            )
        })
        .collect();
    let wanted: Vec<(f64, f64)> = [100.0, 1000.0, 10000.0]
        .iter()
        .flat_map(|&f| [1.2e-5, 0.01, 0.05].map(|level| (f, level)))
        .collect();
    assert_eq!(grid, wanted);
}

#[test]
fn a_range_is_spaced_by_equal_ratios_and_ends_where_it_says() {
    let bench = Bench::with_stage("a_plain_common_emitter");
    let run = bench
        .run("distortion stage.toml --level 100uV..10mV/5 --json")
        .ends_with(0);
    let levels = points(&run)
        .into_iter()
        .map(|p| p["level_v_rms"].as_f64().unwrap());
    let levels: Vec<f64> = levels.collect();
    assert_eq!(levels.len(), 5);
    let wanted = [-4.0, -3.5, -3.0, -2.5, -2.0].map(|exponent| 10.0_f64.powf(exponent));
    for (level, wanted) in levels.iter().zip(wanted) {
        assert!(
            (level / wanted - 1.0).abs() < 1e-12,
            "{level} V, expected {wanted} V"
        );
    }
}

#[test]
fn without_levels_sixty_are_swept_upward_through_ten_percent() {
    let bench = Bench::with_stage("b_split_emitter");
    let points = points(&bench.run("distortion stage.toml --json").ends_with(0));
    assert_eq!(points.len(), 60);
    let level = |i: usize| points[i]["level_v_rms"].as_f64().unwrap();
    assert!((1..60).all(|i| level(i) > level(i - 1)));
    // From 60 dB below the 10 % point to 10 dB above it.
    assert!((20.0 * (level(59) / level(0)).log10() - 70.0).abs() < 0.01);
    assert!(points[0]["thd_percent"].as_f64().unwrap() < 10.0);
    assert!(points[59]["thd_percent"].as_f64().unwrap() > 10.0);
}

#[test]
fn without_a_second_harmonic_in_the_bandwidth_there_is_a_reason_instead_of_thd() {
    let bench = Bench::with_stage("b_split_emitter");
    let words = "distortion stage.toml --frequency 15kHz --level 20mV --bandwidth 22kHz --json";
    let points = points(&bench.run(words).ends_with(0));
    assert!(points[0]["thd_percent"].is_null(), "{}", points[0]);
    assert!(points[0]["thd_reason"].is_string(), "{}", points[0]);
    assert_eq!(points[0]["harmonics"].as_array().unwrap().len(), 20);
}

#[test]
fn the_bandwidth_decides_how_many_harmonics_count() {
    let bench = Bench::with_stage("b_split_emitter");
    for (bandwidth, count) in [("22kHz", 22), ("30kHz", 30), ("80kHz", 80)] {
        let words = format!("distortion stage.toml --level 20mV --bandwidth {bandwidth} --json");
        assert_eq!(
            points(&bench.run(&words).ends_with(0))[0]["harmonics_in_thd"],
            count
        );
    }
}

#[test]
fn without_a_bandwidth_every_harmonic_counts_and_no_number_is_made_up() {
    let bench = Bench::with_stage("b_split_emitter");
    let words = "distortion stage.toml --level 20mV --bandwidth none";
    let point = &points(&bench.run(&format!("{words} --json")).ends_with(0))[0];
    assert!(point["bandwidth_hz"].is_null() && point["harmonics_in_thd"].is_null());
    let table = bench.run(words).ends_with(0).stdout;
    assert!(
        table.contains("all harmonics, no bandwidth limit"),
        "{table}"
    );
}

#[test]
fn the_table_states_the_conditions_and_what_was_assumed() {
    let bench = Bench::with_stage("exact_exponential");
    let table = bench
        .run("distortion stage.toml --level 2mV")
        .ends_with(0)
        .stdout;
    assert!(
        table.contains("assumed"),
        "neither source nor load are in the file:\n{table}"
    );
    assert!(
        table.contains("25 °C") && table.contains("80 kHz") && table.contains("1 kHz"),
        "{table}"
    );
}

#[test]
fn distortion_csv_has_a_row_a_point() {
    let bench = Bench::with_stage("b_split_emitter");
    let run = bench
        .run("distortion stage.toml --level 1mV,10mV,100mV --csv")
        .ends_with(0);
    let rows = run.rows();
    assert_eq!(rows.len(), 4);
    for name in ["frequency_hz", "level_v_rms", "thd_percent"] {
        let column = rows[0].iter().position(|c| c == name);
        let column = column.unwrap_or_else(|| panic!("no column {name} in {:?}", rows[0]));
        assert!(
            rows[1..]
                .iter()
                .all(|row| row[column].parse::<f64>().is_ok()),
            "{name}"
        );
    }
}

#[test]
fn json_and_csv_at_once_are_refused() {
    let bench = Bench::with_stage("b_split_emitter");
    bench
        .run("distortion stage.toml --level 1mV --json --csv")
        .ends_with(2)
        .says("--csv");
}

#[test]
fn a_distortion_plot_is_a_picture() {
    let bench = Bench::with_stage("b_split_emitter");
    bench
        .run("distortion stage.toml --level 1mV..1V/12 --plot thd.svg")
        .ends_with(0);
    assert!(
        String::from_utf8(bench.read("thd.svg"))
            .unwrap()
            .contains("<svg")
    );
    bench
        .run("distortion stage.toml --level 1mV..1V/12 --plot thd.png")
        .ends_with(0);
    assert!(bench.read("thd.png").starts_with(b"\x89PNG\r\n\x1a\n"));
}

#[test]
fn levels_and_frequencies_that_mean_nothing_are_refused_as_typed() {
    let bench = Bench::with_stage("b_split_emitter");
    for (option, value) in [
        ("--level", "20mA"),
        ("--level", "loud"),
        ("--level", "-20mV"),
        ("--level", "NaN"),
        ("--level", "1mV..1V/0"),
        ("--level", "10mV,,20mV"),
        ("--frequency", "0"),
        ("--frequency", "-1k"),
        ("--frequency", "inf"),
        ("--frequency", "1kV"),
        ("--bandwidth", "wide"),
    ] {
        bench
            .run(&format!("distortion stage.toml {option} {value}"))
            .ends_with(2)
            .says(value);
    }
}

#[test]
fn no_json_holds_anything_that_is_not_a_number() {
    let bench = Bench::with_stage("e_series_feedback_pair");
    // From far below the floor to far into clipping; a document with NaN or inf in it would not parse.
    let run = bench
        .run("distortion stage.toml --level 1nV,1uV,3.1V --json")
        .ends_with(0);
    for point in points(&run) {
        let harmonics = point["harmonics"].as_array().unwrap().clone();
        assert!(harmonics.iter().all(|h| h["v_rms"].is_number()), "{point}");
    }
}
