//! The messaging protocol as a client sees it, against the real kernel and its engine.
//!
//! Expected behaviour is that of the protocol's page, version 5.3
//! (<https://jupyter-client.readthedocs.io/en/stable/messaging.html>), which each test names by
//! section where it is not plain. Requests and replies are made and read by `jupyter-protocol`,
//! not by anything of the kernel's own.

use std::path::Path;
use std::process::{Command, Output, Stdio};
use std::time::{Duration, Instant};

use jupyter_protocol::{
    CommId, CommInfoRequest, CommOpen, CompleteRequest, ConnectionInfo, ExecuteRequest,
    HistoryRequest, InspectRequest, IsCompleteRequest, JupyterMessage, JupyterMessageContent,
    KernelInfoRequest, ReplyStatus, ShutdownRequest, Transport, UnknownMessage,
};
use jupyter_zmq_client::{
    create_client_control_connection, create_client_shell_connection_with_identity,
    peer_identity_for_session,
};
use semiaxis_tests::client::{CELL, Client, SOON, Start, connection_info, kernel_executable};
use semiaxis_tests::command::semiaxis;
use serde_json::{Value, json};
use tokio::io::{AsyncReadExt, AsyncWriteExt};
use tokio::net::TcpStream;
use tokio::time::timeout;
use zeromq::{DealerSocket, ReqSocket, RouterSocket, Socket, SocketRecv, SocketSend};

/// Runs until it is stopped, and yields to an interrupt.
const ENDLESS: &str = "let mut turns = 0u64; loop { turns = turns.wrapping_add(1); }";

fn content(message: &JupyterMessage) -> Value {
    serde_json::to_value(&message.content).unwrap()
}

#[tokio::test]
async fn a_kernel_answers_before_its_engine_runs_and_ends_when_asked() {
    let started = Instant::now();
    let mut client = Client::start().await;
    // "Kernel info".
    let info = content(&client.ask(KernelInfoRequest {}).await);
    assert!(started.elapsed() < SOON);
    assert_eq!(info["status"], "ok");
    assert_eq!(info["implementation"], "semiaxis");
    assert_eq!(info["language_info"]["name"], "rust");
    assert_eq!(info["language_info"]["file_extension"], ".rs");
    let by_control = content(&client.ask_control(KernelInfoRequest {}).await);
    assert_eq!(by_control, info);
    assert!(client.shutdown(false).await.success());

    let client = Client::start().await;
    assert!(client.shutdown(true).await.success());
}

#[tokio::test]
async fn a_cell_is_framed_and_everything_names_it_as_parent() {
    for transport in [Transport::TCP, Transport::IPC] {
        let mut client = Client::start_with(Start { transport, ..Start::default() }).await;
        let cell = client.execute_well("println!(\"fired\"); 6 * 7").await;
        assert_eq!(cell.kinds(), ["busy", "execute_input", "stream", "execute_result", "idle"]);
        assert_eq!(cell.stdout(), "fired\n");
        assert_eq!(cell.result_text(), Some("42"));
        assert_eq!(cell.reply.execution_count.value(), 1);
        let parent = cell.reply_message.parent_header.as_ref().unwrap();
        assert_eq!(parent.session, client.session);
        let sessions: Vec<_> = cell.broadcasts.iter().map(|m| &m.header.session).collect();
        assert!(sessions.iter().all(|session| **session == cell.reply_message.header.session));
        assert_ne!(*sessions[0], client.session);
        let input = content(&cell.broadcasts[1]);
        assert_eq!(input["execution_count"], 1);
        assert_eq!(input["code"], "println!(\"fired\"); 6 * 7");
        let quiet = client.execute_well("let x = 1;").await;
        assert_eq!(quiet.kinds(), ["busy", "execute_input", "idle"]);
        assert_eq!(quiet.reply.execution_count.value(), 2);
        assert!(client.shutdown(false).await.success());
    }
}

