//! The kit: found in milliseconds, built once however many ask, and refused clearly where it cannot
//! be built. What decides a rebuild is tested beside the code on a tiny workspace; here are the real
//! prelude and whatever else can stand in the way.

use std::fs;
use std::os::unix::fs::{PermissionsExt, symlink};
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};
use std::sync::OnceLock;
use std::time::{Duration, Instant};

use semiaxis_tests::client::kernel_executable;
use semiaxis_tests::command::{in_own_mounts, semiaxis, stderr, stdout};
use semiaxis_tests::place;
use serde_json::Value;

/// The kit of this user, built now if it was not there.
fn kit() -> &'static Value {
    static KIT: OnceLock<Value> = OnceLock::new();
    KIT.get_or_init(|| {
        let output = semiaxis(["prepare"]).output().unwrap();
        assert!(output.status.success(), "{}", stderr(&output));
        read_kit(Path::new(stdout(&output).trim()))
    })
}

fn read_kit(dir: &Path) -> Value {
    serde_json::from_slice(&fs::read(dir.join("kit.json")).unwrap()).unwrap()
}

fn path(kit: &Value, key: &str) -> PathBuf {
    PathBuf::from(kit[key].as_str().unwrap())
}

/// `semiaxis prepare` with a data folder of its own.
fn prepare_in(data: &Path) -> Command {
    let mut command = semiaxis(["prepare"]);
    command.env("XDG_DATA_HOME", data);
    command
}

/// `semiaxis prepare` where no compiler but those in `bin` can be found.
fn prepare_with_only(bin: &Path, home: &Path) -> Output {
    prepare_in(&home.join("data"))
        .env("PATH", bin)
        .env("HOME", home)
        .env_remove("CARGO_HOME")
        .env_remove("CARGO")
        .output()
        .unwrap()
}

fn script(file: &Path, text: &str) {
    fs::create_dir_all(file.parent().unwrap()).unwrap();
    fs::write(file, format!("#!/bin/sh\n{text}\n")).unwrap();
    fs::set_permissions(file, fs::Permissions::from_mode(0o755)).unwrap();
}

#[test]
fn a_kit_that_is_there_is_found_without_starting_anything() {
    kit();
    let times: Vec<Duration> = (0..5)
        .map(|_| {
            let started = Instant::now();
            let output = semiaxis(["prepare"]).output().unwrap();
            assert!(output.status.success());
            assert_eq!(stderr(&output), "", "nothing is built and nothing is said");
            started.elapsed()
        })
        .collect();
    // The best of five on a machine that may be busy; a single `rustc -vV` through the proxy takes
    // as long as the whole allowance.
    let best = times.iter().min().unwrap();
    assert!(*best < Duration::from_millis(100), "{times:?}");
}

#[test]
fn a_cell_compiles_against_the_kit_and_names_the_crates_below_it() {
    let kit = kit();
    let folder = tempfile::tempdir().unwrap();
    let cell = folder.path().join("cell.rs");
    let text = "pub fn cell() -> f64 { let m = nalgebra::DMatrix::<f64>::identity(3, 3);\n\
        let frame: Option<semiaxis::polars::prelude::DataFrame> = None::<polars::prelude::DataFrame>;\n\
        m.trace() + f64::from(u8::from(frame.is_some())) }\n";
    fs::write(&cell, text).unwrap();
    let mut rustc = Command::new(path(kit, "rustc"));
    rustc.args(["--crate-type", "dylib", "--edition", "2024", "-Cprefer-dynamic"]);
    rustc.arg("-L").arg(format!("dependency={}", path(kit, "dependencies").display()));
    rustc.arg("--extern").arg(format!("semiaxis={}", path(kit, "prelude").display()));
    for (name, file) in kit["externs"].as_object().unwrap() {
        rustc.arg("--extern").arg(format!("{name}={}", file.as_str().unwrap()));
    }
    let output = rustc.arg("--out-dir").arg(folder.path()).arg(&cell).output().unwrap();
    assert!(output.status.success(), "{}", stderr(&output));
    assert!(folder.path().join("libcell.so").exists());
}

