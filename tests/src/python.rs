//! Python for the tests of notebook clients: a virtual environment that the tests make themselves.

use std::fs::File;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use crate::{debian, place};

/// A virtual environment with everything that `clients/requirements.txt` names.
#[derive(Debug, Clone)]
pub struct Python {
    folder: PathBuf,
}

impl Python {
    /// The environment, made on first use; tests that want it at the same time wait for one
    /// another.
    ///
    /// # Panics
    /// When there is no Python, or its packages cannot be installed, with what was said.
    pub fn prepare() -> Python {
        let requirements = folder().join("requirements.txt");
        let wanted = std::fs::read_to_string(&requirements)
            .unwrap_or_else(|e| panic!("{}: {e}", requirements.display()));
        let parent = place::target_dir().join("tests-python");
        std::fs::create_dir_all(&parent).expect("the folder of the build can be written");
        let lock = File::create(parent.join("lock")).expect("a lock file can be made");
        lock.lock().expect("the lock file can be locked");

        // An environment made halfway, or for other requirements, is made again.
        let python = Python { folder: parent.join("environment") };
        let made_for = parent.join("made-for.txt");
        if std::fs::read_to_string(&made_for).is_ok_and(|made| made == wanted)
            && python.executable().exists()
        {
            return python;
        }
        if python.folder.exists() {
            std::fs::remove_dir_all(&python.folder).expect("an old environment can be removed");
        }
        debian::need(&["python3", "-c", "import venv, ensurepip"], &["python3", "python3-venv"]);
        let mut venv = Command::new("python3");
        succeed(venv.args(["-m", "venv"]).arg(&python.folder));
        let mut pip = python.command(["-m", "pip", "install", "--quiet"]);
        succeed(pip.args(["--disable-pip-version-check", "--requirement"]).arg(&requirements));
        std::fs::write(made_for, wanted).expect("the folder of the build can be written");
        python
    }

    /// The folder of the environment.
    pub fn folder(&self) -> &Path {
        &self.folder
    }

    /// The interpreter.
    pub fn executable(&self) -> PathBuf {
        self.folder.join("bin/python3")
    }

    /// A command that the interpreter will run with these arguments.
    ///
    /// Settings and kernels of the person who runs the tests are kept out of it.
    pub fn command<'a>(&self, arguments: impl IntoIterator<Item = &'a str>) -> Command {
        let mut command = Command::new(self.executable());
        command.args(arguments);
        for name in ["PYTHONPATH", "PYTHONHOME", "JUPYTER_PATH", "JUPYTER_CONFIG_PATH"] {
            command.env_remove(name);
        }
        let own = self.folder.join("own");
        command.env("JUPYTER_CONFIG_DIR", own.join("config"));
        command.env("JUPYTER_DATA_DIR", own.join("data"));
        command.env("JUPYTER_NO_CONFIG", "1");
        command
    }

    /// A command that runs one of the scripts in `clients/`.
    pub fn script(&self, name: &str) -> Command {
        let script = folder().join(name);
        self.command([script.to_str().expect("the project stands in a folder with a plain name")])
    }
}

/// The folder of the clients' scripts.
pub fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("clients")
}

/// Runs a command and returns its output.
///
/// # Panics
/// When it cannot be started or fails, with all that it said.
pub fn succeed(command: &mut Command) -> Output {
    let output = command.output().unwrap_or_else(|e| panic!("{command:?} cannot be started: {e}"));
    assert!(
        output.status.success(),
        "{command:?} failed, {}\n{}\n{}",
        output.status,
        String::from_utf8_lossy(&output.stdout),
        String::from_utf8_lossy(&output.stderr)
    );
    output
}
