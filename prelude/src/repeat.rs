//! The one loop behind everything that is drawn or fitted many times over.
//!
//! Each replicate has a generator of its own, derived from the seed and the replicate's number, so
//! that results depend on the seed only and not on the number of threads. Progress is shown while
//! the loop runs, and an interrupt ends it within one replicate on every thread.

use rayon::prelude::*;

use crate::error::{Error, Result};
use crate::live::{Progress, checkpoint, interrupted};
use crate::random::{Generator, replicate_generator};

/// Runs `replicate` for the numbers from 0 up, side by side, and returns the answers in order.
///
/// `what` names the work in the progress line ("parallel analysis"). Each thread makes one
/// workspace and hands it to all replicates that it runs.
///
/// # Errors
///
/// The first error of a replicate in order; [`Error::Interrupted`] outside a cell (inside one, an
/// interrupt leaves the cell here).
pub(crate) fn repeat<W, T: Send>(
    what: &'static str,
    n_replicates: usize,
    seed: u64,
    workspace: impl Fn() -> W + Sync + Send,
    replicate: impl Fn(&mut W, &mut Generator, usize) -> Result<T> + Sync + Send,
) -> Result<Vec<T>> {
    let progress = Progress::new(what, n_replicates);
    let answers: Result<Vec<T>> = (0..n_replicates)
        .into_par_iter()
        .map_init(workspace, |workspace, number| {
            if interrupted() {
                return Err(Error::Interrupted);
            }
            let mut generator = replicate_generator(seed, number as u64);
            let answer = replicate(workspace, &mut generator, number);
            progress.advance(1);
            answer
        })
        .collect();
    drop(progress);
    // Only the thread of the cell may leave it.
    checkpoint();
    answers
}
