//! The five sockets: bound once, read by a task each, written by the session.
//!
//! Readers only carry frames into a bounded channel; whether a message is let in is decided by
//! the [`Intake`](super::Intake), in one place. The heartbeat answers by itself, whatever else
//! the kernel is doing. The broadcast socket is a plain publisher: a client that stops reading
//! loses messages after a long queue, and cannot hold up the kernel.
//!
//! Source: "Introduction" and "Heartbeat for kernels" of
//! <https://jupyter-client.readthedocs.io/en/stable/messaging.html>.

use std::io;
use std::os::unix::fs::{FileTypeExt, PermissionsExt};
use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::time::Duration;

use jupyter_protocol::{ConnectionInfo, JupyterMessage, Transport};
use jupyter_zmq_client::{
    Connection, KernelIoPubConnection, KernelShellConnection, RouterRecvConnection,
    RouterSendConnection,
};
use tempfile::TempDir;
use thiserror::Error;
use tokio::net::TcpListener;
use tokio::sync::mpsc;
use zeromq::{
    PubSocket, RepSocket, RouterSocket, Socket, SocketRecv, SocketSend, ZmqMessage, ZmqResult,
};

use super::{Inlet, gate, note};

/// How many messages may wait between a socket and the session.
const WAITING: usize = 256;

/// How long a reader rests after the transport reported an error of its own. Without a rest an
/// error that stays would keep a processor busy.
const REST: Duration = Duration::from_millis(20);

/// Why a socket could not be bound.
#[derive(Debug, Error)]
#[error("cannot bind the {socket} socket at {endpoint}: {source}")]
pub struct BindError {
    /// Which of the five.
    pub socket: &'static str,
    /// Where it was to listen.
    pub endpoint: String,
    /// What the transport said, for instance that the address is in use.
    pub source: zeromq::ZmqError,
}

/// The bound sockets.
pub struct Sockets {
    /// Frames that came in on the shell socket.
    pub shell: mpsc::Receiver<ZmqMessage>,
    /// Frames that came in on the control socket.
    pub control: mpsc::Receiver<ZmqMessage>,
    /// Frames that came in on the stdin socket.
    pub stdin: mpsc::Receiver<ZmqMessage>,
    /// The ways out.
    pub outlets: Outlets,
}

/// The sending ends.
pub struct Outlets {
    shell: RouterSendConnection,
    control: RouterSendConnection,
    stdin: RouterSendConnection,
    iopub: KernelIoPubConnection,
    /// What the tcp sockets stand in, removed with them.
    _ground: Ground,
}

/// Where sockets are bound.
enum Ground {
    /// In files of their own, which only their owner may open.
    Files,
    /// On ports, with a gate before them; the transport itself listens in this folder.
    Ports(TempDir),
}

impl Outlets {
    /// Sends a reply by the socket its request came in by.
    ///
    /// A client that has gone away is no fault of the kernel, so a failure is only noted.
    pub async fn reply(&mut self, inlet: Inlet, message: JupyterMessage) {
        let outlet = match inlet {
            Inlet::Shell => &mut self.shell,
            Inlet::Control => &mut self.control,
            Inlet::Stdin => &mut self.stdin,
        };
        let kind = message.header.msg_type.clone();
        if let Err(error) = outlet.send(message).await {
            note(format_args!("a {kind} could not be delivered: {error}"));
        }
    }

    /// Broadcasts a message to every client that listens.
    pub async fn publish(&mut self, message: JupyterMessage) {
        let kind = message.header.msg_type.clone();
        if let Err(error) = self.iopub.send(message).await {
            note(format_args!("a {kind} could not be broadcast: {error}"));
        }
    }
}

