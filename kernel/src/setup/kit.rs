//! The kit: everything that cells compile against, built once and found again.
//!
//! A kit is one folder under the user's data folder, named after a hash of its sources and compiler. It holds the prelude as
//! one shared library, the metadata of every crate inside it, copies of what decided how it was
//! built, and `kit.json`, which is the [`Kit`] itself. A folder is written under another name and
//! renamed, so a folder with a `kit.json` is always whole.

use std::collections::BTreeMap;
use std::fs::{self, File};
use std::path::{Path, PathBuf};
use std::sync::Mutex;
use std::time::{Duration, SystemTime};

use serde::{Deserialize, Serialize};

use super::compiler::Compiler;
use super::error::SetupError;

pub use crate::worker::message::INTERFACE;

/// How long a kit that nobody started is kept beside the current one.
const KEEP_UNUSED: Duration = Duration::from_secs(30 * 24 * 60 * 60);

/// What cells compile against and run in.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Kit {
    /// The folder of this kit.
    pub dir: PathBuf,
    /// The hash of the prelude's library: two kits of one stamp run each other's cells.
    pub stamp: String,
    /// The version of the agreement between kernel and worker.
    pub interface: u32,
    /// The prelude as a shared library: what cells link and the worker loads.
    pub prelude: PathBuf,
    /// The folder for `-L dependency=`: the metadata of all crates, and the procedural macros.
    pub dependencies: PathBuf,
    /// The crates that a cell may name directly, with the metadata file of each.
    pub externs: BTreeMap<String, PathBuf>,
    /// The compiler itself, not the proxy that chooses one.
    pub rustc: PathBuf,
    /// What `rustc -vV` prints.
    pub rustc_version: String,
    /// Where the compiler keeps its standard library.
    pub sysroot: PathBuf,
    /// Every crate inside the prelude's library.
    pub packages: Vec<KitPackage>,
    /// The crates that only procedural macros and build scripts needed.
    pub host: Vec<KitPackage>,
    /// A copy of the `Cargo.lock` that the kit was built by.
    pub lock: PathBuf,
    /// The `[profile…]` sections of the workspace manifest.
    pub profile: String,
    /// Where cargo built it; extra dependencies of cells are built there too.
    pub target_dir: PathBuf,
    /// The index of the prelude's public names, as JSON.
    pub index: PathBuf,
    /// The workspace that it was built from.
    pub workspace: PathBuf,
    /// The hash of the sources alone, to tell a changed prelude from a changed compiler.
    pub sources: String,
    /// The compiler's file as it was then.
    pub compiler: Compiler,
}

/// One crate inside the prelude's library.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct KitPackage {
    /// The package's name.
    pub name: String,
    /// Its version.
    pub version: String,
    /// The features that it was compiled with.
    pub features: Vec<String>,
    /// The stem of its files: `lib<crate>-<hash>`.
    pub artifact: String,
}

impl Kit {
    /// Reads the kit in a folder back, if there is one and it is whole and of this interface.
    pub fn load(dir: &Path) -> Option<Self> {
        let text = fs::read(dir.join("kit.json")).ok()?;
        let kit: Self = serde_json::from_slice(&text).ok()?;
        let whole = kit.dir == dir
            && kit.interface == INTERFACE
            && [&kit.prelude, &kit.dependencies, &kit.lock, &kit.index].iter().all(|p| p.exists())
            && kit.externs.values().all(|file| file.exists());
        whole.then_some(kit)
    }

    /// Marks the kit as in use for as long as this process lives, so that no other removes it.
    ///
    /// # Errors
    /// The mark cannot be opened or locked.
    pub fn hold(&self) -> Result<(), SetupError> {
        static HELD: Mutex<Vec<File>> = Mutex::new(Vec::new());
        let mark = in_use(&self.dir);
        let file = File::options()
            .create(true)
            .truncate(false)
            .write(true)
            .open(&mark)
            .map_err(SetupError::files("open", &mark))?;
        file.lock_shared().map_err(SetupError::files("lock", &mark))?;
        // The time tells how long ago somebody started it; losing it costs a rebuild at worst.
        let _ = file.set_modified(SystemTime::now());
        HELD.lock().unwrap_or_else(|poisoned| poisoned.into_inner()).push(file);
        Ok(())
    }

    /// When somebody last started it.
    pub fn last_used(&self) -> Option<SystemTime> {
        fs::metadata(in_use(&self.dir)).and_then(|found| found.modified()).ok()
    }
}

/// The folder in which kits stand side by side.
#[derive(Debug, Clone)]
pub struct KitHome {
    /// `<data folder>/semiaxis/kits`
    pub kits: PathBuf,
    /// Where the answers of compilers are remembered.
    pub compilers: PathBuf,
}

impl KitHome {
    /// Under `$XDG_DATA_HOME`, or else `~/.local/share`.
    ///
    /// # Errors
    /// The environment names neither.
    pub fn find() -> Result<Self, SetupError> {
        let given = std::env::var_os("XDG_DATA_HOME").map(PathBuf::from);
        let home = std::env::var_os("HOME").map(PathBuf::from).filter(|home| home.is_absolute());
        let data = given
            .filter(|folder| folder.is_absolute())
            .or_else(|| home.map(|home| home.join(".local/share")))
            .ok_or(SetupError::NoDataFolder)?
            .join("semiaxis");
        Ok(Self { kits: data.join("kits"), compilers: data.join("compilers.json") })
    }

    /// The script by which cargo calls the compiler for the prelude.
    pub fn compile_script(&self) -> PathBuf {
        self.compilers.with_file_name("compile-prelude")
    }

    /// Where the compiler keeps parts of the prelude, so that a small change is compiled quickly.
    pub fn parts(&self) -> PathBuf {
        self.compilers.with_file_name("prelude-parts")
    }

    /// The folder of one kit.
    pub fn folder(&self, stamp: &str) -> PathBuf {
        self.kits.join(stamp)
    }

    /// The kits that are whole, the last used first.
    pub fn all(&self) -> Vec<Kit> {
        let entries = fs::read_dir(&self.kits).into_iter().flatten().flatten();
        let mut kits: Vec<Kit> = entries.filter_map(|entry| Kit::load(&entry.path())).collect();
        kits.sort_by_key(|kit| std::cmp::Reverse(kit.last_used()));
        kits
    }

    /// Removes what nobody can use again: unfinished folders, and kits that nobody started for a
    /// month. The caller holds the lock of the folder.
    pub fn prune(&self, current: &Path) {
        for entry in fs::read_dir(&self.kits).into_iter().flatten().flatten() {
            let dir = entry.path();
            if dir == current || !dir.is_dir() {
                continue;
            }
            let unfinished = entry.file_name().to_string_lossy().starts_with('.');
            if unfinished || is_abandoned(&dir) {
                // What cannot be removed now is tried again after the next build.
                let _ = fs::remove_dir_all(&dir);
            }
        }
    }
}

fn is_abandoned(dir: &Path) -> bool {
    let Ok(mark) = File::open(in_use(dir)) else { return true };
    let used = mark.metadata().and_then(|found| found.modified());
    let old = used.ok().and_then(|at| at.elapsed().ok()).is_some_and(|age| age > KEEP_UNUSED);
    old && mark.try_lock().is_ok()
}

fn in_use(dir: &Path) -> PathBuf {
    dir.join("in-use")
}

/// Where cargo builds a workspace, unless its configuration says otherwise.
pub fn target_dir(workspace: &Path) -> PathBuf {
    match std::env::var_os("CARGO_TARGET_DIR") {
        Some(given) => workspace.join(given),
        None => workspace.join("target"),
    }
}
