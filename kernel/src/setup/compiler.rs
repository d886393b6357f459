//! Which compiler builds cells, found without starting it whenever it was found before.
//!
//! The `rustc` on `PATH` is often a proxy that chooses a toolchain by environment, settings and files.
//! Asking it costs a process or two, so the answer is remembered under a hash of everything that
//! decides the choice, and believed as long as the compiler's own file is the one that answered.

use std::collections::BTreeMap;
use std::env;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::time::UNIX_EPOCH;

use serde::{Deserialize, Serialize};

use super::error::SetupError;

/// A compiler, with what tells whether its file is still the same.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Compiler {
    /// The compiler itself, not the proxy that chooses one.
    pub rustc: PathBuf,
    /// What `rustc -vV` prints.
    pub version: String,
    /// Where it keeps its standard library.
    pub sysroot: PathBuf,
    /// The size of its file in bytes.
    size: u64,
    /// When its file was last written, in nanoseconds since 1970.
    modified: u64,
}

impl Compiler {
    /// The compiler that cargo would use in the workspace.
    ///
    /// # Errors
    /// There is none, it does not answer, or it is older than `needed`.
    pub fn find(workspace: &Path, memory: &Path, needed: &str) -> Result<Self, SetupError> {
        let command = command_path("rustc").ok_or_else(|| SetupError::NoCompiler {
            cargo_bin: cargo_bin().unwrap_or_else(|| PathBuf::from("~/.cargo/bin")),
            needed: needed.to_owned(),
        })?;
        let choice = choice(&command, workspace);
        let mut remembered = read_memory(memory);
        let compiler = match remembered.get(&choice).filter(|known| known.is_unchanged()) {
            Some(known) => known.clone(),
            None => {
                let asked = Self::ask(&command, workspace)?;
                remembered.retain(|_, known| known.is_unchanged());
                remembered.insert(choice, asked.clone());
                // A memory that cannot be written costs the next start some milliseconds, no more.
                let _ = write_memory(memory, &remembered);
                asked
            }
        };
        compiler.check_release(needed)?;
        Ok(compiler)
    }

    /// Whether its file has the size and the time that it had when it answered.
    pub fn is_unchanged(&self) -> bool {
        file_identity(&self.rustc) == Some((self.size, self.modified))
    }

    /// Its release, such as `1.95.0`; empty if it did not say.
    pub fn release(&self) -> &str {
        self.field("release: ")
    }

    /// The platform that it runs on and builds for.
    pub fn host(&self) -> &str {
        self.field("host: ")
    }

    fn field(&self, key: &str) -> &str {
        self.version.lines().find_map(|line| line.strip_prefix(key)).unwrap_or_default().trim()
    }

    fn ask(command: &Path, workspace: &Path) -> Result<Self, SetupError> {
        let version = answer(command, &["-vV"], workspace)?;
        let sysroot = PathBuf::from(answer(command, &["--print", "sysroot"], workspace)?.trim());
        let beside = sysroot.join("bin").join("rustc");
        let rustc = if beside.is_file() { beside } else { command.to_owned() };
        let (size, modified) = file_identity(&rustc).ok_or_else(|| SetupError::NotACompiler {
            path: command.to_owned(),
            said: format!("it names {}, which cannot be read", rustc.display()),
        })?;
        let compiler = Self { rustc, version, sysroot, size, modified };
        if compiler.release().is_empty() || compiler.host().is_empty() {
            return Err(SetupError::NotACompiler {
                path: command.to_owned(),
                said: first_line(&compiler.version),
            });
        }
        Ok(compiler)
    }

    fn check_release(&self, needed: &str) -> Result<(), SetupError> {
        if numbers(self.release()) >= numbers(needed) {
            return Ok(());
        }
        Err(SetupError::OldCompiler {
            path: self.rustc.clone(),
            found: self.release().to_owned(),
            needed: needed.to_owned(),
        })
    }
}

/// A program by its name, from `PATH` and then from where rustup puts it: a client started from a
/// desktop often has a `PATH` without that folder.
pub fn command_path(name: &str) -> Option<PathBuf> {
    let path = env::var_os("PATH").unwrap_or_default();
    env::split_paths(&path)
        .chain(cargo_bin())
        .map(|folder| folder.join(name))
        .find(|file| is_executable(file))
}

fn cargo_bin() -> Option<PathBuf> {
    let home = env::var_os("CARGO_HOME")
        .map(PathBuf::from)
        .or_else(|| env::var_os("HOME").map(|home| Path::new(&home).join(".cargo")))?;
    Some(home.join("bin"))
}

fn is_executable(file: &Path) -> bool {
    use std::os::unix::fs::PermissionsExt;
    fs::metadata(file).is_ok_and(|found| found.is_file() && found.permissions().mode() & 0o111 != 0)
}

