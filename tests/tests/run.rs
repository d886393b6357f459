//! `semiaxis run`: the built-in client, with the real engine.

use std::fs;
use std::path::Path;
use std::process::{Output, Stdio};
use std::time::{Duration, Instant};

use semiaxis_tests::client::kernel_executable;
use semiaxis_tests::command::{in_own_mounts, notebook, semiaxis, stderr, stdout};
use semiaxis_tests::folder::Folder;
use serde_json::{Value, json};

/// Twelve tiles, invented: length, width and weight.
const TILES: &str = "length,width,weight\n\
    410.2,251.1,3.10\n408.9,250.4,3.02\n411.7,252.0,3.21\n409.5,250.2,3.05\n\
    412.3,252.8,3.24\n407.8,249.9,2.98\n410.9,251.6,3.15\n409.1,250.9,3.06\n\
    411.1,251.2,3.18\n408.4,250.1,3.01\n412.0,252.3,3.25\n410.0,250.8,3.09\n";

/// Runs a notebook with a cache of compiled cells that is its folder's own.
fn run(folder: &Folder, notebook: &Path, more: &[&str]) -> Output {
    semiaxis(["run", notebook.to_str().unwrap()])
        .args(more)
        .env("XDG_CACHE_HOME", folder.path("cache"))
        .output()
        .unwrap()
}

/// What was written, after `nbformat` accepted it.
fn read(path: &Path) -> Value {
    let text = fs::read_to_string(path).unwrap();
    assert!(matches!(nbformat::parse_notebook(&text), Ok(nbformat::Notebook::V4(_))));
    serde_json::from_str(&text).unwrap()
}

fn text_of(output: &Value) -> String {
    let joined = |value: &Value| match value {
        Value::Array(lines) => lines.iter().map(|line| line.as_str().unwrap()).collect(),
        other => other.as_str().unwrap_or_default().to_owned(),
    };
    match output["output_type"].as_str() {
        Some("stream") => joined(&output["text"]),
        _ => joined(&output["data"]["text/plain"]),
    }
}

const ANALYSIS: [(&str, &str); 6] = [
    ("markdown", "# Tiles"),
    ("code", "let tiles = read_table(\"tiles.csv\")?;\ntiles.height()"),
    (
        "code",
        "let x = tiles.data_matrix()?;\nlet pca = principal_components(&x, Scaling::Correlation)?;",
    ),
    ("code", "println!(\"{} variables\", x.n_cols());\neprintln!(\"careful\");\npca"),
    ("code", "scree(&pca)"),
    ("code", "  "),
];

