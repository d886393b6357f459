//! The intake: which of the frames that arrive are let in, and as what.
//!
//! In stages, each of which can refuse and none of which can panic: the frames are counted, the
//! signature is checked over the bytes as received and in constant time, the message must not
//! have been seen before, and only then is anything parsed. A message whose header can be read is
//! always let in, since its sender can be answered: when its content is malformed the request
//! says so in [`Request::defect`].
//!
//! Source: "The wire protocol" and "General message format" of
//! <https://jupyter-client.readthedocs.io/en/stable/messaging.html>.

use jupyter_protocol::{Header, JupyterMessage, JupyterMessageContent, UnknownMessage};
use jupyter_zmq_client::{Connection, RawMessage, RuntimeError};
use serde_json::Value;
use thiserror::Error;
use zeromq::{RouterSocket, Socket, ZmqMessage};

use super::quirks;
use super::replay::ReplayGuard;

/// The socket a message came in by, and by which it is answered.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Inlet {
    /// Requests, served in the order they come.
    Shell,
    /// Requests that may overtake a running cell.
    Control,
    /// Answers to what a cell asked the user.
    Stdin,
}

impl std::fmt::Display for Inlet {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(match self {
            Inlet::Shell => "shell",
            Inlet::Control => "control",
            Inlet::Stdin => "stdin",
        })
    }
}

/// A message that was let in.
#[derive(Debug, Clone)]
pub struct Request {
    /// Where it came from.
    pub inlet: Inlet,
    /// The message. When `defect` is set its content is the JSON as it came, kept as unknown.
    pub message: JupyterMessage,
    /// Why the content is not what the message's type says, if it is not.
    pub defect: Option<String>,
}

/// Why frames were not let in. The sender gets no answer, for it may not be a client at all.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum Refusal {
    /// Too few frames, no delimiter, or a signature that does not hold.
    #[error("a message on the {inlet} socket was refused: {}", reason(source))]
    Unsigned {
        /// Where it came from.
        inlet: Inlet,
        /// What is wrong with its frames.
        source: RuntimeError,
    },
    /// The same message was let in before.
    #[error("a message on the {inlet} socket was refused: it was received before")]
    Replayed {
        /// Where it came from.
        inlet: Inlet,
    },
    /// The header or the metadata cannot be read, so there is nobody to answer.
    #[error("a message on the {inlet} socket was refused: its {part} cannot be read: {source}")]
    Unreadable {
        /// Where it came from.
        inlet: Inlet,
        /// The part at fault.
        part: &'static str,
        /// Where and why reading it failed.
        source: serde_json::Error,
    },
}

/// The library's words for a wrong signature are an empty "unspecified", hence ours.
fn reason(error: &RuntimeError) -> String {
    match error {
        RuntimeError::VerifyError(_) => "its signature is wrong".to_owned(),
        RuntimeError::MissingDelimiter => "it has no delimiter frame".to_owned(),
        RuntimeError::MissingHmac => "it has no signature frame".to_owned(),
        RuntimeError::InsufficientMessageParts(count) => {
            format!("it has {count} frames after its signature, at least 4 are needed")
        }
        other => format!("its signature cannot be read: {other}"),
    }
}

/// Checks everything that comes in, with the key of the connection file.
pub struct Intake {
    /// A socket that is never bound: the client crate keeps the key in a connection, and the
    /// key's own type belongs to a crate this one does not name.
    signer: Connection<RouterSocket>,
    replays: ReplayGuard,
}

impl Intake {
    /// An intake that accepts messages signed with `key`, or any message if the key is empty.
    pub fn new(key: &str) -> Self {
        Self { signer: Connection::new(RouterSocket::new(), key, ""), replays: ReplayGuard::new() }
    }

    /// Lets a message in, or says why not.
    ///
    /// # Errors
    ///
    /// A [`Refusal`]; the frames are then to be forgotten.
    pub fn admit(&mut self, inlet: Inlet, frames: ZmqMessage) -> Result<Request, Refusal> {
        let raw = RawMessage::from_multipart(frames, &self.signer.mac)
            .map_err(|source| Refusal::Unsigned { inlet, source })?;
        let mut parts = raw.jparts.into_iter();
        let mut next = || parts.next().unwrap_or_default();
        let (header, parent, metadata, content) = (next(), next(), next(), next());
        let buffers = parts.collect();
        if !self.replays.is_new(&header) {
            return Err(Refusal::Replayed { inlet });
        }
        let unreadable = |part| move |source| Refusal::Unreadable { inlet, part, source };
        let header: Header = serde_json::from_slice(&header).map_err(unreadable("header"))?;
        let metadata: Value = serde_json::from_slice(&metadata).map_err(unreadable("metadata"))?;
        let (content, defect) = read_content(&header.msg_type, &content);
        let message = JupyterMessage {
            zmq_identities: raw.zmq_identities,
            header,
            // A request has no parent as a rule, and then sends an empty object.
            parent_header: serde_json::from_slice(&parent).ok(),
            metadata,
            content,
            buffers,
            channel: None,
        };
        Ok(Request { inlet, message, defect })
    }
}

/// Reads the content as its type says; what cannot be read so is kept as it came.
fn read_content(message_type: &str, bytes: &[u8]) -> (JupyterMessageContent, Option<String>) {
    let unknown = |content| {
        JupyterMessageContent::UnknownMessage(UnknownMessage {
            msg_type: message_type.to_owned(),
            content,
        })
    };
    let mut value: Value = match serde_json::from_slice(bytes) {
        Ok(value) => value,
        Err(error) => return (unknown(Value::Null), Some(format!("content is not JSON: {error}"))),
    };
    quirks::fill_in(message_type, &mut value);
    match JupyterMessageContent::from_type_and_content(message_type, value.clone()) {
        Ok(content) => (content, None),
        Err(error) => (unknown(value), Some(format!("content of a {message_type}: {error}"))),
    }
}

#[cfg(test)]
#[path = "intake_tests.rs"]
mod tests;
