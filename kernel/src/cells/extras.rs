//! Crates that the header of a cell asks for.
//!
//! Cargo builds them once, in a small project of its own. So that a crate which the prelude also
//! stands on is the very same crate (a generator of the prelude's `rand` must be one for an extra
//! `rand_distr`), the project starts from the prelude's lock file, its profile and its target folder,
//! and asks for shared crates with the features that the prelude has them with; cargo then finds
//! them compiled. What is new is linked into one shared library, because two cells that each held
//! a copy could not be linked with one another. Cells themselves never go through cargo.

use std::collections::{BTreeMap, BTreeSet};
use std::ffi::OsString;
use std::path::{Path, PathBuf};
use std::process::Stdio;

use serde::{Deserialize, Serialize};
use serde_json::Value;
use tokio::io::{AsyncBufReadExt, AsyncReadExt, BufReader};
use tokio::process::Command;
use tokio::sync::mpsc;

use super::cache::Cache;
use super::types::{CellEvent, StreamName};
use crate::setup::Kit;
use crate::setup::kit::KitPackage;

/// The extra crates of a session.
#[derive(Debug, Default)]
pub struct Extras {
    wanted: BTreeMap<String, String>,
    sets: Vec<Set>,
}

/// What one header added.
#[derive(Debug, Clone, Serialize, Deserialize)]
struct Set {
    /// The crate whose library holds what is new; `None` if the prelude had it all.
    crate_name: Option<String>,
    /// That library.
    library: Option<PathBuf>,
    /// Crates that cells can name, with the file that describes each.
    named: BTreeMap<String, PathBuf>,
    /// The folder with the files of new crates.
    folder: PathBuf,
    /// A hash of what is new.
    content: String,
    /// Stems of the files of new crates, so that later sets do not link them again.
    stems: BTreeSet<String>,
}

const ACCOUNT: &str = "extras.json";

/// How often the features of shared crates may bring in further shared crates.
const MOST_ROUNDS: usize = 6;

impl Extras {
    /// Builds what is not there yet; the error is for the person, cargo's own words included.
    pub async fn ensure(
        &mut self,
        kit: &Kit,
        cache: &Cache,
        wanted: &BTreeMap<String, String>,
        events: &mpsc::Sender<CellEvent>,
    ) -> Result<(), String> {
        let mut all = self.wanted.clone();
        for (name, requirement) in wanted {
            match all.get(name) {
                Some(known) if known != requirement => {
                    return Err(format!(
                        "this session already has `{name} = {known}`; another version takes a restart of the kernel"
                    ));
                }
                _ => _ = all.insert(name.clone(), requirement.clone()),
            }
        }
        if all.len() == self.wanted.len() {
            return Ok(());
        }
        let table = lines_of(&all);
        let before: String = self.sets.iter().filter_map(|set| set.crate_name.clone()).collect();
        let hash = blake3::hash(format!("{}\n{table}\n{before}", kit.stamp).as_bytes()).to_hex();
        let folder = cache.extras_folder().join(&hash[..16]);
        let set = match read(&folder) {
            Some(set) => set,
            None => {
                let project = Project { kit, extras: self, folder: &folder, events };
                project.build(&hash[..16], &all).await?
            }
        };
        self.sets.push(set);
        self.wanted = all;
        Ok(())
    }

    /// Arguments for the compiler.
    pub fn arguments(&self) -> Vec<OsString> {
        let mut arguments = Vec::new();
        let mut named = BTreeMap::new();
        for set in &self.sets {
            named.extend(set.named.iter());
            arguments.push(joined("-Ldependency=", &set.folder));
            if let (Some(name), Some(library)) = (&set.crate_name, &set.library) {
                arguments.push(joined("-Ldependency=", library.parent().unwrap_or(&set.folder)));
                arguments.push("--extern".into());
                arguments.push(joined(&format!("{name}="), library));
            }
        }
        for (name, path) in named {
            arguments.push("--extern".into());
            arguments.push(joined(&format!("{name}="), path));
        }
        arguments
    }

