//! The service: what the session does about each event.
//!
//! Three rules hold throughout. Whatever a request causes stands between a `busy` and an `idle`
//! that name it as their parent, also when the request fails or is not understood. Cells run one
//! at a time, in the order they came; questions that need no engine are answered at once, also
//! while a cell runs. A cell that fails takes the waiting ones with it if it asked for that.

use std::ops::ControlFlow;
use std::time::{Duration, Instant};

use jupyter_protocol::{
    CommClose, CommInfoReply, DisplayData, ErrorOutput, ExecuteInput, ExecuteReply, ExecuteResult,
    ExecutionCount, ExpressionResult, HistoryReply, InterruptReply, JupyterMessage,
    JupyterMessageContent, ReplyError, ReplyStatus, ShutdownReply, Status, Stdio, StreamContent,
    Transient,
};
use serde_json::{Value, json};
use tokio::sync::mpsc;
use zeromq::ZmqMessage;

use super::answers::{self, media, refusal};
use super::engine::{EngineHandle, Finished, News};
use super::evaluator::Interrupt;
use super::history::History;
use super::publish::{Outlet, broadcast, reply_to};
use super::queue::{Order, Queue, Running};
use super::stream::{Gathered, StreamBuffer};
use super::watch::Signal;
use crate::cells::types::{
    CellEvent, CellFailure, CellReply, MimeBundle, Outcome, Scope, StreamName, Timings,
};
use crate::help::Index;
use crate::wire::{Inlet, Intake, Refusal, Request, note};

/// Everything that can happen to a session.
pub enum Event {
    /// A client asks for something.
    Request(Box<Request>),
    /// Frames arrived that are not let in.
    Refused(Refusal),
    /// The engine's thread has news, or has ended without a word.
    Engine(Option<News>),
    /// A signal arrived, or the client's process has gone.
    Signal(Signal),
    /// Gathered text has waited long enough.
    FlushDue,
}

impl Event {
    /// What frames from a socket amount to.
    pub fn frames(intake: &mut Intake, inlet: Inlet, frames: ZmqMessage) -> Self {
        match intake.admit(inlet, frames) {
            Ok(request) => Event::Request(Box::new(request)),
            Err(refusal) => Event::Refused(refusal),
        }
    }

    /// Whether this ends the running cell.
    pub fn ends_a_cell(&self) -> bool {
        matches!(self, Event::Engine(Some(News::Finished(_))))
    }
}

/// Whether cells can be run.
enum EngineState {
    /// Not yet; the latest line about what is being prepared.
    Starting(Option<String>),
    /// Yes; the way to stop one.
    Ready(Interrupt),
    /// No, and why.
    Unavailable(String),
}

/// What an answer that needs no engine consists of.
enum Answer {
    Reply(JupyterMessageContent),
    Broadcast(JupyterMessageContent),
    Nothing,
}

/// The state of a session, and what it does about events.
pub struct Service<O> {
    /// The kernel's id, which stands in its broadcasts' topics.
    id: String,
    outlet: O,
    engine: EngineHandle,
    state: EngineState,
    queue: Queue,
    history: History,
    stream: StreamBuffer,
    /// What the session defined when the last cell ended.
    scope: Scope,
    /// What the prelude offers; empty until the engine's thread has read it.
    index: Index,
}

impl<O: Outlet> Service<O> {
    /// A session whose engine is being started.
    pub fn new(id: &str, outlet: O, engine: EngineHandle) -> Self {
        Self {
            id: id.to_owned(),
            outlet,
            engine,
            state: EngineState::Starting(None),
            queue: Queue::default(),
            history: History::default(),
            stream: StreamBuffer::default(),
            scope: Scope::default(),
            index: Index::default(),
        }
    }

    /// Says, once, that the kernel is starting.
    pub async fn greet(&mut self) {
        self.broadcast(None, Status::starting()).await;
    }

    /// When [`Event::FlushDue`] is to be raised: a moment that lies far ahead if nothing waits.
    pub fn flush_due(&self) -> Instant {
        self.stream.due().unwrap_or_else(|| Instant::now() + Duration::from_secs(3600))
    }

    /// Does what an event asks for, and breaks if the session is to end.
    pub async fn handle(&mut self, event: Event) -> ControlFlow<()> {
        match event {
            Event::Request(request) => return self.serve(*request).await,
            Event::Refused(refusal) => note(refusal),
            Event::Engine(news) => self.hear(news).await,
            Event::Signal(Signal::Interrupt) => self.interrupt().await,
            Event::Signal(Signal::Terminate) => {
                note("asked by a signal to end");
                self.abandon().await;
                return ControlFlow::Break(());
            }
            Event::Signal(Signal::Orphaned) => {
                note("the client's process has gone, the kernel ends");
                return ControlFlow::Break(());
            }
            Event::FlushDue => self.flush().await,
        }
        ControlFlow::Continue(())
    }

