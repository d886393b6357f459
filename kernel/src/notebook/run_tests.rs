//! Runs with a scripted evaluator: what the notebook gets from events and replies.

use super::*;
use crate::cells::types::{CellEvent, CellFailure, MimeBundle, StreamName};

/// Answers by the text of the cell.
struct Scripted {
    seen: Vec<CellRequest>,
}

impl Runner for Scripted {
    async fn execute(
        &mut self,
        request: CellRequest,
        events: mpsc::Sender<CellEvent>,
    ) -> CellReply {
        let code = request.code.clone();
        self.seen.push(request);
        let text =
            |text: &str| CellEvent::Stream { name: StreamName::Stdout, text: text.to_owned() };
        let failure = CellFailure {
            name: "panic".to_owned(),
            message: "it broke".to_owned(),
            traceback: vec!["\u{1b}[31mit broke\u{1b}[0m".to_owned()],
            line: Some(1),
        };
        let outcome = match code.as_str() {
            "flood" => {
                for _ in 0..10 * WAITING {
                    events.send(text("line\n")).await.unwrap();
                }
                Outcome::Done
            }
            "picture" => {
                let forms = json!({"image/svg+xml": "<svg/>", "text/plain": "a chart"});
                let bundle: MimeBundle = forms.as_object().unwrap().clone();
                events.send(CellEvent::Display(bundle.clone())).await.unwrap();
                events.send(CellEvent::Result(bundle)).await.unwrap();
                Outcome::Done
            }
            "stop" => Outcome::Interrupted(failure),
            "fail" => {
                events.send(text("before")).await.unwrap();
                Outcome::Failed(failure)
            }
            _ => Outcome::Done,
        };
        let timings = Timings {
            compile: Duration::from_micros(12_340),
            run: Duration::from_millis(2),
            compiled: code != "cached",
        };
        CellReply { outcome, timings, facts: Default::default() }
    }

    fn interrupter(&self) -> Box<dyn Fn()> {
        Box::new(|| ())
    }

    async fn shutdown(self) {}
}

fn notebook(cells: &[(&str, &str)]) -> String {
    let cells: Vec<Value> = cells
        .iter()
        .enumerate()
        .map(|(at, (kind, source))| match *kind {
            "markdown" => json!({"cell_type": "markdown", "id": format!("c{at}"), "metadata": {},
                "source": source}),
            tag => json!({"cell_type": "code", "id": format!("c{at}"), "metadata": {"tags": [tag]},
                "source": source, "execution_count": 99, "outputs": [
                    {"output_type": "stream", "name": "stdout", "text": "from an earlier run"}]}),
        })
        .collect();
    json!({"nbformat": 4, "nbformat_minor": 5, "metadata": {}, "cells": cells}).to_string()
}

/// Runs a notebook file and reads back what was written.
async fn run(text: &str) -> (Result<Summary, RunError>, Option<Value>, tempfile::TempDir) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("kilns.ipynb");
    std::fs::write(&path, text).unwrap();
    let start = async || Ok(Scripted { seen: Vec::new() });
    let summary = run_file(&path, None, &[], "1.95.0", start).await;
    let written = std::fs::read(folder.path().join("kilns.executed.ipynb")).ok();
    let value = written.map(|bytes| {
        nbformat::parse_notebook(std::str::from_utf8(&bytes).unwrap()).unwrap();
        serde_json::from_slice(&bytes).unwrap()
    });
    assert_eq!(std::fs::read_to_string(&path).unwrap(), text, "the notebook itself is not touched");
    (summary, value, folder)
}

#[tokio::test(flavor = "current_thread")]
async fn results_counts_and_times_are_written() {
    let text = notebook(&[("markdown", "# Kilns"), ("x", "picture"), ("x", " "), ("x", "cached")]);
    let (summary, value, folder) = run(&text).await;
    let expected = Summary { n_run: 2, n_code: 2, n_compiled: 1, failed: false };
    assert_eq!(summary.unwrap(), expected);
    let value = value.unwrap();
    let cell = &value["cells"][1];
    assert_eq!(cell["execution_count"], 1);
    assert_eq!(cell["outputs"][0]["output_type"], "display_data");
    assert_eq!(cell["outputs"][1]["output_type"], "execute_result");
    assert_eq!(cell["outputs"][1]["execution_count"], 1);
    assert_eq!(
        cell["metadata"]["semiaxis"],
        json!({"compile_ms": 12.3, "run_ms": 2.0, "cached": false})
    );
    let times = &cell["metadata"]["execution"];
    let began = times["iopub.execute_input"].as_str().unwrap();
    let ended = times["shell.execute_reply"].as_str().unwrap();
    let read = |text: &str| DateTime::parse_from_rfc3339(text).unwrap();
    assert!(read(began) <= read(ended));
    assert_eq!(value["cells"][2]["execution_count"], Value::Null, "there was nothing to run");
    assert_eq!(value["cells"][2]["outputs"], json!([]));
    assert_eq!(value["cells"][3]["execution_count"], 2);
    assert_eq!(value["cells"][3]["metadata"]["semiaxis"]["cached"], true);
    let pictures = folder.path().join("kilns.executed.pictures");
    assert_eq!(std::fs::read_to_string(pictures.join("cell-01.svg")).unwrap(), "<svg/>");
    assert!(pictures.join("cell-01-2.svg").exists());
}

#[tokio::test(flavor = "current_thread")]
async fn the_first_failure_ends_the_run_and_is_written() {
    let text = notebook(&[("raises-exception", "fail"), ("x", "fail"), ("x", "picture")]);
    let (summary, value, _folder) = run(&text).await;
    let expected = Summary { n_run: 2, n_code: 3, n_compiled: 2, failed: true };
    assert_eq!(summary.unwrap(), expected);
    let cells = &value.unwrap()["cells"];
    for cell_idx in [0, 1] {
        let outputs = &cells[cell_idx]["outputs"];
        assert_eq!(outputs[0]["text"], json!(["before"]));
        assert_eq!(outputs[1]["output_type"], "error");
        assert_eq!(outputs[1]["evalue"], "it broke");
    }
    assert_eq!(cells[2]["outputs"], json!([]), "results of an earlier run would mislead");
    assert_eq!(cells[2]["execution_count"], Value::Null);
}

#[tokio::test(flavor = "current_thread")]
async fn an_interrupted_cell_ends_the_run_even_where_failure_is_allowed() {
    let (summary, ..) = run(&notebook(&[("raises-exception", "stop"), ("x", "picture")])).await;
    let summary = summary.unwrap();
    assert!(summary.failed);
    assert_eq!(summary.n_run, 1);
}

#[tokio::test(flavor = "current_thread")]
async fn more_output_than_may_wait_arrives_whole() {
    let (_, value, _folder) = run(&notebook(&[("x", "flood")])).await;
    let outputs = value.unwrap()["cells"][0]["outputs"].clone();
    assert_eq!(outputs.as_array().unwrap().len(), 1);
    assert_eq!(outputs[0]["text"].as_array().unwrap().len(), 10 * WAITING);
}

#[tokio::test(flavor = "current_thread")]
async fn a_bad_notebook_starts_no_engine() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("x.ipynb");
    std::fs::write(&path, "{").unwrap();
    let start = async || -> Result<Scripted, String> { panic!("the engine was started") };
    let error = run_file(&path, None, &[], "1.95.0", start).await.unwrap_err();
    assert!(error.to_string().contains("is not JSON"), "{error}");
}
