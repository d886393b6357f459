//! A client for tests: it starts the kernel as a notebook would, and every wait has a deadline.
//!
//! The client knows nothing of the kernel's insides. It writes a connection file, starts
//! `semiaxis kernel FILE`, connects to its sockets with `jupyter-zmq-client`, and speaks the
//! messaging protocol. A deadline that passes is a failed test with the missing thing named;
//! nothing here sleeps and hopes.
//!
//! ```no_run
//! # async fn example() {
//! use semiaxis_tests::client::Client;
//! let mut client = Client::start().await;
//! let cell = client.execute("println!(\"hello\"); 1 + 1").await;
//! assert_eq!(cell.stdout(), "hello\n");
//! assert_eq!(cell.result_text(), Some("2"));
//! assert!(client.shutdown(false).await.success());
//! # }
//! ```

use std::collections::HashMap;
use std::path::{Path, PathBuf};
use std::process::{ExitStatus, Stdio};
use std::sync::OnceLock;
use std::time::{Duration, Instant};

use jupyter_protocol::{
    ConnectionInfo, ExecuteRequest, ExecutionState, InterruptRequest, JupyterMessage,
    JupyterMessageContent, KernelInfoRequest, ReplyStatus, ShutdownRequest, Transport,
};
use jupyter_zmq_client::{
    ClientControlConnection, ClientIoPubConnection, ClientShellConnection,
    create_client_control_connection, create_client_iopub_connection,
    create_client_shell_connection_with_identity, peek_ports_with_listeners,
    peer_identity_for_session,
};
use tempfile::TempDir;
use tokio::process::{Child, Command};
use tokio::time::timeout;

pub use crate::execution::{CellError, Execution};

/// How long the kernel may take to answer what needs no engine.
pub const SOON: Duration = Duration::from_secs(20);

/// How long a cell may take, the first one included, for which the kit may have to be built.
pub const LONG: Duration = Duration::from_secs(40 * 60);

/// How long a cell may take once the engine is known to run.
pub const CELL: Duration = Duration::from_secs(120);

/// How a kernel is started.
#[derive(Debug, Clone)]
pub struct Start {
    /// `tcp` or `ipc`.
    pub transport: Transport,
    /// The key that messages are signed with.
    pub key: String,
    /// Variables added to the kernel's environment.
    pub environment: HashMap<String, String>,
    /// Where the kernel is started, and where its cells run.
    pub working_dir: Option<PathBuf>,
    /// A command that starts the kernel given behind it, in surroundings of its own.
    pub wrapper: Vec<String>,
}

impl Default for Start {
    fn default() -> Self {
        Self {
            transport: Transport::TCP,
            key: uuid::Uuid::new_v4().to_string(),
            environment: HashMap::new(),
            working_dir: None,
            wrapper: Vec::new(),
        }
    }
}

/// A kernel process and the connections to it. The process is killed when this is dropped.
pub struct Client {
    /// The kernel's process.
    pub process: Child,
    /// What the connection file says.
    pub info: ConnectionInfo,
    /// Where the connection file is.
    pub connection_file: PathBuf,
    /// The id that this client's messages carry.
    pub session: String,
    shell: ClientShellConnection,
    control: ClientControlConnection,
    iopub: ClientIoPubConnection,
    /// Broadcasts that were read while waiting for others, by the request they belong to.
    kept: HashMap<String, Vec<JupyterMessage>>,
    /// Replies that were read while waiting for others.
    replies: Vec<JupyterMessage>,
    /// Holds the connection file and the socket files.
    _dir: TempDir,
}