    /// Ends the engine, or leaves it to the system when that takes too long.
    pub async fn stop_engine(&mut self, news: &mut mpsc::Receiver<News>, patience: Duration) {
        self.engine.stop();
        let stopped = async { while !matches!(news.recv().await, Some(News::Stopped) | None) {} };
        if tokio::time::timeout(patience, stopped).await.is_err() {
            note("the engine did not end in time and is left to the system");
        }
    }

    async fn serve(&mut self, request: Request) -> ControlFlow<()> {
        let Request { inlet, message, defect } = request;
        if inlet == Inlet::Stdin {
            // The kernel never asks the user anything, so there is no question to answer.
            note(format_args!("an unasked {} was ignored", message.header.msg_type));
            return ControlFlow::Continue(());
        }
        match message.content.clone() {
            JupyterMessageContent::ExecuteRequest(execute) => {
                self.queue.push(Order { inlet, message, execute });
                self.pump().await;
            }
            JupyterMessageContent::ShutdownRequest(shutdown) => {
                self.broadcast(Some(&message), Status::busy()).await;
                self.abandon().await;
                let reply = ShutdownReply { restart: shutdown.restart, ..ShutdownReply::default() };
                self.outlet.reply(inlet, reply_to(&message, reply.clone())).await;
                // Clients that did not ask learn of it here.
                self.broadcast(Some(&message), reply).await;
                self.broadcast(Some(&message), Status::idle()).await;
                return ControlFlow::Break(());
            }
            content => self.answer(inlet, &message, content, defect).await,
        }
        ControlFlow::Continue(())
    }

    async fn answer(
        &mut self,
        inlet: Inlet,
        message: &JupyterMessage,
        content: JupyterMessageContent,
        defect: Option<String>,
    ) {
        self.broadcast(Some(message), Status::busy()).await;
        let interrupts = matches!(content, JupyterMessageContent::InterruptRequest(_));
        match self.find_answer(message, content, defect) {
            Answer::Reply(reply) => self.outlet.reply(inlet, reply_to(message, reply)).await,
            Answer::Broadcast(content) => self.broadcast(Some(message), content).await,
            Answer::Nothing => {}
        }
        self.broadcast(Some(message), Status::idle()).await;
        if interrupts {
            self.interrupt().await;
        }
        if let Some(running) = &self.queue.running {
            // Clients show the latest status they hear, whoever it is about; without this a
            // question asked while a cell runs would make the kernel look idle.
            let parent = running.order.message.clone();
            self.broadcast(Some(&parent), Status::busy()).await;
        }
    }

    fn find_answer(
        &self,
        message: &JupyterMessage,
        content: JupyterMessageContent,
        defect: Option<String>,
    ) -> Answer {
        use JupyterMessageContent as Content;
        let message_type = &message.header.msg_type;
        if let Some(defect) = defect {
            let failure = plain_failure("MalformedRequest", defect);
            return Answer::Reply(refusal(message_type, &failure, self.queue.counted()));
        }
        match content {
            Content::KernelInfoRequest(_) => Answer::Reply(answers::kernel_info().into()),
            Content::IsCompleteRequest(request) => {
                Answer::Reply(answers::is_complete(&request.code).into())
            }
            Content::CompleteRequest(request) => {
                Answer::Reply(answers::complete(&request, &self.scope, &self.index).into())
            }
            Content::InspectRequest(request) => {
                Answer::Reply(answers::inspect(&request, &self.scope, &self.index).into())
            }
            Content::HistoryRequest(request) => {
                Answer::Reply(HistoryReply::new(self.history.answer(&request)).into())
            }
            Content::InterruptRequest(_) => Answer::Reply(InterruptReply::new().into()),
            // There are no comms: none can be listed, and one that is opened is closed at once,
            // as the protocol asks for a target that is not known.
            Content::CommInfoRequest(_) => Answer::Reply(CommInfoReply::default().into()),
            Content::CommOpen(open) => Answer::Broadcast(
                CommClose { comm_id: open.comm_id, data: Default::default() }.into(),
            ),
            Content::CommMsg(_) | Content::CommClose(_) => Answer::Nothing,
            _ if message_type.ends_with("_request") => {
                let text = format!("this kernel does not serve '{message_type}'");
                let failure = plain_failure("UnknownRequest", text);
                Answer::Reply(refusal(message_type, &failure, self.queue.counted()))
            }
            _ => {
                note(format_args!("a message of type '{message_type}' was ignored"));
                Answer::Nothing
            }
        }
    }

