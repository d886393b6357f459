//! The worker process itself: it loads the prelude and calls one function in it.

use std::os::fd::RawFd;
use std::path::Path;

use super::message::{ENTRY, linker_words};

/// Runs the worker until the kernel lets go of it; gives the exit status.
pub fn main(prelude: &Path, commands: RawFd, reports: RawFd) -> i32 {
    for descriptor in [commands, reports] {
        // Processes that a cell starts must not hold the worker's pipes open.
        // SAFETY: setting a flag on a descriptor number; a bad number is an error, nothing more.
        unsafe { libc::fcntl(descriptor, libc::F_SETFD, libc::FD_CLOEXEC) };
    }
    // SAFETY: the prelude is a Rust library; it has no initializers of its own.
    let library = match unsafe { libloading::Library::new(prelude) } {
        Ok(library) => library,
        Err(error) => {
            eprintln!("the prelude would not load: {}", linker_words(&error));
            return 3;
        }
    };
    type Entry = unsafe extern "C" fn(RawFd, RawFd) -> i32;
    // SAFETY: the prelude defines the function under this name with this signature.
    let entry = match unsafe { library.get::<Entry>(ENTRY.as_bytes()) } {
        Ok(entry) => *entry,
        Err(error) => {
            eprintln!("the prelude is not one that a worker can run: {error}");
            return 3;
        }
    };
    super::opened::watch();
    // SAFETY: the descriptors were inherited for this call and nothing else uses them.
    let status = unsafe { entry(commands, reports) };
    // Threads of cells may still be inside the library; it is never unloaded.
    std::mem::forget(library);
    status
}
