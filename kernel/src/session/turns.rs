//! Turns: how cells get theirs, what they show, and how they end.
//!
//! One cell has its turn at a time. It may have to wait for the engine; it is handed over once;
//! what it shows goes out as it comes; and it ends with its error if it has one, its reply, its
//! `idle`, and, if it failed and asked for that, the end of the cells behind it.

use std::time::Instant;

use jupyter_protocol::{
    DisplayData, ErrorOutput, ExecuteInput, ExecuteReply, ExecuteResult, ExecutionCount,
    ExpressionResult, JupyterMessageContent, ReplyError, ReplyStatus, Status, Stdio, StreamContent,
    Transient, UpdateDisplayData,
};
use serde_json::{Value, json};

use super::answers::media;
use super::publish::{Outlet, reply_to};
use super::queue::{Headway, Order, Running, Turn, origin};
use super::service::{EngineState, Service};
use super::stream::Gathered;
use crate::cells::types::{
    CellEvent, CellFailure, CellReply, Facts, MimeBundle, Outcome, StreamName, Timings,
};
use crate::log::entry::CellEntry;
use crate::wire::note;
use crate::worker::headway;

impl<O: Outlet> Service<O> {
    /// Gives the next cell its turn, and the engine the cell whose turn it is.
    pub(super) async fn pump(&mut self) {
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
                    let line = line.clone();
                    self.show_preparation(line).await;
                }
            }
            let Some(running) = &mut self.queue.running else { return };
            match &self.state {
                EngineState::Ready(_) => {
                    if running.turn == Turn::Waiting {
                        running.turn = Turn::HandedOver { interrupt: false };
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

    /// Stops the cell whose turn it is, and never another one.
    pub(super) async fn interrupt(&mut self) {
        // Nothing runs: an interrupt that comes too late must not hit the next cell.
        let Some(running) = &mut self.queue.running else { return };
        match (&mut running.turn, &self.state) {
            (Turn::Begun, EngineState::Ready(interrupt)) => interrupt(),
            (Turn::HandedOver { interrupt }, _) => *interrupt = true,
            (Turn::Waiting, EngineState::Starting(_)) => {
                let text = "interrupted before the engine was ready; the cell did not run";
                let outcome = Outcome::Interrupted(plain_failure("Interrupted", text));
                self.conclude(CellReply::at_once(outcome), vec![]).await;
                self.pump().await;
            }
            // The cell ends by itself, for there is no engine.
            _ => {}
        }
    }

    /// The engine has begun with the cell, so it can be interrupted from now on.
    pub(super) fn begun(&mut self) {
        let Some(running) = &mut self.queue.running else { return };
        let before = std::mem::replace(&mut running.turn, Turn::Begun);
        if let (Turn::HandedOver { interrupt: true }, EngineState::Ready(interrupt)) =
            (before, &self.state)
        {
            interrupt();
        }
    }

    pub(super) async fn fail_running(&mut self, name: &str, reason: &str) {
        let outcome = Outcome::Failed(plain_failure(name, reason));
        self.conclude(CellReply::at_once(outcome), vec![]).await;
    }

    /// Shows something that the running cell showed.
    pub(super) async fn show(&mut self, event: CellEvent) {
        if let (Some(running), Some(_)) = (&mut self.queue.running, &self.log) {
            running.listener.hear(&event);
        }
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
            CellEvent::Progress(line) => {
                let line = line.as_ref().map(headway::words);
                self.show_headway(line.as_deref()).await;
            }
        }
    }

    /// Says what is being prepared while a cell waits for it: in the line that goes again where
    /// somebody watches, else as text.
    pub(super) async fn show_preparation(&mut self, line: String) {
        match &self.queue.running {
            Some(running) if running.is_watched() => self.show_headway(Some(&line)).await,
            _ => self.show_text(StreamName::Stdout, format!("{line}\n")).await,
        }
    }

    /// Shows, changes or empties the line that says how far the running cell has come.
    pub(super) async fn show_headway(&mut self, line: Option<&str>) {
        let Some(running) = &mut self.queue.running else { return };
        if !running.is_watched() || (line.is_none() && running.headway != Headway::Shown) {
            return;
        }
        let now = if line.is_some() { Headway::Shown } else { Headway::Emptied };
        let before = std::mem::replace(&mut running.headway, now);
        let data = media(plain_bundle(line.unwrap_or_default()));
        let display_id = running.headway_id();
        let content = if before != Headway::Never {
            UpdateDisplayData::new(data, &display_id).into()
        } else {
            let transient = Some(Transient { display_id: Some(display_id) });
            DisplayData { transient, ..DisplayData::new(data) }.into()
        };
        self.show_content(content).await;
    }

    pub(super) async fn show_text(&mut self, name: StreamName, text: String) {
        for gathered in self.stream.push(name, text, Instant::now()) {
            self.send_text(gathered).await;
        }
    }

    pub(super) async fn flush(&mut self) {
        if let Some(gathered) = self.stream.take() {
            self.send_text(gathered).await;
        }
    }

    async fn send_text(&mut self, Gathered { name, text }: Gathered) {
        self.pacer.spend(text.len(), Instant::now());
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
    pub(super) async fn conclude(
        &mut self,
        reply: CellReply,
        expressions: Vec<(String, Result<MimeBundle, CellFailure>)>,
    ) {
        self.show_headway(None).await;
        self.flush().await;
        let interrupted = matches!(reply.outcome, Outcome::Interrupted(_));
        let failure = match reply.outcome {
            Outcome::Done => None,
            Outcome::Failed(failure) | Outcome::Interrupted(failure) => Some(failure),
        };
        if let Some(failure) = &failure {
            self.send_output(error_output(failure).into()).await;
        }
        let Some(mut running) = self.queue.running.take() else { return };
        self.enter(&mut running, failure.as_ref(), interrupted, reply.timings, reply.facts);
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
    pub(super) async fn abandon(&mut self) {
        self.flush().await;
        if let Some(running) = self.queue.running.take() {
            self.abort(&running.order).await;
        }
        self.abort_waiting().await;
    }
}

fn plain_bundle(text: &str) -> MimeBundle {
    MimeBundle::from_iter([("text/plain".to_owned(), text.into())])
}

impl<O> Service<O> {
    /// Enters a cell that has ended into the log, before its reply is sent.
    fn enter(
        &mut self,
        running: &mut Running,
        failure: Option<&CellFailure>,
        interrupted: bool,
        timings: Timings,
        facts: Facts,
    ) {
        let Some(log) = &mut self.log else { return };
        let outcome = match failure {
            None => "done",
            Some(_) if interrupted => "interrupted",
            Some(_) => "failed",
        };
        let milliseconds = |time: std::time::Duration| time.as_secs_f64() * 1e3;
        let written = log.cell(CellEntry {
            count: u32::try_from(running.count).unwrap_or(u32::MAX),
            cell_id: origin(&running.order.message).cell_id,
            silent: running.order.execute.silent,
            source: running.order.execute.code.clone(),
            outcome: outcome.to_owned(),
            message: failure.map(|failure| format!("{}: {}", failure.name, failure.message)),
            seed: facts.seed,
            compile_ms: milliseconds(timings.compile),
            run_ms: milliseconds(timings.run),
            outputs: std::mem::take(&mut running.listener).finish(),
            tables: facts.tables,
            opened: facts.opened,
            uses: facts.uses,
            makes: facts.makes,
            outdated: facts.outdated,
        });
        if let Err(error) = written {
            // The next cell tries again: a full disk may have been emptied.
            note(format_args!("a cell could not be logged in {}: {error}", log.path().display()));
        }
    }
}

/// A failure with nothing to tell but one line.
pub fn plain_failure(name: &str, message: impl Into<String>) -> CellFailure {
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
