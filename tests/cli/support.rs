//! A folder of its own for each test, and one way to run the program in it.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Stdio;

use assert_cmd::Command;

/// What one run of the program left behind.
pub struct Run {
    /// Exit code.
    pub code: i32,
    /// Standard output.
    pub stdout: String,
    /// Standard error.
    pub stderr: String,
}

impl Run {
    /// Fails unless the exit code is `code`; shows what was printed.
    #[track_caller]
    pub fn ends_with(self, code: i32) -> Self {
        assert_eq!(
            self.code, code,
            "exit code\nstdout:\n{}\nstderr:\n{}",
            self.stdout, self.stderr
        );
        self
    }

    /// Fails unless standard error holds `text`.
    #[track_caller]
    pub fn says(self, text: &str) -> Self {
        assert!(
            self.stderr.contains(text),
            "stderr should hold {text:?}:\n{}",
            self.stderr
        );
        self
    }

    /// Standard output as one JSON document, and nothing else, whose schema is `cleanswing.COMMAND/1`.
    #[track_caller]
    pub fn document(&self, command: &str) -> serde_json::Value {
        let document: serde_json::Value = serde_json::from_str(&self.stdout)
            .unwrap_or_else(|error| panic!("{error} in:\n{}", self.stdout));
        assert_eq!(document["schema"], format!("cleanswing.{command}/1"));
        assert!(document["stage"].is_string(), "stage: {document}");
        assert!(document["conditions"].is_object(), "conditions: {document}");
        document
    }

    /// Standard output as CSV rows (RFC 4180, no line feeds in fields), the first being the header, all of one length.
    #[track_caller]
    pub fn rows(&self) -> Vec<Vec<String>> {
        let rows: Vec<Vec<String>> = self.stdout.lines().map(fields).collect();
        assert!(
            rows.len() > 1,
            "a header and at least one row:\n{}",
            self.stdout
        );
        for row in &rows {
            assert_eq!(
                row.len(),
                rows[0].len(),
                "{row:?} under the header {:?}",
                rows[0]
            );
        }
        rows
    }
}

/// The fields of one CSV line; quotes hold commas together and a doubled quote is one.
fn fields(line: &str) -> Vec<String> {
    let (mut fields, mut quoted) = (vec![String::new()], false);
    let mut rest = line.chars().peekable();
    while let Some(c) = rest.next() {
        let last = fields.len() - 1;
        match c {
            '"' if quoted && rest.peek() == Some(&'"') => fields[last].extend(rest.next()),
            '"' => quoted = !quoted,
            ',' if !quoted => fields.push(String::new()),
            _ => fields[last].push(c),
        }
    }
    fields
}

/// A temporary folder in which the program is run.
pub struct Bench {
    folder: tempfile::TempDir,
}

impl Bench {
    /// An empty folder.
    pub fn new() -> Self {
        Bench {
            folder: tempfile::tempdir().unwrap(),
        }
    }

    /// A folder that holds one of the stages of `tests/expected/open` as `stage.toml`.
    pub fn with_stage(name: &str) -> Self {
        let bench = Bench::new();
        let path =
            Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("tests/expected/open/{name}.toml"));
        bench.write("stage.toml", &fs::read(path).unwrap());
        bench
    }

    /// Path of a file in the folder.
    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// Write a file.
    pub fn write(&self, name: &str, bytes: &[u8]) {
        fs::write(self.path(name), bytes).unwrap();
    }

    /// Read a file.
    #[track_caller]
    pub fn read(&self, name: &str) -> Vec<u8> {
        fs::read(self.path(name)).unwrap_or_else(|error| panic!("{name}: {error}"))
    }

    /// Names of all files in the folder, sorted.
    pub fn names(&self) -> Vec<String> {
        let mut names: Vec<String> = fs::read_dir(self.folder.path())
            .unwrap()
            .map(|entry| entry.unwrap().file_name().into_string().unwrap())
            .collect();
        names.sort();
        names
    }

    /// Run the program in the folder with words separated by spaces.
    #[track_caller]
    pub fn run(&self, words: &str) -> Run {
        self.run_with(words, "")
    }

    /// The same with a text on standard input.
    #[track_caller]
    pub fn run_with(&self, words: &str, input: &str) -> Run {
        let output = Command::new(env!("CARGO_BIN_EXE_cleanswing"))
            .args(words.split_whitespace())
            .current_dir(self.folder.path())
            .write_stdin(input)
            .output()
            .unwrap();
        let run = Run {
            code: output.status.code().expect("ended by a signal"),
            stdout: String::from_utf8(output.stdout).expect("stdout is UTF-8"),
            stderr: String::from_utf8(output.stderr).expect("stderr is UTF-8"),
        };
        assert_no_panic(words, &run);
        run
    }

    /// Run it with a standard output that nobody reads any more.
    pub fn run_unread(&self, words: &str) -> Run {
        let mut child = std::process::Command::new(env!("CARGO_BIN_EXE_cleanswing"))
            .args(words.split_whitespace())
            .current_dir(self.folder.path())
            .stdin(Stdio::null())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        drop(child.stdout.take());
        let output = child.wait_with_output().unwrap();
        let run = Run {
            // Ended by the signal of a closed pipe is as good as any code of its own.
            code: output.status.code().unwrap_or(0),
            stdout: String::new(),
            stderr: String::from_utf8(output.stderr).unwrap(),
        };
        assert_no_panic(words, &run);
        run
    }
}

#[track_caller]
fn assert_no_panic(words: &str, run: &Run) {
    let panicked =
        run.code == 101 || run.stderr.contains("panicked") || run.stderr.contains("RUST_BACKTRACE");
    assert!(!panicked, "cleanswing {words} panicked:\n{}", run.stderr);
}
