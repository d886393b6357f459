//! Which files a cell reads and writes, for the record of what its results rest on.
//!
//! Readers of tables tell of each file with the digest of the bytes they got. Every other file is
//! known by name only: the worker's host sees each one that the process opens.

use std::collections::BTreeMap;
use std::ffi::c_void;
use std::path::Path;

use sha2::{Digest, Sha256};

use super::message::{OpenedFile, TableFile, TakeOpened};

/// The function of the worker's host that hands over opened files.
const TAKE_OPENED: &[u8] = b"semiaxis_take_opened";

/// Tells of a file that became a table. It costs the digest of the bytes in a worker, and nothing
/// anywhere else.
pub(crate) struct TableRead(Option<(u64, String)>);

impl TableRead {
    /// Takes the digest of the bytes before a reader consumes them.
    pub(crate) fn of(bytes: &[u8]) -> Self {
        Self(super::worker::is_here().then(|| (bytes.len() as u64, hexadecimal(bytes))))
    }

    /// Tells what they became.
    pub(crate) fn became(self, path: &Path, (rows, columns): (usize, usize)) {
        let Some((bytes, sha256)) = self.0 else { return };
        let path = std::path::absolute(path).unwrap_or_else(|_| path.to_owned());
        let path = path.to_string_lossy().into_owned();
        super::worker::read(TableFile { path, bytes, sha256, rows, columns });
    }
}

fn hexadecimal(bytes: &[u8]) -> String {
    Sha256::digest(bytes).iter().map(|byte| format!("{byte:02x}")).collect()
}

/// The files that this process has opened since it was last asked; empty where the host does not
/// watch.
pub(super) fn opened() -> Vec<OpenedFile> {
    type Take = extern "C" fn(TakeOpened, *mut c_void);
    extern "C" fn take(context: *mut c_void, path: *const u8, length: usize, written: bool) {
        // SAFETY: the host passes the context back, and a path that lives through the call.
        let (files, path) = unsafe {
            (
                &mut *context.cast::<BTreeMap<String, bool>>(),
                std::slice::from_raw_parts(path, length),
            )
        };
        *files.entry(String::from_utf8_lossy(path).into_owned()).or_default() |= written;
    }
    let host = libloading::os::unix::Library::this();
    // SAFETY: the host defines the function under this name with this signature.
    let Ok(function) = (unsafe { host.get::<Take>(TAKE_OPENED) }) else {
        return Vec::new();
    };
    let mut files: BTreeMap<String, bool> = BTreeMap::new();
    function(take, (&raw mut files).cast());
    files.into_iter().map(|(path, written)| OpenedFile { path, written }).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn digests_are_those_of_the_standard() {
        // FIPS 180-4, the example of one block: the message "abc".
        let expected = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad";
        assert_eq!(hexadecimal(b"abc"), expected);
    }
}
