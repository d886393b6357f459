//! Kits of a tiny workspace whose crates bear the names that a real one must have, built by the real
//! cargo and the real compiler in seconds.

use std::process::Command;
use std::sync::Barrier;
use std::time::{Duration, SystemTime};

use super::*;
use crate::help::index::Index;

struct Tiny {
    folder: tempfile::TempDir,
}

impl Tiny {
    fn new() -> Self {
        let tiny = Self { folder: tempfile::tempdir().unwrap() };
        let mut members = vec!["\"prelude\"".to_owned()];
        let mut dependencies = String::new();
        for name in ["polars", "nalgebra", "rand", "rand_distr", "rayon"] {
            members.push(format!("\"{name}\""));
            dependencies.push_str(&format!("{name} = {{ path = \"../{name}\" }}\n"));
            let manifest =
                format!("[package]\nname = \"{name}\"\nversion = \"1.2.3\"\nedition = \"2024\"\n");
            tiny.write(&format!("workspace/{name}/Cargo.toml"), &manifest);
            tiny.write(&format!("workspace/{name}/src/lib.rs"), "pub struct Thing(pub u8);\n");
        }
        let workspace = format!(
            "[workspace]\nmembers = [{}]\nresolver = \"3\"\n[workspace.package]\nrust-version = \"1.95\"\n",
            members.join(", ")
        );
        tiny.write("workspace/Cargo.toml", &workspace);
        let prelude = format!(
            "[package]\nname = \"semiaxis\"\nversion = \"0.1.0\"\nedition = \"2024\"\n[dependencies]\n{dependencies}"
        );
        tiny.write("workspace/prelude/Cargo.toml", &prelude);
        tiny.set_prelude(
            "/// Twice as many.\npub fn twice(thing: &polars::Thing) -> u8 { thing.0 * 2 }\n",
        );
        let locked = Command::new(env!("CARGO"))
            .args(["generate-lockfile", "--offline"])
            .current_dir(tiny.place().workspace)
            .output()
            .unwrap();
        assert!(locked.status.success(), "{locked:?}");
        tiny
    }

    fn place(&self) -> Place {
        let root = self.folder.path();
        let data = root.join("data");
        let home = KitHome { kits: data.join("kits"), compilers: data.join("compilers.json") };
        let target_dir = Some(root.join("target"));
        Place { home, workspace: root.join("workspace"), target_dir }
    }

    fn write(&self, name: &str, text: &str) {
        let path = self.folder.path().join(name);
        fs::create_dir_all(path.parent().unwrap()).unwrap();
        fs::write(path, text).unwrap();
    }

    fn set_prelude(&self, text: &str) {
        let whole = format!("pub use {{polars, nalgebra, rand, rand_distr, rayon}};\n{text}");
        self.write("workspace/prelude/src/lib.rs", &whole);
    }

    fn ensure(&self) -> (Result<Kit, SetupError>, Vec<SetupEvent>) {
        let mut events = Vec::new();
        let kit = ensure_at(&self.place(), &mut |event| events.push(event));
        (kit, events)
    }
}

fn reasons(events: &[SetupEvent]) -> Vec<&Reason> {
    events
        .iter()
        .filter_map(|event| match event {
            SetupEvent::Needed(reason) => Some(reason),
            _ => None,
        })
        .collect()
}

#[test]
fn a_kit_is_built_once_and_again_when_what_it_stands_on_changes() {
    let tiny = Tiny::new();
    let (kit, events) = tiny.ensure();
    let first = kit.unwrap();
    assert_eq!(reasons(&events), [&Reason::FirstBuild]);
    let last = events.iter().rev().find_map(|event| match event {
        SetupEvent::Building { done, total, .. } => Some((*done, *total)),
        _ => None,
    });
    assert_eq!(last, Some((6, 6)), "five dependencies and the prelude");
    let names: Vec<&str> = first.packages.iter().map(|package| package.name.as_str()).collect();
    assert_eq!(names, ["nalgebra", "polars", "rand", "rand_distr", "rayon"]);
    assert_eq!(first.packages[0].version, "1.2.3");
    assert!(first.packages[0].artifact.starts_with("libnalgebra-"), "{:?}", first.packages[0]);
    let index = Index::load(&first.index).unwrap();
    assert_eq!(index.entries[0].docs, "Twice as many.");

    let (again, events) = tiny.ensure();
    assert_eq!(again.unwrap(), first);
    assert!(matches!(events.as_slice(), [SetupEvent::Ready { .. }]), "{events:?}");

    tiny.set_prelude("pub fn thrice(thing: &polars::Thing) -> u8 { thing.0 * 3 }\n");
    let (changed, events) = tiny.ensure();
    let changed = changed.unwrap();
    assert_eq!(reasons(&events), [&Reason::SourcesChanged]);
    assert_ne!(changed.stamp, first.stamp);
    assert!(first.prelude.exists(), "the earlier kit stays for a month");

    fs::remove_file(&changed.prelude).unwrap();
    let (mended, events) = tiny.ensure();
    assert_eq!(reasons(&events), [&Reason::Incomplete]);
    assert_eq!(mended.unwrap(), changed);
}

