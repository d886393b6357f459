//! The service: what the session does about each event.
//!
//! Three rules hold throughout. Whatever a request causes stands between a `busy` and an `idle`
//! that name it as their parent, also when the request fails or is not understood. Cells run one
//! at a time, in the order they came; questions that need no engine are answered at once, also
//! while a cell runs. A cell that fails takes the waiting ones with it if it asked for that.

use std::ops::ControlFlow;
use std::time::{Duration, Instant};

use jupyter_protocol::{
    CommClose, CommInfoReply, HistoryReply, InterruptReply, JupyterMessage, JupyterMessageContent,
    ShutdownReply, Status,
};
use tokio::sync::mpsc;
use zeromq::ZmqMessage;

use super::answers::{self, refusal};
use super::engine::{EngineHandle, Finished, News};
use super::evaluator::Interrupt;
use super::history::History;
use super::publish::{Outlet, broadcast, reply_to};
use super::queue::{Order, Queue, Running};
use super::stream::{Pacer, StreamBuffer};
use super::turns::plain_failure;
use super::watch::Signal;
use crate::cells::types::Scope;
use crate::help::Index;
use crate::log::store::Log;
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
pub(super) enum EngineState {
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
    pub(super) outlet: O,
    pub(super) engine: EngineHandle,
    pub(super) state: EngineState,
    pub(super) queue: Queue,
    pub(super) history: History,
    pub(super) stream: StreamBuffer,
    pub(super) pacer: Pacer,
    /// What ran, for later; none where it cannot be written.
    pub(super) log: Option<Log>,
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
            pacer: Pacer::new(Instant::now()),
            log: None,
            scope: Scope::default(),
            index: Index::default(),
        }
    }

    /// Logs what runs from now on.
    pub fn with_log(mut self, log: Option<Log>) -> Self {
        self.log = log;
        self
    }

    /// Says, once, that the kernel is starting.
    pub async fn greet(&mut self) {
        self.broadcast(None, Status::starting()).await;
    }

    /// When [`Event::FlushDue`] is to be raised: a moment that lies far ahead if nothing waits.
    pub fn flush_due(&self) -> Instant {
        let due = [self.stream.due(), self.pause()].into_iter().flatten().min();
        due.unwrap_or_else(|| Instant::now() + Duration::from_secs(3600))
    }

    /// Until when the engine is not to be heard, because a cell writes more than clients can read.
    pub fn pause(&self) -> Option<Instant> {
        self.pacer.pause(Instant::now())
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
        if let Some(Err(error)) = self.log.as_mut().map(Log::end) {
            note(format_args!("the end of the session could not be logged: {error}"));
        }
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
                if self.queue.running.as_ref().is_some_and(Running::waits) {
                    self.show_preparation(line.clone()).await;
                }
                if let EngineState::Starting(latest) = &mut self.state {
                    *latest = Some(line);
                }
            }
            Some(News::Index(index)) => self.index = index,
            Some(News::Ready(readiness)) => {
                self.show_headway(None).await;
                self.state = EngineState::Ready(readiness.interrupt);
                self.scope = readiness.scope;
                self.pump().await;
            }
            Some(News::Unavailable(reason)) => {
                note(&reason);
                self.state = EngineState::Unavailable(reason);
                self.pump().await;
            }
            Some(News::Begun) => self.begun(),
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
                if self.queue.running.as_ref().is_some_and(|running| !running.waits()) {
                    self.fail_running("EngineFailure", reason).await;
                }
                self.pump().await;
            }
        }
    }

    pub(super) async fn broadcast(
        &mut self,
        parent: Option<&JupyterMessage>,
        content: impl Into<JupyterMessageContent>,
    ) {
        let message = broadcast(&self.id, parent, content);
        self.outlet.publish(message).await;
    }
}
