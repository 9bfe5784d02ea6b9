//! Stage files that are missing, broken or have no answer: the exit code and the place named.

use crate::support::Bench;

const COMMANDS: [&str; 3] = ["bias", "distortion", "listen"];

fn words(command: &str, stage: &str) -> String {
    match command {
        "listen" => format!("listen {stage} in.wav -o out.wav"),
        _ => format!("{command} {stage}"),
    }
}

#[test]
fn a_stage_file_that_is_not_there_is_named() {
    for command in COMMANDS {
        let run = Bench::new().run(&words(command, "missing.toml"));
        run.ends_with(2).says("missing.toml");
    }
}

#[test]
fn a_folder_and_bytes_that_are_no_text_are_refused_as_stage_files() {
    let bench = Bench::new();
    std::fs::create_dir(bench.path("folder.toml")).unwrap();
    bench.write("noise.toml", &[0xff, 0xfe, 0x00, 0x80, 0x0a, 0xc3]);
    bench.write("empty.toml", b"");
    for command in COMMANDS {
        for file in ["folder.toml", "noise.toml", "empty.toml"] {
            bench.run(&words(command, file)).ends_with(2).says(file);
        }
    }
}

#[test]
fn a_fault_of_syntax_is_placed_by_file_line_and_column() {
    let bench = Bench::new();
    bench.write(
        "broken.toml",
        b"title = \"x\"\ninput = \"in\"\noutput = = \"out\"\n",
    );
    for command in COMMANDS {
        bench
            .run(&words(command, "broken.toml"))
            .ends_with(2)
            .says("broken.toml:3:10");
    }
}

/// A divider around which the tests below put one fault or several; the first part stands on line 8.
fn stage_with(parts: &str) -> String {
    format!(
        "title = \"x\"\ninput = \"in\"\noutput = \"out\"\n[rails]\nvcc = \"9\"\n\n[parts]\n{parts}\n\
         RA = {{ resistor = \"1k\", pins = [\"in\", \"out\"] }}\nRB = {{ resistor = \"1k\", pins = [\"out\", \"gnd\"] }}\n\
         RC = {{ resistor = \"1k\", pins = [\"vcc\", \"out\"] }}\n"
    )
}

#[test]
fn a_value_that_cannot_be_is_placed_and_quoted() {
    let bench = Bench::new();
    for (value, quoted) in [
        ("-4.7k", "-4.7k"),
        ("0", "0"),
        ("2,2k", "2,2k"),
        ("lots", "lots"),
        ("inf", "inf"),
    ] {
        let part = format!("R1 = {{ resistor = \"{value}\", pins = [\"in\", \"gnd\"] }}");
        bench.write("stage.toml", stage_with(&part).as_bytes());
        let run = bench
            .run("bias stage.toml")
            .ends_with(2)
            .says("stage.toml:8:")
            .says("R1");
        run.says(quoted);
    }
}

#[test]
fn all_faults_of_a_file_are_reported_at_once() {
    let bench = Bench::new();
    let parts = "R1 = { resistor = \"-1k\", pins = [\"in\", \"gnd\"] }\n\
                 Q1 = { npn = \"npn-small-signl\", collector = \"vcc\", base = \"out\", emitter = \"gnd\" }\n\
                 R3 = { resistor = \"1k\", pins = [\"out\", \"nowhere\"] }\n\
                 R4 = { resistor = \"1k\", pins = [\"in\", \"gnd\"], tolerence = \"5%\" }";
    bench.write("stage.toml", stage_with(parts).as_bytes());
    let run = bench.run("bias stage.toml").ends_with(2);
    for place in [
        "stage.toml:8:",
        "stage.toml:9:",
        "stage.toml:10:",
        "stage.toml:11:",
    ] {
        assert!(
            run.stderr.contains(place),
            "nothing at {place}\n{}",
            run.stderr
        );
    }
    // The nearest name there is, so that a slip of the finger need not be looked up.
    run.says("npn-small-signal").says("nowhere");
}

#[test]
fn an_unknown_key_is_an_error_with_the_nearest_name() {
    let bench = Bench::new();
    let stage = stage_with("").replace("title =", "temprature = \"25C\"\ntitle =");
    bench.write("stage.toml", stage.as_bytes());
    bench
        .run("bias stage.toml")
        .ends_with(2)
        .says("stage.toml:1:")
        .says("temperature");
}

#[test]
fn a_current_that_can_only_return_through_a_reversed_junction_has_no_bias() {
    let bench = Bench::new();
    let parts = "I1 = { current = \"1m\", from = \"gnd\", to = \"a\" }\n\
                 D1 = { diode = \"plain\", anode = \"gnd\", cathode = \"a\" }\n\
                 C1 = { capacitor = \"1u\", pins = [\"a\", \"out\"] }";
    let stage = stage_with(parts) + "[devices.plain]\nsaturation_current = \"1n\"\n";
    bench.write("stage.toml", stage.as_bytes());
    let run = bench.run("bias stage.toml").ends_with(3);
    assert!(!run.stderr.is_empty());
}

#[test]
fn nothing_is_printed_on_standard_output_when_there_is_no_answer() {
    let bench = Bench::new();
    bench.write(
        "stage.toml",
        stage_with("R1 = { resistor = \"-1k\", pins = [\"in\", \"gnd\"] }").as_bytes(),
    );
    for option in ["", "--json", "--csv"] {
        let run = bench.run(&format!("bias stage.toml {option}")).ends_with(2);
        assert!(run.stdout.is_empty(), "{:?}", run.stdout);
        assert!(!run.stderr.is_empty(), "nothing said with {option:?}");
    }
}
