//! The README shows what the program prints.
//!
//! Every ```` ```console ```` block of README.md is run, in the order of the page and in one folder, so that a later
//! block finds the files an earlier one wrote. In a block, a line that starts with `$ cleanswing` is run; the lines up to
//! the next `$` are what it must print on standard output, character for character but for spaces at the ends of
//! lines; a line that holds `…` alone stands for any lines left out. A command that is shown to fail carries `# exit N`
//! behind it and shows its standard error. The folder holds a copy of `signals/`. Commands of other programs belong
//! into ```` ```sh ```` blocks, which are not run.
//!
//! `CLEANSWING_README=write cargo test --test readme` puts the present output into the page instead, except where
//! `…` stands.
#![allow(clippy::unwrap_used, clippy::expect_used)] // helpers of tests, which the lint counts as code

use std::fs;
use std::path::{Path, PathBuf};

use assert_cmd::Command;

const FENCE: &str = "```";
const OPENING: &str = "```console";
const LEFT_OUT: &str = "…";

/// One command of a block: its line in the page (from 0) and the lines shown under it.
struct Shown {
    line: usize,
    command: String,
    output: Vec<String>,
}

fn page() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("README.md")
}

/// All commands of all console blocks, in order.
fn shown(text: &str) -> Vec<Shown> {
    let mut found: Vec<Shown> = Vec::new();
    let mut inside = false;
    for (line, content) in text.lines().enumerate() {
        if !inside {
            inside = content.trim_end() == OPENING;
        } else if content.trim_end() == FENCE {
            inside = false;
        } else if let Some(command) = content.strip_prefix("$ ") {
            let command = command.to_owned();
            found.push(Shown {
                line,
                command,
                output: Vec::new(),
            });
        } else {
            let last = found.last_mut();
            let last =
                last.unwrap_or_else(|| panic!("README.md:{}: output before any command", line + 1));
            last.output.push(content.trim_end().to_owned());
        }
    }
    assert!(!inside, "README.md: a console block is not closed");
    found
}

/// Words of a command line: spaces divide, single and double quotes hold together.
fn words(command: &str) -> Vec<String> {
    let (mut words, mut word, mut quote) = (Vec::new(), None::<String>, None);
    for c in command.chars() {
        match (quote, c) {
            (Some(open), c) if c == open => quote = None,
            (None, '\'' | '"') => {
                quote = Some(c);
                word.get_or_insert_default();
            }
            (None, c) if c.is_whitespace() => words.extend(word.take()),
            (_, c) => word.get_or_insert_default().push(c),
        }
    }
    words.extend(word);
    words
}

/// The command without its remark, and the exit code the remark announces.
fn with_exit_code(command: &str) -> (&str, i32) {
    match command.rsplit_once("# exit ") {
        Some((command, code)) => (
            command.trim_end(),
            code.trim().parse().expect("# exit NUMBER"),
        ),
        None => (command, 0),
    }
}

/// Run one command in `folder`; the lines it prints.
fn run(shown: &Shown, folder: &Path) -> Vec<String> {
    let place = format!("README.md:{}: $ {}", shown.line + 1, shown.command);
    let (command, code) = with_exit_code(&shown.command);
    let words = words(command);
    assert_eq!(
        words[0], "cleanswing",
        "{place}: a console block runs this program alone"
    );
    let output = Command::new(env!("CARGO_BIN_EXE_cleanswing"))
        .args(&words[1..])
        .current_dir(folder)
        .output()
        .unwrap();
    let error = String::from_utf8(output.stderr).unwrap();
    assert_eq!(output.status.code(), Some(code), "{place}\n{error}");
    let printed = if code == 0 {
        String::from_utf8(output.stdout).unwrap()
    } else {
        error
    };
    let mut lines: Vec<String> = printed.lines().map(|l| l.trim_end().to_owned()).collect();
    while lines.last().is_some_and(String::is_empty) {
        lines.pop();
    }
    lines
}

/// Whether the printed lines are those shown, `…` standing for any number of lines.
fn agrees(shown: &[String], printed: &[String]) -> bool {
    match shown.split_first() {
        None => printed.is_empty(),
        Some((first, rest)) if first == LEFT_OUT => {
            (0..=printed.len()).any(|skip| agrees(rest, &printed[skip..]))
        }
        Some((first, rest)) => printed.first() == Some(first) && agrees(rest, &printed[1..]),
    }
}

fn without_empty_end(lines: &[String]) -> &[String] {
    let length = lines
        .iter()
        .rposition(|l| !l.is_empty())
        .map_or(0, |last| last + 1);
    &lines[..length]
}

fn copy_signals(folder: &Path) {
    let signals = Path::new(env!("CARGO_MANIFEST_DIR")).join("signals");
    fs::create_dir(folder.join("signals")).unwrap();
    for entry in fs::read_dir(&signals).unwrap().map(Result::unwrap) {
        if entry.file_type().unwrap().is_file() {
            fs::copy(entry.path(), folder.join("signals").join(entry.file_name())).unwrap();
        }
    }
}

