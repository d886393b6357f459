//! Cargo's part: building the prelude as a shared library, with every step of it reported.
//!
//! Cargo is asked before it builds which packages take part, so that progress has a total and
//! host-only crates can be told from those inside the library; then `cargo rustc` builds and names
//! every file that it made. The flags after `--` reach the prelude alone, so all
//! dependencies are shared with an ordinary release build of the workspace.

use std::collections::{BTreeMap, BTreeSet};
use std::ffi::OsStr;
use std::fs;
use std::io::{BufRead, BufReader, Read};
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::sync::mpsc::{self, RecvTimeoutError, Sender};
use std::thread;
use std::time::{Duration, Instant};

use serde::Deserialize;

use super::Place;
use super::compiler::{Compiler, command_path};
use super::error::SetupError;
use super::graph::{Package, Target, inside, metadata, n_compiled};
use super::kit::KitHome;
use super::progress::SetupEvent;

/// How many of cargo's last lines a failure shows.
const TAIL: usize = 40;
/// How often progress is reported while nothing finishes.
const TICK: Duration = Duration::from_millis(500);

/// What cargo built.
pub struct Built {
    /// The prelude as a shared library.
    pub dylib: PathBuf,
    /// Every library and procedural macro that took part.
    pub artifacts: Vec<Artifact>,
    /// The packages inside the library, by cargo's identifier.
    pub inside: BTreeMap<String, Package>,
    /// Where cargo put everything.
    pub target_dir: PathBuf,
}

/// One file set that cargo made, as it reports it.
#[derive(Debug, Clone, Deserialize)]
pub struct Artifact {
    /// Cargo's identifier of the package.
    pub package_id: String,
    /// Which target of the package.
    pub target: Target,
    /// How it was compiled.
    pub profile: ArtifactProfile,
    /// The features it was compiled with.
    pub features: Vec<String>,
    /// The files.
    pub filenames: Vec<PathBuf>,
}

/// The one setting that tells a build for the host from one for the library.
#[derive(Debug, Clone, Deserialize)]
pub struct ArtifactProfile {
    /// The optimisation level; cargo compiles what only build scripts and macros need at 0.
    pub opt_level: String,
}

/// Builds the prelude of a workspace for a kit of a given name (hexadecimal digits).
///
/// # Errors
/// There is no cargo, the build fails, or the disk is full.
pub fn build(
    place: &Place,
    compiler: &Compiler,
    name: &str,
    progress: &mut dyn FnMut(SetupEvent),
) -> Result<Built, SetupError> {
    let cargo = cargo(compiler)?;
    let workspace = &place.workspace;
    let metadata = metadata(&cargo, workspace, compiler)?;
    let prelude = workspace.join("prelude").join("Cargo.toml");
    let root = metadata
        .packages
        .iter()
        .find(|package| same_file(&package.manifest_path, &prelude))
        .map(|package| package.id.clone())
        .ok_or_else(|| SetupError::UnexpectedBuild { what: "the prelude's package".to_owned() })?;
    let packages: BTreeMap<String, Package> =
        metadata.packages.into_iter().map(|package| (package.id.clone(), package)).collect();
    let total = n_compiled(&cargo, workspace)?;
    let artifacts = run_cargo(&cargo, place, compiler, name, total, progress)?;
    let dylib = library(&artifacts, &root)
        .ok_or_else(|| SetupError::UnexpectedBuild { what: "the prelude's library".to_owned() })?;
    let within = inside(&metadata.resolve, &packages, &root);
    let inside =
        packages.into_iter().filter(|(id, _)| within.contains(id) && *id != root).collect();
    let target_dir = place.target_dir.clone().unwrap_or(metadata.target_directory);
    Ok(Built { dylib, artifacts, inside, target_dir })
}

fn cargo(compiler: &Compiler) -> Result<PathBuf, SetupError> {
    let given = std::env::var_os("CARGO").map(PathBuf::from).filter(|cargo| cargo.is_file());
    let beside = compiler.rustc.with_file_name("cargo");
    given
        .or_else(|| command_path("cargo"))
        .or_else(|| beside.is_file().then_some(beside))
        .ok_or_else(|| SetupError::NoCargo { rustc: compiler.rustc.clone() })
}

/// Cargo in the workspace, without what an outer `cargo run` or `cargo test` tells about itself:
/// build scripts that watch those variables would otherwise run, and compile, again.
pub fn cargo_command(cargo: &Path, workspace: &Path) -> Command {
    let mut command = Command::new(cargo);
    command.current_dir(workspace).stdin(Stdio::null());
    for (name, _) in std::env::vars_os() {
        let text = name.to_string_lossy();
        if ["CARGO_PKG_", "CARGO_MANIFEST_", "CARGO_BIN_", "CARGO_CRATE_", "CARGO_PRIMARY_"]
            .iter()
            .any(|prefix| text.starts_with(prefix))
        {
            command.env_remove(&name);
        }
    }
    command
}

enum Line {
    Out(String),
    Err(String),
}