    /// Lines that make the compiler take new crates from their shared library.
    pub fn preamble(&self) -> String {
        let names = self.sets.iter().filter_map(|set| set.crate_name.as_ref());
        names.map(|name| format!("extern crate {name} as _;\n")).collect()
    }

    /// What must be loaded before a cell.
    pub fn libraries(&self) -> impl Iterator<Item = &PathBuf> {
        self.sets.iter().filter_map(|set| set.library.as_ref())
    }

    /// Whether a cell can name this crate.
    pub fn has(&self, name: &str) -> bool {
        self.sets.iter().any(|set| set.named.contains_key(name))
    }

    /// What tells one set of extra crates from another.
    pub fn identity(&self) -> String {
        self.sets.iter().map(|set| format!("{} {}\n", set.folder.display(), set.content)).collect()
    }
}

fn joined(prefix: &str, path: &Path) -> OsString {
    let mut argument = OsString::from(prefix);
    argument.push(path);
    argument
}

fn read(folder: &Path) -> Option<Set> {
    let set: Set = serde_json::from_slice(&std::fs::read(folder.join(ACCOUNT)).ok()?).ok()?;
    let whole = set.named.values().chain(&set.library).all(|path| path.exists());
    whole.then_some(set)
}

/// One build.
struct Project<'a> {
    kit: &'a Kit,
    extras: &'a Extras,
    folder: &'a Path,
    events: &'a mpsc::Sender<CellEvent>,
}

/// A crate that cargo has built.
struct Artifact {
    package: String,
    crate_name: String,
    files: Vec<PathBuf>,
    is_macro: bool,
}

impl Artifact {
    /// The file by which another crate names this one.
    fn main_file(&self) -> Option<&PathBuf> {
        let ends =
            |end: &str| self.files.iter().find(|file| file.extension().is_some_and(|e| e == end));
        if self.is_macro { ends("so") } else { ends("rlib") }
    }

    fn stem(&self) -> Option<String> {
        Some(self.main_file()?.file_stem()?.to_string_lossy().into_owned())
    }
}

