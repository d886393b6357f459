//! The service with a scripted evaluator in place of the engine and a recorder in place of the
//! sockets. What reaches the wire is compared as a list of short lines, one per message:
//! `<what> [details]`, replies as `-> type status`.

use std::cell::RefCell;
use std::ops::ControlFlow;
use std::rc::Rc;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

use jupyter_protocol::{
    CommId, CommInfoRequest, CommOpen, CompleteRequest, ExecuteRequest, ExecutionState,
    HistoryRequest, InterruptRequest, JupyterMessage, JupyterMessageContent, KernelInfoRequest,
    ShutdownRequest, UnknownMessage,
};
use serde_json::{Value, json};
use tokio::sync::{Notify, mpsc};
use tokio::time::timeout;

use super::engine::{self, News, Progress};
use super::evaluator::{Evaluator, Interrupt};
use super::publish::Outlet;
use super::service::{Event, Service};
use super::watch::Signal;
use crate::cells::types::{
    CellEvent, CellFailure, CellReply, CellRequest, Facts, MimeBundle, Outcome, Scope, StreamName,
    Timings, VariableInfo,
};
use crate::wire::{Inlet, Request};
use crate::worker::message::Line;

/// Longer than anything here takes, short enough to be waited for when something hangs.
const DEADLINE: Duration = Duration::from_secs(20);

/// Does what the lines of a cell say.
///
/// An interrupt reaches it while it executes, as it does the engine; one that came before is lost.
struct Script {
    interrupted: Arc<Interrupted>,
    defined: Vec<String>,
}

#[derive(Default)]
struct Interrupted {
    flag: AtomicBool,
    wake: Notify,
}

impl Script {
    fn new() -> Self {
        Self { interrupted: Arc::default(), defined: Vec::new() }
    }

    async fn line(&mut self, line: &str, events: &mpsc::Sender<CellEvent>) -> Option<Outcome> {
        let (word, rest) = line.split_once(' ').unwrap_or((line, ""));
        let stream = |name| CellEvent::Stream { name, text: rest.to_owned() };
        match word {
            "out" => events.send(stream(StreamName::Stdout)).await.unwrap(),
            "err" => events.send(stream(StreamName::Stderr)).await.unwrap(),
            "show" => events.send(CellEvent::Display(plain(rest))).await.unwrap(),
            "result" => events.send(CellEvent::Result(plain(rest))).await.unwrap(),
            "work" => events.send(CellEvent::Progress(work(rest.parse().ok()))).await.unwrap(),
            "let" => self.defined.push(rest.to_owned()),
            "fail" => return Some(Outcome::Failed(failure("Oops", rest))),
            "panic" => panic!("on purpose"),
            "wait" => {
                while !self.interrupted.flag.swap(false, Ordering::SeqCst) {
                    self.interrupted.wake.notified().await;
                }
                return Some(Outcome::Interrupted(failure("Interrupted", "as asked")));
            }
            other => panic!("the script has no '{other}'"),
        }
        None
    }
}

impl Evaluator for Script {
    async fn execute(
        &mut self,
        request: CellRequest,
        events: mpsc::Sender<CellEvent>,
    ) -> CellReply {
        let timings = Timings { compiled: true, ..Timings::default() };
        self.interrupted.flag.store(false, Ordering::SeqCst);
        for line in request.code.lines() {
            if let Some(outcome) = self.line(line, &events).await {
                return CellReply { outcome, timings, facts: Facts::default() };
            }
        }
        CellReply { outcome: Outcome::Done, timings, facts: Facts::default() }
    }

    async fn evaluate(&mut self, expression: &str) -> Result<MimeBundle, CellFailure> {
        match expression.strip_prefix("fail ") {
            Some(reason) => Err(failure("Oops", reason)),
            None => Ok(plain(expression)),
        }
    }

    fn interrupter(&self) -> Interrupt {
        let interrupted = Arc::clone(&self.interrupted);
        Box::new(move || {
            interrupted.flag.store(true, Ordering::SeqCst);
            interrupted.wake.notify_one();
        })
    }

    fn scope(&self) -> Scope {
        let variable = |name: &String| VariableInfo {
            name: name.clone(),
            type_text: "i32".to_owned(),
            mutable: false,
            cell: 1,
        };
        Scope { variables: self.defined.iter().map(variable).collect(), items: Vec::new() }
    }

