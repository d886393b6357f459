//! Registering the kernel, so that notebook clients offer it.
//!
//! A client finds a kernel by a folder `kernels/semiaxis` in one of its data folders, with a file
//! `kernel.json` that says how to start it and what to call it, and pictures for its launcher.
//! Registering again, after the program was moved or built anew, replaces what was there.
//!
//! Format: <https://jupyter-client.readthedocs.io/en/stable/kernels.html#kernel-specs>.

use std::collections::HashMap;
use std::fmt;
use std::io::{self, Write};
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};

use jupyter_protocol::JupyterKernelspec;
use serde_json::json;
use thiserror::Error;

/// The name that clients and notebooks know the kernel by.
pub const KERNEL_NAME: &str = "semiaxis";

/// The name that people see.
pub const DISPLAY_NAME: &str = "Semiaxis (Rust)";

/// The pictures, under the names that clients look for; `logo/draw.py` drew them.
const LOGOS: [(&str, &[u8]); 3] = [
    ("logo-svg.svg", include_bytes!("logo/logo-svg.svg")),
    ("logo-32x32.png", include_bytes!("logo/logo-32x32.png")),
    ("logo-64x64.png", include_bytes!("logo/logo-64x64.png")),
];

/// For whom the kernel is registered.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Place {
    /// For the user who asks: in the data folder of this user's clients.
    User,
    /// For a Python environment or a whole machine: in `<prefix>/share/jupyter`.
    Prefix(PathBuf),
}

/// What was registered.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Installed {
    /// The folder that clients will find.
    pub folder: PathBuf,
    /// The program they will start.
    pub program: PathBuf,
    /// Whether the kernel was registered there before.
    pub replaced: bool,
}

impl fmt::Display for Installed {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let again = if self.replaced { "again " } else { "" };
        write!(
            f,
            "registered {again}as '{KERNEL_NAME}' in {}\n\
             notebook clients now offer \"{DISPLAY_NAME}\" and start {}",
            self.folder.display(),
            self.program.display()
        )
    }
}

/// Why the kernel could not be registered.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum InstallError {
    /// The environment names no folder of this user.
    #[error(
        "found no data folder of this user: none of JUPYTER_DATA_DIR, XDG_DATA_HOME and HOME is \
         set; name a folder with --prefix"
    )]
    NoUserFolder,
    /// The system does not say where this program is.
    #[error("cannot find out where this program is: {source}")]
    NoProgram {
        /// What the system said.
        source: io::Error,
    },
    /// The path of this program cannot stand in a JSON file.
    #[error("the path of this program, {}, is not valid unicode; move it to one that is", path.display())]
    StrangePath {
        /// Where the program is.
        path: PathBuf,
    },
    /// A folder or file cannot be written.
    #[error("cannot write {}: {source}", path.display())]
    Unwritable {
        /// The folder or file.
        path: PathBuf,
        /// What the system said.
        source: io::Error,
    },
}

/// Registers this program as a kernel.
///
/// # Errors
///
/// An [`InstallError`] that names the folder or file at fault. What was registered before stays
/// usable unless its `kernel.json` was the file that failed.
pub fn install(place: &Place) -> Result<Installed, InstallError> {
    let program = std::env::current_exe().map_err(|source| InstallError::NoProgram { source })?;
    let data = match place {
        Place::User => user_data(|name| std::env::var_os(name).map(PathBuf::from))
            .ok_or(InstallError::NoUserFolder)?,
        Place::Prefix(prefix) => prefix.join("share").join("jupyter"),
    };
    install_into(&data, &program)
}

/// The data folder of a user's clients, as the clients find it themselves.
fn user_data(variable: impl Fn(&str) -> Option<PathBuf>) -> Option<PathBuf> {
    let set = |name| variable(name).filter(|path| !path.as_os_str().is_empty());
    if let Some(data) = set("JUPYTER_DATA_DIR") {
        return Some(data);
    }
    let home = || set("HOME");
    if cfg!(target_os = "macos") {
        return home().map(|home| home.join("Library").join("Jupyter"));
    }
    let data = set("XDG_DATA_HOME").or_else(|| home().map(|home| home.join(".local/share")));
    data.map(|data| data.join("jupyter"))
}

fn install_into(data: &Path, program: &Path) -> Result<Installed, InstallError> {
    let spec = kernelspec(program)?;
    let folder = data.join("kernels").join(KERNEL_NAME);
    let replaced = folder.join("kernel.json").exists();
    std::fs::create_dir_all(&folder)
        .map_err(|source| InstallError::Unwritable { path: folder.clone(), source })?;
    for (name, picture) in LOGOS {
        write(&folder.join(name), picture)?;
    }
    // Last, because clients take the folder for a kernel as soon as this file is there.
    write(&folder.join("kernel.json"), &spec)?;
    Ok(Installed { folder, program: program.to_owned(), replaced })
}

