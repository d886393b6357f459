//! The session's door to the help: completion, inspection and the check for completeness.

use jupyter_protocol::CompleteReply;

use crate::cells::types::{MimeBundle, Scope};

/// Whether code can be run as it stands.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Completeness {
    /// It can.
    Complete,
    /// More must follow; the next line could begin with `indent`.
    Incomplete {
        /// White space for the next line.
        indent: String,
    },
    /// It cannot, whatever follows.
    Invalid,
}

/// Answers questions about code.
#[derive(Debug, Default)]
pub struct Guide;

impl Guide {
    /// Whether code can be run as it stands.
    pub fn completeness(&self, code: &str) -> Completeness {
        let _ = code;
        Completeness::Complete
    }

    /// What could be typed at the cursor, counted in characters.
    pub fn complete(&self, code: &str, cursor: usize, scope: &Scope) -> CompleteReply {
        let _ = (code, scope);
        CompleteReply { cursor_start: cursor, cursor_end: cursor, ..Default::default() }
    }

    /// What stands at the cursor, counted in characters.
    pub fn inspect(
        &self,
        code: &str,
        cursor: usize,
        detail: u8,
        scope: &Scope,
    ) -> Option<MimeBundle> {
        let _ = (code, cursor, detail, scope);
        None
    }
}