/// The kernel's executable, built now if it was not yet.
///
/// Cargo does not build another package's binary for an integration test, and a stale one would
/// be tested silently, so cargo is asked once per test process; that takes a fraction of a second
/// when there is nothing to build.
pub fn kernel_executable() -> &'static Path {
    static EXECUTABLE: OnceLock<PathBuf> = OnceLock::new();
    EXECUTABLE.get_or_init(|| {
        let test = std::env::current_exe().expect("the test knows its own path");
        // A test lies in <profile>/deps, another program of this package beside the kernel.
        let folder = test.parent().expect("an executable lies in a folder");
        let folder =
            if folder.ends_with("deps") { folder.parent().unwrap_or(folder) } else { folder };
        // Where the tests were built, for that need not be where cargo would build by itself.
        let target = folder.parent().expect("a profile's folder lies in the target folder");
        let mut build =
            std::process::Command::new(std::env::var_os("CARGO").unwrap_or("cargo".into()));
        build.args(["build", "--quiet", "-p", "semiaxis-kernel", "--target-dir"]).arg(target);
        if folder.ends_with("release") {
            build.arg("--release");
        }
        build.current_dir(concat!(env!("CARGO_MANIFEST_DIR"), "/.."));
        let status = build.status().expect("cargo can be started");
        assert!(status.success(), "the kernel does not build");
        folder.join("semiaxis")
    })
}

impl Client {
    /// Starts a kernel over tcp and waits until it answers.
    pub async fn start() -> Self {
        Self::start_with(Start::default()).await
    }

    /// Starts a kernel and waits until it answers and its broadcasts arrive.
    pub async fn start_with(start: Start) -> Self {
        let dir = tempfile::tempdir().expect("a temporary folder");
        // The ports stay held until the kernel is about to bind them, so that no other test that
        // starts a kernel now is given the same.
        let (info, held) = connection_info(&start, dir.path()).await;
        let connection_file = dir.path().join("connection.json");
        let text = serde_json::to_vec(&info).expect("connection files are JSON");
        std::fs::write(&connection_file, text).expect("the connection file can be written");

        let mut words = start.wrapper.iter().map(std::ffi::OsString::from).collect::<Vec<_>>();
        words.push(kernel_executable().into());
        let mut command = Command::new(&words[0]);
        command.args(&words[1..]);
        // Sessions of tests are no sessions of the person who runs them.
        command.env("SEMIAXIS_LOG", dir.path().join("log"));
        command.arg("kernel").arg(&connection_file).envs(&start.environment);
        command.stdin(Stdio::null()).kill_on_drop(true);
        // What cargo adds to the environment of tests, users do not have.
        command.env_remove("LD_LIBRARY_PATH").env_remove("CARGO");
        if let Some(working_dir) = &start.working_dir {
            command.current_dir(working_dir);
        }
        drop(held);
        let process = command.spawn().expect("the kernel can be started");
        let session = uuid::Uuid::new_v4().to_string();
        let connected = timeout(SOON, connect(&info, &session)).await;
        let (shell, control, iopub) = connected.expect("the kernel binds its sockets in time");
        let mut client = Self {
            process,
            info,
            connection_file,
            session,
            shell,
            control,
            iopub,
            kept: HashMap::new(),
            replies: Vec::new(),
            _dir: dir,
        };
        client.wait_for_broadcasts().await;
        client
    }

    /// A subscription takes effect some time after it was made. Questions are asked until one is
    /// heard to be served; whatever is asked after that is heard whole.
    async fn wait_for_broadcasts(&mut self) {
        let deadline = Instant::now() + SOON;
        loop {
            assert!(Instant::now() < deadline, "no broadcast arrived within {SOON:?}");
            let id = self.send(KernelInfoRequest {}).await;
            self.reply_to(&id, SOON).await;
            if timeout(Duration::from_millis(200), self.iopub.read()).await.is_ok() {
                break;
            }
        }
        // What is left over from those questions belongs to nobody.
        let id = self.send(KernelInfoRequest {}).await;
        self.reply_to(&id, SOON).await;
        self.broadcasts_until_idle(&id, SOON).await;
        self.kept.clear();
    }

    /// Sends a request by the shell socket and returns its id.
    pub async fn send(&mut self, content: impl Into<JupyterMessageContent>) -> String {
        self.send_message(JupyterMessage::new(content, None)).await
    }

    /// Sends a message that was made elsewhere by the shell socket and returns its id.
    pub async fn send_message(&mut self, message: JupyterMessage) -> String {
        let id = message.header.msg_id.clone();
        self.shell.send(message).await.expect("the shell socket takes a message");
        id
    }