    async fn shutdown(self) {}
}

fn plain(text: &str) -> MimeBundle {
    json!({"text/plain": text}).as_object().unwrap().clone()
}

/// A line that says so many of ten steps are done, or none.
fn work(done: Option<usize>) -> Option<Line> {
    done.map(|done| Line { what: "fits".to_owned(), done, total: Some(10), seconds: 2.0 })
}

fn failure(name: &str, message: &str) -> CellFailure {
    CellFailure {
        name: name.to_owned(),
        message: message.to_owned(),
        traceback: vec![format!("{name}: {message}")],
        line: None,
    }
}

/// A message, and the inlet it answers if it is a reply.
type Sent = (Option<Inlet>, JupyterMessage);

/// Keeps what would have been sent, in order.
#[derive(Clone, Default)]
struct Recorder(Rc<RefCell<Vec<Sent>>>);

impl Outlet for Recorder {
    async fn reply(&mut self, inlet: Inlet, message: JupyterMessage) {
        self.0.borrow_mut().push((Some(inlet), message));
    }

    async fn publish(&mut self, message: JupyterMessage) {
        self.0.borrow_mut().push((None, message));
    }
}

struct Harness {
    service: Service<Recorder>,
    news: mpsc::Receiver<News>,
    sent: Recorder,
}

impl Harness {
    /// A session whose engine is ready.
    async fn ready() -> Self {
        let mut harness = Self::starting(|_| async { Ok(Script::new()) });
        harness.next_news().await;
        harness
    }

    fn starting<E: Evaluator, F: Future<Output = Result<E, String>>>(
        start: impl FnOnce(Progress) -> F + Send + 'static,
    ) -> Self {
        let (engine, news) = engine::start(start);
        let sent = Recorder::default();
        Self { service: Service::new("k", sent.clone(), engine), news, sent }
    }

    async fn next_news(&mut self) {
        let news = timeout(DEADLINE, self.news.recv()).await.expect("no news in time");
        assert!(self.service.handle(Event::Engine(news)).await.is_continue());
    }

    /// Sends a request and returns its id.
    async fn ask(&mut self, content: impl Into<JupyterMessageContent>) -> String {
        self.ask_by(Inlet::Shell, content).await.0
    }

    async fn ask_by(
        &mut self,
        inlet: Inlet,
        content: impl Into<JupyterMessageContent>,
    ) -> (String, ControlFlow<()>) {
        let message = JupyterMessage::new(content, None);
        let id = message.header.msg_id.clone();
        let request = Request { inlet, message, defect: None };
        (id, self.service.handle(Event::Request(Box::new(request))).await)
    }

    async fn run(&mut self, code: &str) -> String {
        self.ask(ExecuteRequest::new(code.to_owned())).await
    }

    /// Drives the session until the request has its `idle`.
    async fn until_idle(&mut self, id: &str) {
        while !self.is_idle(id) {
            self.step().await;
        }
    }

    /// Lets one thing happen.
    async fn step(&mut self) {
        let due = self.service.flush_due();
        let event = tokio::select! {
            news = timeout(DEADLINE, self.news.recv()) => {
                Event::Engine(news.expect("no news in time"))
            }
            () = tokio::time::sleep_until(due.into()) => Event::FlushDue,
        };
        assert!(self.service.handle(event).await.is_continue());
    }

    async fn interrupt(&mut self) {
        assert!(self.service.handle(Event::Signal(Signal::Interrupt)).await.is_continue());
    }

    fn is_idle(&self, id: &str) -> bool {
        let is_idle = |message: &JupyterMessage| match &message.content {
            JupyterMessageContent::Status(status) => {
                status.execution_state == ExecutionState::Idle && parent_id(message) == Some(id)
            }
            _ => false,
        };
        self.sent.0.borrow().iter().any(|(_, message)| is_idle(message))
    }

    async fn run_to_end(&mut self, code: &str) -> Vec<String> {
        let id = self.run(code).await;
        self.until_idle(&id).await;
        self.lines(&id)
    }

    /// What was sent about a request, a short line for each message.
    fn lines(&self, id: &str) -> Vec<String> {
        let sent = self.sent.0.borrow();
        sent.iter()
            .filter(|(_, message)| parent_id(message) == Some(id))
            .map(|(inlet, message)| line(*inlet, message))
            .collect()
    }