    async fn hear(&mut self, news: Option<News>) {
        match news {
            Some(News::Progress(line)) => {
                if self.queue.running.as_ref().is_some_and(|running| !running.handed_over) {
                    self.show_text(StreamName::Stdout, format!("{line}\n")).await;
                }
                if let EngineState::Starting(latest) = &mut self.state {
                    *latest = Some(line);
                }
            }
            Some(News::Index(index)) => self.index = index,
            Some(News::Ready(readiness)) => {
                self.state = EngineState::Ready(readiness.interrupt);
                self.scope = readiness.scope;
                self.pump().await;
            }
            Some(News::Unavailable(reason)) => {
                note(&reason);
                self.state = EngineState::Unavailable(reason);
                self.pump().await;
            }
            Some(News::Cell(event)) => self.show(event).await,
            Some(News::Finished(finished)) => {
                let Finished { reply, expressions, scope } = *finished;
                self.scope = scope;
                self.conclude(reply, expressions).await;
                self.pump().await;
            }
            Some(News::Stopped) => {}
            None => {
                let reason = "the engine's thread has ended, which is a bug of semiaxis; \
                              restart the kernel to run cells again";
                self.state = EngineState::Unavailable(reason.to_owned());
                if self.queue.running.as_ref().is_some_and(|running| running.handed_over) {
                    self.fail_running("EngineFailure", reason).await;
                }
                self.pump().await;
            }
        }
    }

    /// Gives the next cell its turn, and the engine the cell whose turn it is.
    async fn pump(&mut self) {
        loop {
            if let Some(running) = self.queue.advance() {
                let parent = running.order.message.clone();
                let execution_count = ExecutionCount::new(running.count);
                let code = running.order.execute.code.clone();
                let (heard, stored) = (running.is_heard(), running.is_stored());
                self.broadcast(Some(&parent), Status::busy()).await;
                if heard {
                    let input = ExecuteInput { code: code.clone(), execution_count };
                    self.broadcast(Some(&parent), input).await;
                }
                if stored {
                    self.history.push(execution_count.value(), &code);
                }
                if let EngineState::Starting(Some(line)) = &self.state {
                    let line = format!("{line}\n");
                    self.show_text(StreamName::Stdout, line).await;
                }
            }
            let Some(running) = &mut self.queue.running else { return };
            match &self.state {
                EngineState::Ready(_) => {
                    if !running.handed_over {
                        running.handed_over = true;
                        self.engine.run(running.job());
                    }
                    return;
                }
                EngineState::Starting(_) => return,
                EngineState::Unavailable(reason) => {
                    let reason = reason.clone();
                    self.fail_running("EngineUnavailable", &reason).await;
                }
            }
        }
    }

    async fn interrupt(&mut self) {
        match (&self.queue.running, &self.state) {
            (Some(running), EngineState::Ready(interrupt)) if running.handed_over => interrupt(),
            (Some(_), EngineState::Starting(_)) => {
                let text = "interrupted before the engine was ready; the cell did not run";
                let outcome = Outcome::Interrupted(plain_failure("Interrupted", text));
                self.conclude(CellReply { outcome, timings: Timings::default() }, vec![]).await;
                self.pump().await;
            }
            // Nothing runs; an interrupt that comes too late must not hit the next cell.
            _ => {}
        }
    }

    async fn fail_running(&mut self, name: &str, reason: &str) {
        let outcome = Outcome::Failed(plain_failure(name, reason));
        self.conclude(CellReply { outcome, timings: Timings::default() }, vec![]).await;
    }

    /// Shows something that the running cell showed.
    async fn show(&mut self, event: CellEvent) {
        match event {
            CellEvent::Stream { name, text } => self.show_text(name, text).await,
            CellEvent::Display(bundle) => {
                let content = DisplayData::new(media(bundle));
                self.show_content(content.into()).await;
            }
            CellEvent::Result(bundle) => {
                let Some(running) = &mut self.queue.running else { return };
                running.output =
                    bundle.get("text/plain").and_then(Value::as_str).map(str::to_owned);
                let content = ExecuteResult {
                    execution_count: ExecutionCount::new(running.count),
                    data: media(bundle),
                    metadata: Default::default(),
                    transient: Some(Transient::default()),
                };
                self.show_content(content.into()).await;
            }
        }
    }

    async fn show_text(&mut self, name: StreamName, text: String) {
        for gathered in self.stream.push(name, text, Instant::now()) {
            self.send_text(gathered).await;
        }
    }

    async fn flush(&mut self) {
        if let Some(gathered) = self.stream.take() {
            self.send_text(gathered).await;
        }
    }

