//! The connection file: where a client says on which sockets it will look for the kernel.
//!
//! The file is read once, checked whole before anything is bound, and every refusal names the
//! file, the field and what would be accepted. A kernel runs whatever it is sent, so it listens
//! on this machine only: an address beyond the loopback is refused rather than warned about.
//!
//! Format: <https://jupyter-client.readthedocs.io/en/stable/kernels.html#connection-files>.

use std::io;
use std::net::IpAddr;
use std::path::{Path, PathBuf};

use jupyter_protocol::{ConnectionInfo, Transport};
use thiserror::Error;

/// The one signature scheme of the protocol that this kernel knows.
const SIGNATURE_SCHEME: &str = "hmac-sha256";

/// No connection file comes near this size; a larger one is something else given by mistake.
const LARGEST_FILE: u64 = 64 * 1024;

/// Why a connection file cannot be used.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum ConnectionFileError {
    /// The file is not there or cannot be read.
    #[error("cannot read the connection file {}: {source}", path.display())]
    Unreadable {
        /// The file asked for.
        path: PathBuf,
        /// What the system said.
        source: io::Error,
    },
    /// The file is far larger than any connection file.
    #[error(
        "the connection file {} has {bytes} bytes, at most {LARGEST_FILE} are accepted",
        path.display()
    )]
    TooLarge {
        /// The file asked for.
        path: PathBuf,
        /// Its size.
        bytes: u64,
    },
    /// The file is not JSON, or a field is missing or of the wrong type.
    #[error(
        "the connection file {} is malformed: {source}; expected is a JSON object with ip, \
         transport, key, signature_scheme, shell_port, control_port, stdin_port, iopub_port \
         and hb_port",
        path.display()
    )]
    Malformed {
        /// The file asked for.
        path: PathBuf,
        /// Where and why reading it failed.
        source: serde_json::Error,
    },
    /// The address is not one of this machine's own loopback addresses.
    #[error(
        "the connection file {} asks for address '{ip}', which other machines may reach; \
         accepted are 127.0.0.1, ::1 and localhost",
        path.display()
    )]
    BeyondLoopback {
        /// The file asked for.
        path: PathBuf,
        /// The address in it.
        ip: String,
    },
    /// The messages are to be signed in a way this kernel does not know.
    #[error(
        "the connection file {} asks for signature scheme '{scheme}'; accepted is \
         {SIGNATURE_SCHEME}",
        path.display()
    )]
    UnknownScheme {
        /// The file asked for.
        path: PathBuf,
        /// The scheme in it.
        scheme: String,
    },
    /// A port is zero, so that no client could know where to look.
    #[error(
        "the connection file {} gives {field} as 0; accepted are 1 to 65535",
        path.display()
    )]
    ZeroPort {
        /// The file asked for.
        path: PathBuf,
        /// The field at fault.
        field: &'static str,
    },
    /// Two sockets are to share one port.
    #[error(
        "the connection file {} gives port {port} to both {first} and {second}; each needs its own",
        path.display()
    )]
    SharedPort {
        /// The file asked for.
        path: PathBuf,
        /// The port given twice.
        port: u16,
        /// The first field with it.
        first: &'static str,
        /// The second field with it.
        second: &'static str,
    },
    /// The `ipc` transport needs a path to put its socket files at.
    #[error(
        "the connection file {} has transport ipc and an empty ip; there ip is the beginning of \
         the socket files' path",
        path.display()
    )]
    NoSocketPath {
        /// The file asked for.
        path: PathBuf,
    },
}

/// Reads and checks a connection file.
///
/// The address `localhost` is resolved here, to 127.0.0.1, so that nothing the machine's name
/// service says can move the sockets off the loopback.
///
/// # Errors
///
/// One variant of [`ConnectionFileError`] for each thing that can be wrong with the file.
pub fn read_connection_file(path: &Path) -> Result<ConnectionInfo, ConnectionFileError> {
    let unreadable = |source| ConnectionFileError::Unreadable { path: path.to_owned(), source };
    let bytes = std::fs::metadata(path).map_err(unreadable)?.len();
    if bytes > LARGEST_FILE {
        return Err(ConnectionFileError::TooLarge { path: path.to_owned(), bytes });
    }
    let text = std::fs::read(path).map_err(unreadable)?;
    let info = serde_json::from_slice(&text)
        .map_err(|source| ConnectionFileError::Malformed { path: path.to_owned(), source })?;
    check(path, info)
}

fn check(path: &Path, mut info: ConnectionInfo) -> Result<ConnectionInfo, ConnectionFileError> {
    let path = || path.to_owned();
    if info.signature_scheme != SIGNATURE_SCHEME {
        return Err(ConnectionFileError::UnknownScheme {
            path: path(),
            scheme: info.signature_scheme,
        });
    }
    match info.transport {
        Transport::TCP => match loopback(&info.ip) {
            Some(ip) => info.ip = ip,
            None => {
                return Err(ConnectionFileError::BeyondLoopback { path: path(), ip: info.ip });
            }
        },
        Transport::IPC if info.ip.is_empty() => {
            return Err(ConnectionFileError::NoSocketPath { path: path() });
        }
        Transport::IPC => {}
    }
    let ports = ports(&info);
    for (idx, &(field, port)) in ports.iter().enumerate() {
        if port == 0 {
            return Err(ConnectionFileError::ZeroPort { path: path(), field });
        }
        if let Some(&(second, _)) = ports.iter().skip(idx + 1).find(|(_, other)| *other == port) {
            return Err(ConnectionFileError::SharedPort {
                path: path(),
                port,
                first: field,
                second,
            });
        }
    }
    Ok(info)
}