/// Binds the five sockets and starts reading them.
///
/// # Errors
///
/// A [`BindError`] naming the socket and the address; those bound before it are released.
pub async fn bind(info: &ConnectionInfo, session: &str) -> Result<Sockets, BindError> {
    let ground = match info.transport {
        Transport::IPC => Ground::Files,
        Transport::TCP => Ground::Ports(gate::folder().map_err(|error| BindError {
            socket: "shell",
            endpoint: info.shell_url(),
            source: error.into(),
        })?),
    };
    let router = async |name, port, endpoint| {
        let mut socket = RouterSocket::new();
        bind_one(&ground, info, &mut socket, name, port, endpoint).await?;
        Ok::<KernelShellConnection, BindError>(Connection::new(socket, &info.key, session))
    };
    let shell = router("shell", info.shell_port, info.shell_url()).await?;
    let control = router("control", info.control_port, info.control_url()).await?;
    let stdin = router("stdin", info.stdin_port, info.stdin_url()).await?;
    let mut iopub = PubSocket::new();
    bind_one(&ground, info, &mut iopub, "iopub", info.iopub_port, info.iopub_url()).await?;
    let mut heartbeat = RepSocket::new();
    bind_one(&ground, info, &mut heartbeat, "heartbeat", info.hb_port, info.hb_url()).await?;

    let (shell, from_shell) = shell.split();
    let (control, from_control) = control.split();
    let (stdin, from_stdin) = stdin.split();
    tokio::spawn(beat(heartbeat));
    Ok(Sockets {
        shell: read(Inlet::Shell, from_shell),
        control: read(Inlet::Control, from_control),
        stdin: read(Inlet::Stdin, from_stdin),
        outlets: Outlets {
            shell,
            control,
            stdin,
            iopub: Connection::new(iopub, &info.key, session),
            _ground: ground,
        },
    })
}

async fn bind_one(
    ground: &Ground,
    info: &ConnectionInfo,
    socket: &mut impl Socket,
    name: &'static str,
    port: u16,
    endpoint: String,
) -> Result<(), BindError> {
    let bound = match ground {
        Ground::Files => bind_file(socket, &endpoint).await,
        Ground::Ports(folder) => {
            bind_port(socket, (info.ip.as_str(), port), folder.path().join(name)).await
        }
    };
    bound.map_err(|source| BindError { socket: name, endpoint, source })
}

async fn bind_file(socket: &mut impl Socket, endpoint: &str) -> ZmqResult<()> {
    let file = Path::new(endpoint.strip_prefix("ipc://").unwrap_or(endpoint));
    remove_if_abandoned(file);
    socket.bind(endpoint).await?;
    // Only the owner may connect, as only the owner may read the connection file.
    std::fs::set_permissions(file, std::fs::Permissions::from_mode(0o600))?;
    Ok(())
}

async fn bind_port(
    socket: &mut impl Socket,
    address: (&str, u16),
    behind: PathBuf,
) -> ZmqResult<()> {
    let listener = TcpListener::bind(address).await?;
    socket.bind(&format!("ipc://{}", behind.display())).await?;
    tokio::spawn(gate::guard(listener, behind));
    Ok(())
}

/// Removes the socket file of a kernel that was killed, so that a restart can bind it again. A
/// file somebody listens on, or that is no socket, stays, and binding then reports it as taken.
fn remove_if_abandoned(file: &Path) {
    let is_socket =
        std::fs::symlink_metadata(file).is_ok_and(|metadata| metadata.file_type().is_socket());
    if is_socket
        && UnixStream::connect(file)
            .is_err_and(|error| error.kind() == io::ErrorKind::ConnectionRefused)
    {
        // Whether this worked shows when the socket is bound.
        let _ = std::fs::remove_file(file);
    }
}

fn read(inlet: Inlet, mut connection: RouterRecvConnection) -> mpsc::Receiver<ZmqMessage> {
    let (sender, receiver) = mpsc::channel(WAITING);
    tokio::spawn(async move {
        loop {
            match connection.socket.recv().await {
                Ok(frames) => {
                    if sender.send(frames).await.is_err() {
                        // The session has ended.
                        return;
                    }
                }
                Err(error) => {
                    note(format_args!("the {inlet} socket reports: {error}"));
                    tokio::time::sleep(REST).await;
                }
            }
        }
    });
    receiver
}

/// Echoes whatever comes, which is all that the protocol asks of a heartbeat.
async fn beat(mut socket: RepSocket) {
    loop {
        match socket.recv().await {
            // Whoever asked may be gone by now; the next beat is unaffected.
            Ok(frames) => drop(socket.send(frames).await),
            Err(_) => tokio::time::sleep(REST).await,
        }
    }
}

#[cfg(test)]
#[path = "sockets_tests.rs"]
mod tests;
