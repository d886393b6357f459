//! Long work as the person who waits for it sees it: a line that says how far it is, and an
//! interrupt that stops it without a loss.
//!
//! What a client does about `update_display_data` is that of the messaging protocol
//! (<https://jupyter-client.readthedocs.io/en/stable/messaging.html>, "update_display_data").

use std::time::Duration;

use jupyter_protocol::{ExecuteRequest, JupyterMessage, ReplyStatus};
use semiaxis_tests::client::{CELL, Client};
use serde_json::Value;

fn content(message: &JupyterMessage) -> Value {
    serde_json::to_value(&message.content).unwrap()
}

/// A cell sent by a client that can ask a person for input.
fn watched(code: &str) -> ExecuteRequest {
    ExecuteRequest { allow_stdin: true, ..ExecuteRequest::new(code.to_owned()) }
}

#[tokio::test]
async fn a_loop_that_counts_is_shown_in_a_line_that_changes_and_goes() {
    let mut client = Client::start().await;
    let code = "let mut fired = 0;
        for tile in counted(\"firing\", 0..24) {
            std::thread::sleep(std::time::Duration::from_millis(100));
            fired += tile;
        }
        fired";
    let id = client.send(watched(code)).await;
    let cell = client.collect(&id, CELL).await;
    assert_eq!(cell.result_text(), Some("276"), "{:?}", cell.error());
    let shown: Vec<(String, String, String)> = cell
        .broadcasts
        .iter()
        .filter(|message| message.header.msg_type.contains("display_data"))
        .map(|message| {
            let content = content(message);
            let text = |value: &Value| value.as_str().unwrap().to_owned();
            let id = text(&content["transient"]["display_id"]);
            (message.header.msg_type.clone(), id, text(&content["data"]["text/plain"]))
        })
        .collect();
    assert!(shown.len() >= 3, "{shown:?}");
    assert_eq!(shown[0].0, "display_data");
    assert!(shown[0].2.starts_with("firing: ") && shown[0].2.contains(" of 24, "), "{shown:?}");
    assert!(
        shown[1..].iter().all(|(kind, id, _)| kind == "update_display_data" && *id == shown[0].1)
    );
    assert_eq!(shown.last().unwrap().2, "", "the line is gone when the work is done");
    // A client that runs a notebook by itself would keep the line, and gets none.
    let quiet = client.execute_well(code).await;
    assert!(quiet.displays().is_empty());
    assert!(client.shutdown(false).await.success());
}

/// Long computations of the prelude, far longer than anybody waits.
const LONG: [(&str, &str); 3] = [
    (
        "parallel analysis",
        "let a = parallel_analysis(&x, ParallelOptions::new().replicates(1_000_000))?;",
    ),
    (
        "permuted columns",
        "let a = parallel_analysis(&x, ParallelOptions::new().replicates(1_000_000).noise(Noise::Permuted))?;",
    ),
    (
        "a loop that counts",
        "let a = counted(\"waiting\", 0..u64::MAX).map(|i| std::hint::black_box(i) % 7).max();",
    ),
];

#[tokio::test]
async fn long_computations_of_the_prelude_stop_when_asked_and_lose_nothing() {
    let mut client = Client::start().await;
    client
        .execute_well("let x = DataMatrix::from_unnamed(random_normal(600, 24))?; let kept = 12;")
        .await;
    for (what, code) in LONG {
        let id = client.send(ExecuteRequest::new(code.to_owned())).await;
        assert_eq!(client.next_broadcast(&id, CELL).await.header.msg_type, "status");
        // Compiled, and well on its way.
        tokio::time::sleep(Duration::from_millis(2500)).await;
        client.interrupt().await;
        let cell = client.collect(&id, CELL).await;
        assert_eq!(cell.reply.status, ReplyStatus::Error, "{what}");
        let error = cell.error().unwrap();
        assert!(error.name.contains("Interrupted"), "{what}: {error:?}");
        // Had the worker been replaced, the variable would be gone with it.
        assert_eq!(
            client.execute_well("kept as usize + x.n_cols()").await.result_text(),
            Some("36"),
            "{what}"
        );
    }
    assert!(client.shutdown(false).await.success());
}
