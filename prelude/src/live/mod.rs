//! What a running cell stands on: the shelf of variables, the end of a cell, interrupts, seeds, and
//! showing things in the middle of a cell.
//!
//! Everything here serves one process, the worker, which runs one cell at a time on one thread.
//! `message` is the language between the worker and the kernel, `worker` the loop that speaks it,
//! `shelf` keeps the variables, `cell` is what compiled cells call, `seen` finds the exhibit of any
//! value. Outside a worker (in tests, in a program that uses the library alone) interrupts never
//! come, the seed is that of a first session, and shown things are printed as plain text.

pub mod message;

mod cell;
mod files;
mod progress;
mod seen;
mod shelf;
#[cfg(test)]
mod tests;
mod worker;

use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};

pub use cell::{Cell, Failure, leaving, left};
pub(crate) use files::TableRead;
pub use progress::{Counted, Progress, counted};
pub use seen::{ByDebug, ByDisplay, ByExhibit, ByName, Seen};

use crate::exhibit::{Bundle, Content};
use message::Form;

/// The seed of a session for which nobody has chosen one.
pub const DEFAULT_SEED: u64 = 1;

static INTERRUPTED: AtomicBool = AtomicBool::new(false);
static SEED: AtomicU64 = AtomicU64::new(DEFAULT_SEED);
static SEEDS_DRAWN: AtomicU64 = AtomicU64::new(0);

/// Leaves the running cell if an interrupt was asked for.
///
/// The kernel writes a call of this into every loop of a cell; long computations of the prelude
/// call it too, on the thread of the cell. Other threads ask [`interrupted`] and return.
///
/// # Panics
/// After an interrupt, with a payload that the worker knows; variables stay on the shelf.
#[inline]
pub fn checkpoint() {
    if INTERRUPTED.load(Ordering::Relaxed) {
        stop();
    }
}

#[cold]
fn stop() {
    std::panic::resume_unwind(Box::new(cell::Interruption));
}

/// Whether the running cell was asked to stop.
#[inline]
pub fn interrupted() -> bool {
    INTERRUPTED.load(Ordering::Relaxed)
}

/// A seed for the next random computation of the running cell.
///
/// It follows from the seed of the session, the text of the cell (or the `seed` in its header) and
/// the number of seeds drawn in this run before, so that a cell run again gives the same numbers,
/// in whatever order cells are run, and two draws in one cell differ.
pub fn seed() -> u64 {
    let draw = SEEDS_DRAWN.fetch_add(1, Ordering::Relaxed);
    mix(SEED.load(Ordering::Relaxed) ^ mix(draw.wrapping_add(0x9e37_79b9_7f4a_7c15)))
}

/// The finalizer of SplitMix64 (Steele, Lea and Flood 2014, Fast splittable pseudorandom number
/// generators, section 3): a bijection of 64 bits that leaves no visible structure.
fn mix(mut z: u64) -> u64 {
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}

fn begin(seed: u64) {
    INTERRUPTED.store(false, Ordering::Relaxed);
    SEED.store(seed, Ordering::Relaxed);
    SEEDS_DRAWN.store(0, Ordering::Relaxed);
}

fn interrupt() {
    INTERRUPTED.store(true, Ordering::Relaxed);
}

/// Shows an exhibit now; what was printed before it stands before it.
pub fn show(bundle: Bundle) {
    if bundle.is_empty() {
        return;
    }
    if !worker::show(forms(&bundle))
        && let Some(text) = bundle.text("text/plain")
    {
        println!("{text}");
    }
}

/// A bundle as the messaging protocol wants it: text as it is, bytes as base64.
fn forms(bundle: &Bundle) -> Vec<Form> {
    use base64::Engine as _;
    let form = |(mime, content): &(String, Content)| Form {
        mime: mime.clone(),
        content: match content {
            Content::Text(text) => text.as_str().into(),
            Content::Bytes(bytes) => base64::engine::general_purpose::STANDARD.encode(bytes).into(),
            Content::Json(json) => json.clone(),
        },
    };
    bundle.entries().iter().map(form).collect()
}