fn kernelspec(program: &Path) -> Result<Vec<u8>, InstallError> {
    let Some(path) = program.to_str() else {
        return Err(InstallError::StrangePath { path: program.to_owned() });
    };
    let spec = JupyterKernelspec {
        argv: vec![path.to_owned(), "kernel".to_owned(), "{connection_file}".to_owned()],
        display_name: DISPLAY_NAME.to_owned(),
        language: "rust".to_owned(),
        metadata: Some(HashMap::from([("debugger".to_owned(), json!(false))])),
        // An interrupt goes through the kernel, which stops the worker without losing the
        // session; a signal to the process group would reach the worker too.
        interrupt_mode: Some("message".to_owned()),
        env: Some(HashMap::new()),
    };
    // Strings, lists and maps with string keys can always be written as JSON.
    Ok(serde_json::to_vec_pretty(&spec).unwrap_or_default())
}

/// Writes a file whole or not at all, readable for everyone the folder lets in.
fn write(path: &Path, content: &[u8]) -> Result<(), InstallError> {
    let unwritable = |source| InstallError::Unwritable { path: path.to_owned(), source };
    let folder = path.parent().unwrap_or(Path::new("."));
    let mut file = tempfile::NamedTempFile::new_in(folder).map_err(unwritable)?;
    file.write_all(content).map_err(unwritable)?;
    let readable = std::fs::Permissions::from_mode(0o644);
    file.as_file().set_permissions(readable).map_err(unwritable)?;
    file.persist(path).map_err(|error| unwritable(error.error))?;
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn clients_find_a_kernelspec_they_can_start() {
        let prefix = tempfile::tempdir().unwrap();
        let installed = install(&Place::Prefix(prefix.path().to_owned())).unwrap();
        assert_eq!(installed.folder, prefix.path().join("share/jupyter/kernels/semiaxis"));
        assert!(!installed.replaced);
        let text = std::fs::read(installed.folder.join("kernel.json")).unwrap();
        let spec: serde_json::Value = serde_json::from_slice(&text).unwrap();
        let program = std::env::current_exe().unwrap();
        assert_eq!(
            spec,
            json!({
                "argv": [program, "kernel", "{connection_file}"],
                "display_name": "Semiaxis (Rust)", "language": "rust",
                "interrupt_mode": "message", "metadata": {"debugger": false}, "env": {}
            })
        );
        assert!(Path::new(spec["argv"][0].as_str().unwrap()).is_absolute());
        for (name, picture) in LOGOS {
            let file = installed.folder.join(name);
            assert_eq!(std::fs::read(&file).unwrap(), picture);
            assert_eq!(std::fs::metadata(&file).unwrap().permissions().mode() & 0o777, 0o644);
        }
        assert_eq!(std::fs::read_dir(&installed.folder).unwrap().count(), 4);
    }

    #[test]
    fn registering_again_replaces_what_was_there() {
        let data = tempfile::tempdir().unwrap();
        install_into(data.path(), Path::new("/old/semiaxis")).unwrap();
        let again = install_into(data.path(), Path::new("/new/semiaxis")).unwrap();
        assert!(again.replaced);
        let text = std::fs::read_to_string(again.folder.join("kernel.json")).unwrap();
        assert!(text.contains("/new/semiaxis") && !text.contains("/old"));
        let said = again.to_string();
        assert!(said.contains("again") && said.contains("/new/semiaxis"), "{said}");
    }

    #[test]
    fn the_users_folder_is_the_one_clients_look_in() {
        let with = |set: &[(&str, &str)]| {
            let set: HashMap<String, PathBuf> =
                set.iter().map(|(name, path)| (name.to_string(), path.into())).collect();
            user_data(move |name| set.get(name).cloned())
        };
        let home = ("HOME", "/home/u");
        let xdg = ("XDG_DATA_HOME", "/data");
        assert_eq!(with(&[home, xdg, ("JUPYTER_DATA_DIR", "/own")]).unwrap(), Path::new("/own"));
        assert_eq!(with(&[]), None);
        if !cfg!(target_os = "macos") {
            assert_eq!(with(&[home, xdg]).unwrap(), Path::new("/data/jupyter"));
            assert_eq!(with(&[home]).unwrap(), Path::new("/home/u/.local/share/jupyter"));
            assert_eq!(
                with(&[home, ("XDG_DATA_HOME", "")]).unwrap(),
                Path::new("/home/u/.local/share/jupyter")
            );
        }
    }

    #[test]
    fn a_folder_that_cannot_be_written_is_named() {
        let dir = tempfile::tempdir().unwrap();
        let file = dir.path().join("share");
        std::fs::write(&file, "in the way").unwrap();
        let error = install(&Place::Prefix(dir.path().to_owned())).unwrap_err();
        assert!(error.to_string().contains("share/jupyter/kernels/semiaxis"), "{error}");
    }

    #[test]
    fn the_pictures_have_the_sizes_their_names_say() {
        for (name, side) in [("logo-32x32.png", 32_u32), ("logo-64x64.png", 64)] {
            let (_, picture) = LOGOS.iter().find(|(logo, _)| *logo == name).unwrap();
            assert_eq!(&picture[..8], b"\x89PNG\r\n\x1a\n");
            // Width and height are the first two numbers of the header chunk (PNG, 11.2.2).
            assert_eq!(picture[16..20], side.to_be_bytes());
            assert_eq!(picture[20..24], side.to_be_bytes());
        }
    }
}
