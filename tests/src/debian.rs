//! Programs that some tests need and Debian has: installed by the tests where they may, named
//! clearly where they may not.

use std::fs::File;
use std::process::{Command, Stdio};

/// Makes sure that a command succeeds, installing Debian's packages if it does not.
///
/// # Panics
/// When the command fails and the packages cannot be installed, with what to install.
pub fn need(probe: &[&str], packages: &[&str]) {
    if works(probe) {
        return;
    }
    // Two tests may find the same thing missing.
    let lock = std::env::temp_dir().join("semiaxis-tests-install.lock");
    let lock = File::create(lock).expect("a lock file can be made");
    lock.lock().expect("the lock file can be locked");
    if works(probe) {
        return;
    }
    let names = packages.join(" ");
    // SAFETY: the call takes nothing and cannot fail.
    let is_root = unsafe { libc::geteuid() } == 0;
    assert!(
        is_root && works(&["apt-get", "--version"]),
        "this test needs `{}` to work; install it first, on Debian by `apt-get install {names}`",
        probe.join(" ")
    );
    run(&["apt-get", "update", "--quiet"]);
    let install = ["apt-get", "install", "--yes", "--quiet", "--no-install-recommends"];
    run(&[&install[..], packages].concat());
    assert!(works(probe), "`{}` does not work even with {names} installed", probe.join(" "));
}

/// The browser.
pub fn browser() -> &'static str {
    need(&["chromium", "--version"], &["chromium", "fonts-dejavu-core"]);
    "chromium"
}

fn works(command: &[&str]) -> bool {
    let status = Command::new(command[0])
        .args(&command[1..])
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .status();
    status.is_ok_and(|status| status.success())
}

fn run(command: &[&str]) {
    let output = Command::new(command[0])
        .args(&command[1..])
        .env("DEBIAN_FRONTEND", "noninteractive")
        .output()
        .unwrap_or_else(|e| panic!("{} cannot be started: {e}", command[0]));
    assert!(
        output.status.success(),
        "{} failed, {}\n{}",
        command.join(" "),
        output.status,
        String::from_utf8_lossy(&output.stderr)
    );
}
