//! `start`: the list of starters, printing one, writing one.

use crate::support::Bench;

fn starters(bench: &Bench) -> Vec<String> {
    let listing = bench.run("start").ends_with(0).stdout;
    let names = listing.lines().map(|l| l.split("  ").next().unwrap_or(l));
    names.map(str::to_owned).collect()
}

#[test]
fn start_lists_each_starter_on_a_line_with_its_purpose_and_nothing_else() {
    let listing = Bench::new().run("start").ends_with(0).stdout;
    assert!(listing.lines().count() >= 2, "{listing}");
    for line in listing.lines() {
        let (name, purpose) = line
            .split_once("  ")
            .unwrap_or_else(|| panic!("no two spaces in {line:?}"));
        let allowed = |c: char| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '-';
        assert!(!name.is_empty() && name.chars().all(allowed), "{name:?}");
        assert!(!purpose.trim().is_empty(), "no purpose in {line:?}");
    }
}

#[test]
fn start_with_a_name_prints_the_file_it_would_write() {
    let bench = Bench::new();
    for name in starters(&bench) {
        let printed = bench.run(&format!("start {name}")).ends_with(0).stdout;
        bench
            .run(&format!("start {name} -o {name}.toml"))
            .ends_with(0);
        assert_eq!(
            bench.read(&format!("{name}.toml")),
            printed.as_bytes(),
            "{name}"
        );
    }
}

#[test]
fn every_starter_has_a_bias() {
    let bench = Bench::new();
    for name in starters(&bench) {
        bench
            .run(&format!("start {name} -o {name}.toml"))
            .ends_with(0);
        let run = bench.run(&format!("bias {name}.toml --json")).ends_with(0);
        let document = run.document("bias");
        let transistors = document["transistors"].as_object().unwrap();
        assert!(!transistors.is_empty(), "{name}");
        for (designator, transistor) in transistors {
            assert_eq!(transistor["region"], "active", "{name}: {designator}");
        }
    }
}

#[test]
fn start_keeps_an_existing_file_unless_told_to_overwrite() {
    let bench = Bench::new();
    let name = starters(&bench).remove(0);
    bench.write("mine.toml", b"my own work");
    let refused = bench.run(&format!("start {name} -o mine.toml"));
    refused.ends_with(2).says("mine.toml").says("--overwrite");
    assert_eq!(bench.read("mine.toml"), b"my own work");
    bench
        .run(&format!("start {name} -o mine.toml --overwrite"))
        .ends_with(0);
    assert_ne!(bench.read("mine.toml"), b"my own work");
    assert_eq!(
        bench.names(),
        ["mine.toml"],
        "nothing temporary left behind"
    );
}

#[test]
fn an_unknown_starter_is_refused_by_name() {
    let bench = Bench::new();
    bench
        .run("start no-such-starter")
        .ends_with(2)
        .says("no-such-starter");
}

#[test]
fn a_starter_cannot_be_written_into_a_folder_that_is_not_there() {
    let bench = Bench::new();
    let name = starters(&bench).remove(0);
    let run = bench.run(&format!("start {name} -o nowhere/stage.toml"));
    run.ends_with(2).says("nowhere");
    assert!(bench.names().is_empty());
}
