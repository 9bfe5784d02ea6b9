//! Every fault of a stage file is told with its place, what was found and what would be right.

use cleanswing::failure::FailureKind;
use cleanswing::stage::{Caution, Stage, StageError};

/// A stage without a fault, one part or section a line, for tests to spoil.
const SOUND: &str = r#"title = "Sound"
input = "in"
output = "out"
temperature = "25C"
[source]
resistance = "600"
[load]
resistance = "47k"
[rails]
vcc = { volts = "12", resistance = "1" }
[parts]
R1 = { resistor = "82k", pins = ["vcc", "base"], tolerance = "5%", watts = "0.25", tempco = "100ppm" }
R2 = { resistor = "18k", pins = ["base", "gnd"] }
R3 = { resistor = "3k3", pins = ["vcc", "coll"] }
R4 = { resistor = "1k", pins = ["emit", "gnd"] }
C1 = { capacitor = "10u", plus = "base", minus = "in", volts = "25" }
C2 = { capacitor = "220u", pins = ["emit", "gnd"], series_resistance = "1" }
C3 = { capacitor = "4u7", pins = ["coll", "out"] }
P1 = { potentiometer = "10k", clockwise = "out", wiper = "tap", anticlockwise = "gnd", turn = 0.5 }
L1 = { inductor = "2.5", pins = ["tap", "gnd"], resistance = "6k" }
D1 = { diode = "silicon-switching", anode = "out", cathode = "gnd" }
CCS1 = { current = "1m", from = "vcc", to = "coll" }
Q1 = { npn = "mine", collector = "coll", base = "base", emitter = "emit" }
[devices.mine]
like = "npn-small-signal"
forward_gain = 300
gain_range = [200, 500]
ratings = { dissipation = "300m" }
[ratings.Q1]
collector_current = "50m"
[nominal]
input = "-40dBu"
[targets]
gain = { at = "1kHz", min = "33dB" }
"#;

fn read(text: &str) -> Result<(Stage, Vec<Caution>), StageError> {
    Stage::from_text("t.toml", text)
}

/// The message for `SOUND` with `from` replaced by `to`; every line of it without the file name.
#[track_caller]
fn spoiled(from: &str, to: &str) -> Vec<String> {
    assert_eq!(
        SOUND.matches(from).count(),
        1,
        "{from:?} must stand once in the sound stage"
    );
    messages(&SOUND.replace(from, to))
}

#[track_caller]
fn messages(text: &str) -> Vec<String> {
    let error = match read(text) {
        Ok(_) => panic!("accepted:\n{text}"),
        Err(error) => error,
    };
    assert_eq!(error.kind(), FailureKind::BadRequest);
    error
        .to_string()
        .lines()
        .map(|line| line.strip_prefix("t.toml:").unwrap_or(line).to_owned())
        .collect()
}

#[test]
fn the_sound_stage_has_no_fault_and_no_caution() {
    let (stage, cautions) = read(SOUND).unwrap_or_else(|error| panic!("{error}"));
    assert_eq!(cautions, []);
    assert_eq!(
        (
            stage.parts.len(),
            stage.parts[0].line,
            stage.check_network()
        ),
        (12, 12, vec![])
    );
    let ratings = &stage.parts[11].ratings;
    // From the part's own section, its device and the built-in class below that.
    assert_eq!(
        (ratings.collector_current, ratings.dissipation),
        (Some(0.05), Some(0.3))
    );
    assert_eq!(ratings.collector_emitter_volts, Some(45.0));
}

