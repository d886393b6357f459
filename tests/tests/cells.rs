//! The cells of `cells/`, sent to the kernel through the messaging protocol: each sequence to a
//! session of its own, as from a notebook.

use std::collections::HashMap;
use std::process::Command;
use std::sync::OnceLock;
use std::time::{Duration, Instant};

use jupyter_protocol::{ExecuteRequest, JupyterMessageContent};
use semiaxis_tests::client::{CELL, Client, Execution, LONG, Start, kernel_executable};
use semiaxis_tests::python::succeed;
use semiaxis_tests::sequences::{self, Failure, Seen};

/// One test for each file, so that a failure says at once which part of the cells' behaviour is
/// at fault.
macro_rules! files {
    ($($name:ident),* $(,)?) => {
        $(
            #[tokio::test]
            async fn $name() {
                send(stringify!($name)).await;
            }
        )*

        #[test]
        fn every_file_of_cells_is_sent() {
            assert_eq!(sequences::names(), [$(stringify!($name)),*]);
        }
    };
}

files!(bad_tables, diagnostics, extras, flow, items, moves, statistics, variables);

/// Starts a kernel for which all is built, so that its first cell says nothing of a build.
async fn start(start: Start) -> Client {
    static PREPARED: OnceLock<()> = OnceLock::new();
    PREPARED.get_or_init(|| {
        succeed(Command::new(kernel_executable()).arg("prepare"));
    });
    Client::start_with(start).await
}

/// Sends every sequence of a file and reports all that went wrong at once.
async fn send(file: &str) {
    let mut wrong = Vec::new();
    for sequence in sequences::read(file) {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let settings = Start { working_dir: Some(folder.path().to_owned()), ..Start::default() };
        let mut client = start(settings).await;
        for (cell_idx, cell) in sequence.cells.iter().enumerate() {
            let seen = seen(&client.execute(&cell.code).await);
            for problem in cell.check(&seen) {
                wrong.push(format!("{}: cell {}: {problem}", sequence.name, cell_idx + 1));
            }
        }
        let status = client.shutdown(false).await;
        if !status.success() {
            wrong.push(format!("{}: the kernel ended with {status}", sequence.name));
        }
    }
    assert!(wrong.is_empty(), "{file}: {} problems\n{}", wrong.len(), wrong.join("\n"));
}

/// What a cell did, as far as the protocol told it.
fn seen(execution: &Execution) -> Seen {
    let form = |bundle: &serde_json::Map<String, serde_json::Value>, mime: &str| {
        bundle.get(mime).and_then(|text| text.as_str()).map(str::to_owned)
    };
    let result = execution.result();
    Seen {
        stdout: execution.stdout(),
        stderr: execution.stderr(),
        text: result.as_ref().and_then(|bundle| form(bundle, "text/plain")),
        html: result.as_ref().and_then(|bundle| form(bundle, "text/html")),
        displays: execution
            .displays()
            .iter()
            .map(|bundle| form(bundle, "text/plain").unwrap_or_default())
            .collect(),
        failure: execution.error().map(|error| Failure {
            name: error.name,
            value: error.value,
            traceback: error.traceback.join("\n"),
        }),
    }
}

#[tokio::test]
async fn output_without_a_newline_appears_at_once() {
    let mut client = start(Start::default()).await;
    client.execute_well("use std::time::Duration; use std::thread::sleep;").await;
    let code = "print!(\"begun\"); sleep(Duration::from_secs(3)); print!(\" and ended\");";
    let id = client.send(ExecuteRequest::new(code.to_owned())).await;
    let first = loop {
        let message = client.next_broadcast(&id, LONG).await;
        if let JupyterMessageContent::StreamContent(stream) = message.content {
            break stream.text;
        }
    };
    assert_eq!(first, "begun");
    let arrived = Instant::now();
    let rest = client.collect(&id, CELL).await;
    assert_eq!(rest.stdout(), " and ended");
    // The cell sleeps for three seconds between the two; half of that tells the cases apart on a
    // machine that is busy.
    let between = arrived.elapsed();
    assert!(
        between > Duration::from_millis(1500),
        "the first word came {between:?} before the end"
    );
    client.shutdown(false).await;
}

/// Runs cells in a session of their own and returns all that they wrote and showed.
async fn run(cells: &[&str], environment: &[(&str, &str)]) -> String {
    let environment: HashMap<String, String> =
        environment.iter().map(|(name, value)| ((*name).to_owned(), (*value).to_owned())).collect();
    let mut client = start(Start { environment, ..Start::default() }).await;
    let mut text = String::new();
    for cell in cells {
        let execution = client.execute_well(cell).await;
        text.push_str(&execution.stdout());
        text.push_str(execution.result_text().unwrap_or_default());
    }
    client.shutdown(false).await;
    text
}

/// A table of two causes and noise, made by a rule of whole numbers, and random numbers asked of
/// the prelude in four ways.
const RANDOM: [&str; 4] = [
    r#"
    let values = nalgebra::DMatrix::from_fn(60, 8, |i, j| {
        let (a, b) = (((i * 37) % 61) as f64, ((i * 17 + 5) % 59) as f64);
        let noise = ((i * 7919 + j * 104_729) % 997) as f64 / 50.0;
        if j < 4 { a + noise } else { b + noise }
    });
    let x = DataMatrix::from_unnamed(values)?;
    "#,
    r#"
    let first = parallel_analysis(&x, ParallelOptions::default().replicates(200))?;
    for value in first.noise_percentile().iter() { println!("{:016x}", value.to_bits()); }
    "#,
    "---\n[cell]\nseed = 11\n---\n\
    let second = parallel_analysis(&x, ParallelOptions::default().replicates(200))?;\n\
    for value in second.noise_mean().iter() { println!(\"{:016x}\", value.to_bits()); }",
    r#"
    let third = parallel_analysis(&x, ParallelOptions::default().noise(Noise::Permuted).replicates(200))?;
    for value in third.noise_percentile().iter() { println!("{:016x}", value.to_bits()); }
    "#,
];

#[tokio::test]
async fn the_same_notebook_gives_the_same_random_numbers_on_any_number_of_threads() {
    let one = run(&RANDOM, &[("RAYON_NUM_THREADS", "1")]).await;
    let two = run(&RANDOM, &[("RAYON_NUM_THREADS", "2")]).await;
    let seven = run(&RANDOM, &[("RAYON_NUM_THREADS", "7")]).await;
    assert_eq!(one.lines().count(), 3 * 8, "{one}");
    assert_eq!(one, two);
    assert_eq!(one, seven);
}

#[tokio::test]
async fn a_seed_changes_the_random_numbers_and_only_those() {
    let plain = run(&RANDOM, &[]).await;
    let other_seed = RANDOM.map(|cell| cell.replace("seed = 11", "seed = 12"));
    let other_seed: Vec<&str> = other_seed.iter().map(String::as_str).collect();
    let other = run(&other_seed, &[]).await;
    let (plain, other): (Vec<&str>, Vec<&str>) = (plain.lines().collect(), other.lines().collect());
    // The first cell that draws has no seed of its own, the second has.
    assert_eq!(plain[..8], other[..8]);
    assert!((8..16).all(|line| plain[line] != other[line]), "{plain:?} {other:?}");
    assert_eq!(plain[16..], other[16..]);
}
