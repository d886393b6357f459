//! The kernel's executable as a person types it, for tests of the command line.

use std::path::Path;
use std::process::{Command, Output, Stdio};

use serde_json::{Value, json};

use crate::client::kernel_executable;

/// The `semiaxis` command with arguments, without a terminal, and without what cargo adds to the
/// environment of tests: the prelude must find the standard library by itself.
pub fn semiaxis<'a>(arguments: impl IntoIterator<Item = &'a str>) -> Command {
    let mut command = Command::new(kernel_executable());
    command.args(arguments).stdin(Stdio::null()).env_remove("NO_COLOR");
    command.env_remove("LD_LIBRARY_PATH");
    command
}

/// What a command printed to standard output.
pub fn stdout(output: &Output) -> String {
    String::from_utf8_lossy(&output.stdout).into_owned()
}

/// What a command printed to standard error.
pub fn stderr(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

/// Runs a shell script in a name space of its own, in which it may mount file systems: the honest
/// way to a disk that is full or read-only, gone without a trace when the script ends. It needs
/// `unshare` of util-linux and a system that allows user name spaces, or root.
pub fn in_own_mounts(script: &str, arguments: &[&Path]) -> Command {
    let mut command = Command::new("unshare");
    command.args(["--user", "--map-root-user", "--mount", "sh", "-euc", script, "sh"]);
    command.args(arguments).stdin(Stdio::null()).env_remove("LD_LIBRARY_PATH");
    command
}

/// A notebook of format 4.5 from pairs of kind and text; the kind is `markdown`, `code`, or the tag
/// of a code cell.
pub fn notebook(cells: &[(&str, &str)]) -> Value {
    let cell = |(at, (kind, source)): (usize, &(&str, &str))| {
        let id = format!("cell-{at}");
        match *kind {
            "markdown" => {
                json!({"cell_type": "markdown", "id": id, "metadata": {}, "source": source})
            }
            kind => {
                let metadata = match kind {
                    "code" => json!({}),
                    tag => json!({"tags": [tag]}),
                };
                json!({"cell_type": "code", "id": id, "metadata": metadata, "source": source,
                    "execution_count": null, "outputs": []})
            }
        }
    };
    let cells: Vec<Value> = cells.iter().enumerate().map(cell).collect();
    json!({
        "nbformat": 4, "nbformat_minor": 5, "cells": cells,
        "metadata": {"kernelspec":
            {"name": "semiaxis", "display_name": "Semiaxis (Rust)", "language": "rust"}},
    })
}