#[test]
fn one_fault_gives_one_message_at_its_place() {
    for (from, to, message) in [
        // Keys.
        (
            "title = \"Sound\"",
            "titel = \"Sound\"",
            "1:1: unknown key \"titel\"; did you mean \"title\"?",
        ),
        (
            "[load]\nresistance",
            "[load]\nresistence",
            "8:1: [load]: unknown key \"resistence\"; did you mean \"resistance\"?",
        ),
        (
            "tolerance = ",
            "tolerence = ",
            "12:50: R1: unknown key \"tolerence\"; did you mean \"tolerance\"?",
        ),
        (
            "R2 = { resistor",
            "R2 = { volts = 5, resistor",
            "13:8: R2: unknown key \"volts\"; known are pins, watts, tolerance, tempco, resistor, fitted, match",
        ),
        (
            "forward_gain = 300",
            "forward_gian = 300",
            "26:1: [devices.mine]: unknown parameter \"forward_gian\"; did you mean \"forward_gain\"?",
        ),
        (
            "collector_current =",
            "colector_current =",
            "30:1: [ratings.Q1]: unknown key \"colector_current\"; did you mean \"collector_current\"?",
        ),
        (
            "volts = \"12\", resistance",
            "volts = \"12\", resistanse",
            "10:23: vcc: unknown key \"resistanse\"; did you mean \"resistance\"?",
        ),
        (
            "gain = { at",
            "gian = { at",
            "34:1: [targets]: unknown key \"gian\"; did you mean \"gain\"?",
        ),
        (
            "[nominal]\ninput",
            "[nominal]\nimput",
            "32:1: [nominal]: unknown key \"imput\"; did you mean \"input\"?",
        ),
        (
            "title = \"Sound\"",
            "title = \"S\\u001b\"",
            "1:9: title \"S\\u{1b}\" may have no control characters",
        ),
        // Names.
        (
            "[ratings.Q1]",
            "[ratings.Q2]",
            "29:10: [ratings]: no part \"Q2\"; did you mean \"Q1\"?",
        ),
        (
            "CCS1 = {",
            "load = {",
            "22:1: [parts]: the name \"load\" is reserved",
        ),
        (
            "CCS1 = {",
            "\"CCS 1\" = {",
            "22:1: [parts]: the name \"CCS 1\" may have only letters, digits, _ + and -",
        ),
        (
            "CCS1 = {",
            "vcc = {",
            "22:1: [parts]: \"vcc\" is also the rail of line 10; parts and rails need different names",
        ),
        (
            "CCS1 = {",
            "R1 = {",
            "22:1: this name stands here a second time; names and keys must differ",
        ),
        // Values.
        (
            "resistor = \"18k\"",
            "resistor = \"2,2k\"",
            "13:19: R2: resistor \"2,2k\" has a comma; write 2.2k with a point",
        ),
        (
            "resistor = \"18k\"",
            "resistor = 18k",
            "13:19: not TOML: a value with letters needs quotes, such as \"4k7\"",
        ),
        (
            "capacitor = \"4u7\"",
            "capacitor = \"4M7\"",
            "18:20: C3: capacitor \"4M7\": M is mega; write 4u7 for microfarads or 4m7 for millifarads",
        ),
        (
            "capacitor = \"4u7\"",
            "capacitor = true",
            "18:20: C3: capacitor is true or false, must be a value in quotes or a plain number",
        ),
        (
            "resistor = \"18k\"",
            "resistor = \"-18k\"",
            "13:19: R2: resistor is -18k, must be above 0 Ω",
        ),
        (
            "resistor = \"18k\"",
            "resistor = 0",
            "13:19: R2: resistor is 0, must be above 0 Ω",
        ),
        (
            "resistor = \"18k\"",
            "resistor = inf",
            "13:19: R2: resistor \"inf\" is not a resistance such as 4k7, 4R7 or 4.7kΩ",
        ),
        (
            "resistor = \"18k\"",
            "resistor = \"1e999\"",
            "13:19: R2: resistor \"1e999\" is not a finite number",
        ),
        (
            "inductor = \"2.5\"",
            "inductor = \"-2.5\"",
            "20:19: L1: inductor is -2.5, must be above 0 H",
        ),
        (
            "series_resistance = \"1\"",
            "series_resistance = \"-1\"",
            "17:72: C2: series_resistance is -1, must be 0 Ω or above",
        ),
        (
            "resistance = \"600\"",
            "resistance = \"-600\"",
            "6:14: [source]: resistance is -600, must be 0 Ω or above",
        ),
        (
            "resistance = \"47k\"",
            "resistance = \"0\"",
            "8:14: [load]: resistance is 0, must be above 0 Ω",
        ),
        (
            "volts = \"12\"",
            "volts = \"12A\"",
            "10:17: vcc: volts \"12A\" is in amperes; needs a voltage such as 12, 700m or 1.5V",
        ),
        (
            "temperature = \"25C\"",
            "temperature = \"-300C\"",
            "4:15: temperature \"-300C\" must be above absolute zero, -273.15C",
        ),
        (
            "tolerance = \"5%\"",
            "tolerance = \"500%\"",
            "12:62: R1: tolerance is 500 %, must be below 100 %; write 5 percent as \"5%\"",
        ),
        (
            "turn = 0.5",
            "turn = 1.5",
            "19:95: P1: turn is 1.5, must be from 0 to 1",
        ),
        (
            "turn = 0.5",
            "law = \"log\", turn = 0.5",
            "19:94: P1: law is \"log\", must be linear, audio or reverse-audio",
        ),
        (
            "forward_gain = 300",
            "forward_gain = -3",
            "26:16: [devices.mine]: forward_gain is -3, must be above 0",
        ),
        (
            "forward_gain = 300",
            "emitter_grading = 1",
            "26:19: [devices.mine]: emitter_grading is 1, must be 0 or above and below 1",
        ),
        (
            "gain_range = [200, 500]",
            "gain_range = [500, 200]",
            "27:14: [devices.mine]: gain_range must be lowest and highest gain, such as [200, 800]",
        ),
        (
            "input = \"-40dBu\"",
            "input = \"-40dB\"",
            "32:9: [nominal]: input \"-40dB\": write decibels as dBV (1 V) or dBu (0.7746 V)",
        ),
        (
            "min = \"33dB\"",
            "min = \"lots\"",
            "34:29: [targets]: gain: min \"lots\" is not a gain such as 33dB",
        ),
        // Parts and pins.
        (
            "R2 = { resistor = \"18k\",",
            "R2 = { resistr = \"18k\",",
            "13:1: R2: says not what it is; did you mean resistor?",
        ),
        (
            "R2 = { resistor = \"18k\",",
            "R2 = { resistor = \"18k\", capacitor = \"1n\",",
            "13:26: R2: is both resistor and capacitor; keep one",
        ),
        (
            "pins = [\"base\", \"gnd\"]",
            "tolerance = 0",
            "13:1: R2: pins is missing; needs two node names such as [\"in\", \"base\"]",
        ),
        (
            "pins = [\"base\", \"gnd\"]",
            "pins = [\"base\", 0]",
            "13:33: R2: pins must be two node names in quotes such as [\"in\", \"base\"]",
        ),
        (
            "emitter = \"emit\" }",
            "emiter = \"emit\" }",
            "23:57: Q1: unknown key \"emiter\"; did you mean \"emitter\"?",
        ),
        (
            "plus = \"base\", minus",
            "pins = [\"a\", \"b\"], plus = \"base\", minus",
            "16:27: C1: has pins beside plus and minus; plus and minus mark a polarised part, pins one that is not",
        ),
        (
            "Q1 = { npn",
            "Q1 = { fitted = \"no\", npn",
            "23:17: Q1: fitted is text, must be true or false",
        ),
        (
            "turn = 0.5",
            "gang = \"P2\"",
            "19:95: P1: gang names no part \"P2\"; did you mean \"P1\"?",
        ),
        (
            "turn = 0.5",
            "gang = \"R1\"",
            "19:95: P1: gang names \"R1\", which is no potentiometer",
        ),
        (
            "turn = 0.5",
            "gang = \"P1\"",
            "19:95: P1: gang leads back to \"P1\" itself",
        ),
        (
            ", turn = 0.5",
            "",
            "19:1: P1: turn is missing; needs 0 (anticlockwise) to 1, or gang",
        ),
        // Devices.
        (
            "diode = \"silicon-switching\"",
            "diode = \"silicon-swiching\"",
            "21:16: D1: unknown device \"silicon-swiching\"; did you mean \"silicon-switching\"?",
        ),
        (
            "diode = \"silicon-switching\"",
            "diode = \"mine\"",
            "21:16: D1: device \"mine\" is a transistor; diode needs one like \"silicon-switching\"",
        ),
        (
            "npn = \"mine\"",
            "npn = \"silicon-switching\"",
            "23:14: Q1: device \"silicon-switching\" is a diode; npn needs one like \"npn-small-signal\"",
        ),
        (
            "npn = \"mine\"",
            "pnp = \"mine\"",
            "23:14: Q1: device \"mine\" is an NPN transistor; pnp needs one like \"pnp-small-signal\"",
        ),
        (
            "like = \"npn-small-signal\"",
            "like = \"npn-smal-signal\"",
            "25:8: [devices.mine]: unknown device \"npn-smal-signal\"; did you mean \"npn-small-signal\"?",
        ),
        (
            "like = \"npn-small-signal\"",
            "like = \"mine\"",
            "25:8: [devices.mine]: like leads back to \"mine\" itself",
        ),
        (
            "like = \"npn-small-signal\"",
            "bandgap = 1.11",
            "24:10: [devices.mine]: saturation_current is missing; needs a current such as 1m, 10u or 2.5mA, or start from a class by like",
        ),
        // The network.
        (
            "input = \"in\"\n",
            "input = \"on\"\n",
            "2:9: input node \"on\" is not on the network; did you mean \"in\"?",
        ),
        (
            "output = \"out\"",
            "output = \"gnd\"",
            "3:10: output is gnd itself; name the node output is at",
        ),
        (
            "collector = \"coll\"",
            "collector = \"colt\"",
            "23:34: Q1: collector node \"colt\" has no other connection; did you mean \"coll\"?",
        ),
        ("R1 = { resistor", "R1 = { fitted = false, resistor", ""),
        ("resistance = \"6k\"", "resistance = \"0\"", ""),
    ] {
        if message.is_empty() {
            // The neighbours of a fault: what is allowed although it looks alike.
            let text = SOUND.replace(from, to);
            assert!(read(&text).is_ok(), "{to}: {}", read(&text).unwrap_err());
            continue;
        }
        let found = spoiled(from, to);
        let expected = vec![message.to_owned()];
        assert_eq!(found, expected, "{to}");
    }
}

