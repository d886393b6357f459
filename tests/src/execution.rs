//! What a cell caused: its reply, and what it broadcast, taken apart for assertions.

use std::time::Duration;

use jupyter_protocol::{ExecuteReply, JupyterMessage, JupyterMessageContent, Stdio as StreamName};
use serde_json::{Map, Value};

/// Everything a cell caused.
#[derive(Debug)]
pub struct Execution {
    /// The reply on the shell socket.
    pub reply: ExecuteReply,
    /// The reply's message, for its metadata.
    pub reply_message: JupyterMessage,
    /// All broadcasts, in order, from `busy` to `idle`.
    pub broadcasts: Vec<JupyterMessage>,
    /// From the moment the client began to wait to its `idle`.
    pub elapsed: Duration,
}

/// The `error` of a cell.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct CellError {
    /// What kind it is.
    pub name: String,
    /// What it says.
    pub value: String,
    /// The lines shown, colours included.
    pub traceback: Vec<String>,
}

impl Execution {
    /// The text written to standard output.
    pub fn stdout(&self) -> String {
        self.stream(|name| matches!(name, StreamName::Stdout))
    }

    /// The text written to standard error.
    pub fn stderr(&self) -> String {
        self.stream(|name| matches!(name, StreamName::Stderr))
    }

    fn stream(&self, wanted: impl Fn(&StreamName) -> bool) -> String {
        self.contents()
            .filter_map(|content| match content {
                JupyterMessageContent::StreamContent(stream) if wanted(&stream.name) => {
                    Some(stream.text.as_str())
                }
                _ => None,
            })
            .collect()
    }

    /// What the final expression showed, by MIME type.
    pub fn result(&self) -> Option<Map<String, Value>> {
        self.contents().find_map(|content| match content {
            JupyterMessageContent::ExecuteResult(result) => Some(bundle(&result.data)),
            _ => None,
        })
    }

    /// The plain text of what the final expression showed.
    pub fn result_text(&self) -> Option<&str> {
        self.contents().find_map(|content| match content {
            JupyterMessageContent::ExecuteResult(result) => {
                result.data.content.iter().find_map(|form| match form {
                    jupyter_protocol::MediaType::Plain(text) => Some(text.as_str()),
                    _ => None,
                })
            }
            _ => None,
        })
    }

    /// What was shown in the middle of the cell, by MIME type.
    pub fn displays(&self) -> Vec<Map<String, Value>> {
        let display = |content: &JupyterMessageContent| match content {
            JupyterMessageContent::DisplayData(display) => Some(bundle(&display.data)),
            _ => None,
        };
        self.contents().filter_map(display).collect()
    }

    /// The error that was broadcast, if there was one.
    pub fn error(&self) -> Option<CellError> {
        self.contents().find_map(|content| match content {
            JupyterMessageContent::ErrorOutput(error) => Some(CellError {
                name: error.ename.clone(),
                value: error.evalue.clone(),
                traceback: error.traceback.clone(),
            }),
            _ => None,
        })
    }

    /// The types of the broadcasts in order, with the state in place of `status`.
    pub fn kinds(&self) -> Vec<String> {
        let kind = |message: &JupyterMessage| match &message.content {
            JupyterMessageContent::Status(status) => status.execution_state.as_str().to_owned(),
            _ => message.header.msg_type.clone(),
        };
        self.broadcasts.iter().map(kind).collect()
    }

    fn contents(&self) -> impl Iterator<Item = &JupyterMessageContent> {
        self.broadcasts.iter().map(|message| &message.content)
    }
}

/// The forms of an output as the JSON object that was sent.
fn bundle(media: &jupyter_protocol::Media) -> Map<String, Value> {
    match serde_json::to_value(media) {
        Ok(Value::Object(forms)) => forms,
        other => panic!("a bundle is an object, not {other:?}"),
    }
}