#[test]
fn the_kit_says_what_is_inside_and_indexes_the_names_of_the_prelude() {
    let kit = kit();
    let packages = kit["packages"].as_array().unwrap();
    let has = |name: &str| packages.iter().any(|package| package["name"] == name);
    for inside in ["polars", "polars-core", "nalgebra", "rand", "rayon", "serde"] {
        assert!(has(inside), "{inside}");
    }
    for only_at_build_time in ["syn", "quote", "serde_derive"] {
        assert!(!has(only_at_build_time), "{only_at_build_time}");
    }
    assert!(kit["profile"].as_str().unwrap().contains("opt-level = 3"));
    let index: Value = serde_json::from_slice(&fs::read(path(kit, "index")).unwrap()).unwrap();
    let entries = index["entries"].as_array().unwrap();
    let entry = |name: &str, owner: Option<&str>| {
        entries.iter().find(|entry| entry["name"] == name && entry["owner"].as_str() == owner)
    };
    // Names that the design fixes, all to be reached without a `use`.
    for name in ["read_table", "principal_components", "Scaling", "scree", "score_plot"] {
        let found = entry(name, None).unwrap_or_else(|| panic!("{name} is not indexed"));
        assert_eq!(found["preloaded"], true, "{name}");
        assert_ne!(found["docs"].as_str().unwrap_or_default(), "", "{name} is documented");
    }
    for (name, owner) in [
        ("variances", "PrincipalComponents"),
        ("n_rows", "DataMatrix"),
        ("data_matrix", "DataFrame"),
        ("height", "DataFrame"),
        ("transpose", "Matrix"),
    ] {
        assert!(entry(name, Some(owner)).is_some(), "{owner}::{name} is not indexed");
    }
}

#[test]
fn two_that_start_at_once_on_a_cold_folder_build_once() {
    kit();
    let data = tempfile::tempdir().unwrap();
    let start = || prepare_in(data.path()).stderr(Stdio::piped()).stdout(Stdio::piped()).spawn();
    let both = [start().unwrap(), start().unwrap()];
    let outputs = both.map(|child| child.wait_with_output().unwrap());
    for output in &outputs {
        assert!(output.status.success(), "{}", stderr(output));
    }
    assert_eq!(stdout(&outputs[0]), stdout(&outputs[1]));
    let built = outputs.iter().filter(|output| stderr(output).contains("for the first time"));
    assert_eq!(built.count(), 1);
}

#[test]
fn a_kit_of_another_compiler_is_built_again_with_a_word_about_it() {
    kit();
    let data = tempfile::tempdir().unwrap();
    let output = prepare_in(data.path()).output().unwrap();
    assert!(output.status.success(), "{}", stderr(&output));
    // The kit becomes one that another compiler built: its own name and its own release.
    let dir = PathBuf::from(stdout(&output).trim());
    let other = dir.with_file_name("of-another-compiler");
    fs::rename(&dir, &other).unwrap();
    let text = fs::read_to_string(other.join("kit.json")).unwrap();
    let text = text.replace(dir.to_str().unwrap(), other.to_str().unwrap());
    let release = read_kit(&other)["compiler"]["version"].as_str().unwrap().to_owned();
    let now = release.lines().find_map(|line| line.strip_prefix("release: ")).unwrap();
    let text = text.replace(&format!("release: {now}"), "release: 1.94.0");
    fs::write(other.join("kit.json"), text).unwrap();

    let output = prepare_in(data.path()).output().unwrap();
    assert!(output.status.success(), "{}", stderr(&output));
    let said = format!("the compiler changed from 1.94.0 to {now}");
    assert!(stderr(&output).contains(&said), "{}", stderr(&output));
    assert!(dir.join("kit.json").exists());
}