#[test]
fn all_faults_are_told_at_once_in_file_order() {
    let text = SOUND
        .replace("temperature = \"25C\"", "temperature = \"hot\"")
        .replace("resistor = \"18k\"", "resistor = \"0\"")
        .replace("collector = \"coll\"", "collector = \"colt\"")
        .replace(
            "\"12\", resistance = \"1\" }",
            "\"12\", resistance = \"-1\" }",
        );
    assert_eq!(
        messages(&text),
        [
            "4:15: temperature \"hot\" is not a temperature such as 25C, -10C or 298.15K",
            "10:36: vcc: resistance is -1, must be 0 Ω or above",
            "13:19: R2: resistor is 0, must be above 0 Ω",
            "23:34: Q1: collector node \"colt\" has no other connection; did you mean \"coll\"?",
        ]
    );
}

#[test]
fn syntax_errors_stand_beside_the_other_faults() {
    let text = SOUND
        .replace("resistor = \"18k\"", "resistor = 18k")
        .replace("inductor = \"2.5\"", "inductor = 0")
        + "[broken\n";
    let found = messages(&text);
    assert_eq!(
        found[0],
        "13:19: not TOML: a value with letters needs quotes, such as \"4k7\""
    );
    assert_eq!(found[1], "20:19: L1: inductor is 0, must be above 0 H");
    assert!(found[2].starts_with("35:8: not TOML: "), "{found:#?}");
    assert_eq!(found.len(), 3, "{found:#?}");
}