fn ports(info: &ConnectionInfo) -> [(&'static str, u16); 5] {
    [
        ("shell_port", info.shell_port),
        ("control_port", info.control_port),
        ("stdin_port", info.stdin_port),
        ("iopub_port", info.iopub_port),
        ("hb_port", info.hb_port),
    ]
}

/// The address to bind, if it is one that only this machine can reach.
fn loopback(ip: &str) -> Option<String> {
    if ip == "localhost" {
        return Some("127.0.0.1".to_owned());
    }
    let bare = ip.strip_prefix('[').and_then(|rest| rest.strip_suffix(']')).unwrap_or(ip);
    let address: IpAddr = bare.parse().ok()?;
    address.is_loopback().then(|| address.to_string())
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::{Value, json};

    fn sample() -> Value {
        json!({
            "ip": "127.0.0.1", "transport": "tcp", "key": "k", "signature_scheme": "hmac-sha256",
            "shell_port": 5001, "control_port": 5002, "stdin_port": 5003, "iopub_port": 5004,
            "hb_port": 5005, "kernel_name": "semiaxis", "added_by_some_client": [1, 2]
        })
    }

    fn read(text: &str) -> Result<ConnectionInfo, ConnectionFileError> {
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("connection.json");
        std::fs::write(&path, text).unwrap();
        read_connection_file(&path)
    }

    fn read_with(field: &str, value: Value) -> Result<ConnectionInfo, ConnectionFileError> {
        let mut file = sample();
        file[field] = value;
        read(&file.to_string())
    }

    #[test]
    fn a_good_file_is_read_and_unknown_fields_do_no_harm() {
        let info = read(&sample().to_string()).unwrap();
        assert_eq!(info.shell_url(), "tcp://127.0.0.1:5001");
        assert_eq!(info.hb_port, 5005);
    }

    #[test]
    fn a_missing_file_is_named() {
        let error = read_connection_file(Path::new("no/such/connection.json")).unwrap_err();
        assert!(error.to_string().contains("no/such/connection.json"), "{error}");
        assert!(matches!(error, ConnectionFileError::Unreadable { .. }));
    }

    #[test]
    fn what_is_not_a_connection_file_is_malformed_with_the_place() {
        for text in ["", "not json", "[]", "{}", "{\"ip\": 3}", "\u{0}\u{1}\u{2}"] {
            let error = read(text).unwrap_err();
            assert!(matches!(error, ConnectionFileError::Malformed { .. }), "{text:?}: {error}");
        }
        let mut file = sample();
        file.as_object_mut().unwrap().remove("hb_port");
        let error = read(&file.to_string()).unwrap_err().to_string();
        assert!(error.contains("hb_port") && error.contains("line 1"), "{error}");
    }

    #[test]
    fn addresses_beyond_the_loopback_are_refused_and_named() {
        for ip in ["0.0.0.0", "192.168.1.4", "::", "*", "example.org", "", "127.0.0.1.example.org"]
        {
            let error = read_with("ip", json!(ip)).unwrap_err();
            assert!(matches!(error, ConnectionFileError::BeyondLoopback { .. }), "{ip}: {error}");
            assert!(error.to_string().contains(&format!("'{ip}'")));
        }
        for (ip, bound) in [
            ("127.0.0.1", "127.0.0.1"),
            ("localhost", "127.0.0.1"),
            ("::1", "::1"),
            ("[::1]", "::1"),
            ("127.0.0.2", "127.0.0.2"),
        ] {
            assert_eq!(read_with("ip", json!(ip)).unwrap().ip, bound);
        }
    }

    #[test]
    fn ports_must_be_given_and_differ() {
        let error = read_with("iopub_port", json!(0)).unwrap_err();
        assert!(matches!(error, ConnectionFileError::ZeroPort { field: "iopub_port", .. }));
        let error = read_with("iopub_port", json!(5001)).unwrap_err();
        assert!(matches!(
            error,
            ConnectionFileError::SharedPort {
                port: 5001,
                first: "shell_port",
                second: "iopub_port",
                ..
            }
        ));
        for port in [json!(70000), json!(-1), json!("5001"), json!(1.5)] {
            let error = read_with("iopub_port", port).unwrap_err();
            assert!(matches!(error, ConnectionFileError::Malformed { .. }), "{error}");
        }
    }

    #[test]
    fn the_scheme_and_the_transport_must_be_known() {
        let error = read_with("signature_scheme", json!("hmac-md5")).unwrap_err();
        assert!(matches!(error, ConnectionFileError::UnknownScheme { .. }));
        assert!(error.to_string().contains("'hmac-md5'"));
        let error = read_with("transport", json!("udp")).unwrap_err().to_string();
        assert!(error.contains("udp") && error.contains("tcp"), "{error}");
    }

    #[test]
    fn with_ipc_the_address_is_a_path() {
        let mut file = sample();
        file["transport"] = json!("ipc");
        file["ip"] = json!("some/folder/kernel");
        assert_eq!(read(&file.to_string()).unwrap().shell_url(), "ipc://some/folder/kernel-5001");
        file["ip"] = json!("");
        assert!(matches!(
            read(&file.to_string()).unwrap_err(),
            ConnectionFileError::NoSocketPath { .. }
        ));
    }

    #[test]
    fn a_huge_file_is_refused_unread() {
        let error = read(&" ".repeat(LARGEST_FILE as usize + 1)).unwrap_err();
        assert!(matches!(error, ConnectionFileError::TooLarge { .. }));
    }
}