    /// The content of the reply to a request.
    fn reply(&self, id: &str) -> Value {
        let sent = self.sent.0.borrow();
        let (_, message) = sent
            .iter()
            .find(|(inlet, message)| inlet.is_some() && parent_id(message) == Some(id))
            .expect("no reply");
        serde_json::to_value(&message.content).unwrap()
    }
}

fn parent_id(message: &JupyterMessage) -> Option<&str> {
    message.parent_header.as_ref().map(|header| header.msg_id.as_str())
}

fn line(inlet: Option<Inlet>, message: &JupyterMessage) -> String {
    let kind = message.header.msg_type.as_str();
    let content = serde_json::to_value(&message.content).unwrap();
    let text = |value: &Value| value.as_str().unwrap_or_default().to_owned();
    if inlet.is_some() {
        return format!("-> {kind} {}", text(&content["status"]));
    }
    match kind {
        "status" => text(&content["execution_state"]),
        "stream" => format!("{} {}", text(&content["name"]), text(&content["text"])),
        "execute_input" => format!("input [{}]", content["execution_count"]),
        "execute_result" => {
            format!(
                "result [{}] {}",
                content["execution_count"],
                text(&content["data"]["text/plain"])
            )
        }
        "display_data" => format!("display {}", text(&content["data"]["text/plain"])),
        "update_display_data" => format!("update {}", text(&content["data"]["text/plain"])),
        "error" => format!("error {}: {}", text(&content["ename"]), text(&content["evalue"])),
        other => other.to_owned(),
    }
}

#[tokio::test]
async fn a_cell_shows_everything_in_order_between_busy_and_idle() {
    let mut session = Harness::ready().await;
    let lines = session.run_to_end("out a\nout b\nerr c\nshow d\nout e\nresult f").await;
    assert_eq!(
        lines,
        [
            "busy",
            "input [1]",
            "stdout ab",
            "stderr c",
            "display d",
            "stdout e",
            "result [1] f",
            "-> execute_reply ok",
            "idle"
        ]
    );
    assert_eq!(session.run_to_end("result g").await[1], "input [2]");
}

#[tokio::test]
async fn long_work_is_one_line_that_changes_and_goes() {
    let mut session = Harness::ready().await;
    let watched =
        |code: &str| ExecuteRequest { allow_stdin: true, ..ExecuteRequest::new(code.into()) };
    let id = session.ask(watched("work 4\nwork 8\nwork over\nout a\nwork 2\nfail broken")).await;
    session.until_idle(&id).await;
    assert_eq!(
        session.lines(&id)[2..],
        [
            "display fits: 4 of 10, 2 a second, about 3 s left",
            "update fits: 8 of 10, 4 a second, about 1 s left",
            "update ",
            "stdout a",
            "update fits: 2 of 10, 1 a second, about 8 s left",
            "update ",
            "error Oops: broken",
            "-> execute_reply error",
            "idle"
        ]
    );
    // A client that runs a notebook by itself would keep the line in the file.
    let unwatched = ExecuteRequest { allow_stdin: false, ..watched("work 4\nresult f") };
    let id = session.ask(unwatched).await;
    session.until_idle(&id).await;
    assert_eq!(session.lines(&id)[2..], ["result [2] f", "-> execute_reply ok", "idle"]);
}

#[tokio::test]
async fn a_failed_cell_says_so_twice_and_takes_the_waiting_ones_with_it() {
    let mut session = Harness::ready().await;
    let first = session.run("out a\nfail broken").await;
    let second = session.run("result never").await;
    let third = session.run("result never").await;
    session.until_idle(&third).await;
    assert_eq!(
        session.lines(&first),
        ["busy", "input [1]", "stdout a", "error Oops: broken", "-> execute_reply error", "idle"]
    );
    let reply = session.reply(&first);
    assert_eq!(reply["ename"], "Oops");
    assert_eq!(reply["traceback"], json!(["Oops: broken"]));
    assert_eq!(reply["execution_count"], 1);
    for id in [second, third] {
        assert_eq!(session.lines(&id), ["busy", "-> execute_reply aborted", "idle"]);
    }
    // The session goes on, and aborted cells were not counted.
    assert_eq!(session.run_to_end("result h").await[1], "input [2]");
}