#[test]
fn without_a_compiler_the_message_says_what_to_install() {
    let home = tempfile::tempdir().unwrap();
    let output = prepare_with_only(&home.path().join("nowhere"), home.path());
    assert_eq!(output.status.code(), Some(2));
    let said = stderr(&output);
    assert!(
        said.contains("found no rust compiler") && said.contains("install Rust 1.95"),
        "{said}"
    );
}

#[test]
fn a_compiler_that_is_none_or_too_old_is_named() {
    let home = tempfile::tempdir().unwrap();
    let bin = home.path().join("bin");
    script(&bin.join("rustc"), "echo 'no toolchain chosen' >&2; exit 1");
    let output = prepare_with_only(&bin, home.path());
    assert_eq!(output.status.code(), Some(2));
    let said = stderr(&output);
    assert!(said.contains("does not answer as a rust compiler: no toolchain chosen"), "{said}");

    script(&bin.join("rustc"), "echo hello");
    let said = stderr(&prepare_with_only(&bin, home.path()));
    assert!(said.contains("does not answer as a rust compiler: hello"), "{said}");

    let old = "printf 'rustc 1.70.0\\nhost: x86_64-unknown-linux-gnu\\nrelease: 1.70.0\\n'";
    script(&bin.join("rustc"), old);
    let said = stderr(&prepare_with_only(&bin, home.path()));
    assert!(said.contains("is release 1.70.0, but the prelude needs 1.95 or newer"), "{said}");
}

#[test]
fn a_compiler_without_cargo_is_not_enough() {
    let real = path(kit(), "rustc");
    let home = tempfile::tempdir().unwrap();
    let bin = home.path().join("bin");
    let sysroot = home.path().join("sysroot");
    fs::create_dir_all(sysroot.join("bin")).unwrap();
    symlink(&real, sysroot.join("bin/rustc")).unwrap();
    let text = format!(
        "case \"$*\" in *sysroot*) echo '{}';; *) exec '{}' \"$@\";; esac",
        sysroot.display(),
        real.display()
    );
    script(&bin.join("rustc"), &text);
    let output = prepare_with_only(&bin, home.path());
    assert_eq!(output.status.code(), Some(2));
    assert!(stderr(&output).contains("found no `cargo`"), "{}", stderr(&output));
}

#[test]
fn where_a_client_has_no_path_to_the_compiler_the_kit_still_serves() {
    kit();
    let home = tempfile::tempdir().unwrap();
    let data = home.path().join("data");
    let output = prepare_in(&data).output().unwrap();
    assert!(output.status.success(), "{}", stderr(&output));
    let again = prepare_with_only(&home.path().join("nowhere"), home.path());
    assert_eq!(stderr(&again), "");
    assert_eq!(stdout(&again), stdout(&output));
}

#[test]
fn a_full_disk_under_the_kit_is_said_and_leaves_nothing_half_done() {
    kit();
    let disk = tempfile::tempdir().unwrap();
    let script = "mount -t tmpfs -o size=4m tmpfs \"$1\"\n\
        status=0; XDG_DATA_HOME=\"$1\" \"$2\" prepare || status=$?\n\
        find \"$1\" -name kit.json -o -name '.building*'\n\
        exit $status";
    let output = in_own_mounts(script, &[disk.path(), kernel_executable()]).output().unwrap();
    assert_eq!(output.status.code(), Some(2), "{}", stderr(&output));
    let said = stderr(&output);
    assert!(said.contains("no space left on the disk that holds"), "{said}");
    assert_eq!(stdout(&output), "");
    let workspace = fs::read_dir(place::workspace()).unwrap();
    let left = workspace.map(|entry| entry.unwrap().file_name().into_string().unwrap());
    assert_eq!(left.filter(|name| name.starts_with("rustc-ice")).count(), 0);
}