/// A stage of a few parts between the rail `v`, the input `in` and the output `out`.
fn small(parts: &str) -> String {
    format!(
        "input = \"in\"\noutput = \"out\"\nsource = {{ resistance = 600 }}\nrails = {{ v = 9 }}\n[parts]\n{parts}\n"
    )
}

#[test]
fn an_unloaded_coupled_output_asks_for_a_load() {
    let parts = "R1 = { resistor = 1, pins = [\"v\", \"in\"] }\nC1 = { capacitor = 1, pins = [\"in\", \"out\"] }";
    assert_eq!(
        messages(&small(parts)),
        [
            "2:10: output node \"out\" has no DC path to gnd; add [load] with a resistance, such as resistance = \"47k\""
        ]
    );
    assert!(read(&(small(parts) + "[load]\nresistance = \"47k\"")).is_ok());
    // A leaking capacitor is a path.
    assert!(
        read(&small(
            &parts.replace("\"out\"]", "\"out\"], leakage = \"10M\"")
        ))
        .is_ok()
    );
}

#[test]
fn a_node_without_dc_path_is_named() {
    let parts = "R1 = { resistor = 1, pins = [\"in\", \"out\"] }
I1 = { current = \"1m\", from = \"v\", to = \"a\" }
C1 = { capacitor = 1, pins = [\"a\", \"gnd\"] }
R2 = { resistor = 1, pins = [\"a\", \"b\"] }
C2 = { capacitor = 1, pins = [\"b\", \"gnd\"] }";
    assert_eq!(
        messages(&small(parts)),
        [
            "7:41: nodes \"a\", \"b\" have no DC path to gnd; capacitors and current sources are none"
        ]
    );
}

#[test]
fn a_base_needs_more_than_its_own_junctions_or_another_base() {
    let coupled = "C1 = { capacitor = 1, pins = [\"in\", \"b\"] }
R1 = { resistor = 1, pins = [\"v\", \"out\"] }
Q1 = { npn = \"npn-small-signal\", collector = \"out\", base = \"b\", emitter = \"gnd\" }
Q2 = { npn = \"npn-small-signal\", collector = \"out\", base = \"b\", emitter = \"gnd\" }";
    assert_eq!(
        messages(&small(coupled)),
        [
            "8:60: Q1: nothing biases base node \"b\"; connect a resistor to it",
            "9:60: Q2: nothing biases base node \"b\"; connect a resistor to it"
        ]
    );
    for bias in [
        "R2 = { resistor = 1, pins = [\"out\", \"b\"] }",
        "I1 = { current = \"1u\", from = \"v\", to = \"b\" }",
        "D1 = { diode = \"silicon-switching\", anode = \"v\", cathode = \"b\" }",
        "Q3 = { npn = \"npn-small-signal\", collector = \"v\", base = \"in\", emitter = \"b\" }",
    ] {
        let text = small(&format!("{coupled}\n{bias}"));
        assert!(read(&text).is_ok(), "{bias}: {}", read(&text).unwrap_err());
    }
}

#[test]
fn an_ideal_source_biases_a_base() {
    let text = "input = \"in\"\noutput = \"out\"\nrails = { v = 9 }\n[parts]
R1 = { resistor = 1, pins = [\"v\", \"out\"] }
Q1 = { npn = \"npn-small-signal\", collector = \"out\", base = \"in\", emitter = \"gnd\" }";
    assert!(read(text).is_ok());
}

#[test]
fn a_loop_without_resistance_is_refused_and_named() {
    let parts = "R1 = { resistor = 1, pins = [\"in\", \"out\"] }\n";
    let loops = [
        (
            "L1 = { inductor = 1, pins = [\"v\", \"gnd\"] }",
            "7:1: L1 (0 Ω) and rail v form a loop without resistance; give one of them a resistance",
        ),
        (
            "L1 = { inductor = 1, pins = [\"out\", \"x\"] }\nL2 = { inductor = 1, pins = [\"x\", \"out\"] }",
            "8:1: L2 (0 Ω) and L1 (0 Ω) form a loop without resistance; give one of them a resistance",
        ),
        (
            "L1 = { inductor = 1, pins = [\"out\", \"out\"] }",
            "7:1: L1 (0 Ω) is bridged by zero ohms; its current would be undetermined",
        ),
    ];
    for (inductors, message) in loops {
        assert_eq!(messages(&small(&format!("{parts}{inductors}"))), [message]);
        let resistive = inductors.replace("inductor = 1", "resistance = 1, inductor = 1");
        assert!(read(&small(&format!("{parts}{resistive}"))).is_ok());
    }
    let ideal = small(parts)
        .replace("source = { resistance = 600 }\n", "")
        .replace("input = \"in\"", "input = \"v\"");
    assert_eq!(
        messages(&ideal.replace("\"in\"", "\"v\"")),
        [
            "1:9: the ideal source and rail v form a loop without resistance; give one of them a resistance"
        ]
    );
}

#[test]
fn a_part_left_out_is_no_path_and_no_fault_of_its_own() {
    let parts = "R1 = { resistor = 1, pins = [\"in\", \"out\"] }
C1 = { capacitor = 1, pins = [\"out\", \"x\"] }
R2 = { resistor = 1, pins = [\"x\", \"gnd\"], fitted = false }
R3 = { resistor = 1, pins = [\"y\", \"z\"], fitted = false }";
    assert_eq!(
        messages(&small(parts)),
        ["7:38: node \"x\" has no DC path to gnd; capacitors and current sources are none"]
    );
}

#[test]
fn a_class_built_from_nothing_is_what_its_parts_take_it_for() {
    let text = small(
        "R1 = { resistor = 1, pins = [\"in\", \"out\"] }
D1 = { diode = \"base\", anode = \"out\", cathode = \"gnd\" }
D2 = { diode = \"derived\", anode = \"out\", cathode = \"gnd\" }
[devices.base]
saturation_current = \"10f\"
[devices.derived]
like = \"base\"
series_resistance = \"25\"
[devices.unused]
forward_gain = 100",
    );
    assert!(read(&text).is_ok(), "{}", read(&text).unwrap_err());
}

#[test]
fn the_title_is_the_file_stem_where_none_is_given() {
    let text = SOUND.replace("title = \"Sound\"\n", "");
    assert_eq!(
        Stage::from_text("/some/where/first-stage.toml", &text)
            .unwrap()
            .0
            .title,
        "first-stage"
    );
}

#[test]
fn what_is_only_unusual_is_a_caution() {
    let text = SOUND
        .replace("resistor = \"18k\"", "resistor = \"18G\"")
        .replace("temperature = \"25C\"", "temperature = \"300C\"")
        .replace("[rails]", "[rails]\nspare = 5");
    let cautions: Vec<_> = read(&text)
        .unwrap()
        .1
        .into_iter()
        .map(|c| (c.line, c.message))
        .collect();
    assert_eq!(
        cautions,
        [
            (
                4,
                "temperature is 300 °C; devices are described for -60 to 175 °C".to_owned()
            ),
            (14, "R2 is 18.0 GΩ, an unusual size".to_owned()),
            (10, "rail spare feeds nothing".to_owned()),
        ]
    );
}

#[test]
fn files_that_are_no_stage_files_have_one_clear_message() {
    let folder = tempfile::tempdir().unwrap();
    let path = |name: &str| folder.path().join(name);
    std::fs::write(path("binary.toml"), b"title = \"x\"\n\xff\xfe").unwrap();
    std::fs::write(path("empty.toml"), b"").unwrap();
    for (name, message) in [
        (
            "missing.toml",
            "no such file; `cleanswing start` writes one to begin with",
        ),
        ("binary.toml", "is no stage file: line 2 is not UTF-8 text"),
    ] {
        let error = Stage::read(&path(name)).unwrap_err().to_string();
        assert_eq!(error, format!("{}: {message}", path(name).display()));
    }
    let directory = Stage::read(folder.path()).unwrap_err().to_string();
    assert!(
        directory.ends_with("is a directory, must be a stage file"),
        "{directory}"
    );
    let empty = Stage::read(&path("empty.toml")).unwrap_err().to_string();
    assert_eq!(
        empty.lines().count(),
        3,
        "input, output and parts are missing: {empty}"
    );
}

#[test]
fn messages_carry_no_control_characters_and_stay_short() {
    let text = SOUND
        .replace("emitter = \"emit\" }", "emitter = \"\\u001b[2J\" }")
        .replace("CCS1 = {", &format!("{} = {{", "N".repeat(100_000)));
    for message in messages(&text) {
        assert!(
            !message.contains('\u{1b}') && message.len() < 400,
            "{message}"
        );
    }
}

#[test]
fn nesting_without_end_is_refused_not_recursed() {
    for text in [
        "a = ".to_owned() + &"[".repeat(200_000),
        "a = ".to_owned() + &"{ a = ".repeat(200_000),
        "a.".repeat(200_000) + "a = 1",
        format!("[{}a]", "a.".repeat(200_000)),
    ] {
        assert!(read(&text).is_err());
    }
}

proptest::proptest! {
    #[test]
    fn no_spoiled_file_makes_it_panic(start in 0..SOUND.len(), length in 0..40usize, with in "[-a-z0-9.,\"'=\\[\\]{}#µ \n\u{0}]{0,12}") {
        let end = (start + length).min(SOUND.len());
        if let (Some(before), Some(after)) = (SOUND.get(..start), SOUND.get(end..)) {
            // Whatever it says, it names a place inside the file.
            let text = format!("{before}{with}{after}");
            if let Err(StageError::Faulty { faults, .. }) = read(&text) {
                for fault in faults {
                    proptest::prop_assert!(fault.line >= 1 && fault.line <= text.lines().count() + 1, "{fault:?}");
                    proptest::prop_assert!(fault.column >= 1, "{fault:?}");
                }
            }
        }
    }
}

#[test]
fn ten_thousand_faulty_parts_are_read_in_moments_and_told_in_fifty_lines() {
    let parts: Vec<String> = (0..10_000)
        .map(|i| {
            format!(
                "R{i} = {{ resistor = \"0\", pins = [\"a{i}\", \"b{i}\"], tolerence = 1 }}\nQ{i} = {{ npn = \"d{i}\", collector = \"q{i}\", base = \"q{}\", emitter = \"q{}\" }}\nL{i} = {{ inductor = 1, pins = [\"x\", \"y\"] }}",
                i + 1,
                i + 2
            )
        })
        .collect();
    let devices: Vec<String> = (0..10_000)
        .map(|i| format!("d{i} = {{ like = \"d{}\" }}", i + 1))
        .collect();
    let text = small(&parts.join("\n")) + "[devices]\n" + &devices.join("\n");
    let start = std::time::Instant::now();
    let found = messages(&text);
    // A search through all names for each fault would take minutes; a second leaves room for a slow machine.
    assert!(start.elapsed().as_secs() < 10, "{:?}", start.elapsed());
    assert_eq!(found.len(), 51);
    assert!(found[50].contains("more"), "{}", found[50]);
}

#[test]
fn another_name_for_ground_is_refused() {
    for name in ["GND", "0", "ground"] {
        let text = SOUND.replacen("\"gnd\"", &format!("\"{name}\""), 1);
        assert_ne!(text, SOUND);
        let error = read(&text).expect_err("a floating ground").to_string();
        assert!(error.contains("ground is called gnd"), "{error}");
    }
}