    /// Sends a request by the control socket and returns its id.
    pub async fn send_control(&mut self, content: impl Into<JupyterMessageContent>) -> String {
        let message = JupyterMessage::new(content, None);
        let id = message.header.msg_id.clone();
        self.control.send(message).await.expect("the control socket takes a message");
        id
    }

    /// Waits for the reply to a request that was sent by the shell socket.
    pub async fn reply_to(&mut self, id: &str, deadline: Duration) -> JupyterMessage {
        let wait = async {
            loop {
                if let Some(found) = self.replies.iter().position(|reply| is_child(reply, id)) {
                    return self.replies.swap_remove(found);
                }
                let reply = self.shell.read().await.expect("a reply can be read");
                self.replies.push(reply);
            }
        };
        let reply = timeout(deadline, wait).await;
        reply.unwrap_or_else(|_| panic!("no reply to {id} within {deadline:?}"))
    }

    /// Sends a request by the shell socket and waits for its reply.
    pub async fn ask(&mut self, content: impl Into<JupyterMessageContent>) -> JupyterMessage {
        let id = self.send(content).await;
        self.reply_to(&id, SOON).await
    }

    /// Sends a request by the control socket and waits for its reply.
    pub async fn ask_control(
        &mut self,
        content: impl Into<JupyterMessageContent>,
    ) -> JupyterMessage {
        let id = self.send_control(content).await;
        let wait = async {
            loop {
                let reply = self.control.read().await.expect("a control reply can be read");
                if is_child(&reply, &id) {
                    return reply;
                }
            }
        };
        let reply = timeout(SOON, wait).await;
        reply.unwrap_or_else(|_| panic!("no control reply to {id} within {SOON:?}"))
    }

    /// Waits for the next broadcast that belongs to a request.
    pub async fn next_broadcast(&mut self, id: &str, deadline: Duration) -> JupyterMessage {
        if let Some(kept) = self.kept.get_mut(id)
            && !kept.is_empty()
        {
            return kept.remove(0);
        }
        let wait = async {
            loop {
                let message = self.iopub.read().await.expect("a broadcast can be read");
                match message.parent_header.as_ref().map(|parent| parent.msg_id.clone()) {
                    Some(parent) if parent == id => return message,
                    Some(parent) => self.kept.entry(parent).or_default().push(message),
                    // The kernel's own "starting" has no parent.
                    None => {}
                }
            }
        };
        let message = timeout(deadline, wait).await;
        message.unwrap_or_else(|_| panic!("no broadcast about {id} within {deadline:?}"))
    }

    /// Waits for all broadcasts that belong to a request, up to its `idle`.
    pub async fn broadcasts_until_idle(
        &mut self,
        id: &str,
        deadline: Duration,
    ) -> Vec<JupyterMessage> {
        let end = Instant::now() + deadline;
        let mut broadcasts = Vec::new();
        loop {
            let left = end.saturating_duration_since(Instant::now());
            let message = self.next_broadcast(id, left).await;
            let is_idle = is_idle(&message);
            broadcasts.push(message);
            if is_idle {
                return broadcasts;
            }
        }
    }

    /// Runs a cell to its end, whether it goes well or not.
    pub async fn execute(&mut self, code: &str) -> Execution {
        let id = self.send(ExecuteRequest::new(code.to_owned())).await;
        self.collect(&id, LONG).await
    }

    /// Runs a cell as an editor sends it, with the identifier of the cell and those of cells that were
    /// deleted since.
    pub async fn execute_as(&mut self, cell: &str, deleted: &[&str], code: &str) -> Execution {
        let metadata = serde_json::json!({"cellId": cell, "deletedCells": deleted});
        let message = JupyterMessage::new(ExecuteRequest::new(code.to_owned()), None);
        let id = self.send_message(message.with_metadata(metadata)).await;
        self.collect(&id, LONG).await
    }

    /// Runs a cell to its end and fails the test if it does not go well.
    pub async fn execute_well(&mut self, code: &str) -> Execution {
        let cell = self.execute(code).await;
        if let Some(error) = cell.error() {
            panic!("the cell failed:\n{code}\n{}", error.traceback.join("\n"));
        }
        assert_eq!(cell.reply.status, ReplyStatus::Ok, "{:?}", cell.reply);
        cell
    }