#[test]
fn a_notebook_runs_from_top_to_bottom_and_is_written_whole() {
    let folder = Folder::with_tiles(TILES);
    let path = folder.put("kilns.ipynb", &ANALYSIS);
    let before = fs::read(&path).unwrap();
    let output = run(&folder, &path, &[]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    assert_eq!(fs::read(&path).unwrap(), before, "the notebook itself is not changed");

    let executed = folder.path("kilns.executed.ipynb");
    let said = stdout(&output);
    assert!(said.contains("ran 4 of 4 cells"), "{said}");
    assert!(said.contains(&format!("executed notebook: {}", executed.display())), "{said}");
    assert!(stderr(&output).contains("cell 2 of 6: let tiles = read_table"), "{}", stderr(&output));

    let written = read(&executed);
    let cells = written["cells"].as_array().unwrap();
    assert_eq!(cells.len(), 6);
    assert_eq!(cells[0]["source"], "# Tiles");
    let counts: Vec<&Value> = cells[1..].iter().map(|cell| &cell["execution_count"]).collect();
    assert_eq!(counts, [&json!(1), &json!(2), &json!(3), &json!(4), &Value::Null]);
    assert_eq!(text_of(&cells[1]["outputs"][0]), "12");
    assert_eq!(cells[2]["outputs"], json!([]), "a final `;` keeps a cell silent");

    let outputs = cells[3]["outputs"].as_array().unwrap();
    let stream = |name: &str| outputs.iter().find(|output| output["name"] == name).map(text_of);
    assert_eq!(stream("stdout").as_deref(), Some("3 variables\n"));
    assert_eq!(stream("stderr").as_deref(), Some("careful\n"));
    let table = outputs.iter().find(|output| output["output_type"] == "execute_result").unwrap();
    assert_eq!(table["execution_count"], 3);
    for form in ["text/html", "text/plain"] {
        assert!(table["data"].get(form).is_some(), "{form}");
    }
    let chart = &cells[4]["outputs"][0]["data"];
    let svg: String =
        chart["image/svg+xml"].as_array().unwrap().iter().map(|l| l.as_str().unwrap()).collect();
    assert!(svg.starts_with("<svg") || svg.starts_with("<?xml"), "{}", &svg[..40]);
    let picture = folder.path("kilns.executed.pictures/cell-04.svg");
    assert_eq!(fs::read_to_string(&picture).unwrap(), svg);
    assert!(said.contains(picture.parent().unwrap().to_str().unwrap()), "{said}");

    for cell in &cells[1..5] {
        let metadata = &cell["metadata"];
        assert_eq!(metadata["semiaxis"]["cached"], false, "the cache was empty");
        assert!(metadata["semiaxis"]["compile_ms"].as_f64().unwrap() > 1.0);
        let began = metadata["execution"]["iopub.execute_input"].as_str().unwrap();
        let ended = metadata["execution"]["shell.execute_reply"].as_str().unwrap();
        // Both in UTC with the same digits, so that they compare as text (ISO 8601).
        assert!(began < ended && began.ends_with('Z') && began.len() == ended.len());
    }
    assert_eq!(written["metadata"]["language_info"]["name"], "rust");
}

#[test]
fn the_same_notebook_again_compiles_nothing_and_shows_the_same() {
    let folder = Folder::with_tiles(TILES);
    let path = folder.put("kilns.ipynb", &ANALYSIS);
    let outputs = |name: &str| {
        let output = run(&folder, &path, &["--output", folder.path(name).to_str().unwrap()]);
        assert!(output.status.success(), "{}", stderr(&output));
        let written = read(&folder.path(name));
        let cells = written["cells"].as_array().unwrap().clone();
        (stdout(&output), cells)
    };
    let (_, first) = outputs("first.ipynb");
    let (said, second) = outputs("second.ipynb");
    assert!(said.contains("0 newly compiled"), "{said}");
    for (one, other) in first.iter().zip(&second) {
        assert_eq!(one["outputs"], other["outputs"]);
    }
    assert_eq!(second[1]["metadata"]["semiaxis"]["cached"], true);
}

#[test]
fn a_failed_cell_ends_the_run_with_its_line() {
    let folder = Folder::with_tiles(TILES);
    let cells = [
        ("raises-exception", "let none: Option<u8> = None;\nnone.unwrap()"),
        ("code", "let a = 1;\nlet b: u8 = \"two\";\na"),
        ("code", "println!(\"never\")"),
    ];
    let path = folder.put("broken.ipynb", &cells);
    let output = run(&folder, &path, &[]);
    assert_eq!(output.status.code(), Some(1));
    let said = stderr(&output);
    assert!(said.contains("cell [2] failed at its line 2 (2 of 3 in the notebook)"), "{said}");
    assert!(said.contains("mismatched types"), "rustc's own words: {said}");
    assert!(said.contains("let b: u8 = \"two\";") && said.contains("^^^^^"), "its caret: {said}");
    assert!(!said.contains('\u{1b}'), "no colours where there is no terminal: {said}");
    let written = read(&folder.path("broken.executed.ipynb"));
    let kinds = |at: usize| written["cells"][at]["outputs"][0]["output_type"].clone();
    assert_eq!(kinds(0), "error", "a cell that may fail failed, and the run went on");
    assert_eq!(kinds(1), "error");
    let traceback = written["cells"][1]["outputs"][0]["traceback"].to_string();
    assert!(
        traceback.contains("mismatched types") && traceback.contains("\\u001b["),
        "{traceback}"
    );
    assert_eq!(written["cells"][2]["outputs"], json!([]));
    assert_eq!(written["cells"][2]["execution_count"], Value::Null);
}

#[test]
fn what_is_no_notebook_for_this_kernel_is_refused() {
    let folder = Folder::with_tiles(TILES);
    let refused = |name: &str, text: &[u8]| {
        let path = folder.path(name);
        fs::write(&path, text).unwrap();
        let output = run(&folder, &path, &[]);
        assert_eq!(output.status.code(), Some(2), "{name}");
        assert_eq!(stdout(&output), "");
        assert!(!folder.path(name).with_extension("executed.ipynb").exists());
        stderr(&output)
    };
    let said = refused("text.ipynb", b"length,width\n1,2\n");
    assert!(said.contains("it is not JSON") && said.contains("line 1 column 1"), "{said}");
    assert!(refused("cut.ipynb", b"{\"cells\": [").contains("EOF while parsing"));
    assert!(refused("empty.ipynb", b"").contains("it is not JSON"));
    assert!(refused("binary.ipynb", b"\xff\xfe\x00\x01").contains("it is not JSON"));
    assert!(refused("other.ipynb", b"{\"a\": 1}").contains("does not say which `nbformat`"));
    let old = br#"{"nbformat": 3, "nbformat_minor": 0, "metadata": {}, "worksheets": []}"#;
    assert!(refused("old.ipynb", old).contains("in notebook format 3.0, and format 4 is accepted"));
    let mut foreign = notebook(&[]);
    foreign["metadata"]["kernelspec"] =
        json!({"name": "abacus", "display_name": "A", "language": "beads"});
    let said = refused("foreign.ipynb", foreign.to_string().as_bytes());
    assert!(said.contains("is for the kernel `abacus` (beads)"), "{said}");
    let output = run(&folder, &folder.path("missing.ipynb"), &[]);
    assert_eq!(output.status.code(), Some(2));
    assert!(stderr(&output).contains("there is no notebook at"), "{}", stderr(&output));
    let output = run(&folder, &folder.path(""), &[]);
    assert!(stderr(&output).contains("it is a folder"), "{}", stderr(&output));
}

#[test]
fn an_older_notebook_is_brought_up_to_date_with_everything_in_it() {
    let folder = Folder::with_tiles(TILES);
    let old = json!({
        "nbformat": 4, "nbformat_minor": 1, "metadata": {"own": {"deep": [1, 2.5]}},
        "cells": [
            {"cell_type": "markdown", "metadata": {"seen": true}, "source": ["![](attachment:a.png)"],
             "attachments": {"a.png": {"image/png": "AAAA"}}},
            {"cell_type": "code", "metadata": {"mine": 1}, "source": ["1 +\n", " 1"],
             "execution_count": 9, "outputs": []},
        ],
    });
    let path = folder.path("old.ipynb");
    fs::write(&path, old.to_string()).unwrap();
    let output = run(&folder, &path, &[]);
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let written = read(&folder.path("old.executed.ipynb"));
    assert_eq!(written["metadata"]["own"], old["metadata"]["own"]);
    assert_eq!(written["cells"][0]["attachments"], old["cells"][0]["attachments"]);
    assert_eq!(written["cells"][0]["metadata"]["seen"], true);
    assert_eq!(written["cells"][1]["metadata"]["mine"], 1);
    assert_eq!(written["cells"][1]["source"], old["cells"][1]["source"]);
    assert_eq!(text_of(&written["cells"][1]["outputs"][0]), "2");
}

#[test]
fn two_runs_at_once_on_a_cold_cache_both_succeed() {
    let folder = Folder::with_tiles(TILES);
    let path = folder.put("kilns.ipynb", &ANALYSIS);
    let start = |name: &str| {
        semiaxis(["run", path.to_str().unwrap(), "--output"])
            .arg(folder.path(name))
            .env("XDG_CACHE_HOME", folder.path("cache"))
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap()
    };
    let both = [start("one.ipynb"), start("other.ipynb")];
    for child in both {
        let output = child.wait_with_output().unwrap();
        assert!(output.status.success(), "{}", stderr(&output));
    }
    let (one, other) = (read(&folder.path("one.ipynb")), read(&folder.path("other.ipynb")));
    for (cell, same) in
        one["cells"].as_array().unwrap().iter().zip(other["cells"].as_array().unwrap())
    {
        assert_eq!(cell["outputs"], same["outputs"]);
    }
}

#[test]
fn a_full_disk_under_the_cache_fails_the_cell_and_says_so() {
    let folder = Folder::with_tiles(TILES);
    let path = folder.put("one.ipynb", &[("code", "1 + 1")]);
    let disk = folder.path("disk");
    fs::create_dir(&disk).unwrap();
    // Ten kilobytes are enough for folders and too little for a compiled cell.
    let script = "mount -t tmpfs -o size=12k tmpfs \"$1\"; XDG_CACHE_HOME=\"$1\" \"$2\" run \"$3\"";
    let output = in_own_mounts(script, &[&disk, kernel_executable(), &path]).output().unwrap();
    assert_eq!(output.status.code(), Some(1), "{}", stderr(&output));
    let said = stderr(&output).to_lowercase();
    assert!(said.contains("no space left"), "{said}");
    let written = read(&folder.path("one.executed.ipynb"));
    assert_eq!(written["cells"][0]["outputs"][0]["output_type"], "error");
}

#[test]
fn a_full_disk_under_the_results_keeps_the_old_file() {
    let folder = Folder::with_tiles(TILES);
    let path = folder.put("loud.ipynb", &[("code", "println!(\"{}\", \"x\".repeat(300_000))")]);
    let disk = folder.path("disk");
    fs::create_dir(&disk).unwrap();
    let script = "mount -t tmpfs -o size=64k tmpfs \"$1\"; echo old > \"$1/out.ipynb\"\n\
        status=0; \"$2\" run \"$3\" --output \"$1/out.ipynb\" || status=$?\n\
        cat \"$1/out.ipynb\"; ls -A \"$1\"; exit $status";
    let output = in_own_mounts(script, &[&disk, kernel_executable(), &path]).output().unwrap();
    assert_eq!(output.status.code(), Some(2), "{}", stderr(&output));
    assert!(stderr(&output).contains("no space left on the disk"), "{}", stderr(&output));
    assert_eq!(stdout(&output), "old\nout.ipynb\n", "the old file, and nothing beside it");
}

#[test]
fn a_folder_that_cannot_be_written_sends_the_results_to_the_current_one() {
    let folder = Folder::with_tiles(TILES);
    let path = folder.put("kilns.ipynb", &[("code", "read_table(\"tiles.csv\")?.height()")]);
    let (disk, here) = (folder.path("disk"), folder.path("here"));
    fs::create_dir(&disk).unwrap();
    fs::create_dir(&here).unwrap();
    let script = "mount -t tmpfs tmpfs \"$1\"; cp \"$3\" \"$4\" \"$1\"\n\
        mount -o remount,ro \"$1\"; cd \"$5\"; \"$2\" run \"$1/kilns.ipynb\"";
    let tiles = folder.path("tiles.csv");
    let arguments: [&Path; 5] = [&disk, kernel_executable(), &path, &tiles, &here];
    let output = in_own_mounts(script, &arguments).output().unwrap();
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    let written = read(&here.join("kilns.executed.ipynb"));
    assert_eq!(
        text_of(&written["cells"][0]["outputs"][0]),
        "12",
        "cells ran in the notebook's folder"
    );
}

#[test]
fn an_interrupt_from_the_keyboard_ends_the_run_and_keeps_what_was_done() {
    let folder = Folder::with_tiles(TILES);
    let cells = [
        ("code", "let done = 7;\ndone"),
        ("code", "println!(\"endless\");\nlet mut n = 0u64;\nloop { n = n.wrapping_add(1); }"),
        ("code", "done"),
    ];
    let path = folder.put("endless.ipynb", &cells);
    let mut child = semiaxis(["run", path.to_str().unwrap()])
        .env("XDG_CACHE_HOME", folder.path("cache"))
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    // The first cell's line is written when it has ended; then the second is compiled and runs.
    let mut lines = std::io::BufReader::new(child.stderr.take().unwrap());
    let mut said = String::new();
    while !said.contains("cell 1 of 3") {
        let read = std::io::BufRead::read_line(&mut lines, &mut said).unwrap();
        assert_ne!(read, 0, "{said}");
    }
    let started = Instant::now();
    let status = loop {
        // Sent again until it is heard: the cell may still be on its way to the worker.
        // SAFETY: a signal to a child that is not waited for yet.
        unsafe { libc::kill(child.id().try_into().unwrap(), libc::SIGINT) };
        std::thread::sleep(Duration::from_millis(200));
        if let Some(status) = child.try_wait().unwrap() {
            break status;
        }
        assert!(started.elapsed() < Duration::from_secs(60), "the run does not end: {said}");
    };
    assert_eq!(status.code(), Some(1));
    let written = read(&folder.path("endless.executed.ipynb"));
    assert_eq!(text_of(&written["cells"][0]["outputs"][0]), "7");
    let outputs = written["cells"][1]["outputs"].as_array().unwrap();
    assert_eq!(outputs.last().unwrap()["output_type"], "error");
    assert_eq!(written["cells"][2]["execution_count"], Value::Null);
}
