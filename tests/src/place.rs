//! Where things are: the workspace, the folder of its build, the cargo that runs the tests.

use std::path::{Path, PathBuf};

/// The top of the workspace.
pub fn workspace() -> PathBuf {
    let tests = Path::new(env!("CARGO_MANIFEST_DIR"));
    tests.parent().expect("the tests stand inside the workspace").to_owned()
}

/// The folder that the tests were built into (`target`, unless cargo was told another).
pub fn target_dir() -> PathBuf {
    // A test is target/<profile>/deps/<name>.
    let test = std::env::current_exe().expect("a running test knows its own file");
    test.ancestors().nth(3).expect("a test stands three folders deep").to_owned()
}

/// The folder for what the tests leave behind to be looked at.
pub fn leavings() -> PathBuf {
    let folder = target_dir().join("tests-leave");
    std::fs::create_dir_all(&folder).expect("the folder of the build can be written");
    folder
}

/// The cargo that runs the tests.
pub fn cargo() -> PathBuf {
    std::env::var_os("CARGO").map_or_else(|| PathBuf::from("cargo"), PathBuf::from)
}
