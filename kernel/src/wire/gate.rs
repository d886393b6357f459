//! The gate before the tcp sockets: no frame is longer than anything a client has to say.
//!
//! Every user of this machine can reach a port of the loopback. Without the key none of their
//! messages is let in, but the transport reserves memory for a frame as soon as its length is
//! announced, before there is any signature to check, and a length beyond all memory would end
//! the kernel with everything in it. The transport has no limit to set, so connections end here
//! first: the gate reads the lengths as they pass by and drops a connection that announces too
//! much. Behind it the transport listens in a folder that only this user may enter.
//!
//! Source of the framing: ZMTP 3.1, "Greeting" and "Framing" of
//! <https://rfc.zeromq.org/spec/37/>.

use std::io;
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};
use std::time::Duration;

use tempfile::TempDir;
use tokio::io::{AsyncReadExt, AsyncWriteExt, BufReader};
use tokio::net::tcp::OwnedReadHalf;
use tokio::net::unix::OwnedWriteHalf;
use tokio::net::{TcpListener, TcpStream, UnixStream};

use super::note;

/// The most that one message may hold. The largest that clients send are cells with data pasted
/// into them, a thousandth of this.
const LARGEST_MESSAGE: u64 = 256 * 1024 * 1024;

/// How much is carried at once.
const PIECE: usize = 64 * 1024;

/// How long the gate rests when the system cannot accept a connection, for instance because the
/// process has too many files open.
const REST: Duration = Duration::from_millis(20);

/// The longest folder in which a socket's file still has a path that the system takes (108 bytes
/// on Linux, 104 elsewhere).
const LONGEST_FOLDER: usize = 80;

/// Makes the folder in which the transport listens behind the gate.
///
/// # Errors
///
/// What the system said about the last of the folders tried.
pub fn folder() -> io::Result<TempDir> {
    let runtime = std::env::var_os("XDG_RUNTIME_DIR").map(PathBuf::from);
    let places = runtime.into_iter().chain([std::env::temp_dir()]);
    let mut failure = io::Error::from(io::ErrorKind::NotFound);
    for place in places.filter(|place| place.is_absolute()) {
        let mut builder = tempfile::Builder::new();
        let owner_only = std::fs::Permissions::from_mode(0o700);
        match builder.prefix("semiaxis-").permissions(owner_only).tempdir_in(place) {
            Ok(folder) if folder.path().as_os_str().len() <= LONGEST_FOLDER => return Ok(folder),
            Ok(_) => {}
            Err(error) => failure = error,
        }
    }
    Err(failure)
}

/// Carries every connection of a listener to the socket behind the gate, as long as it behaves.
pub async fn guard(listener: TcpListener, behind: PathBuf) {
    loop {
        match listener.accept().await {
            Ok((stream, _)) => {
                let behind = behind.clone();
                tokio::spawn(async move {
                    // An end or an error of either side ends both, as it would without a gate.
                    if let Err(Stopped::TooLong { announced }) = carry(stream, &behind).await {
                        note(format_args!(
                            "a connection was dropped: it announced a message of {announced} \
                             bytes, at most {LARGEST_MESSAGE} are accepted"
                        ));
                    }
                });
            }
            Err(error) => {
                note(format_args!("a connection could not be accepted: {error}"));
                tokio::time::sleep(REST).await;
            }
        }
    }
}

/// Why a connection is no longer carried.
enum Stopped {
    /// One side has gone.
    Ended,
    /// The client announced more than it may.
    TooLong {
        /// The bytes of the message, as far as they were announced.
        announced: u64,
    },
}

impl From<io::Error> for Stopped {
    fn from(_: io::Error) -> Self {
        Stopped::Ended
    }
}

async fn carry(outer: TcpStream, behind: &Path) -> Result<(), Stopped> {
    outer.set_nodelay(true)?;
    let inner = UnixStream::connect(behind).await?;
    let (from_client, mut to_client) = outer.into_split();
    let (from_kernel, to_kernel) = inner.into_split();
    let mut from_kernel = BufReader::with_capacity(PIECE, from_kernel);
    tokio::select! {
        stopped = carry_in(from_client, to_kernel) => stopped,
        ended = tokio::io::copy_buf(&mut from_kernel, &mut to_client) => Ok(ended.map(drop)?),
    }
}

async fn carry_in(mut from: OwnedReadHalf, mut to: OwnedWriteHalf) -> Result<(), Stopped> {
    let mut meter = Meter::new();
    let mut piece = vec![0; PIECE];
    loop {
        let read = from.read(&mut piece).await?;
        let Some(bytes) = piece.get(..read).filter(|bytes| !bytes.is_empty()) else {
            return Ok(());
        };
        meter.pass(bytes)?;
        to.write_all(bytes).await?;
    }
}

/// Follows the framing of one connection, whatever the pieces it comes in.
struct Meter {
    expected: Expected,
    /// The bytes of the frames so far of a message in several.
    message: u64,
}

