//! The wire: how bytes on five sockets become messages, and messages become bytes.
//!
//! A client writes a connection file and starts the kernel with it; this part reads the file
//! ([`connection`]), binds the sockets it names ([`sockets`], behind a [`gate`]), and lets in only messages whose
//! signature holds and which were not seen before ([`intake`], [`replay`]). It knows nothing of
//! cells: bytes come in, checked messages go out.
//!
//! The formats are those of the Jupyter messaging protocol, version 5.3
//! (<https://jupyter-client.readthedocs.io/en/stable/messaging.html>). Message types, framing,
//! signing and transport come from the crates `jupyter-protocol`, `jupyter-zmq-client` and
//! `zeromq`; nothing of the format is spelled out here that they offer.

mod connection;
mod gate;
mod intake;
mod quirks;
mod replay;
mod sockets;

pub use connection::read_connection_file;
pub use intake::{Inlet, Intake, Refusal, Request};
pub use sockets::{Outlets, Sockets, bind};

/// Tells the person at the terminal something that has no place in the notebook.
///
/// The kernel outlives the terminal that started it, so a standard error that is closed must not
/// end the kernel: the line is then lost, which is all that can be done.
pub fn note(text: impl std::fmt::Display) {
    use std::io::Write;
    let _ = writeln!(std::io::stderr(), "semiaxis: {text}");
}
