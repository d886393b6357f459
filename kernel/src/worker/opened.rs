//! Which files the worker's process opens while a cell runs.
//!
//! The host is the program, so a function of its own named as the C library's is found first by every
//! library that it loads: all of Rust opens files by `open64`. Files that other processes open are not
//! seen, nor those that are opened by other means; a record says what was seen, never that nothing
//! else was.

use std::ffi::{CStr, c_char, c_int, c_void};
use std::os::unix::ffi::OsStrExt;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, AtomicPtr, Ordering};
use std::sync::{Mutex, PoisonError};

use super::message::TakeOpened;

/// A cell that opens more files than this between two reports is not listed further.
const MOST: usize = 100_000;

/// Whether this process is a worker; the kernel opens its own files unseen.
static WATCHING: AtomicBool = AtomicBool::new(false);

static OPENED: Mutex<Vec<(PathBuf, bool)>> = Mutex::new(Vec::new());

/// Watches from now on.
pub fn watch() {
    WATCHING.store(true, Ordering::Relaxed);
}

/// Hands over the files opened since the last call.
#[unsafe(no_mangle)]
extern "C" fn semiaxis_take_opened(take: TakeOpened, context: *mut c_void) {
    let files = std::mem::take(&mut *OPENED.lock().unwrap_or_else(PoisonError::into_inner));
    for (path, written) in files {
        let bytes = path.as_os_str().as_bytes();
        take(context, bytes.as_ptr(), bytes.len(), written);
    }
}

/// Opens a file as the C library does, and notes its name.
///
/// # Safety
/// As `open(2)`: the path is a C string.
#[unsafe(no_mangle)]
unsafe extern "C" fn open64(path: *const c_char, flags: c_int, mode: libc::mode_t) -> c_int {
    static REAL: AtomicPtr<c_void> = AtomicPtr::new(std::ptr::null_mut());
    type Open = unsafe extern "C" fn(*const c_char, c_int, ...) -> c_int;
    let real = real(&REAL, c"open64");
    // SAFETY: the C library's function has this type; the arguments are the caller's own.
    let descriptor = unsafe { std::mem::transmute::<*mut c_void, Open>(real)(path, flags, mode) };
    if descriptor >= 0 {
        // SAFETY: the call went well, so the path is a C string.
        note(unsafe { CStr::from_ptr(path) }, None, flags);
    }
    descriptor
}

/// Opens a file below a folder as the C library does, and notes its name.
///
/// # Safety
/// As `openat(2)`: the path is a C string.
#[unsafe(no_mangle)]
unsafe extern "C" fn openat64(
    folder: c_int,
    path: *const c_char,
    flags: c_int,
    mode: libc::mode_t,
) -> c_int {
    static REAL: AtomicPtr<c_void> = AtomicPtr::new(std::ptr::null_mut());
    type Open = unsafe extern "C" fn(c_int, *const c_char, c_int, ...) -> c_int;
    let real = real(&REAL, c"openat64");
    // SAFETY: as in `open64`.
    let descriptor =
        unsafe { std::mem::transmute::<*mut c_void, Open>(real)(folder, path, flags, mode) };
    if descriptor >= 0 {
        let below = (folder != libc::AT_FDCWD).then_some(folder);
        // SAFETY: the call went well, so the path is a C string.
        note(unsafe { CStr::from_ptr(path) }, below, flags);
    }
    descriptor
}

fn real(known: &AtomicPtr<c_void>, name: &CStr) -> *mut c_void {
    let found = known.load(Ordering::Relaxed);
    if !found.is_null() {
        return found;
    }
    // SAFETY: looks a name up behind this program; the C library is always there.
    let found = unsafe { libc::dlsym(libc::RTLD_NEXT, name.as_ptr()) };
    if found.is_null() {
        // Without the C library's own function nothing can be opened at all.
        std::process::abort();
    }
    known.store(found, Ordering::Relaxed);
    found
}

fn note(path: &CStr, below: Option<c_int>, flags: c_int) {
    if !WATCHING.load(Ordering::Relaxed) || flags & libc::O_DIRECTORY != 0 {
        return;
    }
    let path = Path::new(std::ffi::OsStr::from_bytes(path.to_bytes()));
    if ["/proc", "/sys", "/dev"].iter().any(|system| path.starts_with(system)) {
        return;
    }
    let path = match below {
        // Names below an open folder are asked of the system, which still knows the folder's.
        Some(folder) if path.is_relative() => {
            std::fs::read_link(format!("/proc/self/fd/{folder}")).map(|folder| folder.join(path))
        }
        _ => std::path::absolute(path),
    };
    let Ok(path) = path else { return };
    let mut opened = OPENED.lock().unwrap_or_else(PoisonError::into_inner);
    if opened.len() < MOST {
        opened.push((path, flags & libc::O_ACCMODE != libc::O_RDONLY));
    }
}