impl Project<'_> {
    async fn build(&self, hash: &str, all: &BTreeMap<String, String>) -> Result<Set, String> {
        let trouble = |error: std::io::Error| {
            format!("the crates cannot be built in {}: {error}", self.folder.display())
        };
        std::fs::create_dir_all(self.folder).map_err(trouble)?;
        // Two kernels that want the same crates build them once.
        let lock = std::fs::File::create(self.folder.join("lock")).map_err(trouble)?;
        while lock.try_lock().is_err() {
            tokio::time::sleep(std::time::Duration::from_millis(100)).await;
        }
        if let Some(set) = read(self.folder) {
            return Ok(set);
        }
        std::fs::write(self.folder.join("lib.rs"), "").map_err(trouble)?;
        std::fs::write(self.folder.join("build.rs"), "fn main() {}").map_err(trouble)?;
        let plain: String = lines_of(all);
        self.write_manifest(&plain).map_err(trouble)?;
        let mut graph = self.graph().await?;
        // Sharing a crate brings in what its features need, which must be shared in turn.
        let mut shared = plain.clone();
        for _ in 0..MOST_ROUNDS {
            let more = self.sharing(all, &graph);
            if more == shared {
                break;
            }
            shared = more;
            self.write_manifest(&shared).map_err(trouble)?;
            match self.graph().await {
                Ok(found) => graph = found,
                Err(_) => break,
            }
        }
        // What the header asks for can make sharing impossible; the crates are then built apart from
        // the prelude's, and their types are not the prelude's.
        let lines = match self.cargo(&BUILD, true).await {
            Ok(lines) => lines,
            Err(_) if shared != plain => {
                self.write_manifest(&plain).map_err(trouble)?;
                graph = self.graph().await?;
                self.cargo(&BUILD, true).await?
            }
            Err(words) => return Err(words),
        };
        let artifacts: Vec<Artifact> = lines.iter().filter_map(|line| artifact(line)).collect();
        let set = self.assemble(hash, all, &graph, &artifacts).await?;
        std::fs::write(
            self.folder.join(ACCOUNT),
            serde_json::to_vec(&set).map_err(|e| e.to_string())?,
        )
        .map_err(trouble)?;
        Ok(set)
    }

    fn write_manifest(&self, dependencies: &str) -> std::io::Result<()> {
        let manifest = format!(
            "[workspace]\n[package]\nname = \"cell-extras\"\nversion = \"0.0.0\"\nedition = \"2024\"\nbuild = \"build.rs\"\n\
             [lib]\npath = \"lib.rs\"\n[dependencies]\n{dependencies}\n{}\n",
            self.kit.profile
        );
        std::fs::write(self.folder.join("Cargo.toml"), manifest)?;
        std::fs::copy(&self.kit.lock, self.folder.join("Cargo.lock")).map(|_| ())
    }

    /// The dependencies of the project such that every crate on which the prelude stands too is asked
    /// for in the prelude's version, with the features that the prelude has it with and those that
    /// the header names, and no others; cargo then finds it compiled.
    fn sharing(&self, all: &BTreeMap<String, String>, graph: &Value) -> String {
        let in_kit = |package: &Value| only(&self.kit.packages, package);
        let packages = graph["packages"].as_array();
        let by_id: BTreeMap<&str, &Value> = packages
            .into_iter()
            .flatten()
            .filter_map(|package| Some((package["id"].as_str()?, package)))
            .collect();
        let mut asked = direct(graph);
        asked.retain(|(asked, _)| all.keys().any(|name| name.replace('-', "_") == *asked));
        let mut lines = String::new();
        for (name, requirement) in all {
            let package = asked
                .iter()
                .find(|(asked, _)| *asked == name.replace('-', "_"))
                .and_then(|(_, id)| in_kit(by_id.get(id.as_str())?));
            let line = package.and_then(|package| with_features_of(requirement, package));
            lines.push_str(&format!("{name} = {}\n", line.as_ref().unwrap_or(requirement)));
        }
        let others = by_id.iter().filter(|(id, _)| !asked.iter().any(|(_, asked)| asked == *id));
        for package in others.filter_map(|(_, package)| in_kit(package)) {
            lines.push_str(&shared_line(package));
        }
        // A macro with other features is another macro, and so is every crate that uses it.
        lines.push_str("[build-dependencies]\n");
        for package in by_id.values().filter_map(|package| only(&self.kit.host, package)) {
            lines.push_str(&shared_line(package));
        }
        lines
    }

    /// Cargo's account of the project's crates.
    async fn graph(&self) -> Result<Value, String> {
        let lines = self.cargo(&["metadata", "--format-version=1"], false).await?;
        serde_json::from_str(lines.last().map_or("", String::as_str))
            .map_err(|error| format!("cargo's account of the crates cannot be read: {error}"))
    }

    /// Runs cargo in the project; gives the lines of its standard output.
    async fn cargo(&self, arguments: &[&str], tell: bool) -> Result<Vec<String>, String> {
        let cargo = self.kit.rustc.with_file_name("cargo");
        let mut command = Command::new(&cargo);
        command
            .args(arguments)
            .current_dir(self.folder)
            .env("RUSTC", &self.kit.rustc)
            .env("CARGO_TARGET_DIR", &self.kit.target_dir)
            .env("CARGO_TERM_COLOR", "never")
            .env("CARGO_TERM_PROGRESS_WHEN", "never")
            .env_remove("RUSTFLAGS")
            .env_remove("RUSTC_WRAPPER")
            .env_remove("RUSTC_WORKSPACE_WRAPPER")
            .stdin(Stdio::null())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .kill_on_drop(true);
        let mut child = command.spawn().map_err(|error| {
            format!("cargo could not be started from {}: {error}", cargo.display())
        })?;
        let (Some(stdout), Some(mut stderr)) = (child.stdout.take(), child.stderr.take()) else {
            return Err("cargo's output could not be read".to_owned());
        };
        let read_lines = async {
            let mut lines = BufReader::new(stdout).lines();
            let mut all = Vec::new();
            while let Ok(Some(line)) = lines.next_line().await {
                if tell && let Some(words) = progress(&line) {
                    let text = format!("\u{1b}[2m{words}\u{1b}[0m\n");
                    let _ = self
                        .events
                        .send(CellEvent::Stream { name: StreamName::Stderr, text })
                        .await;
                }
                all.push(line);
            }
            all
        };
        let mut words = Vec::new();
        let (lines, _) = tokio::join!(read_lines, stderr.read_to_end(&mut words));
        let status = child.wait().await.map_err(|error| format!("cargo: {error}"))?;
        if status.success() {
            return Ok(lines);
        }
        let compiler: String = lines.iter().filter_map(|line| rendered(line)).collect();
        let words = String::from_utf8_lossy(&words);
        Err(format!("{compiler}{}", tidy(&words, self.folder)))
    }

    /// Gathers the files of new crates and links them into one library.
    async fn assemble(
        &self,
        hash: &str,
        all: &BTreeMap<String, String>,
        graph: &Value,
        artifacts: &[Artifact],
    ) -> Result<Set, String> {
        let files = self.folder.join("crates");
        let trouble = |error: std::io::Error| {
            format!("the crates cannot be kept in {}: {error}", files.display())
        };
        std::fs::create_dir_all(&files).map_err(trouble)?;
        let in_prelude: BTreeSet<&str> =
            self.kit.packages.iter().map(|package| package.artifact.as_str()).collect();
        let earlier = |stem: &str| self.extras.sets.iter().find(|set| set.stems.contains(stem));
        let (mut stems, mut file_of) = (BTreeSet::new(), BTreeMap::new());
        for artifact in artifacts {
            let (Some(main), Some(stem)) = (artifact.main_file(), artifact.stem()) else {
                continue;
            };
            let home = if in_prelude.contains(stem.as_str()) {
                let end = if artifact.is_macro { "so" } else { "rmeta" };
                self.kit.dependencies.join(format!("{stem}.{end}"))
            } else if let Some(set) = earlier(&stem) {
                set.folder.join(main.file_name().unwrap_or_default())
            } else {
                let home = files.join(main.file_name().unwrap_or_default());
                if !home.exists() {
                    std::fs::hard_link(main, &home)
                        .or_else(|_| std::fs::copy(main, &home).map(|_| ()))
                        .map_err(trouble)?;
                }
                if !artifact.is_macro {
                    stems.insert(stem);
                }
                home
            };
            file_of.insert((artifact.package.clone(), artifact.crate_name.clone()), home);
        }
        let mut named = BTreeMap::new();
        for (dependency, package) in direct(graph) {
            if all.contains_key(&dependency) || all.contains_key(&dependency.replace('_', "-")) {
                let file = file_of
                    .iter()
                    .find(|((id, _), _)| *id == package)
                    .map(|(_, file)| file.clone());
                let file = file.ok_or_else(|| {
                    format!("`{dependency}` is no library, so a cell cannot use it")
                })?;
                named.insert(dependency, file);
            }
        }
        let mut set = Set {
            crate_name: None,
            library: None,
            named,
            folder: files,
            content: String::new(),
            stems,
        };
        if !set.stems.is_empty() {
            self.link(hash, &mut set).await?;
        }
        Ok(set)
    }

    /// Links new crates into one shared library beside the prelude's.
    async fn link(&self, hash: &str, set: &mut Set) -> Result<(), String> {
        let crate_name = format!("extras_{hash}");
        let library = self.folder.join(format!("lib{crate_name}.so"));
        let mut text = String::from("extern crate semiaxis as _;\n");
        text.push_str(&self.extras.preamble());
        let mut command = Command::new(&self.kit.rustc);
        command.current_dir(self.folder).arg("linked.rs").args(["--crate-name", &crate_name]).args(
            [
                "--edition=2024",
                "--crate-type=dylib",
                "-Cprefer-dynamic",
                "-Cembed-bitcode=no",
                "--extern",
            ],
        );
        command.arg(joined("semiaxis=", &self.kit.prelude));
        command
            .arg(joined("-Ldependency=", &self.kit.dependencies))
            .arg(joined("-Ldependency=", &self.kit.dir))
            .arg(joined("-Ldependency=", &set.folder));
        command.args(self.extras.arguments());
        for (name, file) in &set.named {
            if file.extension().is_some_and(|end| end == "rlib") {
                text.push_str(&format!("pub extern crate {name};\n"));
                if !self.extras.has(name) {
                    command.arg("--extern").arg(joined(&format!("{name}="), file));
                }
            }
        }
        std::fs::write(self.folder.join("linked.rs"), text).map_err(|error| error.to_string())?;
        command.env_remove("LD_LIBRARY_PATH").stdin(Stdio::null()).kill_on_drop(true);
        let output = command
            .output()
            .await
            .map_err(|error| format!("the compiler could not be run: {error}"))?;
        if !output.status.success() {
            return Err(format!(
                "the crates could not be linked: {}",
                String::from_utf8_lossy(&output.stderr)
            ));
        }
        let bytes = std::fs::read(&library).map_err(|error| error.to_string())?;
        set.content = blake3::hash(&bytes).to_hex().to_string();
        set.crate_name = Some(crate_name);
        set.library = Some(library);
        Ok(())
    }
}

