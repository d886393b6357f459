//! What must hold of the project as a whole.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};
use std::process::Command;

use semiaxis_tests::place;
use semiaxis_tests::python::succeed;

/// Cargo unites features over the packages that it builds together. If the kernel or the tests
/// asked more of a crate than the prelude does, a build of the whole workspace would compile that
/// crate, and with it the data-frame library, a second time.
#[test]
fn the_prelude_has_the_same_dependencies_alone_and_in_the_whole_workspace() {
    let alone = crates(&["-p", "semiaxis", "-e", "normal,build"]);
    let together = crates(&["--workspace", "-e", "normal,build,dev"]);
    assert!(alone.len() > 100, "cargo names only {} crates", alone.len());
    let differ: Vec<&String> = alone.difference(&together).collect();
    assert!(
        differ.is_empty(),
        "the workspace builds these with other features than the prelude alone; \
         align them in prelude/Cargo.toml:\n{differ:#?}"
    );
}

/// The crates of a dependency tree, each with its version and features.
fn crates(selection: &[&str]) -> BTreeSet<String> {
    let mut tree = Command::new(place::cargo());
    tree.current_dir(place::workspace());
    tree.args(["tree", "--offline", "--prefix", "none", "-f", "{p} {f}"]).args(selection);
    let output = succeed(&mut tree);
    String::from_utf8(output.stdout)
        .expect("names of crates are UTF-8")
        .lines()
        .filter(|line| !line.ends_with("(*)"))
        .map(str::to_owned)
        .collect()
}

#[test]
fn the_evaluator_stands_outside_the_workspace() {
    let mut metadata = Command::new(place::cargo());
    metadata.current_dir(place::workspace());
    metadata.args(["metadata", "--offline", "--no-deps", "--format-version", "1"]);
    let output = succeed(&mut metadata);
    let metadata: serde_json::Value =
        serde_json::from_slice(&output.stdout).expect("cargo writes JSON");
    let packages = metadata["packages"].as_array().expect("a list of packages");
    let mut names: Vec<&str> =
        packages.iter().filter_map(|package| package["name"].as_str()).collect();
    names.sort_unstable();
    assert_eq!(names, ["semiaxis", "semiaxis-kernel", "semiaxis-tests"]);
}

#[test]
fn the_demo_data_are_what_their_script_makes() {
    let script = place::workspace().join("notebooks-demo/make_tiles.py");
    succeed(Command::new("python3").arg(script).arg("--check"));
}

/// A notebook is handed over without outputs, so that what it shows is always made here.
#[test]
fn the_demo_notebook_is_kept_without_outputs() {
    let text = std::fs::read_to_string(place::workspace().join("notebooks-demo/kilns.ipynb"))
        .expect("the demo is part of the project");
    let notebook: serde_json::Value = serde_json::from_str(&text).expect("a notebook is JSON");
    assert_eq!((&notebook["nbformat"], &notebook["nbformat_minor"]), (&4.into(), &5.into()));
    assert_eq!(notebook["metadata"]["kernelspec"]["name"], "semiaxis");
    let mut ids = BTreeSet::new();
    for cell in notebook["cells"].as_array().expect("a notebook has cells") {
        let id = cell["id"].as_str().expect("a cell has an id");
        assert!(ids.insert(id), "two cells have the id {id}");
        if cell["cell_type"] == "code" {
            assert_eq!(cell["outputs"], serde_json::json!([]), "{id}");
            assert!(cell["execution_count"].is_null(), "{id}");
        }
    }
}

/// Words that have no place in what is handed to others: folders of one machine, addresses of
/// package registries, marks of unfinished work. They are put together from halves, so that this
/// file does not contain them.
const BANNED: [(&str, &str); 10] = [
    ("/wo", "rk/"),
    ("/ro", "ot/"),
    ("/tmp/", "bash"),
    ("crates.", "io/"),
    ("pypi.", "org"),
    ("registry.", "npmjs"),
    ("deb.", "debian.org"),
    ("far", "m-"),
    ("TO", "DO"),
    ("FIX", "ME"),
];

#[test]
fn no_file_holds_machine_paths_or_marks_of_unfinished_work() {
    let mut found = Vec::new();
    for path in tracked() {
        // The lock files name the registry that every Rust project names.
        if path.ends_with("Cargo.lock") {
            continue;
        }
        let Ok(text) = std::fs::read_to_string(place::workspace().join(&path)) else {
            continue; // Not text.
        };
        for (line_idx, line) in text.lines().enumerate() {
            for (first, second) in BANNED {
                if line.contains(&format!("{first}{second}")) {
                    found.push(format!("{}:{}: {line}", path.display(), line_idx + 1));
                }
            }
        }
    }
    assert!(found.is_empty(), "{}", found.join("\n"));
}

/// The files that are kept under version control; in a copy without it, all files.
fn tracked() -> Vec<PathBuf> {
    let listed = Command::new("git").arg("ls-files").current_dir(place::workspace()).output();
    let listed = listed.ok().filter(|output| output.status.success()).map(|output| output.stdout);
    let files: Vec<PathBuf> = match listed {
        Some(names) => String::from_utf8_lossy(&names).lines().map(PathBuf::from).collect(),
        None => {
            let mut files = Vec::new();
            walk(&place::workspace(), Path::new(""), &mut files);
            files
        }
    };
    assert!(files.len() > 50, "only {} files found", files.len());
    files
}

fn walk(top: &Path, below: &Path, files: &mut Vec<PathBuf>) {
    for entry in std::fs::read_dir(top.join(below)).expect("a folder of the project") {
        let entry = entry.expect("a folder of the project can be listed");
        let path = below.join(entry.file_name());
        let is_folder = entry.file_type().is_ok_and(|kind| kind.is_dir());
        if is_folder && !path.ends_with("target") && !path.ends_with(".git") {
            walk(top, &path, files);
        } else if !is_folder {
            files.push(path);
        }
    }
}

#[test]
fn every_path_that_the_guide_for_contributors_names_exists() {
    let guide = std::fs::read_to_string(place::workspace().join("DEVELOPERS.md"))
        .expect("the guide for contributors is part of the project");
    let mut n_named = 0;
    let mut missing = Vec::new();
    // A path is a word in backquotes that has a slash and no space, or ends like a file.
    for word in guide.split('`').skip(1).step_by(2) {
        let like_path = word.contains('/') || word.ends_with(".rs") || word.ends_with(".md");
        let plain = word.chars().all(|c| c.is_ascii_alphanumeric() || "/._-".contains(c));
        if !like_path || !plain || word.starts_with('/') {
            continue;
        }
        n_named += 1;
        if !place::workspace().join(word).exists() {
            missing.push(word);
        }
    }
    assert!(n_named >= 10, "the guide names only {n_named} paths");
    assert!(missing.is_empty(), "these paths do not exist: {missing:?}");
}