/// The page with the printed lines in place of those shown.
fn rewritten(text: &str, results: &[(Shown, Vec<String>)]) -> String {
    let mut lines: Vec<String> = text.lines().map(str::to_owned).collect();
    for (shown, printed) in results.iter().rev() {
        if !shown.output.iter().any(|l| l == LEFT_OUT) {
            let first = shown.line + 1;
            lines.splice(first..first + shown.output.len(), printed.iter().cloned());
        }
    }
    lines.join("\n") + "\n"
}

#[test]
fn every_command_of_the_page_prints_what_the_page_shows() {
    let text = fs::read_to_string(page()).expect("README.md");
    let folder = tempfile::tempdir().unwrap();
    copy_signals(folder.path());
    let results: Vec<(Shown, Vec<String>)> = shown(&text)
        .into_iter()
        .map(|shown| {
            let printed = run(&shown, folder.path());
            (shown, printed)
        })
        .collect();
    assert!(
        results.len() >= 3,
        "the page shows a worked session, found {} commands",
        results.len()
    );
    if std::env::var("CLEANSWING_README").is_ok_and(|v| v == "write") {
        fs::write(page(), rewritten(&text, &results)).unwrap();
        return;
    }
    let wrong: Vec<String> = results
        .iter()
        .filter(|(shown, printed)| !agrees(without_empty_end(&shown.output), printed))
        .map(|(shown, printed)| {
            let place = format!("README.md:{}: $ {}", shown.line + 1, shown.command);
            format!(
                "{place}\nshown:\n{}\nprinted:\n{}",
                shown.output.join("\n"),
                printed.join("\n")
            )
        })
        .collect();
    assert!(wrong.is_empty(), "{}", wrong.join("\n\n"));
}

#[test]
fn every_command_of_the_help_stands_on_the_page() {
    let output = Command::new(env!("CARGO_BIN_EXE_cleanswing"))
        .arg("--help")
        .output()
        .unwrap();
    let help = String::from_utf8(output.stdout).unwrap();
    let listed = help
        .lines()
        .skip_while(|l| !l.starts_with("Commands:"))
        .skip(1)
        .take_while(|l| !l.is_empty());
    let commands: Vec<&str> = listed
        .filter(|l| l.starts_with("  ") && !l.starts_with("   "))
        .filter_map(|l| l.split_whitespace().next())
        .filter(|&name| name != "help")
        .collect();
    assert!(
        commands.len() >= 5,
        "no list of commands in --help:\n{help}"
    );
    let text = fs::read_to_string(page()).expect("README.md");
    for command in commands {
        assert!(
            text.contains(&format!("cleanswing {command}")),
            "README.md does not show cleanswing {command}"
        );
    }
}

#[test]
fn lines_left_out_may_be_any_number_and_others_must_be_equal() {
    let lines = |text: &str| -> Vec<String> { text.lines().map(str::to_owned).collect() };
    assert!(agrees(&lines("a\n…\nd"), &lines("a\nb\nc\nd")));
    assert!(agrees(&lines("a\n…\nd"), &lines("a\nd")));
    assert!(!agrees(&lines("a\n…\nd"), &lines("a\nb\nc")));
    assert!(!agrees(&lines("a"), &lines("a\nb")));
    assert!(!agrees(&lines("a\nb"), &lines("a")));
}

#[test]
fn quotes_hold_the_words_of_a_command_together() {
    assert_eq!(
        words("cleanswing bias \"my stage.toml\" --set 'R1=4k7'"),
        ["cleanswing", "bias", "my stage.toml", "--set", "R1=4k7"]
    );
    assert_eq!(
        with_exit_code("cleanswing bias gone.toml  # exit 2"),
        ("cleanswing bias gone.toml", 2)
    );
}

#[test]
fn a_command_owns_the_lines_up_to_the_next_one() {
    let text = "x\n```console\n$ cleanswing a\n1\n2\n\n$ cleanswing b\n```\n```sh\n$ other\n```\n";
    let found = shown(text);
    assert_eq!(
        found
            .iter()
            .map(|s| (s.line, s.output.len()))
            .collect::<Vec<_>>(),
        [(2, 3), (6, 0)]
    );
    assert_eq!(found[1].command, "cleanswing b");
}

/// `CLEANSWING_README=write` puts the present picture in its place.
#[test]
fn the_picture_of_the_page_is_what_its_command_draws() {
    let folder = tempfile::tempdir().unwrap();
    for words in [
        "start common-emitter-split -o preamp.toml",
        "distortion preamp.toml --plot thd.svg",
    ] {
        let run = Command::new(env!("CARGO_BIN_EXE_cleanswing"))
            .args(words.split(' '))
            .current_dir(folder.path())
            .output()
            .unwrap();
        assert!(run.status.success(), "{words}");
    }
    let kept = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/expected/readme/thd.svg");
    let drawn = fs::read_to_string(folder.path().join("thd.svg")).unwrap();
    if std::env::var("CLEANSWING_README").is_ok_and(|v| v == "write") {
        fs::write(kept, drawn).unwrap();
        return;
    }
    assert!(
        fs::read_to_string(&kept).unwrap() == drawn,
        "{} is not what the program draws; see the top of this file",
        kept.display()
    );
}
