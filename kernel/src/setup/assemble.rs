//! Putting a kit's folder together from what cargo built.
//!
//! Files are hard links where the file system allows it (0.6 GB would otherwise be there twice); the
//! prelude's own library is always copied, because a linker may write a new one into the old file
//! while a running worker has it mapped. Everything happens in a folder with a name of its own that
//! is renamed at the end.

use std::collections::BTreeMap;
use std::fs;
use std::io::Write;
use std::path::{Path, PathBuf};

use super::build::{Artifact, Built};
use super::compiler::Compiler;
use super::error::SetupError;
use super::index::{self, Source};
use super::kit::{INTERFACE, Kit, KitHome, KitPackage};
use super::stamp::{DIGITS, Sources};

/// The crates that a cell may name without asking for them in its header.
const NAMED: [&str; 5] = ["polars", "nalgebra", "rand", "rand_distr", "rayon"];

/// The types of other crates whose methods are indexed: what analysts hold in variables.
const TYPES: [(&str, &[&str]); 4] = [
    ("polars-core", &["DataFrame", "Series", "Column"]),
    ("polars-lazy", &["LazyFrame"]),
    ("polars-plan", &["Expr"]),
    ("nalgebra", &["Matrix"]),
];

/// Writes the kit and puts it in its place.
///
/// # Errors
/// Files cannot be written, or cargo's report lacks a crate that cells may name.
pub fn assemble(
    home: &KitHome,
    workspace: &Path,
    sources: &Sources,
    compiler: &Compiler,
    built: &Built,
) -> Result<Kit, SetupError> {
    let dir = home.folder(&sources.stamp(compiler));
    let building = home.kits.join(format!(".building-{}", std::process::id()));
    remove(&building)?;
    let outcome = fill(&building, &dir, workspace, sources, compiler, built);
    let kit = match outcome {
        Ok(kit) => kit,
        Err(error) => {
            // The first failure is the one to report; what is left is removed after the next build.
            let _ = fs::remove_dir_all(&building);
            return Err(error);
        }
    };
    remove(&dir)?;
    fs::rename(&building, &dir).map_err(SetupError::files("put in place", &dir))?;
    Ok(kit)
}

fn fill(
    building: &Path,
    dir: &Path,
    workspace: &Path,
    sources: &Sources,
    compiler: &Compiler,
    built: &Built,
) -> Result<Kit, SetupError> {
    let dependencies = building.join("dependencies");
    fs::create_dir_all(&dependencies).map_err(SetupError::files("create", &dependencies))?;

    let mut packages = Vec::new();
    let mut externs = BTreeMap::new();
    for artifact in &built.artifacts {
        let Some(file) = linked_file(artifact, &built.dylib) else { continue };
        let is_library = file.extension().is_some_and(|end| end == "rmeta");
        if is_library && artifact.profile.opt_level == "0" {
            continue;
        }
        let name = file.file_name().unwrap_or_default();
        link_or_copy(file, &dependencies.join(name))?;
        let inside = built.inside.get(&artifact.package_id).filter(|_| is_library);
        if let Some(package) = inside {
            let crate_name = artifact.target.name.replace('-', "_");
            if NAMED.contains(&crate_name.as_str()) {
                externs.insert(crate_name, dir.join("dependencies").join(name));
            }
            packages.push(KitPackage {
                name: package.name.clone(),
                version: package.version.clone(),
                features: artifact.features.clone(),
                artifact: file.file_stem().unwrap_or_default().to_string_lossy().into_owned(),
            });
        }
    }
    if let Some(missing) = NAMED.iter().find(|name| !externs.contains_key(**name)) {
        return Err(SetupError::UnexpectedBuild { what: format!("the crate {missing}") });
    }
    packages.sort_by(|a, b| (&a.name, &a.version).cmp(&(&b.name, &b.version)));

    let library = built.dylib.file_name().unwrap_or_default();
    copy(&built.dylib, &building.join(library))?;
    let lock = workspace.join("Cargo.lock");
    copy(&lock, &building.join("Cargo.lock"))?;
    let names = index::read_sources(&indexed(workspace, built))?;
    write_json(&building.join("index.json"), &names)?;
    write(&building.join("in-use"), b"")?;

    let kit = Kit {
        dir: dir.to_owned(),
        stamp: library_stamp(&built.dylib)?,
        interface: INTERFACE,
        prelude: dir.join(library),
        dependencies: dir.join("dependencies"),
        externs,
        rustc: compiler.rustc.clone(),
        rustc_version: compiler.version.clone(),
        sysroot: compiler.sysroot.clone(),
        packages,
        host: host_packages(&built.artifacts),
        lock: dir.join("Cargo.lock"),
        profile: sources.profile.clone(),
        target_dir: built.target_dir.clone(),
        index: dir.join("index.json"),
        workspace: workspace.to_owned(),
        sources: sources.hash.clone(),
        compiler: compiler.clone(),
    };
    write_json(&building.join("kit.json"), &kit)?;
    Ok(kit)
}

