//! Completion and inspection in a real session, over the real index of names.

use std::time::{Duration, Instant};

use jupyter_protocol::{CompleteRequest, InspectRequest};
use semiaxis_tests::client::Client;
use serde_json::Value;

/// Two cells with a table of three invented tiles and its decomposition.
const CELLS: [&str; 2] = [
    "let path = std::env::temp_dir().join(format!(\"semiaxis-tiles-{}.csv\", std::process::id()));\n\
     std::fs::write(&path, \"length,width\\n410.2,251.1\\n408.9,250.4\\n411.7,253.0\\n\")?;\n\
     let tiles = read_table(&path)?;\nstd::fs::remove_file(&path)?;",
    "let x = tiles.data_matrix()?;\nlet pca = principal_components(&x, Scaling::Covariance)?;",
];

async fn content(
    client: &mut Client,
    request: impl Into<jupyter_protocol::JupyterMessageContent>,
) -> Value {
    serde_json::to_value(client.ask(request).await.content).unwrap()
}

async fn matches(client: &mut Client, code: &str) -> Vec<String> {
    let request = CompleteRequest { code: code.to_owned(), cursor_pos: code.chars().count() };
    let reply = content(client, request).await;
    reply["matches"].as_array().unwrap().iter().map(|m| m.as_str().unwrap().to_owned()).collect()
}

/// A session in which the cells have run and the index is there.
async fn session() -> Client {
    let mut client = Client::start().await;
    for cell in CELLS {
        client.execute_well(cell).await;
    }
    // The index is read beside the first cells; from then on every answer is complete.
    let deadline = Instant::now() + Duration::from_secs(30);
    while !matches(&mut client, "read_ta").await.contains(&"read_table".to_owned()) {
        assert!(Instant::now() < deadline, "the index is never read");
    }
    client
}

#[tokio::test]
async fn what_follows_a_dot_is_what_the_type_has_and_comes_at_once() {
    let mut client = session().await;
    for (code, expected) in [
        ("pca.", &["variances", "loadings", "scores", "project"][..]),
        ("tiles.", &["data_matrix", "data_matrix_of", "height", "select"]),
        ("x.", &["n_rows", "n_cols", "values"]),
        ("x.values().", &["transpose", "nrows"]),
        ("let t = read_table(\"a.csv\")?;\nt.", &["data_matrix", "width"]),
        ("col(\"length\").", &["mean", "alias"]),
        ("scree(&pca).", &["svg", "save", "title"]),
        ("Scaling::", &["Correlation", "Covariance"]),
        ("pc", &["pca"]),
        ("princ", &["principal_components"]),
    ] {
        let found = matches(&mut client, code).await;
        for name in expected {
            assert!(found.iter().any(|found| found == name), "{name} after {code:?}: {found:?}");
        }
    }
    assert!(matches(&mut client, "pca.nonsense").await.is_empty());
    assert!(matches(&mut client, "unknown.").await.is_empty());

    let mut times = Vec::new();
    for code in ["pca.", "tiles.", "p", "", "x.values()."] {
        let best = {
            let mut best = Duration::MAX;
            for _ in 0..5 {
                let started = Instant::now();
                matches(&mut client, code).await;
                best = best.min(started.elapsed());
            }
            best
        };
        times.push((code, best));
    }
    assert!(times.iter().all(|(_, best)| *best < Duration::from_millis(50)), "{times:?}");
    assert!(client.shutdown(false).await.success());
}

#[tokio::test]
async fn names_are_explained_with_their_documentation_and_their_cell() {
    let mut client = session().await;
    for (code, cursor_pos, expected) in [
        (
            "principal_components(&x, )",
            25,
            &["fn principal_components(", "Result<PrincipalComponents>"][..],
        ),
        ("pca", 3, &["PrincipalComponents", "cell [2]"]),
        ("pca.loadings()", 6, &["fn loadings(&self)"]),
        ("tiles.height()", 8, &["fn height(&self) -> usize"]),
        ("Scaling::Correlation", 12, &["Scaling::Correlation"]),
    ] {
        let request = InspectRequest { code: code.to_owned(), cursor_pos, detail_level: Some(0) };
        let reply = content(&mut client, request).await;
        let text = reply["data"]["text/plain"].as_str().unwrap_or_default();
        for part in expected {
            assert!(text.contains(part), "{part} at {cursor_pos} in {code:?}: {text}");
        }
    }
    assert!(client.shutdown(false).await.success());
}