#[tokio::test]
async fn a_cell_that_does_not_ask_for_it_fails_alone() {
    let mut session = Harness::ready().await;
    let request =
        ExecuteRequest { stop_on_error: false, ..ExecuteRequest::new("fail x".to_owned()) };
    session.ask(request).await;
    let second = session.run("result y").await;
    session.until_idle(&second).await;
    assert!(session.lines(&second).contains(&"-> execute_reply ok".to_owned()));
}

#[tokio::test]
async fn a_silent_cell_is_not_heard_counted_or_remembered() {
    let mut session = Harness::ready().await;
    let silent = ExecuteRequest {
        silent: true,
        store_history: true,
        ..ExecuteRequest::new("out a\nresult b\nfail c".to_owned())
    };
    let id = session.ask(silent).await;
    session.until_idle(&id).await;
    assert_eq!(session.lines(&id), ["busy", "-> execute_reply error", "idle"]);
    let unstored =
        ExecuteRequest { store_history: false, ..ExecuteRequest::new("result b".to_owned()) };
    let id = session.ask(unstored).await;
    session.until_idle(&id).await;
    assert_eq!(session.lines(&id)[1..3], ["input [1]", "result [1] b"]);
    assert_eq!(session.run_to_end("result d").await[1], "input [1]");

    let tail = HistoryRequest::Tail { n: 9, output: true, raw: true };
    let id = session.ask(tail).await;
    assert_eq!(session.reply(&id)["history"], json!([[1, 1, ["result d", "d"]]]));
}

#[tokio::test]
async fn expressions_are_evaluated_after_a_cell_that_went_well() {
    let mut session = Harness::ready().await;
    let ask = |code: &str| ExecuteRequest {
        user_expressions: Some(
            [("good", "1 + 1"), ("bad", "fail x")]
                .map(|(name, text)| (name.to_owned(), text.to_owned()))
                .into(),
        ),
        ..ExecuteRequest::new(code.to_owned())
    };
    let id = session.ask(ask("out a")).await;
    session.until_idle(&id).await;
    assert_eq!(
        session.reply(&id)["user_expressions"],
        json!({
            "good": {"status": "ok", "data": {"text/plain": "1 + 1"}, "metadata": {}},
            "bad": {"status": "error", "ename": "Oops", "evalue": "x", "traceback": ["Oops: x"]}
        })
    );
    let id = session.ask(ask("fail y")).await;
    session.until_idle(&id).await;
    assert_eq!(session.reply(&id)["user_expressions"], json!({}));
}

#[tokio::test]
async fn questions_are_answered_while_a_cell_runs_and_the_kernel_still_looks_busy() {
    let mut session = Harness::ready().await;
    let cell = session.run("wait").await;
    let info = session.ask_by(Inlet::Control, KernelInfoRequest {}).await.0;
    assert_eq!(session.lines(&info), ["busy", "-> kernel_info_reply ok", "idle"]);
    assert_eq!(session.lines(&cell), ["busy", "input [1]", "busy"]);
    let ask = CompleteRequest { code: "x".to_owned(), cursor_pos: 99 };
    let id = session.ask(ask).await;
    assert_eq!(session.lines(&id), ["busy", "-> complete_reply ok", "idle"]);
    session.interrupt().await;
    session.until_idle(&cell).await;
}

#[tokio::test]
async fn an_interrupt_ends_the_running_cell_and_never_the_next_one() {
    let mut session = Harness::ready().await;
    let cell = session.run("out a\nwait").await;
    let waiting = session.run("result never").await;
    let asked = session.ask_by(Inlet::Control, InterruptRequest {}).await.0;
    assert_eq!(session.lines(&asked), ["busy", "-> interrupt_reply ok", "idle"]);
    session.until_idle(&waiting).await;
    assert!(session.lines(&cell).contains(&"error Interrupted: as asked".to_owned()));
    assert_eq!(session.lines(&waiting)[1], "-> execute_reply aborted");
    // Nothing runs now, so this one has no effect.
    assert!(session.ask_by(Inlet::Control, InterruptRequest {}).await.1.is_continue());
    assert!(session.run_to_end("result b").await.contains(&"-> execute_reply ok".to_owned()));
}

