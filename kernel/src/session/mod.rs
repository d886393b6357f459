//! The session: one client connection file, one engine, one loop that serves requests.
//!
//! [`serve`] is the life of a kernel process. It binds the sockets first and answers questions
//! about itself at once; the engine starts on a thread of its own meanwhile ([`engine`]), and
//! cells wait for it. Everything that happens reaches the loop ([`service`]) as one closed enum of
//! events, and the loop alone writes to the sockets, so messages leave in the order in which
//! things happened.
//!
//! The behaviour follows the Jupyter messaging protocol 5.3
//! (<https://jupyter-client.readthedocs.io/en/stable/messaging.html>); where the page leaves a
//! choice, the choice is explained where it is made.

mod answers;
mod engine;
mod evaluator;
mod history;
mod publish;
mod queue;
mod service;
mod stream;
#[cfg(test)]
mod tests;
mod turns;
mod watch;

use std::path::Path;
use std::process::ExitCode;
use std::time::Duration;

use crate::cells::types::EngineOptions;
use crate::log::store::{self, Limits, Log};
use crate::wire::{self, Intake, Sockets, note};
use service::{Event, Service};

/// Exit status when the connection file cannot be used.
const BAD_CONNECTION_FILE: u8 = 2;
/// Exit status when a socket cannot be bound.
const CANNOT_BIND: u8 = 3;
/// Exit status when the system refuses the process something else it needs.
const NO_RUNTIME: u8 = 4;

/// How long the engine may take to end its worker when the kernel shuts down.
const FAREWELL: Duration = Duration::from_secs(3);

/// How long the sockets stay open after the last message. The transport writes in the background
/// and cannot be asked whether it is done; on the loopback this is a thousand times what it needs.
const LINGER: Duration = Duration::from_millis(100);

/// Serves one client connection until it asks for shutdown.
///
/// Returns 0 after an orderly shutdown, 2 if the connection file cannot be used and 3 if a socket
/// cannot be bound; what was wrong stands on standard error.
pub fn serve(connection_file: &Path, options: EngineOptions) -> ExitCode {
    let runtime = match tokio::runtime::Builder::new_current_thread().enable_all().build() {
        Ok(runtime) => runtime,
        Err(error) => {
            note(format_args!("cannot start the kernel's event loop: {error}"));
            return ExitCode::from(NO_RUNTIME);
        }
    };
    let info = match wire::read_connection_file(connection_file) {
        Ok(info) => info,
        Err(error) => {
            note(error);
            return ExitCode::from(BAD_CONNECTION_FILE);
        }
    };
    if info.key.is_empty() {
        note(
            "the connection file has an empty key: messages are not signed, so any program of \
             any user of this machine can run code here",
        );
    }
    runtime.block_on(async {
        let id = uuid::Uuid::new_v4().to_string();
        match wire::bind(&info, &id).await {
            Ok(sockets) => {
                converse(&id, &info.key, sockets, options).await;
                ExitCode::SUCCESS
            }
            Err(error) => {
                note(error);
                ExitCode::from(CANNOT_BIND)
            }
        }
    })
}

/// Begins the session's log. Without one the session goes on: cells matter more than their log.
fn begin_log(id: &str, seed: u64) -> Option<Log> {
    let short = id.get(..8).unwrap_or(id);
    let begun =
        store::folder().and_then(|folder| Log::begin(&folder, short, seed, Limits::default()));
    begun.map_err(|error| note(format_args!("this session is not logged: {error}"))).ok()
}

/// The loop between the sockets, the engine and the signals.
async fn converse(id: &str, key: &str, sockets: Sockets, options: EngineOptions) {
    let Sockets { mut shell, mut control, mut stdin, outlets } = sockets;
    let (mut signals, _watch) = watch::start();
    let log = begin_log(id, options.seed);
    let (engine, mut news) = engine::start(move |progress| evaluator::start(options, progress));
    let mut intake = Intake::new(key);
    let mut service = Service::new(id, outlets, engine).with_log(log);
    service.greet().await;
    let mut engine_lives = true;
    'session: loop {
        let due = service.flush_due();
        let listens = engine_lives && service.pause().is_none();
        let event = tokio::select! {
            // What can stop a cell goes before what the cell says.
            biased;
            Some(signal) = signals.recv() => Event::Signal(signal),
            Some(frames) = control.recv() => {
                Event::frames(&mut intake, wire::Inlet::Control, frames)
            }
            () = tokio::time::sleep_until(due.into()) => Event::FlushDue,
            // Neither a cell that writes without end nor a client that asks without end keeps the
            // other waiting: this inner choice is fair.
            event = async {
                tokio::select! {
                    news = news.recv(), if listens => Event::Engine(news),
                    Some(frames) = shell.recv() => {
                        Event::frames(&mut intake, wire::Inlet::Shell, frames)
                    }
                    Some(frames) = stdin.recv() => {
                        Event::frames(&mut intake, wire::Inlet::Stdin, frames)
                    }
                }
            } => event,
        };
        engine_lives &= !matches!(event, Event::Engine(None));
        let mut events = Vec::new();
        if event.ends_a_cell() {
            // Cells that were sent before this one ended belong behind it, so that its failure
            // can take them with it; the reader gets a turn to bring them in.
            tokio::task::yield_now().await;
            while let Ok(frames) = shell.try_recv() {
                events.push(Event::frames(&mut intake, wire::Inlet::Shell, frames));
            }
        }
        events.push(event);
        for event in events {
            if service.handle(event).await.is_break() {
                break 'session;
            }
        }
    }
    service.stop_engine(&mut news, FAREWELL).await;
    tokio::time::sleep(LINGER).await;
}