/// Everything that decides which toolchain a proxy chooses, hashed.
fn choice(command: &Path, workspace: &Path) -> String {
    let mut hasher = blake3::Hasher::new();
    let mut add = |bytes: &[u8]| {
        hasher.update(&(bytes.len() as u64).to_le_bytes());
        hasher.update(bytes);
    };
    add(command.as_os_str().as_encoded_bytes());
    add(format!("{:?}", file_identity(command)).as_bytes());
    add(env::var_os("RUSTUP_TOOLCHAIN").unwrap_or_default().as_encoded_bytes());
    let rustup = env::var_os("RUSTUP_HOME")
        .map(PathBuf::from)
        .or_else(|| env::var_os("HOME").map(|home| Path::new(&home).join(".rustup")));
    add(rustup.as_deref().unwrap_or(Path::new("")).as_os_str().as_encoded_bytes());
    if let Some(settings) = rustup.and_then(|home| fs::read(home.join("settings.toml")).ok()) {
        add(&settings);
    }
    for folder in workspace.ancestors() {
        for name in ["rust-toolchain", "rust-toolchain.toml"] {
            if let Ok(file) = fs::read(folder.join(name)) {
                add(&file);
            }
        }
    }
    hasher.finalize().to_hex()[..24].to_owned()
}

fn answer(command: &Path, arguments: &[&str], workspace: &Path) -> Result<String, SetupError> {
    let failed = |said: String| SetupError::NotACompiler { path: command.to_owned(), said };
    let mut asking = Command::new(command);
    asking.args(arguments);
    // The proxy reads the toolchain file of the folder that it is started in.
    if workspace.is_dir() {
        asking.current_dir(workspace);
    }
    let output = asking.output().map_err(|error| failed(error.to_string()))?;
    if !output.status.success() {
        let said = first_line(&String::from_utf8_lossy(&output.stderr));
        return Err(failed(if said.is_empty() { output.status.to_string() } else { said }));
    }
    String::from_utf8(output.stdout).map_err(|_| failed("bytes that are not text".to_owned()))
}

fn first_line(text: &str) -> String {
    text.lines().find(|line| !line.trim().is_empty()).unwrap_or("nothing").trim().to_owned()
}

fn file_identity(path: &Path) -> Option<(u64, u64)> {
    let found = fs::metadata(path).ok()?;
    let modified = found.modified().ok()?.duration_since(UNIX_EPOCH).ok()?;
    Some((found.len(), u64::try_from(modified.as_nanos()).ok()?))
}

/// The numbers of a release, so that 1.100 follows 1.95; a suffix such as `-nightly` is left out.
fn numbers(release: &str) -> (u32, u32, u32) {
    let plain = release.split(['-', '+']).next().unwrap_or_default();
    let mut parts = plain.split('.').map(|part| part.parse().unwrap_or(0));
    let mut next = || parts.next().unwrap_or(0);
    (next(), next(), next())
}

fn read_memory(memory: &Path) -> BTreeMap<String, Compiler> {
    fs::read(memory).ok().and_then(|text| serde_json::from_slice(&text).ok()).unwrap_or_default()
}

fn write_memory(memory: &Path, known: &BTreeMap<String, Compiler>) -> std::io::Result<()> {
    let folder = memory.parent().unwrap_or(Path::new("."));
    fs::create_dir_all(folder)?;
    let mut file = tempfile::NamedTempFile::new_in(folder)?;
    serde_json::to_writer_pretty(&mut file, known)?;
    file.persist(memory)?;
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn compiler(version: &str) -> Compiler {
        Compiler {
            rustc: PathBuf::from("rustc"),
            version: version.to_owned(),
            sysroot: PathBuf::new(),
            size: 0,
            modified: 0,
        }
    }

    #[test]
    fn releases_are_compared_by_number() {
        // The layout of `rustc -vV` is the compiler's own.
        let version =
            "rustc 1.100.0 (abc 2027-01-01)\nhost: x86_64-unknown-linux-gnu\nrelease: 1.100.0\n";
        assert_eq!(compiler(version).release(), "1.100.0");
        assert!(compiler(version).check_release("1.95").is_ok());
        assert!(compiler("release: 1.95.0-nightly\n").check_release("1.95").is_ok());
        let refused = compiler("release: 1.80.1\n").check_release("1.95").unwrap_err();
        assert!(refused.to_string().contains("is release 1.80.1, but the prelude needs 1.95"));
    }

    #[test]
    fn something_else_called_rustc_is_refused_with_its_words() {
        let folder = tempfile::tempdir().unwrap();
        let impostor = folder.path().join("rustc");
        fs::write(&impostor, "#!/bin/sh\necho not today >&2\nexit 3\n").unwrap();
        use std::os::unix::fs::PermissionsExt;
        fs::set_permissions(&impostor, fs::Permissions::from_mode(0o755)).unwrap();
        let error = Compiler::ask(&impostor, folder.path()).unwrap_err();
        assert!(
            error.to_string().contains("does not answer as a rust compiler: not today"),
            "{error}"
        );
    }
}