    /// Waits for everything that a cell which was sent causes.
    pub async fn collect(&mut self, id: &str, deadline: Duration) -> Execution {
        let started = Instant::now();
        let broadcasts = self.broadcasts_until_idle(id, deadline).await;
        let elapsed = started.elapsed();
        let message = self.reply_to(id, SOON).await;
        let JupyterMessageContent::ExecuteReply(reply) = message.content.clone() else {
            panic!("a cell was answered by {}", message.header.msg_type);
        };
        Execution { reply, reply_message: message, broadcasts, elapsed }
    }

    /// Asks the kernel to interrupt what runs.
    pub async fn interrupt(&mut self) {
        let reply = self.ask_control(InterruptRequest {}).await;
        assert!(matches!(reply.content, JupyterMessageContent::InterruptReply(_)), "{reply:?}");
    }

    /// Sends the kernel's process a signal.
    pub fn signal(&self, number: i32) {
        let id = self.process.id().expect("the kernel runs");
        // SAFETY: the call touches no memory; the process is a child that was not waited for.
        let sent = unsafe { libc::kill(id as libc::pid_t, number) };
        assert_eq!(sent, 0, "the signal could not be sent");
    }

    /// Asks the kernel to end, checks its answer, and waits for its process.
    pub async fn shutdown(mut self, restart: bool) -> ExitStatus {
        let reply = self.ask_control(ShutdownRequest { restart }).await;
        let JupyterMessageContent::ShutdownReply(reply) = reply.content else {
            panic!("a shutdown was answered by {}", reply.header.msg_type);
        };
        assert_eq!((reply.status, reply.restart), (ReplyStatus::Ok, restart));
        self.wait_for_end().await
    }

    /// Waits for the kernel's process to end.
    pub async fn wait_for_end(&mut self) -> ExitStatus {
        let ended = timeout(SOON, self.process.wait()).await;
        ended.expect("the kernel ends in time").expect("the kernel can be waited for")
    }
}

fn is_child(message: &JupyterMessage, id: &str) -> bool {
    message.parent_header.as_ref().is_some_and(|parent| parent.msg_id == id)
}

fn is_idle(message: &JupyterMessage) -> bool {
    matches!(
        &message.content,
        JupyterMessageContent::Status(status) if status.execution_state == ExecutionState::Idle
    )
}

/// Where a kernel is to listen, and what holds its ports meanwhile.
pub async fn connection_info(
    start: &Start,
    dir: &Path,
) -> (ConnectionInfo, Vec<tokio::net::TcpListener>) {
    let (ip, ports, held) = match start.transport {
        Transport::TCP => {
            let ip = "127.0.0.1".parse().expect("an address");
            let (ports, held) =
                peek_ports_with_listeners(ip, 5).await.expect("there are free ports");
            ("127.0.0.1".to_owned(), ports, held)
        }
        Transport::IPC => {
            let prefix = dir.join("socket").to_str().expect("a plain path").to_owned();
            (prefix, vec![1, 2, 3, 4, 5], Vec::new())
        }
    };
    let info = ConnectionInfo {
        ip,
        transport: start.transport.clone(),
        shell_port: ports[0],
        control_port: ports[1],
        stdin_port: ports[2],
        iopub_port: ports[3],
        hb_port: ports[4],
        key: start.key.clone(),
        signature_scheme: "hmac-sha256".to_owned(),
        kernel_name: Some("semiaxis".to_owned()),
    };
    (info, held)
}

/// Connects, trying again while the kernel has not bound its sockets yet.
async fn connect(
    info: &ConnectionInfo,
    session: &str,
) -> (ClientShellConnection, ClientControlConnection, ClientIoPubConnection) {
    let identity = || peer_identity_for_session(session).expect("a session is a fit identity");
    loop {
        let shell = create_client_shell_connection_with_identity(info, session, identity()).await;
        let control = create_client_control_connection(info, session).await;
        let iopub = create_client_iopub_connection(info, "", session).await;
        if let (Ok(shell), Ok(control), Ok(iopub)) = (shell, control, iopub) {
            return (shell, control, iopub);
        }
        tokio::time::sleep(Duration::from_millis(10)).await;
    }
}