/// What the next byte is.
enum Expected {
    /// One of this many bytes of the greeting.
    Greeting(u64),
    /// The flags of a frame.
    Flags,
    /// One of the bytes of a frame's length.
    Length { flags: u8, left: u8, value: u64 },
    /// One of this many bytes of a frame's body.
    Body(u64),
}

/// The length of the greeting that begins a connection.
const GREETING: u64 = 64;
/// The flag of a frame that more frames of the same message follow.
const MORE: u8 = 1;
/// The flag of a frame whose length has eight bytes instead of one.
const LONG: u8 = 2;

impl Meter {
    fn new() -> Self {
        Self { expected: Expected::Greeting(GREETING), message: 0 }
    }

    /// Reads over bytes before they are carried on.
    fn pass(&mut self, mut bytes: &[u8]) -> Result<(), Stopped> {
        while let Some((&first, rest)) = bytes.split_first() {
            match &mut self.expected {
                Expected::Greeting(left) | Expected::Body(left) => {
                    // Never more than there are bytes, so it fits.
                    let skipped = (*left).min(bytes.len() as u64);
                    *left -= skipped;
                    bytes = bytes.get(skipped as usize..).unwrap_or_default();
                    if *left == 0 {
                        self.expected = Expected::Flags;
                    }
                    continue;
                }
                Expected::Flags => {
                    let left = if first & LONG == 0 { 1 } else { 8 };
                    self.expected = Expected::Length { flags: first, left, value: 0 };
                }
                Expected::Length { flags, left, value } => {
                    *value = *value << 8 | u64::from(first);
                    *left -= 1;
                    if *left == 0 {
                        let (flags, length) = (*flags, *value);
                        self.begin_body(flags, length)?;
                    }
                }
            }
            bytes = rest;
        }
        Ok(())
    }

    fn begin_body(&mut self, flags: u8, length: u64) -> Result<(), Stopped> {
        self.message = self.message.saturating_add(length);
        if self.message > LARGEST_MESSAGE {
            return Err(Stopped::TooLong { announced: self.message });
        }
        if flags & MORE == 0 {
            self.message = 0;
        }
        self.expected = if length == 0 { Expected::Flags } else { Expected::Body(length) };
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn frame(flags: u8, length: u64) -> Vec<u8> {
        let mut frame = vec![flags];
        match flags & LONG {
            0 => frame.push(length as u8),
            _ => frame.extend(length.to_be_bytes()),
        }
        frame
    }

    fn announced(stream: &[u8], piece: usize) -> Option<u64> {
        let mut meter = Meter::new();
        stream.chunks(piece).find_map(|bytes| match meter.pass(bytes) {
            Err(Stopped::TooLong { announced }) => Some(announced),
            Err(Stopped::Ended) | Ok(()) => None,
        })
    }

    /// A greeting, a short frame, a long one, an empty one.
    fn polite() -> Vec<u8> {
        let mut stream = vec![0xff; GREETING as usize];
        stream.extend(frame(0, 200));
        stream.extend([LONG; 200]);
        stream.extend(frame(MORE | LONG, 3000));
        stream.extend([0xff; 3000]);
        stream.extend(frame(0, 0));
        stream
    }

    #[test]
    fn what_clients_say_passes_in_pieces_of_any_size() {
        for piece in [1, 2, 3, 7, 64, 100_000] {
            assert_eq!(announced(&polite(), piece), None);
        }
    }

    #[test]
    fn a_length_beyond_the_limit_is_caught_before_any_of_it_has_come() {
        for length in [LARGEST_MESSAGE + 1, u64::MAX, 0x0a2b_ffff_0000_0000] {
            for piece in [1, 5, 100_000] {
                let mut stream = polite();
                stream.extend(frame(LONG, length));
                assert_eq!(announced(&stream, piece), Some(length));
            }
        }
        let mut stream = polite();
        stream.extend(frame(LONG, LARGEST_MESSAGE));
        assert_eq!(announced(&stream, 100), None);
    }

    #[test]
    fn many_frames_of_one_message_count_together_and_messages_apart() {
        let part = LARGEST_MESSAGE / 4 + 1;
        let passes = |flags: [u8; 4]| {
            let mut meter = Meter::new();
            flags.into_iter().all(|flags| meter.begin_body(flags, part).is_ok())
        };
        assert!(!passes([MORE; 4]));
        assert!(passes([0; 4]));
        assert!(passes([MORE, MORE, 0, MORE]));
    }

    proptest! {
        #[test]
        fn no_bytes_make_it_panic(
            stream in prop::collection::vec(any::<u8>(), 0..300), piece in 1_usize..50,
        ) {
            announced(&stream, piece);
        }
    }

    #[test]
    fn the_folder_is_closed_to_others_and_short_enough() {
        let folder = folder().unwrap();
        let mode = std::fs::metadata(folder.path()).unwrap().permissions().mode();
        assert_eq!(mode & 0o777, 0o700);
        assert!(folder.path().as_os_str().len() <= LONGEST_FOLDER);
    }
}
