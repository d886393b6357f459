//! What the session needs of an engine, and the real one behind it.
//!
//! The trait is small so that the session's tests can run with a scripted evaluator; in the
//! kernel there is one implementation, [`Engine`](crate::cells::engine::Engine). Its futures need
//! not be `Send`: an evaluator lives and dies on the thread it was started on.

use tokio::sync::mpsc;

use super::engine::Progress;
use crate::cells::types::{
    CellEvent, CellFailure, CellReply, CellRequest, EngineOptions, MimeBundle, Scope,
};

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

/// Starts the real engine: the kit first, which may have to be built, then the worker.
///
/// # Errors
///
/// What is missing and what to do about it, in words for the user.
pub async fn start(options: EngineOptions, progress: Progress) -> Result<NoEngine, String> {
    let _ = (options, progress);
    Err("not built yet".to_owned())
}

/// Placeholder.
pub struct NoEngine;

impl Evaluator for NoEngine {
    async fn execute(
        &mut self,
        _request: CellRequest,
        _events: mpsc::Sender<CellEvent>,
    ) -> CellReply {
        unreachable!()
    }
    async fn evaluate(&mut self, _expression: &str) -> Result<MimeBundle, CellFailure> {
        unreachable!()
    }
    fn interrupter(&self) -> Interrupt {
        Box::new(|| ())
    }
    fn scope(&self) -> Scope {
        Scope::default()
    }
    async fn shutdown(self) {}
}