#[tokio::test]
async fn an_interrupt_that_overtakes_the_cell_is_kept_for_it() {
    let mut session = Harness::ready().await;
    let cell = session.run("wait").await;
    // The session has not heard that the engine is at the cell.
    session.interrupt().await;
    session.until_idle(&cell).await;
    assert!(session.lines(&cell).contains(&"error Interrupted: as asked".to_owned()));
}

#[tokio::test]
async fn cells_wait_for_the_engine_and_see_its_progress() {
    let (go, gone) = tokio::sync::oneshot::channel::<()>();
    let mut session = Harness::starting(|progress| async move {
        progress.tell("building 1 of 2".to_owned());
        gone.await.unwrap();
        progress.tell("building 2 of 2".to_owned());
        Ok(Script::new())
    });
    session.next_news().await;
    // Questions need no engine.
    let info = session.ask(KernelInfoRequest {}).await;
    assert_eq!(session.lines(&info).len(), 3);
    let first = session.run("result a").await;
    let second = session.run("result b").await;
    assert_eq!(session.lines(&first), ["busy", "input [1]"]);
    assert!(session.lines(&second).is_empty());
    go.send(()).unwrap();
    session.until_idle(&second).await;
    let lines = session.lines(&first);
    let text: String = lines.iter().filter_map(|line| line.strip_prefix("stdout ")).collect();
    assert_eq!(text, "building 1 of 2\nbuilding 2 of 2\n");
    assert_eq!(lines.last().unwrap(), "idle");
    assert_eq!(session.lines(&second)[1..3], ["input [2]", "result [2] b"]);
}

#[tokio::test]
async fn a_cell_that_waits_for_the_engine_can_be_interrupted() {
    let mut session = Harness::starting(|_| std::future::pending::<Result<Script, String>>());
    let cell = session.run("result a").await;
    session.interrupt().await;
    let lines = session.lines(&cell);
    assert_eq!(lines[3..], ["-> execute_reply error", "idle"]);
    assert!(lines[2].starts_with("error Interrupted: interrupted before the engine was ready"));
}

#[tokio::test]
async fn without_an_engine_every_cell_says_why_and_questions_are_still_answered() {
    let mut session =
        Harness::starting(|_| async { Err::<Script, _>("no compiler found".to_owned()) });
    for _ in 0..2 {
        let lines = session.run_to_end("result a").await;
        assert_eq!(lines[2], "error EngineUnavailable: no compiler found");
    }
    let info = session.ask(KernelInfoRequest {}).await;
    assert_eq!(session.lines(&info)[1], "-> kernel_info_reply ok");
}

#[tokio::test]
async fn a_panic_of_our_own_costs_one_cell() {
    let mut session = Harness::ready().await;
    let lines = session.run_to_end("panic").await;
    assert!(lines[2].starts_with("error EngineFailure: semiaxis failed inside"), "{lines:?}");
    assert!(lines[2].ends_with("on purpose"));
    assert!(session.run_to_end("result b").await.contains(&"result [2] b".to_owned()));
}

#[tokio::test]
async fn an_engine_that_panics_at_its_start_is_unavailable() {
    async fn broken() -> Result<Script, String> {
        panic!("at the start")
    }
    let mut session = Harness::starting(|_| broken());
    let lines = session.run_to_end("result a").await;
    assert!(lines[2].starts_with("error EngineUnavailable") && lines[2].ends_with("at the start"));
}

#[tokio::test]
async fn requests_that_are_not_understood_get_an_error_between_busy_and_idle() {
    let mut session = Harness::ready().await;
    let unknown = UnknownMessage { msg_type: "none_such_request".into(), content: json!({}) };
    let id = session.ask(unknown).await;
    assert_eq!(session.lines(&id), ["busy", "-> none_such_reply error", "idle"]);
    assert_eq!(session.reply(&id)["ename"], "UnknownRequest");

    let strange = UnknownMessage { msg_type: "none_such".into(), content: json!([1]) };
    let id = session.ask(strange).await;
    assert_eq!(session.lines(&id), ["busy", "idle"]);

    let content = UnknownMessage { msg_type: "execute_request".into(), content: json!({}) };
    let message = JupyterMessage::new(content, None);
    let id = message.header.msg_id.clone();
    let defect = Some("content of an execute_request: missing field `code`".to_owned());
    let request = Request { inlet: Inlet::Shell, message, defect };
    assert!(session.service.handle(Event::Request(Box::new(request))).await.is_continue());
    assert_eq!(session.lines(&id), ["busy", "-> execute_reply error", "idle"]);
    assert_eq!(session.reply(&id)["ename"], "MalformedRequest");
    assert!(session.reply(&id)["evalue"].as_str().unwrap().contains("missing field `code`"));
}