/// A package of the kit, if the kit has it once; one that is there twice is there in two shapes, and
/// which of them is wanted cannot be told.
fn only<'a>(packages: &'a [KitPackage], package: &Value) -> Option<&'a KitPackage> {
    let (name, version) = (package["name"].as_str()?, package["version"].as_str()?);
    let mut found = packages.iter().filter(|known| known.name == name && known.version == version);
    found.next().filter(|_| found.next().is_none())
}

fn lines_of(all: &BTreeMap<String, String>) -> String {
    all.iter().map(|(name, value)| format!("{name} = {value}\n")).collect()
}

/// A line that asks for the very crate that the kit has.
fn shared_line(package: &KitPackage) -> String {
    let requirement = format!("{{ package = {:?} }}", package.name);
    let version = package.version.replace(['.', '+'], "-");
    with_features_of(&requirement, package)
        .map(|line| format!("shared-{}-{version} = {line}\n", package.name))
        .unwrap_or_default()
}

/// A requirement for the very crate that the prelude has.
fn with_features_of(requirement: &str, package: &KitPackage) -> Option<String> {
    let table: toml::Table = toml::from_str(&format!("it = {requirement}")).ok()?;
    let mut table = match table.get("it")? {
        toml::Value::Table(table) => table.clone(),
        _ => toml::Table::new(),
    };
    let mut features: BTreeSet<String> = package.features.iter().cloned().collect();
    let asked = table.get("features").and_then(toml::Value::as_array).into_iter().flatten();
    features.extend(asked.filter_map(|feature| feature.as_str().map(str::to_owned)));
    table.insert("version".to_owned(), format!("={}", package.version).into());
    table.insert("default-features".to_owned(), false.into());
    table.insert("features".to_owned(), features.into_iter().collect::<Vec<_>>().into());
    Some(toml::Value::Table(table).to_string().replace('\n', " "))
}

