//! The engine's thread: where cells are compiled and awaited while the session stays awake.
//!
//! The evaluator is made on this thread and never leaves it. What the session wants goes in as a
//! job, one at a time; whatever happens comes out as [`News`], in order, through a bounded
//! channel, so a cell that writes faster than clients read is slowed down rather than held in
//! memory. A panic in here is our own fault and costs one cell, not the kernel.

use std::any::Any;
use std::future::{Future, poll_fn};
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::pin::pin;
use std::task::Poll;
use std::time::Duration;

use tokio::sync::{mpsc, oneshot};

use super::evaluator::{Evaluator, Interrupt};
use crate::cells::types::{
    CellEvent, CellFailure, CellReply, CellRequest, MimeBundle, Outcome, Scope,
};
use crate::help::Index;
use crate::wire::note;

/// How much news may wait for the session, and how many events of a cell for this thread.
const WAITING: usize = 64;

/// How long the evaluator may take to end its worker before it is left to the system.
const FAREWELL: Duration = Duration::from_secs(2);

/// One cell to run, and the expressions to evaluate once it has run well.
#[derive(Debug)]
pub struct Job {
    /// The cell.
    pub request: CellRequest,
    /// Name and text of each of the client's expressions.
    pub expressions: Vec<(String, String)>,
}

/// What happened on the engine's thread.
pub enum News {
    /// A line about what is being prepared.
    Progress(String),
    /// What the prelude offers to help with typing.
    Index(Index),
    /// The engine can run cells from now on.
    Ready(Readiness),
    /// The engine could not be started; why, in words for the user.
    Unavailable(String),
    /// The evaluator is at the cell now, so that an interrupt reaches it.
    Begun,
    /// The running cell showed something.
    Cell(CellEvent),
    /// The running cell ended.
    Finished(Box<Finished>),
    /// The worker has ended and the thread is about to.
    Stopped,
}

/// What the session holds of an engine that is ready.
pub struct Readiness {
    /// Stops the running cell.
    pub interrupt: Interrupt,
    /// What the session defines before any cell ran.
    pub scope: Scope,
}

/// The end of a job.
#[derive(Debug)]
pub struct Finished {
    /// How the cell ended.
    pub reply: CellReply,
    /// What became of each expression, by name.
    pub expressions: Vec<(String, Result<MimeBundle, CellFailure>)>,
    /// What the session defines now.
    pub scope: Scope,
}

/// The session's hold on the engine's thread.
pub struct EngineHandle {
    jobs: mpsc::UnboundedSender<Job>,
    /// Taken when the engine is told to stop.
    stop: Option<oneshot::Sender<()>>,
}

impl EngineHandle {
    /// Hands in a job. It is lost if the thread has ended, which the news then say.
    pub fn run(&self, job: Job) {
        let _ = self.jobs.send(job);
    }

    /// Tells the engine to drop what it does and end its worker; [`News::Stopped`] follows.
    pub fn stop(&mut self) {
        if let Some(stop) = self.stop.take() {
            let _ = stop.send(());
        }
    }
}

/// Tells the session, from wherever the engine is started, what is being prepared.
#[derive(Clone)]
pub struct Progress(mpsc::Sender<News>);

impl Progress {
    /// Sends a line. When the session is behind, the line is left out: there will be another.
    pub fn tell(&self, line: String) {
        let _ = self.0.try_send(News::Progress(line));
    }

    /// Hands over the index of the prelude's names. Called from a thread of its own, for it waits
    /// for the session.
    pub fn index(&self, index: Index) {
        let _ = self.0.blocking_send(News::Index(index));
    }
}

/// Starts the thread; `start` makes the evaluator on it.
pub fn start<E, F>(
    start: impl FnOnce(Progress) -> F + Send + 'static,
) -> (EngineHandle, mpsc::Receiver<News>)
where
    E: Evaluator,
    F: Future<Output = Result<E, String>>,
{
    let (jobs, job_list) = mpsc::unbounded_channel();
    let (stop, stopped) = oneshot::channel();
    let (news, newspaper) = mpsc::channel(WAITING);
    let body = move || match tokio::runtime::Builder::new_current_thread().enable_all().build() {
        Ok(runtime) => runtime.block_on(live(start, job_list, stopped, news)),
        Err(error) => {
            let text = format!("cannot start the engine's event loop: {error}");
            let _ = news.blocking_send(News::Unavailable(text));
        }
    };
    if let Err(error) = std::thread::Builder::new().name("engine".to_owned()).spawn(body) {
        // The channel of news is closed by now, which tells the session.
        note(format_args!("cannot start the engine's thread: {error}"));
    }
    (EngineHandle { jobs, stop: Some(stop) }, newspaper)
}

