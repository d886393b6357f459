//! How far long work has come.

use std::sync::atomic::{AtomicUsize, Ordering};

/// A line in the notebook that says how far long work has come; it goes when this is dropped.
#[derive(Debug)]
pub struct Progress {
    what: &'static str,
    total: usize,
    done: AtomicUsize,
}

impl Progress {
    /// Starts a line for work that has this many steps.
    pub fn new(what: &'static str, total: usize) -> Self {
        Progress { what, total, done: AtomicUsize::new(0) }
    }

    /// Says that more steps are done; any thread may.
    #[inline]
    pub fn advance(&self, steps: usize) {
        self.done.fetch_add(steps, Ordering::Relaxed);
    }
}