#[tokio::test]
async fn there_are_no_comms_and_one_that_is_opened_is_closed() {
    let mut session = Harness::ready().await;
    let open = CommOpen {
        comm_id: CommId("c1".to_owned()),
        target_name: "none".to_owned(),
        ..CommOpen::default()
    };
    let id = session.ask(open).await;
    assert_eq!(session.lines(&id), ["busy", "comm_close", "idle"]);
    let id = session.ask(CommInfoRequest::default()).await;
    assert_eq!(session.reply(&id), json!({"status": "ok", "comms": {}}));
}

#[tokio::test]
async fn shutdown_tells_everyone_and_ends_the_session() {
    let mut session = Harness::ready().await;
    let running = session.run("wait").await;
    let waiting = session.run("result never").await;
    let request = ShutdownRequest { restart: true };
    let (id, flow) = session.ask_by(Inlet::Control, request).await;
    assert!(flow.is_break());
    assert_eq!(session.lines(&id), ["busy", "-> shutdown_reply ok", "shutdown_reply", "idle"]);
    assert_eq!(session.reply(&id)["restart"], true);
    for id in [running, waiting] {
        let lines = session.lines(&id);
        assert_eq!(lines[lines.len() - 2..], ["-> execute_reply aborted", "idle"]);
    }
    let started = Instant::now();
    session.service.stop_engine(&mut session.news, DEADLINE).await;
    assert!(started.elapsed() < DEADLINE);
}

#[tokio::test]
async fn termination_and_a_lost_client_end_the_session_too() {
    for signal in [Signal::Terminate, Signal::Orphaned] {
        let mut session = Harness::ready().await;
        assert!(session.service.handle(Event::Signal(signal)).await.is_break());
    }
}

#[tokio::test]
async fn ten_megabytes_pass_in_few_messages_and_whole() {
    let mut session = Harness::starting(|_| async { Ok(Flood(Script::new())) });
    session.next_news().await;
    let lines = session.run_to_end("go").await;
    let sent: usize = lines.iter().filter_map(|l| l.strip_prefix("stdout ")).map(str::len).sum();
    assert_eq!(sent, 10_000_000);
    assert!(lines.len() < 1000, "{} messages", lines.len());
}

/// Writes 10 MB in pieces of 100 bytes, whatever it is asked.
struct Flood(Script);

impl Evaluator for Flood {
    async fn execute(&mut self, _: CellRequest, events: mpsc::Sender<CellEvent>) -> CellReply {
        for _ in 0..100_000 {
            let text = "y".repeat(100);
            events.send(CellEvent::Stream { name: StreamName::Stdout, text }).await.unwrap();
        }
        CellReply::at_once(Outcome::Done)
    }

    async fn evaluate(&mut self, expression: &str) -> Result<MimeBundle, CellFailure> {
        self.0.evaluate(expression).await
    }

    fn interrupter(&self) -> Interrupt {
        self.0.interrupter()
    }

    fn scope(&self) -> Scope {
        self.0.scope()
    }

    async fn shutdown(self) {}
}

#[tokio::test]
async fn text_without_a_newline_is_seen_while_the_cell_still_runs() {
    let mut session = Harness::ready().await;
    let cell = session.run("out name? \nwait").await;
    let started = Instant::now();
    while !session.lines(&cell).contains(&"stdout name? ".to_owned()) {
        assert!(started.elapsed() < DEADLINE, "the text never came");
        session.step().await;
    }
    session.interrupt().await;
    session.until_idle(&cell).await;
}

#[tokio::test]
async fn a_blank_cell_never_reaches_the_engine() {
    let mut session = Harness::ready().await;
    let lines = session.run_to_end("  \n ").await;
    assert_eq!(lines, ["busy", "input [1]", "-> execute_reply ok", "idle"]);
}
