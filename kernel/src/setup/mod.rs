//! What must be there before the first cell: the kit that cells compile against, and the entry by
//! which clients find the kernel.
//!
//! Cells never go through cargo. Cargo builds the prelude once, as a shared library, from the
//! workspace that this program was built from; the result is kept as a *kit* and found again by a
//! stamp of everything that decided how it was built. A warm start reads sources and one JSON file
//! and starts no process.

pub mod assemble;
pub mod build;
pub mod compiler;
pub mod error;
pub mod graph;
pub mod index;
pub mod install;
pub mod kit;
pub mod progress;
pub mod stamp;
mod syntax;

use std::fs::{self, File, TryLockError};
use std::path::{Path, PathBuf};
use std::time::Instant;

pub use compiler::command_path;
pub use error::SetupError;
pub use kit::{Kit, KitHome};
pub use progress::{Reporter, SetupEvent};

use compiler::Compiler;
use progress::Reason;
use stamp::Sources;

/// Finds the kit for the sources and the compiler of now, or builds it.
///
/// # Errors
/// There is no usable compiler, the build fails, or the kit cannot be written; see [`SetupError`].
pub fn ensure(progress: &mut dyn FnMut(SetupEvent)) -> Result<Kit, SetupError> {
    let kernel = Path::new(env!("CARGO_MANIFEST_DIR"));
    let workspace = kernel.parent().unwrap_or(kernel).to_owned();
    ensure_at(&Place { home: KitHome::find()?, workspace, target_dir: None }, progress)
}

/// Where kits are kept and what they are built from.
pub struct Place {
    /// The folder of kits.
    pub home: KitHome,
    /// The workspace with the prelude.
    pub workspace: PathBuf,
    /// A folder for cargo's files instead of the one that cargo chooses.
    pub target_dir: Option<PathBuf>,
}

/// As [`ensure`], for a given place.
///
/// # Errors
/// As [`ensure`].
pub fn ensure_at(place: &Place, progress: &mut dyn FnMut(SetupEvent)) -> Result<Kit, SetupError> {
    let started = Instant::now();
    let mut kit = match find(&place.home, &place.workspace)? {
        Found::Kit(kit) => *kit,
        Found::Missing { sources, compiler } => build_once(place, &sources, &compiler, progress)?,
    };
    if !kit.target_dir.is_dir() {
        // What cargo built was cleaned away; extra dependencies start afresh in this workspace.
        kit.target_dir =
            place.target_dir.clone().unwrap_or_else(|| kit::target_dir(&place.workspace));
    }
    kit.hold()?;
    progress(SetupEvent::Ready { elapsed: started.elapsed() });
    Ok(kit)
}

enum Found {
    Kit(Box<Kit>),
    Missing { sources: Sources, compiler: Compiler },
}

fn find(home: &KitHome, workspace: &Path) -> Result<Found, SetupError> {
    let Some(sources) = Sources::read(workspace)? else {
        let left = home
            .all()
            .into_iter()
            .find(|kit| kit.workspace == workspace && kit.compiler.is_unchanged());
        return left.map(|kit| Found::Kit(Box::new(kit))).ok_or_else(|| SetupError::NoSources {
            workspace: workspace.to_owned(),
            kits: home.kits.clone(),
        });
    };
    let compiler = match Compiler::find(workspace, &home.compilers, &sources.needed) {
        Ok(compiler) => compiler,
        Err(error) => {
            // A kit knows its compiler, so cells can be compiled even where `PATH` leads to none.
            let usable = home
                .all()
                .into_iter()
                .find(|kit| kit.sources == sources.hash && kit.compiler.is_unchanged());
            return usable.map(|kit| Found::Kit(Box::new(kit))).ok_or(error);
        }
    };
    let kit = Kit::load(&home.folder(&sources.stamp(&compiler)));
    Ok(match kit.filter(|kit| kit.compiler.is_unchanged()) {
        Some(kit) => Found::Kit(Box::new(kit)),
        None => Found::Missing { sources, compiler },
    })
}

/// Builds the kit while holding the lock of the folder, so that of two kernels that start at once on
/// a cold folder one builds and the other waits.
fn build_once(
    place: &Place,
    sources: &Sources,
    compiler: &Compiler,
    progress: &mut dyn FnMut(SetupEvent),
) -> Result<Kit, SetupError> {
    let Place { home, workspace, .. } = place;
    fs::create_dir_all(&home.kits).map_err(SetupError::files("create", &home.kits))?;
    let path = home.kits.join("lock");
    let lock = File::create(&path).map_err(SetupError::files("open", &path))?;
    match lock.try_lock() {
        Ok(()) => {}
        Err(TryLockError::WouldBlock) => {
            let reason = "another kernel, which is building the prelude".to_owned();
            progress(SetupEvent::Waiting { reason });
            lock.lock().map_err(SetupError::files("lock", &path))?;
        }
        Err(TryLockError::Error(error)) => return Err(SetupError::files("lock", &path)(error)),
    }
    let name = sources.stamp(compiler);
    let dir = home.folder(&name);
    if let Some(kit) = Kit::load(&dir).filter(|kit| kit.compiler.is_unchanged()) {
        return Ok(kit);
    }
    progress(SetupEvent::Needed(reason(home, &dir, compiler)));
    let built = build::build(place, compiler, &name, progress)?;
    progress(SetupEvent::Assembling);
    let kit = assemble::assemble(home, workspace, sources, compiler, &built)?;
    home.prune(&kit.dir);
    Ok(kit)
}

fn reason(home: &KitHome, dir: &Path, compiler: &Compiler) -> Reason {
    if dir.exists() {
        return Reason::Incomplete;
    }
    match home.all().first() {
        None => Reason::FirstBuild,
        Some(last) if last.compiler.version != compiler.version => Reason::CompilerChanged {
            from: last.compiler.release().to_owned(),
            to: compiler.release().to_owned(),
        },
        Some(_) => Reason::SourcesChanged,
    }
}

#[cfg(test)]
mod tests;
