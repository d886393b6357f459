//! The independent evaluator of Rust cells: built on first use, driven through its pipes.

use std::io::{BufRead, BufReader, Write};
use std::path::Path;
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};

use serde::Deserialize;
use serde_json::json;

use crate::place;

/// A running evaluator; it ends when it is dropped.
pub struct Evaluator {
    child: Child,
    requests: ChildStdin,
    answers: BufReader<ChildStdout>,
}

/// What the evaluator says of a cell; `evaluator/src/main.rs` describes the fields.
#[derive(Debug, Deserialize)]
#[allow(missing_docs)]
pub struct Answer {
    pub kind: String,
    #[serde(default)]
    pub stdout: String,
    #[serde(default)]
    pub stderr: String,
    pub text: Option<String>,
    #[serde(default)]
    pub codes: Vec<String>,
    pub message: Option<String>,
}

impl Evaluator {
    /// Builds the evaluator if that was not done before, and starts it.
    ///
    /// It is a package of its own with a target folder of its own, so the first build takes some
    /// ten minutes and changes nothing of the workspace's.
    ///
    /// # Panics
    /// When it cannot be built or started, with what cargo said.
    pub fn start() -> Evaluator {
        let manifest = Path::new(env!("CARGO_MANIFEST_DIR")).join("evaluator/Cargo.toml");
        let target = place::target_dir().join("evaluator");
        let built = plain(Command::new(place::cargo()))
            .args(["build", "--locked", "--manifest-path"])
            .arg(&manifest)
            .arg("--target-dir")
            .arg(&target)
            .status()
            .expect("cargo runs these tests, so it can be started");
        assert!(built.success(), "cargo could not build {}: {built}", manifest.display());

        let mut child = plain(Command::new(target.join("debug/semiaxis-evaluator")))
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .expect("the evaluator was built just now");
        let requests = child.stdin.take().expect("its standard input is a pipe");
        let answers = BufReader::new(child.stdout.take().expect("its standard output is a pipe"));
        Evaluator { child, requests, answers }
    }

    /// Forgets all that was defined.
    pub fn refresh(&mut self) {
        let answer = self.ask(&json!({ "fresh": true }));
        assert_eq!(answer.kind, "done", "the evaluator could not start afresh: {answer:?}");
    }

    /// Evaluates a cell.
    pub fn evaluate(&mut self, code: &str) -> Answer {
        self.ask(&json!({ "code": code }))
    }

    fn ask(&mut self, request: &serde_json::Value) -> Answer {
        let written = writeln!(self.requests, "{request}").and_then(|()| self.requests.flush());
        written.unwrap_or_else(|e| panic!("the evaluator does not read requests: {e}"));
        let mut line = String::new();
        let read = self.answers.read_line(&mut line);
        assert!(
            matches!(read, Ok(1..)),
            "the evaluator ended at {request}: {:?}",
            self.child.try_wait()
        );
        serde_json::from_str(&line).unwrap_or_else(|e| panic!("not an answer: {e}: {line}"))
    }
}

impl Drop for Evaluator {
    fn drop(&mut self) {
        // It may have ended by itself; either way nobody is left to be told.
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

/// A command without the settings that the run of the tests themselves was given.
fn plain(mut command: Command) -> Command {
    for name in ["CARGO_TARGET_DIR", "RUSTC_WORKSPACE_WRAPPER", "RUSTFLAGS", "CLIPPY_ARGS"] {
        command.env_remove(name);
    }
    command
}
