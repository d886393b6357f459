//! What the session needs of an engine, and the real one behind it.
//!
//! The trait is small so that the session's tests can run with a scripted evaluator; in the
//! kernel there is one implementation, [`Engine`]. Its futures need
//! not be `Send`: an evaluator lives and dies on the thread it was started on.

use std::time::{Duration, Instant};

use tokio::sync::{mpsc, oneshot};

use super::engine::Progress;
use crate::cells::Engine;
use crate::cells::types::{
    CellEvent, CellFailure, CellReply, CellRequest, EngineOptions, MimeBundle, Scope,
};
use crate::help::Index;
use crate::setup::progress::clock;
use crate::setup::{self, Kit, Reporter, SetupEvent};
use crate::wire::note;

/// Stops what the evaluator is compiling or running; harmless when it does nothing.
pub type Interrupt = Box<dyn Fn() + Send>;

/// Runs cells for a session.
pub trait Evaluator {
    /// Runs one cell. Everything the cell showed has been sent when this returns.
    async fn execute(&mut self, request: CellRequest, events: mpsc::Sender<CellEvent>)
    -> CellReply;

    /// Evaluates one expression without counting or storing it.
    async fn evaluate(&mut self, expression: &str) -> Result<MimeBundle, CellFailure>;

    /// A handle that works while a cell runs.
    fn interrupter(&self) -> Interrupt;

    /// What the session defines now.
    fn scope(&self) -> Scope;

    /// Ends the worker.
    async fn shutdown(self);
}

/// How often a long build is mentioned in the cell that waits for it.
const MENTION_EVERY: Duration = Duration::from_secs(5);

/// Starts the real engine: the kit first, which may have to be built, then the worker.
///
/// # Errors
///
/// What is missing and what to do about it, in words for the user.
pub async fn start(options: EngineOptions, progress: Progress) -> Result<Engine, String> {
    let kit = prepare(progress.clone()).await?;
    let index = kit.index.clone();
    // Reading the index takes longer than anything else in a warm start, and no cell needs it.
    spawn("index", move || match Index::load(&index) {
        Ok(index) => progress.index(index),
        Err(error) => note(format_args!(
            "completion knows only what cells define, since {} cannot be read: {error}",
            index.display()
        )),
    })?;
    Engine::start(kit, options).await.map_err(|error| error.to_string())
}

/// Finds or builds the kit, on a thread of its own: a build waits for cargo, and this thread must
/// hear when the session ends.
async fn prepare(progress: Progress) -> Result<Kit, String> {
    let (sender, receiver) = oneshot::channel();
    spawn("kit", move || {
        let mut reporter = Reporter::new();
        let mut mentioned = None;
        let kit = setup::ensure(&mut |event| {
            if let Some(line) = mention(&event, &mut mentioned) {
                progress.tell(line);
            }
            reporter.show(event);
        });
        // Nobody listens if the session has ended meanwhile.
        let _ = sender.send(kit.map_err(|error| error.to_string()));
    })?;
    receiver.await.unwrap_or_else(|_| {
        Err("looking for the prelude failed inside, which is a bug of semiaxis".to_owned())
    })
}

fn spawn(name: &str, work: impl FnOnce() + Send + 'static) -> Result<(), String> {
    let thread = std::thread::Builder::new().name(name.to_owned());
    thread.spawn(work).map(drop).map_err(|error| format!("cannot start a thread: {error}"))
}

/// The line for the cell that waits, if the event is worth one.
fn mention(event: &SetupEvent, mentioned: &mut Option<Instant>) -> Option<String> {
    match event {
        SetupEvent::Needed(reason) => Some(reason.to_string()),
        SetupEvent::Waiting { reason } => Some(format!("waiting for {reason}")),
        SetupEvent::Building { done, total, elapsed, .. } => {
            if mentioned.is_some_and(|last| last.elapsed() < MENTION_EVERY) {
                return None;
            }
            *mentioned = Some(Instant::now());
            Some(format!("{done} of {total} crates after {}", clock(*elapsed)))
        }
        SetupEvent::Ready { elapsed } if mentioned.is_some() => {
            Some(format!("the prelude is ready after {}", clock(*elapsed)))
        }
        _ => None,
    }
}

impl Evaluator for Engine {
    async fn execute(
        &mut self,
        request: CellRequest,
        events: mpsc::Sender<CellEvent>,
    ) -> CellReply {
        Engine::execute(self, request, events).await
    }

    async fn evaluate(&mut self, expression: &str) -> Result<MimeBundle, CellFailure> {
        Engine::evaluate(self, expression).await
    }

    fn interrupter(&self) -> Interrupt {
        let interrupter = Engine::interrupter(self);
        Box::new(move || interrupter.interrupt())
    }

    fn scope(&self) -> Scope {
        Engine::scope(self)
    }

    async fn shutdown(self) {
        Engine::shutdown(self).await;
    }
}
