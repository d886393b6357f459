use super::*;
use jupyter_protocol::KernelInfoRequest;
use jupyter_zmq_client::{
    create_client_control_connection, create_client_iopub_connection, peek_ports,
};
use std::os::unix::net::UnixListener;
use tokio::time::timeout;
use zeromq::ReqSocket;

const SOON: Duration = Duration::from_secs(10);

async fn tcp() -> ConnectionInfo {
    let ports = peek_ports("127.0.0.1".parse().unwrap(), 5).await.unwrap();
    info(Transport::TCP, "127.0.0.1", &ports)
}

fn info(transport: Transport, ip: &str, ports: &[u16]) -> ConnectionInfo {
    ConnectionInfo {
        ip: ip.to_owned(),
        transport,
        shell_port: ports[0],
        control_port: ports[1],
        stdin_port: ports[2],
        iopub_port: ports[3],
        hb_port: ports[4],
        key: "key".to_owned(),
        signature_scheme: "hmac-sha256".to_owned(),
        kernel_name: None,
    }
}

fn ipc(dir: &Path) -> ConnectionInfo {
    let prefix = dir.join("kernel");
    info(Transport::IPC, prefix.to_str().unwrap(), &[1, 2, 3, 4, 5])
}

/// A message goes in by the control socket, its reply comes back by it, and a heartbeat is echoed.
async fn exchange(info: ConnectionInfo) {
    let mut sockets = bind(&info, "kernel-session").await.unwrap();
    let mut client = create_client_control_connection(&info, "client-session").await.unwrap();
    client.send(KernelInfoRequest {}.into()).await.unwrap();
    let frames = timeout(SOON, sockets.control.recv()).await.unwrap().unwrap();
    let mut intake = crate::wire::Intake::new(&info.key);
    let request = intake.admit(Inlet::Control, frames).unwrap();
    let reply = jupyter_protocol::InterruptReply::new().as_child_of(&request.message);
    sockets.outlets.reply(Inlet::Control, reply).await;
    let answer = timeout(SOON, client.read()).await.unwrap().unwrap();
    assert_eq!(answer.header.msg_type, "interrupt_reply");
    assert_eq!(answer.header.session, "kernel-session");
    assert_eq!(answer.parent_header.unwrap().msg_id, request.message.header.msg_id);

    let mut pulse = ReqSocket::new();
    pulse.connect(&info.hb_url()).await.unwrap();
    for beat in ["one", "two"] {
        pulse.send(beat.into()).await.unwrap();
        let echo = timeout(SOON, pulse.recv()).await.unwrap().unwrap();
        assert_eq!(String::try_from(echo).unwrap(), beat);
    }
}

#[tokio::test]
async fn tcp_sockets_carry_requests_replies_and_heartbeats() {
    exchange(tcp().await).await;
}

#[tokio::test]
async fn ipc_sockets_do_too_and_only_their_owner_may_connect() {
    let dir = tempfile::tempdir().unwrap();
    let info = ipc(dir.path());
    exchange(info.clone()).await;

    let dir = tempfile::tempdir().unwrap();
    let info = ipc(dir.path());
    let _sockets = bind(&info, "s").await.unwrap();
    let mode = std::fs::metadata(format!("{}-1", info.ip)).unwrap().permissions().mode();
    assert_eq!(mode & 0o777, 0o600);
}

#[tokio::test]
async fn a_taken_port_is_named_with_its_socket() {
    let info = tcp().await;
    let _holder = std::net::TcpListener::bind(("127.0.0.1", info.iopub_port)).unwrap();
    let error = bind(&info, "s").await.err().unwrap();
    let text = error.to_string();
    assert!(text.contains("iopub socket") && text.contains(&info.iopub_port.to_string()), "{text}");
    assert!(text.to_lowercase().contains("in use"), "{text}");
}

#[tokio::test]
async fn an_abandoned_socket_file_is_replaced_and_a_live_one_is_not() {
    let dir = tempfile::tempdir().unwrap();
    let info = ipc(dir.path());
    let shell = format!("{}-1", info.ip);
    // Dropping the listener leaves its file behind, as a killed kernel does.
    drop(UnixListener::bind(&shell).unwrap());
    assert!(Path::new(&shell).exists());
    let sockets = bind(&info, "s").await.unwrap();
    drop(sockets);

    let dir = tempfile::tempdir().unwrap();
    let info = ipc(dir.path());
    let _live = UnixListener::bind(format!("{}-1", info.ip)).unwrap();
    let error = bind(&info, "s").await.err().unwrap();
    assert_eq!(error.socket, "shell");

    let dir = tempfile::tempdir().unwrap();
    let info = ipc(dir.path());
    std::fs::write(format!("{}-1", info.ip), "somebody's notes").unwrap();
    assert_eq!(bind(&info, "s").await.err().unwrap().socket, "shell");
    assert_eq!(std::fs::read_to_string(format!("{}-1", info.ip)).unwrap(), "somebody's notes");
}

#[tokio::test]
async fn broadcasts_reach_who_listens() {
    let info = tcp().await;
    let mut sockets = bind(&info, "kernel-session").await.unwrap();
    let mut listener = create_client_iopub_connection(&info, "", "c").await.unwrap();
    // A subscription takes effect some time after it is made; the first message that arrives
    // says that it has.
    let got = timeout(SOON, async {
        loop {
            sockets.outlets.publish(jupyter_protocol::Status::busy().into()).await;
            if let Ok(message) = timeout(Duration::from_millis(50), listener.read()).await {
                return message.unwrap();
            }
        }
    });
    assert_eq!(got.await.unwrap().header.msg_type, "status");
}