#[test]
fn a_cell_compiles_against_the_kit_alone() {
    let tiny = Tiny::new();
    let kit = tiny.ensure().0.unwrap();
    // What cargo built is gone, as after `cargo clean`.
    fs::remove_dir_all(tiny.folder.path().join("target")).unwrap();
    let cell = "#[unsafe(no_mangle)] pub fn cell() -> u8 { semiaxis::twice(&polars::Thing(4)) }\n";
    tiny.write("cell.rs", cell);
    let polars = format!("polars={}", kit.externs["polars"].display());
    let out = tiny.folder.path().join("libcell.so");
    let output = Command::new(&kit.rustc)
        .args(["--crate-type", "dylib", "--edition", "2024", "-Cprefer-dynamic", "-o"])
        .arg(&out)
        .arg("--extern")
        .arg(format!("semiaxis={}", kit.prelude.display()))
        .args(["--extern", &polars])
        .arg("-L")
        .arg(format!("dependency={}", kit.dependencies.display()))
        .arg(tiny.folder.path().join("cell.rs"))
        .output()
        .unwrap();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    // SAFETY: both libraries were built above and have no initialisers of their own; the prelude is
    // loaded first, as the worker does, and finds the standard library by its own path.
    let answer = unsafe {
        use libloading::os::unix::{Library, RTLD_GLOBAL, RTLD_NOW};
        let _prelude = Library::open(Some(&kit.prelude), RTLD_NOW | RTLD_GLOBAL).unwrap();
        let cell = Library::open(Some(&out), RTLD_NOW).unwrap();
        let run: libloading::os::unix::Symbol<fn() -> u8> = cell.get(b"cell\0").unwrap();
        run()
    };
    assert_eq!(answer, 8);
}

#[test]
fn two_workspaces_that_share_a_target_folder_do_not_mix_up_their_libraries() {
    let (one, other) = (Tiny::new(), Tiny::new());
    let shared = one.place().target_dir;
    other.set_prelude("pub fn other() {}\n");
    let ensure = |tiny: &Tiny| {
        let place = Place { target_dir: shared.clone(), ..tiny.place() };
        ensure_at(&place, &mut |_| ()).unwrap()
    };
    let first = ensure(&one);
    let second = ensure(&other);
    assert_ne!(first.stamp, second.stamp);
    let symbols =
        |kit: &Kit| String::from_utf8_lossy(&fs::read(&kit.prelude).unwrap()).into_owned();
    assert!(symbols(&first).contains("twice") && !symbols(&first).contains("other"));
    // The first workspace's files are older than the library that was built over its own.
    fs::remove_dir_all(&first.dir).unwrap();
    let again = ensure(&one);
    assert!(symbols(&again).contains("twice") && !symbols(&again).contains("other"));
}

#[test]
fn of_two_that_start_at_once_one_builds_and_the_other_waits() {
    let tiny = Tiny::new();
    let barrier = Barrier::new(2);
    let outcomes: Vec<(Kit, Vec<SetupEvent>)> = std::thread::scope(|scope| {
        let run = || {
            barrier.wait();
            let (kit, events) = tiny.ensure();
            (kit.unwrap(), events)
        };
        let both = [scope.spawn(run), scope.spawn(run)];
        both.into_iter().map(|one| one.join().unwrap()).collect()
    });
    assert_eq!(outcomes[0].0, outcomes[1].0);
    let built = outcomes.iter().filter(|(_, events)| !reasons(events).is_empty()).count();
    assert_eq!(built, 1);
    let waited = |events: &Vec<SetupEvent>| {
        events.iter().any(|event| matches!(event, SetupEvent::Waiting { reason } if reason.contains("another kernel")))
    };
    assert!(outcomes.iter().any(|(_, events)| waited(events)));
}

#[test]
fn what_cannot_be_built_says_why_in_the_compiler_s_words() {
    let tiny = Tiny::new();
    tiny.set_prelude("pub fn twice() -> u8 { \"two\" }\n");
    let error = tiny.ensure().0.unwrap_err();
    assert!(matches!(error, SetupError::BuildFailed { .. }));
    assert!(error.to_string().contains("mismatched types"), "{error}");
    let left: Vec<_> = fs::read_dir(tiny.place().home.kits).unwrap().flatten().collect();
    assert_eq!(left.len(), 1, "only the lock: {left:?}");
}

#[test]
fn without_sources_the_last_kit_serves_and_without_both_nothing_does() {
    let tiny = Tiny::new();
    let kit = tiny.ensure().0.unwrap();
    fs::remove_dir_all(tiny.place().workspace.join("prelude")).unwrap();
    assert_eq!(tiny.ensure().0.unwrap(), kit);
    fs::remove_dir_all(&kit.dir).unwrap();
    let error = tiny.ensure().0.unwrap_err();
    assert!(matches!(error, SetupError::NoSources { .. }), "{error}");
}

#[test]
fn only_kits_that_nobody_started_for_a_month_are_removed() {
    let tiny = Tiny::new();
    let used = tiny.ensure().0.unwrap();
    let home = tiny.place().home;
    let make = |name: &str, days: u64| {
        let dir = home.folder(name);
        fs::create_dir_all(&dir).unwrap();
        let mark = File::create(dir.join("in-use")).unwrap();
        mark.set_modified(SystemTime::now() - Duration::from_secs(days * 86_400)).unwrap();
        dir
    };
    let (young, old, held) = (make("young", 29), make("old", 31), make("held", 31));
    let holder = File::open(held.join("in-use")).unwrap();
    holder.lock_shared().unwrap();
    let unfinished = home.kits.join(".building-1");
    fs::create_dir_all(&unfinished).unwrap();
    home.prune(&used.dir);
    assert!(used.dir.exists() && young.exists() && held.exists());
    assert!(!old.exists() && !unfinished.exists());
}