#[tokio::test]
async fn what_a_cell_writes_comes_while_it_runs_and_apart() {
    let mut client = Client::start().await;
    client.execute_well("0").await;
    // Text without a newline is to be seen at once: the cell goes on for two seconds after it.
    let code = "use std::io::Write; print!(\"weight? \"); std::io::stdout().flush()?; \
                std::thread::sleep(std::time::Duration::from_secs(2));";
    let id = client.send(ExecuteRequest::new(code.to_owned())).await;
    let seen = loop {
        let message = client.next_broadcast(&id, CELL).await;
        if let JupyterMessageContent::StreamContent(stream) = &message.content {
            assert_eq!(stream.text, "weight? ");
            break Instant::now();
        }
    };
    client.broadcasts_until_idle(&id, CELL).await;
    assert!(seen.elapsed() > Duration::from_millis(1500), "seen only at the end");
    client.reply_to(&id, SOON).await;

    let cell = client.execute_well("println!(\"out\"); eprintln!(\"err\");").await;
    assert_eq!((cell.stdout().as_str(), cell.stderr().as_str()), ("out\n", "err\n"));
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn ten_megabytes_pass_whole_in_few_messages() {
    let mut client = Client::start().await;
    client.execute_well("0").await;
    let line = "x".repeat(99);
    let cell =
        client.execute_well(&format!("for _ in 0..100_000 {{ println!(\"{line}\"); }}")).await;
    assert_eq!(cell.stdout().len(), 10_000_000);
    assert!(cell.broadcasts.len() < 1_500, "{} messages", cell.broadcasts.len());
    assert!(cell.elapsed < Duration::from_secs(20), "{:?}", cell.elapsed);
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn a_failing_cell_takes_the_queue_with_it_only_if_asked_to() {
    let mut client = Client::start().await;
    client.execute_well("let kept = 5;").await;
    for code in ["let broken: u32 = \"text\";", "panic!(\"cracked\")", "\"x\".parse::<f64>()?;"] {
        let failing = client.send(ExecuteRequest::new(code.to_owned())).await;
        let waiting = client.send(ExecuteRequest::new("println!(\"never\")".to_owned())).await;
        let failed = client.collect(&failing, CELL).await;
        let error = failed.error().expect("an error is broadcast");
        assert_eq!(failed.reply.status, ReplyStatus::Error);
        // "Execution results": the reply repeats the error.
        let told = failed.reply.error.as_ref().unwrap();
        assert_eq!((&told.ename, &told.evalue), (&error.name, &error.value));
        assert_eq!(told.traceback, error.traceback);
        assert!(!error.traceback.is_empty());
        let aborted = client.collect(&waiting, CELL).await;
        assert_eq!(aborted.reply.status, ReplyStatus::Aborted);
        assert_eq!(aborted.kinds(), ["busy", "idle"]);
    }
    let alone = ExecuteRequest {
        stop_on_error: false,
        ..ExecuteRequest::new("panic!(\"alone\")".to_owned())
    };
    let failing = client.send(alone).await;
    let next = client.send(ExecuteRequest::new("kept".to_owned())).await;
    assert_eq!(client.collect(&failing, CELL).await.reply.status, ReplyStatus::Error);
    assert_eq!(client.collect(&next, CELL).await.result_text(), Some("5"));
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn silent_unstored_and_counted_cells_and_the_history_of_them() {
    let mut client = Client::start().await;
    client.execute_well("let a = 1;").await;
    let silent = ExecuteRequest {
        silent: true,
        ..ExecuteRequest::new("println!(\"unheard\"); let b = a + 1; b".to_owned())
    };
    let id = client.send(silent).await;
    let cell = client.collect(&id, CELL).await;
    assert_eq!(cell.kinds(), ["busy", "idle"]);
    assert_eq!(cell.reply.status, ReplyStatus::Ok);
    let unstored =
        ExecuteRequest { store_history: false, ..ExecuteRequest::new("b + 1".to_owned()) };
    let id = client.send(unstored).await;
    let cell = client.collect(&id, CELL).await;
    assert_eq!((cell.result_text(), cell.reply.execution_count.value()), (Some("3"), 2));
    let cell = client.execute_well("b + 2").await;
    assert_eq!((cell.result_text(), cell.reply.execution_count.value()), (Some("4"), 2));

    // "History".
    let tail = HistoryRequest::Tail { n: 10, output: true, raw: true };
    let reply = content(&client.ask(tail).await);
    assert_eq!(reply["history"], json!([[1, 1, ["let a = 1;", ""]], [1, 2, ["b + 2", "4"]]]));
    let range =
        HistoryRequest::Range { session: Some(0), start: 2, stop: 3, output: false, raw: true };
    let reply = content(&client.ask(range).await);
    assert_eq!(reply["history"], json!([[1, 2, "b + 2"]]));
    let search = HistoryRequest::Search {
        pattern: "let*".to_owned(),
        unique: true,
        output: false,
        raw: true,
        n: 5,
    };
    let reply = content(&client.ask(search).await);
    assert_eq!(reply["history"], json!([[1, 1, "let a = 1;"]]));
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn expressions_are_evaluated_after_the_cell() {
    let mut client = Client::start().await;
    let request = ExecuteRequest {
        user_expressions: Some(
            [("twice", "w * 2"), ("wrong", "no_such_name")]
                .map(|(name, text)| (name.to_owned(), text.to_owned()))
                .into(),
        ),
        ..ExecuteRequest::new("let w = 21;".to_owned())
    };
    let id = client.send(request).await;
    let cell = client.collect(&id, SOON.max(CELL)).await;
    let told = serde_json::to_value(&cell.reply.user_expressions).unwrap();
    assert_eq!(told["twice"]["status"], "ok");
    assert_eq!(told["twice"]["data"]["text/plain"], "42");
    assert_eq!(told["wrong"]["status"], "error");
    assert!(told["wrong"]["evalue"].as_str().unwrap().contains("no_such_name"), "{told}");
    // They are not cells: nothing is counted, shown or remembered.
    assert_eq!(cell.kinds(), ["busy", "execute_input", "idle"]);
    assert_eq!(client.execute_well("w").await.reply.execution_count.value(), 2);
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn code_is_judged_completed_and_explained() {
    let mut client = Client::start().await;
    client
        .execute_well("/// Weighs a tile.\npub fn weigh(tile: u32) -> f64 { tile as f64 * 1.5 }")
        .await;
    client.execute_well("let weighty = weigh(2);").await;
    let judge = async |client: &mut Client, code: &str| {
        let reply = client.ask(IsCompleteRequest { code: code.to_owned() }).await;
        content(&reply)["status"].as_str().unwrap().to_owned()
    };
    assert_eq!(judge(&mut client, "1 + 1").await, "complete");
    assert_eq!(judge(&mut client, "fn f() {").await, "incomplete");
    assert_eq!(judge(&mut client, "fn f() }").await, "invalid");

    // "Completion": positions count characters, which the letter before shows.
    let code = "let größe = wei".to_owned();
    let ask = CompleteRequest { cursor_pos: code.chars().count(), code };
    let reply = content(&client.ask(ask).await);
    assert_eq!((&reply["cursor_start"], &reply["cursor_end"]), (&json!(12), &json!(15)));
    let matches: Vec<_> =
        reply["matches"].as_array().unwrap().iter().map(|m| m.as_str().unwrap()).collect();
    assert!(matches.iter().any(|found| found.starts_with("weigh")), "{matches:?}");
    assert!(matches.contains(&"weighty"), "{matches:?}");
    // What the prelude offers is there as soon as its index is read.
    let ask = || CompleteRequest { code: "principal_comp".to_owned(), cursor_pos: 14 };
    let deadline = Instant::now() + SOON;
    loop {
        let reply = content(&client.ask(ask()).await);
        if reply["matches"].to_string().contains("principal_components") {
            break;
        }
        assert!(Instant::now() < deadline, "{reply}");
    }

    let ask = InspectRequest { code: "weigh(3)".to_owned(), cursor_pos: 2, detail_level: Some(0) };
    let reply = content(&client.ask(ask).await);
    assert_eq!(reply["found"], true);
    let text = reply["data"]["text/plain"].as_str().unwrap();
    assert!(text.contains("Weighs a tile") && text.contains("f64"), "{text}");
    let ask = InspectRequest {
        code: "principal_components".to_owned(),
        cursor_pos: 4,
        detail_level: Some(0),
    };
    assert_eq!(content(&client.ask(ask).await)["found"], true);
    let ask =
        InspectRequest { code: "unheard_of".to_owned(), cursor_pos: 4, detail_level: Some(0) };
    let reply = content(&client.ask(ask).await);
    assert_eq!((&reply["status"], &reply["found"]), (&json!("ok"), &json!(false)));
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn a_running_cell_is_interrupted_by_message_and_by_signal_and_variables_survive() {
    let mut client = Client::start().await;
    client.execute_well("let kept = 12;").await;
    for by_signal in [false, true] {
        let id = client.send(ExecuteRequest::new(ENDLESS.to_owned())).await;
        let waiting = client.send(ExecuteRequest::new("1".to_owned())).await;
        assert_eq!(client.next_broadcast(&id, CELL).await.header.msg_type, "status");
        // Control is served while the cell runs, and shell's questions too.
        assert_eq!(content(&client.ask_control(KernelInfoRequest {}).await)["status"], "ok");
        assert_eq!(content(&client.ask(KernelInfoRequest {}).await)["status"], "ok");
        if by_signal {
            client.signal(libc::SIGINT);
        } else {
            client.interrupt().await;
        }
        let cell = client.collect(&id, CELL).await;
        assert_eq!(cell.reply.status, ReplyStatus::Error);
        assert!(cell.error().unwrap().name.contains("Interrupted"), "{:?}", cell.error());
        assert_eq!(client.collect(&waiting, CELL).await.reply.status, ReplyStatus::Aborted);
    }
    assert_eq!(client.execute_well("kept").await.result_text(), Some("12"));
    // With nothing to interrupt, neither has an effect.
    client.interrupt().await;
    client.signal(libc::SIGINT);
    assert_eq!(client.execute_well("kept + 1").await.result_text(), Some("13"));
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn a_heartbeat_is_echoed_also_while_a_cell_runs() {
    let mut client = Client::start().await;
    let id = client.send(ExecuteRequest::new(ENDLESS.to_owned())).await;
    client.next_broadcast(&id, CELL).await;
    let mut pulse = ReqSocket::new();
    pulse.connect(&client.info.hb_url()).await.unwrap();
    for beat in ["first", "second"] {
        pulse.send(beat.into()).await.unwrap();
        let echo = timeout(SOON, pulse.recv()).await.expect("a heartbeat in time").unwrap();
        assert_eq!(String::try_from(echo).unwrap(), beat);
    }
    // Shutting down does not wait for the cell, and its sender is told.
    let asked = client.send_control(ShutdownRequest { restart: false }).await;
    let cell = client.collect(&id, SOON).await;
    assert_eq!(cell.reply.status, ReplyStatus::Aborted);
    let told = client.broadcasts_until_idle(&asked, SOON).await;
    assert!(told.iter().any(|message| message.header.msg_type == "shutdown_reply"));
    assert!(client.wait_for_end().await.success());
}

#[tokio::test]
async fn comms_are_closed_and_unknown_or_malformed_requests_answered() {
    let mut client = Client::start().await;
    let reply = content(&client.ask(CommInfoRequest::default()).await);
    assert_eq!(reply, json!({"status": "ok", "comms": {}}));
    // "Opening a comm": an unknown target is closed at once.
    let open = CommOpen {
        comm_id: CommId("c-1".to_owned()),
        target_name: "nobody".to_owned(),
        ..CommOpen::default()
    };
    let id = client.send(open).await;
    let broadcasts = client.broadcasts_until_idle(&id, SOON).await;
    assert_eq!(broadcasts[1].header.msg_type, "comm_close");
    assert_eq!(content(&broadcasts[1])["comm_id"], "c-1");

    let unknown = UnknownMessage { msg_type: "telepathy_request".into(), content: json!({}) };
    let id = client.send(unknown).await;
    let reply = client.reply_to(&id, SOON).await;
    assert_eq!(reply.header.msg_type, "telepathy_reply");
    assert_eq!(content(&reply)["ename"], "UnknownRequest");
    assert_eq!(client.broadcasts_until_idle(&id, SOON).await.len(), 2);

    let malformed = UnknownMessage {
        msg_type: "execute_request".into(),
        content: json!({"code": ["not", "text"]}),
    };
    let id = client.send(malformed).await;
    let reply = content(&client.reply_to(&id, SOON).await);
    assert_eq!(reply["status"], "error");
    assert_eq!(client.broadcasts_until_idle(&id, SOON).await.len(), 2);
    assert_eq!(client.execute_well("1 + 2").await.result_text(), Some("3"));
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn wrong_signatures_and_replays_are_refused_and_garbage_does_no_harm() {
    let mut client = Client::start().await;
    let marker = tempfile::tempdir().unwrap();
    let write = |name: &str| {
        let path = marker.path().join(name);
        ExecuteRequest::new(format!(
            "use std::io::Write; std::fs::OpenOptions::new().append(true).create(true)\
             .open({path:?})?.write_all(b\"x\")?;"
        ))
    };
    // Signed with another key.
    let other = ConnectionInfo { key: "another key".to_owned(), ..client.info.clone() };
    let identity = peer_identity_for_session("stranger").unwrap();
    let mut stranger =
        create_client_shell_connection_with_identity(&other, "stranger", identity).await.unwrap();
    stranger.send(write("forged").into()).await.unwrap();

    // The same frames twice: a client's message is caught on its way, and sent on two times.
    let (ports, _held) = connection_info(&Start::default(), marker.path()).await;
    drop(_held);
    let trap_info = ConnectionInfo { key: client.info.key.clone(), ..ports };
    let mut trap = RouterSocket::new();
    trap.bind(&trap_info.control_url()).await.unwrap();
    let mut honest = create_client_control_connection(&trap_info, "honest").await.unwrap();
    honest.send(write("replayed").into()).await.unwrap();
    let caught = timeout(SOON, trap.recv()).await.unwrap().unwrap();
    // The first frame is the identity that the router put there.
    let mut caught = caught.into_vecdeque();
    caught.pop_front();
    let mut raw = DealerSocket::new();
    raw.connect(&client.info.shell_url()).await.unwrap();
    for _ in 0..2 {
        raw.send(caught.clone().try_into().unwrap()).await.unwrap();
    }
    for garbage in ["", "<IDS|MSG>", "{\"header\": 1}", "\u{1}\u{0}"] {
        raw.send(garbage.into()).await.unwrap();
    }
    // The one reply there is says that the first copy has run; the second and the garbage came
    // before the cell that follows, for messages of one socket keep their order.
    timeout(CELL, raw.recv()).await.expect("the honest message is served").unwrap();
    assert_eq!(client.execute_well("1").await.result_text(), Some("1"));
    assert_eq!(std::fs::read_to_string(marker.path().join("replayed")).unwrap(), "x");
    assert!(!marker.path().join("forged").exists());
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn a_stranger_who_announces_more_than_there_is_memory_is_dropped() {
    let mut client = Client::start().await;
    let info = client.info.clone();
    // ZMTP 3.1: signature, version 3.0, mechanism NULL, then a long frame and its length.
    let mut hello = vec![0xff, 0, 0, 0, 0, 0, 0, 0, 0, 0x7f, 3, 0];
    hello.extend(b"NULL");
    hello.resize(64, 0);
    hello.push(0x02);
    hello.extend((1_u64 << 59).to_be_bytes());
    for port in [info.shell_port, info.control_port, info.stdin_port, info.iopub_port, info.hb_port]
    {
        for bytes in [hello.as_slice(), &[0xff; 5000]] {
            let mut stranger = TcpStream::connect(("127.0.0.1", port)).await.unwrap();
            stranger.write_all(bytes).await.unwrap();
            // Dropped: the stream ends, or is reset if there was more to read.
            let ended = timeout(SOON, stranger.read_to_end(&mut Vec::new())).await;
            assert!(ended.is_ok(), "port {port} keeps the connection");
        }
    }
    assert_eq!(client.execute_well("1 + 1").await.result_text(), Some("2"));
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn a_termination_signal_and_a_lost_client_end_the_kernel() {
    let mut client = Client::start().await;
    client.signal(libc::SIGTERM);
    assert!(client.wait_for_end().await.success());

    // The kernel watches the process that its client names; here that is one of the test's own.
    let mut watched = Command::new("sleep").arg("1000").spawn().unwrap();
    let environment = [("JPY_PARENT_PID".to_owned(), watched.id().to_string())].into();
    let mut client = Client::start_with(Start { environment, ..Start::default() }).await;
    watched.kill().unwrap();
    watched.wait().unwrap();
    assert!(client.wait_for_end().await.success());

    // A process that it cannot see from the beginning says nothing.
    let environment = [("JPY_PARENT_PID".to_owned(), watched.id().to_string())].into();
    let client = Client::start_with(Start { environment, ..Start::default() }).await;
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn without_a_key_the_kernel_warns_and_serves() {
    let dir = tempfile::tempdir().unwrap();
    let (info, held) =
        connection_info(&Start { key: String::new(), ..Start::default() }, dir.path()).await;
    drop(held);
    let file = dir.path().join("connection.json");
    std::fs::write(&file, serde_json::to_vec(&info).unwrap()).unwrap();
    let kernel = tokio::process::Command::new(kernel_executable())
        .arg("kernel")
        .arg(&file)
        .env_remove("LD_LIBRARY_PATH")
        .stderr(Stdio::piped())
        .kill_on_drop(true)
        .spawn()
        .unwrap();
    let mut control = timeout(SOON, async {
        loop {
            if let Ok(control) = create_client_control_connection(&info, "c").await {
                return control;
            }
        }
    })
    .await
    .unwrap();
    control.send(ShutdownRequest { restart: false }.into()).await.unwrap();
    let reply = timeout(SOON, control.read()).await.unwrap().unwrap();
    assert_eq!(reply.header.msg_type, "shutdown_reply");
    let output = timeout(SOON, kernel.wait_with_output()).await.unwrap().unwrap();
    assert!(output.status.success());
    let said = String::from_utf8(output.stderr).unwrap();
    assert!(said.contains("empty key"), "{said}");
}

/// Starts a kernel that is expected to give up at once.
fn give_up(connection_file: &Path) -> (Option<i32>, String) {
    let path = connection_file.to_str().unwrap();
    let Output { status, stderr, stdout } = semiaxis(["kernel", path]).output().unwrap();
    assert!(stdout.is_empty());
    (status.code(), String::from_utf8(stderr).unwrap())
}

#[tokio::test]
async fn connection_files_that_cannot_be_used_end_with_status_2_and_a_reason() {
    let dir = tempfile::tempdir().unwrap();
    let (info, _held) = connection_info(&Start::default(), dir.path()).await;
    let good = serde_json::to_value(&info).unwrap();
    let with = |field: &str, value: Value| {
        let mut file = good.clone();
        file[field] = value;
        file.to_string()
    };
    let missing = dir.path().join("none.json");
    let (status, said) = give_up(&missing);
    assert_eq!(status, Some(2), "{said}");
    assert!(said.contains("none.json"), "{said}");
    for (text, expected) in [
        (String::new(), "malformed"),
        ("{ not json".to_owned(), "malformed"),
        (with("shell_port", json!("many")), "malformed"),
        (with("ip", json!("0.0.0.0")), "'0.0.0.0'"),
        (with("ip", json!("192.0.2.7")), "'192.0.2.7'"),
        (with("signature_scheme", json!("none")), "'none'"),
        (with("hb_port", json!(0)), "hb_port"),
    ] {
        let file = dir.path().join("connection.json");
        std::fs::write(&file, &text).unwrap();
        let (status, said) = give_up(&file);
        assert_eq!(status, Some(2), "{text}: {said}");
        assert!(said.contains(expected) && said.contains("connection.json"), "{text}: {said}");
    }
}

#[tokio::test]
async fn a_taken_port_ends_with_status_3_and_names_the_port() {
    let dir = tempfile::tempdir().unwrap();
    let (info, held) = connection_info(&Start::default(), dir.path()).await;
    let file = dir.path().join("connection.json");
    std::fs::write(&file, serde_json::to_vec(&info).unwrap()).unwrap();
    let (status, said) = give_up(&file);
    drop(held);
    assert_eq!(status, Some(3), "{said}");
    assert!(said.contains(&info.shell_port.to_string()) && said.contains("shell"), "{said}");
}

#[test]
fn the_kernel_registers_itself_where_it_is_told() {
    let prefix = tempfile::tempdir().unwrap();
    let install = || {
        let prefix = prefix.path().to_str().unwrap();
        semiaxis(["install", "--prefix", prefix]).output().unwrap()
    };
    assert!(install().status.success());
    let again = install();
    assert!(again.status.success());
    assert!(String::from_utf8(again.stdout).unwrap().contains("Semiaxis (Rust)"));
    let folder = prefix.path().join("share/jupyter/kernels/semiaxis");
    let spec: Value =
        serde_json::from_slice(&std::fs::read(folder.join("kernel.json")).unwrap()).unwrap();
    assert_eq!(spec["display_name"], "Semiaxis (Rust)");
    assert_eq!(spec["interrupt_mode"], "message");
    let program = Path::new(spec["argv"][0].as_str().unwrap());
    assert!(program.is_absolute() && program.exists());
    assert_eq!(
        spec["argv"].as_array().unwrap()[1..],
        [json!("kernel"), json!("{connection_file}")]
    );
}