/// The hash of the library itself. Equal sources built in another folder make a library with other
/// symbols, and a cell compiled against the one does not load with the other.
fn library_stamp(library: &Path) -> Result<String, SetupError> {
    let mut hasher = blake3::Hasher::new();
    let mut file = fs::File::open(library).map_err(SetupError::files("read", library))?;
    std::io::copy(&mut file, &mut hasher).map_err(SetupError::files("read", library))?;
    Ok(hasher.finalize().to_hex()[..DIGITS].to_owned())
}

/// The sources that the index of names is made from.
fn indexed<'a>(workspace: &Path, built: &'a Built) -> Vec<Source<'a>> {
    let root = workspace.join("prelude").join("src").join("lib.rs");
    let mut sources = vec![Source { name: "semiaxis", root, features: &[], types: &[] }];
    for (name, types) in TYPES {
        let package = built.inside.values().find(|package| package.name == name);
        let artifact = package.and_then(|package| {
            let same = |artifact: &&Artifact| artifact.package_id == package.id;
            built.artifacts.iter().filter(same).max_by_key(|artifact| artifact.features.len())
        });
        // A prelude that no longer stands on one of them has nothing to index there.
        if let (Some(package), Some(artifact)) = (package, artifact) {
            let root = package.manifest_path.with_file_name("src").join("lib.rs");
            sources.push(Source { name, root, features: &artifact.features, types });
        }
    }
    sources
}

/// The one file of an artifact that compiling a cell reads: the metadata of a library, the shared
/// library of a procedural macro. The prelude itself is no dependency.
fn linked_file<'a>(artifact: &'a Artifact, dylib: &Path) -> Option<&'a PathBuf> {
    if artifact.filenames.iter().any(|file| file == dylib) {
        return None;
    }
    let is_macro = artifact.target.kind.iter().any(|kind| kind == "proc-macro");
    let wanted = if is_macro { std::env::consts::DLL_EXTENSION } else { "rmeta" };
    artifact.filenames.iter().find(|file| file.extension().is_some_and(|end| end == wanted))
}

fn link_or_copy(from: &Path, to: &Path) -> Result<(), SetupError> {
    match fs::hard_link(from, to) {
        Ok(()) => Ok(()),
        // Another file system, or one that knows no links.
        Err(_) => copy(from, to),
    }
}

fn copy(from: &Path, to: &Path) -> Result<(), SetupError> {
    fs::copy(from, to).map(drop).map_err(SetupError::files("copy to", to))
}

fn write_json(path: &Path, value: &impl serde::Serialize) -> Result<(), SetupError> {
    let text = serde_json::to_vec_pretty(value)
        .map_err(|error| SetupError::files("write", path)(error.into()))?;
    write(path, &text)
}

fn write(path: &Path, bytes: &[u8]) -> Result<(), SetupError> {
    let mut file = fs::File::create(path).map_err(SetupError::files("create", path))?;
    file.write_all(bytes).map_err(SetupError::files("write", path))
}

fn remove(dir: &Path) -> Result<(), SetupError> {
    match fs::remove_dir_all(dir) {
        Err(error) if error.kind() != std::io::ErrorKind::NotFound => {
            Err(SetupError::files("remove", dir)(error))
        }
        _ => Ok(()),
    }
}

/// The crates behind procedural macros and build scripts, and the macros themselves. Cargo's name of
/// a package ends in `#name@version`.
fn host_packages(artifacts: &[Artifact]) -> Vec<KitPackage> {
    let packages = artifacts.iter().filter(|artifact| {
        artifact.profile.opt_level == "0"
            && !artifact.target.kind.iter().any(|kind| kind == "custom-build")
    });
    let mut packages: Vec<KitPackage> = packages
        .filter_map(|artifact| {
            let (name, version) = artifact.package_id.rsplit_once('#')?.1.rsplit_once('@')?;
            Some(KitPackage {
                name: name.to_owned(),
                version: version.to_owned(),
                features: artifact.features.clone(),
                artifact: String::new(),
            })
        })
        .collect();
    packages.sort_by(|a, b| (&a.name, &a.version).cmp(&(&b.name, &b.version)));
    packages
}