const BUILD: [&str; 3] = ["build", "--release", "--message-format=json"];

/// The names by which the project calls its direct dependencies, and their packages.
fn direct(graph: &Value) -> Vec<(String, String)> {
    let root = graph["resolve"]["root"].as_str().unwrap_or_default();
    let nodes = graph["resolve"]["nodes"].as_array();
    let node = nodes.into_iter().flatten().find(|node| node["id"] == root);
    let deps = node.and_then(|node| node["deps"].as_array()).into_iter().flatten();
    deps.filter_map(|dep| Some((dep["name"].as_str()?.to_owned(), dep["pkg"].as_str()?.to_owned())))
        .collect()
}

fn artifact(line: &str) -> Option<Artifact> {
    let message: Value = serde_json::from_str(line).ok()?;
    if message["reason"] != "compiler-artifact" {
        return None;
    }
    let kinds: Vec<&str> =
        message["target"]["kind"].as_array()?.iter().filter_map(Value::as_str).collect();
    let is_macro = kinds.contains(&"proc-macro");
    if !is_macro && !kinds.iter().any(|kind| kind.contains("lib")) {
        return None;
    }
    Some(Artifact {
        package: message["package_id"].as_str()?.to_owned(),
        crate_name: message["target"]["name"].as_str()?.replace('-', "_"),
        files: message["filenames"]
            .as_array()?
            .iter()
            .filter_map(Value::as_str)
            .map(PathBuf::from)
            .collect(),
        is_macro,
    })
}