    async fn send_text(&mut self, Gathered { name, text }: Gathered) {
        let name = match name {
            StreamName::Stdout => Stdio::Stdout,
            StreamName::Stderr => Stdio::Stderr,
        };
        self.send_output(StreamContent { name, text }.into()).await;
    }

    /// Shows content after the text that was gathered before it.
    async fn show_content(&mut self, content: JupyterMessageContent) {
        self.flush().await;
        self.send_output(content).await;
    }

    async fn send_output(&mut self, content: JupyterMessageContent) {
        if let Some(running) = &self.queue.running
            && running.is_heard()
        {
            let parent = running.order.message.clone();
            self.broadcast(Some(&parent), content).await;
        }
    }

    /// Ends the running cell: its error, its reply, its `idle`, and what follows for the others.
    async fn conclude(
        &mut self,
        reply: CellReply,
        expressions: Vec<(String, Result<MimeBundle, CellFailure>)>,
    ) {
        self.flush().await;
        let failure = match reply.outcome {
            Outcome::Done => None,
            Outcome::Failed(failure) | Outcome::Interrupted(failure) => Some(failure),
        };
        if let Some(failure) = &failure {
            self.send_output(error_output(failure).into()).await;
        }
        let Some(running) = self.queue.running.take() else { return };
        if running.is_stored()
            && let Some(output) = &running.output
        {
            self.history.set_output(running.count, output);
        }
        let parent = &running.order.message;
        let content = ExecuteReply {
            status: if failure.is_none() { ReplyStatus::Ok } else { ReplyStatus::Error },
            execution_count: ExecutionCount::new(running.count),
            payload: Vec::new(),
            user_expressions: Some(
                expressions.into_iter().map(|(name, value)| (name, expressed(value))).collect(),
            ),
            error: failure.as_ref().map(|failure| Box::new(reply_error(failure))),
        };
        let message = reply_to(parent, content).with_metadata(timing(&running, reply.timings));
        self.outlet.reply(running.order.inlet, message).await;
        self.broadcast(Some(parent), Status::idle()).await;
        if failure.is_some() && running.order.execute.stop_on_error {
            self.abort_waiting().await;
        }
    }

    async fn abort_waiting(&mut self) {
        for order in self.queue.drain() {
            self.broadcast(Some(&order.message), Status::busy()).await;
            self.abort(&order).await;
        }
    }

    async fn abort(&mut self, order: &Order) {
        let content = ExecuteReply {
            status: ReplyStatus::Aborted,
            execution_count: ExecutionCount::new(self.queue.counted()),
            user_expressions: Some(Default::default()),
            ..ExecuteReply::default()
        };
        self.outlet.reply(order.inlet, reply_to(&order.message, content)).await;
        self.broadcast(Some(&order.message), Status::idle()).await;
    }

    /// Gives up every cell, since the session ends; their senders are told.
    async fn abandon(&mut self) {
        self.flush().await;
        if let Some(running) = self.queue.running.take() {
            self.abort(&running.order).await;
        }
        self.abort_waiting().await;
    }

    async fn broadcast(
        &mut self,
        parent: Option<&JupyterMessage>,
        content: impl Into<JupyterMessageContent>,
    ) {
        let message = broadcast(&self.id, parent, content);
        self.outlet.publish(message).await;
    }
}

/// A failure with nothing to tell but one line.
fn plain_failure(name: &str, message: impl Into<String>) -> CellFailure {
    let message = message.into();
    CellFailure {
        name: name.to_owned(),
        traceback: vec![format!("{name}: {message}")],
        message,
        line: None,
    }
}

fn error_output(failure: &CellFailure) -> ErrorOutput {
    ErrorOutput {
        ename: failure.name.clone(),
        evalue: failure.message.clone(),
        traceback: failure.traceback.clone(),
    }
}

fn reply_error(failure: &CellFailure) -> ReplyError {
    ReplyError {
        ename: failure.name.clone(),
        evalue: failure.message.clone(),
        traceback: failure.traceback.clone(),
    }
}

fn expressed(value: Result<MimeBundle, CellFailure>) -> ExpressionResult {
    match value {
        Ok(bundle) => ExpressionResult::Ok { data: media(bundle), metadata: Default::default() },
        Err(failure) => {
            let ReplyError { ename, evalue, traceback } = reply_error(&failure);
            ExpressionResult::Error { ename, evalue, traceback }
        }
    }
}

/// When the cell got its turn, and where its time went, in milliseconds.
fn timing(running: &Running, timings: Timings) -> Value {
    json!({
        "started": running.since.to_rfc3339(),
        "semiaxis": {
            "compile_ms": timings.compile.as_secs_f64() * 1000.0,
            "run_ms": timings.run.as_secs_f64() * 1000.0,
            "compiled": timings.compiled,
        }
    })
}