fn run_cargo(
    cargo: &Path,
    place: &Place,
    compiler: &Compiler,
    name: &str,
    total: usize,
    progress: &mut dyn FnMut(SetupEvent),
) -> Result<Vec<Artifact>, SetupError> {
    let workspace = &place.workspace;
    let chosen =
        place.target_dir.iter().flat_map(|dir| [OsStr::new("--target-dir"), dir.as_os_str()]);
    let mut child = cargo_command(cargo, workspace)
        .args(["rustc", "--release", "--locked", "-p", "semiaxis", "--crate-type", "dylib"])
        .args(chosen)
        .args(["--message-format=json-render-diagnostics", "--color=never", "--"])
        .args(prelude_flags(compiler, &place.home, name))
        .env("RUSTC_WORKSPACE_WRAPPER", wrapper(&place.home)?)
        // A compiler that a full disk brings down would leave an account of it in the sources.
        .env("RUSTC_ICE", "0")
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .map_err(SetupError::files("start", cargo))?;
    let (sender, lines) = mpsc::channel();
    let readers = [
        child.stdout.take().map(|out| forward(out, sender.clone(), Line::Out)),
        child.stderr.take().map(|err| forward(err, sender, Line::Err)),
    ];

    let started = Instant::now();
    let mut watched = Watched::new(total);
    loop {
        match lines.recv_timeout(TICK) {
            Ok(Line::Out(line)) => watched.message(&line),
            Ok(Line::Err(line)) => watched.said(line),
            Err(RecvTimeoutError::Timeout) => {}
            Err(RecvTimeoutError::Disconnected) => break,
        }
        progress(watched.event(started.elapsed()));
    }
    for reader in readers.into_iter().flatten() {
        // A reader only ends; it has nothing to report.
        let _ = reader.join();
    }
    let status = child.wait().map_err(SetupError::files("wait for", cargo))?;
    if status.success() {
        return Ok(watched.artifacts);
    }
    if watched.tail.iter().any(|line| line.contains("No space left on device")) {
        return Err(SetupError::DiskFull { path: super::kit::target_dir(workspace) });
    }
    Err(failed(workspace, status.to_string(), watched.tail.into_iter()))
}

/// The flags for the prelude's library alone: cells and it share one standard library, and it finds
/// that library beside itself or where the compiler keeps it for what it builds.
///
/// The name of the kit goes into the linker's build identifier for cargo's sake. Cargo compares times
/// of files under names relative to the workspace, so of two workspaces that share a folder for build
/// results it would take the other's library for this one's; flags it compares as they are.
/// A way around the compiler for the workspace's own crates, so that the prelude alone is compiled
/// with the flags that stable compilers keep back. Said to cargo itself, the same would make build
/// scripts run, and everything behind them be compiled, again. Cargo takes the place of the script
/// for a part of what is built, so it must not change.
fn wrapper(home: &KitHome) -> Result<PathBuf, SetupError> {
    let path = home.compile_script();
    let script = "#!/bin/sh\nRUSTC_BOOTSTRAP=1 exec \"$@\"\n";
    if fs::read_to_string(&path).is_ok_and(|text| text == script) {
        return Ok(path);
    }
    let parent = path.parent().unwrap_or(Path::new("/"));
    fs::create_dir_all(parent).map_err(SetupError::files("make", parent))?;
    let fresh = path.with_extension("new");
    fs::write(&fresh, script).map_err(SetupError::files("write", &fresh))?;
    fs::set_permissions(&fresh, fs::Permissions::from_mode(0o755))
        .map_err(SetupError::files("write", &fresh))?;
    fs::rename(&fresh, &path).map_err(SetupError::files("write", &path))?;
    Ok(path)
}

fn prelude_flags(compiler: &Compiler, home: &KitHome, name: &str) -> Vec<String> {
    let library = compiler.sysroot.join("lib").join("rustlib").join(compiler.host()).join("lib");
    vec![
        "-Cprefer-dynamic".to_owned(),
        // What the prelude instantiates of generic code, the cells need not; code that drops values
        // is among that only where the compiler works incrementally.
        "-Zshare-generics=y".to_owned(),
        "-Ccodegen-units=16".to_owned(),
        format!("-Cincremental={}", home.parts().display()),
        "-Clink-arg=-Wl,-rpath,$ORIGIN".to_owned(),
        format!("-Clink-arg=-Wl,-rpath,{}", library.display()),
        format!("-Clink-arg=-Wl,--build-id=0x{name}"),
    ]
}

/// The library among the files that cargo made.
fn library(artifacts: &[Artifact], root: &str) -> Option<PathBuf> {
    artifacts
        .iter()
        .rev()
        .filter(|artifact| artifact.package_id == root)
        .flat_map(|artifact| &artifact.filenames)
        .find(|file| file.extension().is_some_and(|end| end == std::env::consts::DLL_EXTENSION))
        .cloned()
}

