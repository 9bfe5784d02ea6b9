//! `bias`: the table, JSON, CSV, the plot, overrides.

use crate::support::Bench;

#[test]
fn bias_prints_nodes_transistors_and_supply() {
    let bench = Bench::with_stage("b_split_emitter");
    let table = bench.run("bias stage.toml").ends_with(0).stdout;
    for word in ["base", "coll", "emit", "split", "Q1", "active", "vcc"] {
        assert!(table.contains(word), "{word} is missing:\n{table}");
    }
    assert!(
        !table.contains('\u{1b}'),
        "colour where there is no terminal"
    );
}

#[test]
fn bias_json_has_every_promised_key() {
    let bench = Bench::with_stage("h_diode_clipper");
    let document = bench
        .run("bias stage.toml --json")
        .ends_with(0)
        .document("bias");
    let keys = [
        "collector_current_a",
        "base_current_a",
        "base_emitter_v",
        "collector_emitter_v",
        "dissipation_w",
        "transconductance_s",
        "input_resistance_ohm",
        "output_resistance_ohm",
    ];
    for key in keys {
        assert!(
            document["transistors"]["Q1"][key].is_f64(),
            "{key}: {document}"
        );
    }
    assert_eq!(document["transistors"]["Q1"]["region"], "active");
    for key in ["current_a", "voltage_v"] {
        assert!(
            document["diodes"]["D1"][key].is_number(),
            "{key}: {document}"
        );
    }
    for key in ["current_a", "power_w"] {
        assert!(document["supply"]["vcc"][key].is_f64(), "{key}: {document}");
    }
    for key in ["up_v", "down_v"] {
        assert!(document["static_swing"][key].is_f64(), "{key}: {document}");
    }
    assert!(
        document["nodes"]["Q1.base"].is_f64(),
        "internal node: {document}"
    );
}

#[test]
fn bias_csv_is_a_header_and_rows_of_equal_length() {
    let bench = Bench::with_stage("e_series_feedback_pair");
    let run = bench.run("bias stage.toml --csv").ends_with(0);
    let rows = run.rows();
    for name in ["Q1", "Q2", "e1"] {
        assert!(
            rows.iter().any(|row| row.iter().any(|field| field == name)),
            "no row of {name}:\n{}",
            run.stdout
        );
    }
}

#[test]
fn a_stage_may_come_from_standard_input() {
    let bench = Bench::with_stage("b_split_emitter");
    let stage = String::from_utf8(bench.read("stage.toml")).unwrap();
    let from_input = bench.run_with("bias - --json", &stage).ends_with(0);
    let from_file = bench.run("bias stage.toml --json").ends_with(0);
    assert_eq!(from_input.stdout, from_file.stdout);
}

#[test]
fn an_override_changes_the_figures_and_is_named_in_the_conditions() {
    let bench = Bench::with_stage("b_split_emitter");
    let nominal = bench
        .run("bias stage.toml --json")
        .ends_with(0)
        .document("bias");
    let run = bench
        .run("bias stage.toml --json --set vcc=9 --set R3=2k2")
        .ends_with(0);
    let changed = run.document("bias");
    assert_ne!(nominal["nodes"]["coll"], changed["nodes"]["coll"]);
    let conditions = changed["conditions"].to_string();
    assert!(
        conditions.contains("vcc=9") && conditions.contains("R3=2k2"),
        "{conditions}"
    );
}

#[test]
fn an_override_equal_to_the_files_value_changes_no_figure() {
    let bench = Bench::with_stage("b_split_emitter");
    let nominal = bench
        .run("bias stage.toml --json")
        .ends_with(0)
        .document("bias");
    let run = bench
        .run("bias stage.toml --json --set R3=4.7k")
        .ends_with(0);
    assert_eq!(nominal["nodes"], run.document("bias")["nodes"]);
}

#[test]
fn an_override_of_nothing_known_is_refused_by_name() {
    let bench = Bench::with_stage("b_split_emitter");
    bench
        .run("bias stage.toml --set R33=1k")
        .ends_with(2)
        .says("R33");
    bench
        .run("bias stage.toml --set R3=banana")
        .ends_with(2)
        .says("banana");
    bench
        .run("bias stage.toml --set R3")
        .ends_with(2)
        .says("R3");
}

#[test]
fn a_plot_is_written_by_its_ending_and_not_over_another_file() {
    let bench = Bench::with_stage("b_split_emitter");
    bench.run("bias stage.toml --plot curve.svg").ends_with(0);
    let svg = String::from_utf8(bench.read("curve.svg")).unwrap();
    assert!(svg.contains("<svg") && svg.trim_end().ends_with("</svg>"));
    bench
        .run("bias stage.toml --plot curve.svg")
        .ends_with(2)
        .says("curve.svg");
    assert_eq!(bench.read("curve.svg"), svg.as_bytes());
    bench.run("bias stage.toml --plot curve.png").ends_with(0);
    assert!(bench.read("curve.png").starts_with(b"\x89PNG\r\n\x1a\n"));
    bench
        .run("bias stage.toml --plot curve.doc")
        .ends_with(2)
        .says("curve.doc");
    assert_eq!(bench.names(), ["curve.png", "curve.svg", "stage.toml"]);
}

#[test]
fn the_same_run_gives_the_same_bytes() {
    let bench = Bench::with_stage("f_complementary_pair");
    let first = bench.run("bias stage.toml --json").ends_with(0);
    assert_eq!(
        first.stdout,
        bench.run("bias stage.toml --json").ends_with(0).stdout
    );
}