async fn live<E, F>(
    start: impl FnOnce(Progress) -> F,
    mut jobs: mpsc::UnboundedReceiver<Job>,
    mut stop: oneshot::Receiver<()>,
    news: mpsc::Sender<News>,
) where
    E: Evaluator,
    F: Future<Output = Result<E, String>>,
{
    let started = tokio::select! {
        started = caught(start(Progress(news.clone()))) => started,
        _ = &mut stop => return tell(&news, News::Stopped).await,
    };
    let mut evaluator = match started.unwrap_or_else(|panic| Err(internal(&panic))) {
        Ok(evaluator) => evaluator,
        Err(reason) => {
            tell(&news, News::Unavailable(reason)).await;
            let _ = stop.await;
            return tell(&news, News::Stopped).await;
        }
    };
    let readiness = Readiness { interrupt: evaluator.interrupter(), scope: evaluator.scope() };
    tell(&news, News::Ready(readiness)).await;
    loop {
        tokio::select! {
            biased;
            _ = &mut stop => break,
            job = jobs.recv() => {
                let Some(job) = job else { break };
                // A job that is dropped half-way leaves the worker to `shutdown`.
                tokio::select! {
                    finished = perform(&mut evaluator, job, &news) => {
                        tell(&news, News::Finished(Box::new(finished))).await;
                    }
                    _ = &mut stop => break,
                }
            }
        }
    }
    if tokio::time::timeout(FAREWELL, evaluator.shutdown()).await.is_err() {
        note("the worker did not end in time and is left to the system");
    }
    tell(&news, News::Stopped).await;
}

/// Runs a cell, then the expressions if it went well.
async fn perform<E: Evaluator>(evaluator: &mut E, job: Job, news: &mpsc::Sender<News>) -> Finished {
    let reply = match caught(run_cell(evaluator, job.request, news)).await {
        Ok(reply) => reply,
        Err(panic) => failed(internal(&panic)),
    };
    let mut expressions = Vec::new();
    if matches!(reply.outcome, Outcome::Done) {
        for (name, text) in job.expressions {
            let value = caught(evaluator.evaluate(&text)).await;
            let value = value.unwrap_or_else(|panic| Err(failure(internal(&panic))));
            expressions.push((name, value));
        }
    }
    Finished { reply, expressions, scope: evaluator.scope() }
}

async fn run_cell<E: Evaluator>(
    evaluator: &mut E,
    request: CellRequest,
    news: &mpsc::Sender<News>,
) -> CellReply {
    if request.code.trim().is_empty() {
        return CellReply::at_once(Outcome::Done);
    }
    let (sender, mut events) = mpsc::channel(WAITING);
    let reply = {
        let mut run = pin!(evaluator.execute(request, sender));
        // An evaluator listens for interrupts from its first step on; the session keeps those
        // that come before.
        let first = poll_fn(|context| Poll::Ready(run.as_mut().poll(context))).await;
        tell(news, News::Begun).await;
        match first {
            Poll::Ready(reply) => reply,
            Poll::Pending => loop {
                tokio::select! {
                    Some(event) = events.recv() => tell(news, News::Cell(event)).await,
                    reply = &mut run => break reply,
                }
            },
        }
    };
    while let Ok(event) = events.try_recv() {
        tell(news, News::Cell(event)).await;
    }
    reply
}

/// The session may be gone, and then nobody needs to know.
async fn tell(news: &mpsc::Sender<News>, item: News) {
    let _ = news.send(item).await;
}

/// Awaits a future and catches a panic in it.
async fn caught<F: Future>(future: F) -> Result<F::Output, Box<dyn Any + Send>> {
    let mut future = pin!(future);
    poll_fn(|context| {
        // After a panic the future is not polled again, so its broken state is never seen.
        match catch_unwind(AssertUnwindSafe(|| future.as_mut().poll(context))) {
            Ok(Poll::Ready(output)) => Poll::Ready(Ok(output)),
            Ok(Poll::Pending) => Poll::Pending,
            Err(panic) => Poll::Ready(Err(panic)),
        }
    })
    .await
}

/// The words for a panic of our own.
fn internal(panic: &Box<dyn Any + Send>) -> String {
    let detail = panic
        .downcast_ref::<String>()
        .map(String::as_str)
        .or_else(|| panic.downcast_ref::<&str>().copied())
        .unwrap_or("no details");
    format!("semiaxis failed inside, which is a bug of its own, please report it: {detail}")
}

fn failed(message: String) -> CellReply {
    CellReply::at_once(Outcome::Failed(failure(message)))
}

/// A failure that is not the cell's fault.
pub fn failure(message: String) -> CellFailure {
    CellFailure {
        name: "EngineFailure".to_owned(),
        traceback: vec![message.clone()],
        message,
        line: None,
    }
}