fn forward(
    from: impl Read + Send + 'static,
    to: Sender<Line>,
    wrap: fn(String) -> Line,
) -> thread::JoinHandle<()> {
    thread::spawn(move || {
        let mut reader = BufReader::new(from);
        let mut bytes = Vec::new();
        while reader.read_until(b'\n', &mut bytes).is_ok_and(|read| read > 0) {
            let line = String::from_utf8_lossy(&bytes).trim_end().to_owned();
            if to.send(wrap(line)).is_err() {
                return;
            }
            bytes.clear();
        }
    })
}

/// What is known of a running build.
struct Watched {
    total: usize,
    finished: BTreeSet<String>,
    current: Vec<String>,
    artifacts: Vec<Artifact>,
    tail: Vec<String>,
    /// Whether cargo waits for another cargo.
    blocked: bool,
}

impl Watched {
    fn new(total: usize) -> Self {
        Self {
            total,
            finished: BTreeSet::new(),
            current: Vec::new(),
            artifacts: Vec::new(),
            tail: Vec::new(),
            blocked: false,
        }
    }

    /// One line of cargo's standard output: a JSON message, of which only artifacts matter.
    fn message(&mut self, line: &str) {
        self.blocked = false;
        let Ok(artifact) = serde_json::from_str::<Artifact>(line) else { return };
        if artifact.target.kind.iter().any(|kind| kind == "custom-build") {
            return;
        }
        let name = package_name(&artifact);
        self.current.retain(|current| *current != name);
        self.finished.insert(artifact.package_id.clone());
        self.artifacts.push(artifact);
    }

    /// One line of cargo's standard error: what it starts, what it waits for, what went wrong.
    fn said(&mut self, line: String) {
        let words: Vec<&str> = line.split_whitespace().collect();
        self.blocked = matches!(words.as_slice(), ["Blocking", "waiting", ..]);
        if let ["Compiling", name, ..] = words.as_slice() {
            self.current.push((*name).to_owned());
        }
        if self.tail.len() == TAIL {
            self.tail.remove(0);
        }
        self.tail.push(line);
    }

    fn event(&self, elapsed: Duration) -> SetupEvent {
        if self.blocked {
            return SetupEvent::Waiting { reason: "another cargo build to end".to_owned() };
        }
        let done = self.finished.len().min(self.total);
        SetupEvent::Building { done, total: self.total, current: self.current.clone(), elapsed }
    }
}

/// The name that cargo prints when it starts the package; targets may have names of their own.
fn package_name(artifact: &Artifact) -> String {
    let id = &artifact.package_id;
    let after = id.rsplit_once('#').map_or(id.as_str(), |(_, after)| after);
    match after.split_once('@') {
        Some((name, _)) => name.to_owned(),
        None => artifact.target.name.replace('_', "-"),
    }
}

/// The error for a cargo that refused, with its last words.
pub fn failed(workspace: &Path, status: String, lines: impl Iterator<Item = String>) -> SetupError {
    let lines: Vec<String> = lines.filter(|line| !is_progress(line)).collect();
    let tail = lines[lines.len().saturating_sub(TAIL)..].to_vec();
    SetupError::BuildFailed { workspace: workspace.to_owned(), status, tail }
}

fn is_progress(line: &str) -> bool {
    ["Compiling ", "Blocking ", "Downloading ", "Downloaded ", "Finished "]
        .iter()
        .any(|word| line.trim_start().starts_with(word))
}

fn same_file(one: &Path, other: &Path) -> bool {
    one == other
        || one.canonicalize().ok().is_some_and(|one| Some(one) == other.canonicalize().ok())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A message as `cargo build --message-format=json` writes it (The Cargo Book, "External tools").
    const ARTIFACT: &str = r#"{"reason":"compiler-artifact","package_id":"registry+https://example.invalid#serde_json@1.0.1","manifest_path":"/m","target":{"kind":["lib"],"crate_types":["lib"],"name":"serde_json","src_path":"/s","edition":"2021","doc":true,"doctest":true,"test":true},"profile":{"opt_level":"3","debuginfo":0,"debug_assertions":false,"overflow_checks":false,"test":false},"features":["std"],"filenames":["/t/libserde_json-1.rlib","/t/libserde_json-1.rmeta"],"executable":null,"fresh":true}"#;

    #[test]
    fn a_build_is_followed_from_cargo_s_own_words() {
        let mut watched = Watched::new(2);
        watched.said("    Blocking waiting for file lock on build directory".to_owned());
        assert!(matches!(watched.event(Duration::ZERO), SetupEvent::Waiting { .. }));
        watched.said("   Compiling serde_json v1.0.1".to_owned());
        assert_eq!(watched.current, ["serde_json"]);
        watched.message(ARTIFACT);
        watched.message("{\"reason\":\"build-finished\",\"success\":true}");
        assert!(watched.current.is_empty());
        assert_eq!(watched.artifacts[0].filenames.len(), 2);
        let SetupEvent::Building { done, total, .. } = watched.event(Duration::ZERO) else {
            panic!("a running build reports itself");
        };
        assert_eq!((done, total), (1, 2));
    }
}
