//! What cargo knows of a workspace before it builds: its packages and which needs which.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

use serde::Deserialize;

use super::build::{cargo_command, failed};
use super::compiler::Compiler;
use super::error::SetupError;

/// The part of a package that an artifact was made from.
#[derive(Debug, Clone, Deserialize)]
pub struct Target {
    /// `lib`, `proc-macro`, `custom-build` and so on.
    pub kind: Vec<String>,
    /// Its name as a package file writes it.
    pub name: String,
}

/// A package as `cargo metadata` knows it.
#[derive(Debug, Clone, Deserialize)]
pub struct Package {
    /// Cargo's identifier.
    pub id: String,
    /// Its name.
    pub name: String,
    /// Its version.
    pub version: String,
    /// Its manifest.
    pub manifest_path: PathBuf,
    /// What it consists of.
    pub targets: Vec<Target>,
}

/// What `cargo metadata` says about a workspace.
#[derive(Deserialize)]
pub struct Metadata {
    /// All packages of the workspace and below it.
    pub packages: Vec<Package>,
    /// Which needs which.
    pub resolve: Resolve,
    /// Where cargo builds.
    pub target_directory: PathBuf,
}

/// Which package needs which.
#[derive(Deserialize)]
pub struct Resolve {
    nodes: Vec<Node>,
}

#[derive(Deserialize)]
struct Node {
    id: String,
    deps: Vec<NodeDependency>,
}

#[derive(Deserialize)]
struct NodeDependency {
    pkg: String,
    dep_kinds: Vec<DependencyKind>,
}

#[derive(Deserialize)]
struct DependencyKind {
    kind: Option<String>,
}

/// Asks cargo about a workspace.
///
/// # Errors
/// Cargo cannot be started or refuses.
pub fn metadata(
    cargo: &Path,
    workspace: &Path,
    compiler: &Compiler,
) -> Result<Metadata, SetupError> {
    let output = cargo_command(cargo, workspace)
        .args(["metadata", "--format-version=1", "--locked", "--filter-platform", compiler.host()])
        .output()
        .map_err(SetupError::files("start", cargo))?;
    if !output.status.success() {
        let said = String::from_utf8_lossy(&output.stderr);
        return Err(failed(workspace, output.status.to_string(), said.lines().map(str::to_owned)));
    }
    serde_json::from_slice(&output.stdout)
        .map_err(|error| SetupError::UnexpectedBuild { what: format!("its metadata ({error})") })
}

/// How many packages are compiled for the prelude, build scripts and macros included. Only `cargo tree`
/// knows the features that the prelude asks for; the metadata has those of the whole workspace.
///
/// # Errors
/// Cargo cannot be started or refuses.
pub fn n_compiled(cargo: &Path, workspace: &Path) -> Result<usize, SetupError> {
    let output = cargo_command(cargo, workspace)
        .args(["tree", "--locked", "-p", "semiaxis", "-e", "normal,build"])
        .args(["--prefix", "none", "--format", "{p}"])
        .output()
        .map_err(SetupError::files("start", cargo))?;
    if !output.status.success() {
        let said = String::from_utf8_lossy(&output.stderr);
        return Err(failed(workspace, output.status.to_string(), said.lines().map(str::to_owned)));
    }
    let text = String::from_utf8_lossy(&output.stdout);
    // A package that was shown before is marked, not left out.
    let lines = text.lines().map(|line| line.trim_end_matches(" (*)").trim());
    Ok(lines.filter(|line| !line.is_empty()).collect::<BTreeSet<_>>().len())
}

/// The packages whose code ends in the library: no build scripts, nothing behind a procedural macro.
pub fn inside(
    resolve: &Resolve,
    packages: &BTreeMap<String, Package>,
    root: &str,
) -> BTreeSet<String> {
    let nodes: BTreeMap<&str, &Node> =
        resolve.nodes.iter().map(|node| (node.id.as_str(), node)).collect();
    let mut found = BTreeSet::new();
    let mut waiting = vec![root];
    while let Some(id) = waiting.pop() {
        let is_macro = packages.get(id).is_some_and(|package| {
            package.targets.iter().any(|target| target.kind.iter().any(|kind| kind == "proc-macro"))
        });
        if is_macro || !found.insert(id.to_owned()) {
            continue;
        }
        for dependency in nodes.get(id).map(|node| node.deps.as_slice()).unwrap_or_default() {
            if dependency.dep_kinds.iter().any(|kind| kind.kind.is_none()) {
                waiting.push(&dependency.pkg);
            }
        }
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_stands_behind_a_macro_or_a_build_script_is_not_inside_the_library() {
        let package = |id: &str, kind: &str| Package {
            id: id.to_owned(),
            name: id.to_owned(),
            version: "1.0.0".to_owned(),
            manifest_path: PathBuf::new(),
            targets: vec![Target { kind: vec![kind.to_owned()], name: id.to_owned() }],
        };
        let node = |id: &str, deps: &[(&str, Option<&str>)]| Node {
            id: id.to_owned(),
            deps: deps
                .iter()
                .map(|(pkg, kind)| NodeDependency {
                    pkg: (*pkg).to_owned(),
                    dep_kinds: vec![DependencyKind { kind: kind.map(str::to_owned) }],
                })
                .collect(),
        };
        let packages: BTreeMap<String, Package> = [
            ("root", "lib"),
            ("inside", "lib"),
            ("macro", "proc-macro"),
            ("behind", "lib"),
            ("script", "lib"),
            ("test", "lib"),
        ]
        .into_iter()
        .map(|(id, kind)| (id.to_owned(), package(id, kind)))
        .collect();
        let resolve = Resolve {
            nodes: vec![
                node(
                    "root",
                    &[
                        ("inside", None),
                        ("macro", None),
                        ("script", Some("build")),
                        ("test", Some("dev")),
                    ],
                ),
                node("macro", &[("behind", None)]),
            ],
        };
        let names: Vec<String> = inside(&resolve, &packages, "root").into_iter().collect();
        assert_eq!(names, ["inside", "root"]);
    }
}
