//! Signals, and the client's process: what else can end or interrupt a session.
//!
//! An interrupt signal stops the running cell, as the interrupt request does, because clients that
//! do not know the request send the signal. A termination signal is an orderly shutdown. When the
//! client's process has gone without a word, nobody can ever ask for shutdown, so the kernel ends
//! by itself; the process to watch is named in `JPY_PARENT_PID`, which clients set for that.

use std::time::Duration;

use tokio::signal::unix::{SignalKind, signal};
use tokio::sync::mpsc;
use tokio::task::JoinSet;

use crate::wire::note;

/// How often the client's process is looked for.
const LOOK_EVERY: Duration = Duration::from_secs(1);

/// The variable in which clients leave their process id.
const CLIENT_PROCESS: &str = "JPY_PARENT_PID";

/// What a signal, or the lack of a client, asks for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Signal {
    /// Stop the running cell.
    Interrupt,
    /// End the kernel.
    Terminate,
    /// End the kernel, for its client has gone.
    Orphaned,
}

/// Starts watching; the watch ends when the returned set is dropped.
pub fn start() -> (mpsc::Receiver<Signal>, JoinSet<()>) {
    let (sender, receiver) = mpsc::channel(8);
    let mut watch = JoinSet::new();
    for (kind, meaning) in [
        (SignalKind::interrupt(), Signal::Interrupt),
        (SignalKind::terminate(), Signal::Terminate),
        (SignalKind::hangup(), Signal::Terminate),
    ] {
        match signal(kind) {
            Ok(mut arrivals) => {
                let sender = sender.clone();
                watch.spawn(async move {
                    while arrivals.recv().await.is_some() {
                        if sender.send(meaning).await.is_err() {
                            return;
                        }
                    }
                });
            }
            Err(error) => note(format_args!("cannot listen for signal {kind:?}: {error}")),
        }
    }
    let client = std::env::var(CLIENT_PROCESS).ok().and_then(|text| text.parse().ok());
    // A kernel that was started in a container of its own cannot see its client's process, and must
    // not take that for its end.
    if let Some(client) = client.filter(|&client: &libc::pid_t| client > 1 && is_alive(client)) {
        watch.spawn(async move {
            while is_alive(client) {
                tokio::time::sleep(LOOK_EVERY).await;
            }
            let _ = sender.send(Signal::Orphaned).await;
        });
    }
    (receiver, watch)
}

/// Whether a process exists; one that may not be signalled does.
fn is_alive(process: libc::pid_t) -> bool {
    // SAFETY: signal 0 only asks whether the process could be signalled; no memory is involved.
    let answer = unsafe { libc::kill(process, 0) };
    answer == 0 || std::io::Error::last_os_error().raw_os_error() != Some(libc::ESRCH)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn this_process_is_alive_and_one_that_was_waited_for_is_not() {
        assert!(is_alive(std::process::id() as libc::pid_t));
        let mut child = std::process::Command::new("true").spawn().unwrap();
        let id = child.id() as libc::pid_t;
        child.wait().unwrap();
        assert!(!is_alive(id));
    }
}
