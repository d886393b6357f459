//! The process that runs cells, seen from the kernel.
//!
//! The kernel never runs a person's code. It starts a worker, which is the same binary called in
//! another way: a thin host that loads the prelude and hands over to it. A cell that aborts,
//! overflows its stack or is killed costs the worker and the variables in it, never the kernel.

pub mod headway;
pub mod host;
mod opened;
pub mod process;

/// The messages, which are written down once, in the prelude.
#[path = "../../../prelude/src/live/message.rs"]
pub mod message;