/// A line about a crate that was compiled just now.
fn progress(line: &str) -> Option<String> {
    let message: Value = serde_json::from_str(line).ok()?;
    let compiled = message["reason"] == "compiler-artifact" && message["fresh"] == false;
    let name = message["target"]["name"]
        .as_str()
        .filter(|name| compiled && *name != "build-script-build")?;
    (name != "cell_extras").then(|| format!("compiled the crate {name}"))
}

fn rendered(line: &str) -> Option<String> {
    let message: Value = serde_json::from_str(line).ok()?;
    let is_error =
        message["reason"] == "compiler-message" && message["message"]["level"] == "error";
    is_error.then(|| message["message"]["rendered"].as_str().map(str::to_owned))?
}

/// Cargo's words without the place where the kernel keeps the project.
fn tidy(words: &str, folder: &Path) -> String {
    let place = folder.to_string_lossy();
    let lines = words.lines().filter(|line| {
        let line = line.trim_start();
        !["Updating", "Locking", "Adding", "Compiling", "Blocking", "warning: profile package spec"]
            .iter()
            .any(|start| line.starts_with(start))
    });
    lines.map(|line| line.replace(place.as_ref(), "the header")).collect::<Vec<_>>().join("\n")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn package() -> KitPackage {
        KitPackage {
            name: "rand_distr".into(),
            version: "0.6.0".into(),
            features: vec!["std".into(), "alloc".into()],
            artifact: "librand_distr-0123456789abcdef".into(),
        }
    }

    fn read(line: &str) -> toml::Table {
        let table: toml::Table = toml::from_str(&format!("it = {line}")).expect("one line of TOML");
        table["it"].as_table().expect("a table").clone()
    }

    #[test]
    fn a_shared_crate_is_asked_for_as_the_prelude_has_it() {
        for requirement in ["\"0.6\"", "{ version = \"0.6\", features = [\"serde\"] }"] {
            let line = with_features_of(requirement, &package()).unwrap();
            let table = read(&line);
            assert_eq!(table["version"].as_str(), Some("=0.6.0"));
            assert_eq!(table["default-features"].as_bool(), Some(false));
            let features = table["features"].as_array().unwrap().len();
            assert_eq!(features, if requirement.contains("serde") { 3 } else { 2 }, "{line}");
        }
    }

    #[test]
    fn only_libraries_and_macros_are_artifacts_of_interest() {
        let line = |kind: &str| {
            format!(
                "{{\"reason\":\"compiler-artifact\",\"package_id\":\"p\",\"target\":{{\"kind\":[\"{kind}\"],\
                 \"name\":\"a-b\"}},\"filenames\":[\"/t/liba_b-1.rlib\",\"/t/liba_b-1.rmeta\"],\"fresh\":false}}"
            )
        };
        let library = artifact(&line("lib")).unwrap();
        assert_eq!(
            (library.crate_name.as_str(), library.stem().as_deref()),
            ("a_b", Some("liba_b-1"))
        );
        assert!(artifact(&line("custom-build")).is_none());
        assert!(artifact("not JSON").is_none());
        assert_eq!(progress(&line("lib")).as_deref(), Some("compiled the crate a-b"));
    }
}
