//! Help, version, and requests that are no request.

use crate::support::Bench;

const COMMANDS: [&str; 5] = ["demo", "start", "bias", "distortion", "listen"];

#[test]
fn help_names_every_command() {
    let help = Bench::new().run("--help").ends_with(0).stdout;
    for command in COMMANDS {
        assert!(help.contains(command), "{command} is missing:\n{help}");
    }
}

#[test]
fn every_command_has_help_of_its_own_on_standard_output() {
    for command in COMMANDS {
        let run = Bench::new().run(&format!("{command} --help")).ends_with(0);
        assert!(
            run.stdout.contains("Usage") && run.stdout.contains(command),
            "{}",
            run.stdout
        );
        assert!(run.stderr.is_empty(), "{}", run.stderr);
    }
}

#[test]
fn help_shows_the_options_a_command_takes() {
    let bench = Bench::new();
    for (command, options) in [
        ("start", "-o --overwrite"),
        ("bias", "--json --csv --plot --set"),
        (
            "distortion",
            "--level --frequency --bandwidth --json --csv --plot --set",
        ),
        (
            "listen",
            "-o --full-scale --output-full-scale --oversample --format --overwrite --set",
        ),
    ] {
        let help = bench.run(&format!("{command} --help")).ends_with(0).stdout;
        for option in options.split(' ') {
            assert!(
                help.contains(option),
                "{command} --help lacks {option}:\n{help}"
            );
        }
    }
}

#[test]
fn the_version_is_that_of_the_manifest() {
    let version = Bench::new().run("--version").ends_with(0).stdout;
    assert_eq!(
        version.trim(),
        concat!("cleanswing ", env!("CARGO_PKG_VERSION"))
    );
}

#[test]
fn a_request_that_is_none_ends_with_two_and_says_so_on_standard_error() {
    for words in [
        "",
        "no-such-command",
        "bias",
        "bias stage.toml --no-such-option",
        "listen stage.toml",
    ] {
        let run = Bench::new().run(words).ends_with(2);
        assert!(!run.stderr.is_empty(), "nothing said about {words:?}");
        assert!(run.stdout.is_empty(), "{words:?} printed {:?}", run.stdout);
    }
}

#[test]
fn a_reader_that_has_gone_away_is_no_reason_to_panic() {
    let bench = Bench::with_stage("b_split_emitter");
    for words in [
        "--help",
        "start",
        "bias stage.toml",
        "bias stage.toml --json",
        "distortion stage.toml --level 1mV..1V/20",
    ] {
        bench.run(words).ends_with(0);
        bench.run_unread(words);
    }
}
