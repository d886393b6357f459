//! From what a cell showed to the outputs that a notebook keeps.
//!
//! Text that follows text of the same stream is joined to it, as clients do. Forms that are text are
//! written as lists of lines, so that version control compares them line by line.

use serde_json::{Value, json};

use crate::cells::types::{CellEvent, CellFailure, MimeBundle, StreamName};

/// The outputs of one cell.
#[derive(Debug, Default)]
pub struct Outputs {
    done: Vec<Value>,
    /// The stream that is being written, kept as one string until something else follows.
    open: Option<(StreamName, String)>,
    bundles: Vec<MimeBundle>,
}

impl Outputs {
    /// Adds what a cell showed.
    pub fn add(&mut self, event: CellEvent, count: u32) {
        match event {
            CellEvent::Stream { name, text } => match &mut self.open {
                Some((open, so_far)) if *open == name => so_far.push_str(&text),
                _ => {
                    self.close();
                    self.open = Some((name, text));
                }
            },
            CellEvent::Display(bundle) => {
                self.close();
                self.done.push(json!({
                    "output_type": "display_data", "data": written(&bundle), "metadata": {},
                }));
                self.bundles.push(bundle);
            }
            CellEvent::Result(bundle) => {
                self.close();
                self.done.push(json!({
                    "output_type": "execute_result", "execution_count": count,
                    "data": written(&bundle), "metadata": {},
                }));
                self.bundles.push(bundle);
            }
            // For whoever waits, not for whoever reads the notebook later.
            CellEvent::Progress(_) => {}
        }
    }

    /// Adds the reason why the cell failed.
    pub fn add_failure(&mut self, failure: &CellFailure) {
        self.close();
        self.done.push(json!({
            "output_type": "error", "ename": failure.name, "evalue": failure.message,
            "traceback": failure.traceback,
        }));
    }

    /// The outputs as the format has them, and the exhibits among them.
    pub fn finish(mut self) -> (Vec<Value>, Vec<MimeBundle>) {
        self.close();
        (self.done, self.bundles)
    }

    fn close(&mut self) {
        if let Some((name, text)) = self.open.take().filter(|(_, text)| !text.is_empty()) {
            self.done.push(json!({
                "output_type": "stream", "name": name.as_str(), "text": lines(&text),
            }));
        }
    }
}

fn written(bundle: &MimeBundle) -> Value {
    let form = |(mime, content): (&String, &Value)| {
        let content = match content {
            Value::String(text) if is_text(mime) => lines(text),
            other => other.clone(),
        };
        (mime.clone(), content)
    };
    Value::Object(bundle.iter().map(form).collect())
}

fn is_text(mime: &str) -> bool {
    mime.starts_with("text/") || mime == "image/svg+xml" || mime == "application/javascript"
}

fn lines(text: &str) -> Value {
    Value::Array(text.split_inclusive('\n').map(|line| Value::String(line.to_owned())).collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn stream(name: StreamName, text: &str) -> CellEvent {
        CellEvent::Stream { name, text: text.to_owned() }
    }

    fn bundle(forms: &[(&str, Value)]) -> MimeBundle {
        forms.iter().map(|(mime, content)| ((*mime).to_owned(), content.clone())).collect()
    }

    #[test]
    fn streams_are_joined_until_something_else_follows() {
        use StreamName::{Stderr, Stdout};
        let mut outputs = Outputs::default();
        for event in [
            stream(Stdout, "a"),
            stream(Stdout, "b\nc"),
            stream(Stderr, "e"),
            stream(Stdout, ""),
            stream(Stdout, "d\n"),
            CellEvent::Display(bundle(&[("text/plain", json!("x"))])),
            stream(Stdout, "f"),
        ] {
            outputs.add(event, 1);
        }
        let (done, _) = outputs.finish();
        let texts: Vec<&Value> = done.iter().map(|output| &output["text"]).collect();
        assert_eq!(texts[..3], [&json!(["ab\n", "c"]), &json!(["e"]), &json!(["d\n"])]);
        assert_eq!(done[3]["output_type"], "display_data");
        assert_eq!(texts[4], &json!(["f"]));
    }

    #[test]
    fn nbformat_reads_what_is_written_and_would_write_the_same() {
        let mut outputs = Outputs::default();
        outputs.add(stream(StreamName::Stdout, "one\ntwo\n"), 3);
        let forms = [
            ("text/plain", json!("a\nb")),
            ("text/html", json!("<b>\n</b>")),
            ("image/svg+xml", json!("<svg>\n</svg>\n")),
            ("image/png", json!("AAAA")),
            ("application/json", json!({"k": [1, "x\ny"]})),
            ("application/x-own", json!("q\nr")),
        ];
        outputs.add(CellEvent::Display(bundle(&forms)), 3);
        outputs.add(CellEvent::Result(bundle(&forms)), 3);
        outputs.add_failure(&CellFailure {
            name: "panic".to_owned(),
            message: "no".to_owned(),
            traceback: vec!["a".to_owned(), "b".to_owned()],
            line: Some(1),
        });
        let (done, bundles) = outputs.finish();
        assert_eq!(bundles.len(), 2);
        let cell = json!({"cell_type": "code", "id": "a", "metadata": {}, "source": ["x"],
            "execution_count": 3, "outputs": done});
        let whole = json!({"nbformat": 4, "nbformat_minor": 5, "metadata": {}, "cells": [cell]});
        let read = nbformat::parse_notebook(&whole.to_string()).unwrap();
        let again: Value =
            serde_json::from_str(&nbformat::serialize_notebook(&read).unwrap()).unwrap();
        assert_eq!(again, whole);
    }
}
