//! The session log and the notes about outdated values, through the protocol as editors speak it.

use std::collections::HashMap;
use std::fs;
use std::os::unix::fs::PermissionsExt;
use std::path::Path;
use std::process::Output;

use semiaxis_tests::client::{Client, Start};
use semiaxis_tests::command::{semiaxis, stderr, stdout};
use serde_json::Value;

async fn start(log: &Path) -> Client {
    let log = log.to_str().unwrap().to_owned();
    let environment = HashMap::from([("SEMIAXIS_LOG".to_owned(), log)]);
    Client::start_with(Start { environment, ..Start::default() }).await
}

fn log(folder: &Path, arguments: &[&str]) -> Output {
    let mut command = semiaxis(["log"]);
    command.args(arguments).env("SEMIAXIS_LOG", folder).output().unwrap()
}

#[tokio::test(flavor = "current_thread")]
async fn values_that_are_no_longer_what_their_cells_make_are_told_quietly() {
    let folder = tempfile::tempdir().unwrap();
    let mut client = start(folder.path()).await;
    let note = async |client: &mut Client, id: &str, code: &str| {
        let cell = client.execute_as(id, &[], code).await;
        assert!(cell.error().is_none(), "{code}: {:?}", cell.error());
        cell.stderr()
    };
    assert_eq!(note(&mut client, "a", "let x = 2.0;").await, "");
    assert_eq!(note(&mut client, "f", "fn double(v: f64) -> f64 { 2.0 * v }").await, "");
    assert_eq!(note(&mut client, "b", "let y = double(x);").await, "");
    assert_eq!(note(&mut client, "c", "y + x").await, "");
    // Run again as it was: nothing is outdated.
    assert_eq!(note(&mut client, "a", "let x = 2.0;").await, "");
    assert_eq!(note(&mut client, "c", "y + x").await, "");
    // Edited and run again.
    note(&mut client, "a", "let x = 3.0;").await;
    let said = note(&mut client, "c", "y + x").await;
    assert!(
        said.contains("uses `y`, which cell [3] made from an earlier `x` than that of cell [7]"),
        "{said}"
    );
    note(&mut client, "b", "let y = double(x);").await;
    assert_eq!(note(&mut client, "c", "y + x").await, "");
    // A function that was edited.
    note(&mut client, "f", "fn double(v: f64) -> f64 { v + v + 1.0 }").await;
    let said = note(&mut client, "c", "y + x").await;
    assert!(said.contains("uses `y`") && said.contains("an earlier `double`"), "{said}");
    note(&mut client, "b", "let y = double(x);").await;
    // A cell that no longer makes what it made.
    note(&mut client, "a", "let w = 1.0;").await;
    let said = note(&mut client, "c", "x").await;
    assert!(said.contains("uses `x` from an earlier version of cell"), "{said}");
    // A cell that is gone.
    let cell = client.execute_as("c", &["b"], "y").await;
    assert!(
        cell.stderr().contains("uses `y` from cell") && cell.stderr().contains("deleted"),
        "{}",
        cell.stderr()
    );
    // A cell that changes what it has changed before.
    note(&mut client, "v", "let mut v = vec![1];").await;
    assert_eq!(note(&mut client, "p", "v.push(2); v.len()").await, "");
    let said = note(&mut client, "p", "v.push(2); v.len()").await;
    assert!(said.contains("uses `v` as an earlier run of this cell"), "{said}");
    client.shutdown(false).await;
}

#[tokio::test(flavor = "current_thread")]
async fn a_session_is_logged_listed_exported_and_made_a_notebook() {
    let folder = tempfile::tempdir().unwrap();
    let logs = folder.path().join("logs");
    let mut client = start(&logs).await;
    let table = folder.path().join("t é.csv");
    fs::write(&table, "a,b\n1,2\n3,5\n").unwrap();
    let read = format!("let t = read_table({:?})?;", table.to_str().unwrap());
    for (id, code) in [
        ("one", "let x = 1;"),
        ("one", "let x = 2;"),
        ("two", read.as_str()),
        ("three", "println!(\"{}\", x); x"),
        ("four", "let broken: u8 = \"no\";"),
    ] {
        client.execute_as(id, &[], code).await;
    }
    let last = fs::read_dir(&logs).unwrap().next().unwrap().unwrap().path();
    assert_eq!(fs::metadata(&last).unwrap().permissions().mode() & 0o777, 0o600);
    assert_eq!(fs::metadata(&logs).unwrap().permissions().mode() & 0o777, 0o700);
    // All of it is there as soon as the reply is, also if the kernel then dies at once.
    client.signal(libc::SIGKILL);
    client.wait_for_end().await;

    let listed = log(&logs, &[]);
    assert!(stdout(&listed).contains("5 cells"), "{}", stdout(&listed));
    let exported = log(&logs, &["last", "--json"]);
    let entries: Vec<Value> =
        stdout(&exported).lines().map(|line| serde_json::from_str(line).unwrap()).collect();
    assert_eq!(entries.len(), 6);
    assert_eq!(entries[1]["source"], "let x = 1;");
    assert_eq!(entries[1]["cell_id"], "one");
    assert_eq!(entries[3]["tables"][0]["rows"], 2);
    assert_eq!(entries[3]["tables"][0]["sha256"].as_str().unwrap().len(), 64);
    // The digest of "2\n", by sha256sum of GNU coreutils 9.1 on 2026-12-01.
    let two = "53c234e5e8472b6ac51c1ae1cab3fe06fad053beb8ebfd8977b010655bfdd3c3";
    assert_eq!(entries[4]["outputs"][0]["sha256"]["text"], two);
    assert_eq!(entries[4]["outputs"][1]["kind"], "result");
    assert!(entries[4]["seed"].is_u64() && entries[4]["run_ms"].is_f64());
    assert_eq!(entries[5]["outcome"], "failed");
    let shown = log(&logs, &["last"]);
    assert!(stdout(&shown).contains("t é.csv (2 rows, 2 columns"), "{}", stdout(&shown));

    let path = folder.path().join("ran.ipynb");
    let made = log(&logs, &["last", "--notebook", path.to_str().unwrap()]);
    assert!(made.status.success(), "{}", stderr(&made));
    let text = fs::read_to_string(&path).unwrap();
    assert!(nbformat::parse_notebook(&text).is_ok());
    let notebook: Value = serde_json::from_str(&text).unwrap();
    let sources: Vec<String> = notebook["cells"]
        .as_array()
        .unwrap()
        .iter()
        .map(|cell| cell["source"][0].as_str().unwrap().to_owned())
        .collect();
    assert_eq!(sources, ["let x = 2;", read.as_str(), "println!(\"{}\", x); x"]);
    let output = semiaxis(["run", path.to_str().unwrap()]).output().unwrap();
    assert!(output.status.success(), "{}", stderr(&output));

    // Cut off in the middle of the last entry.
    let bytes = fs::read(&last).unwrap();
    fs::write(&last, &bytes[..bytes.len() - 20]).unwrap();
    let shown = log(&logs, &["last"]);
    assert_eq!(shown.status.code(), Some(1));
    assert!(
        stderr(&shown).contains("cut short") && stdout(&shown).contains("[4]"),
        "{}",
        stderr(&shown)
    );
    assert_eq!(log(&logs, &["nobody"]).status.code(), Some(2));
}

#[tokio::test(flavor = "current_thread")]
async fn a_log_that_cannot_be_written_stops_no_cell() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("a file, not a folder");
    fs::write(&file, "").unwrap();
    for log in [file.to_str().unwrap(), "off"] {
        let mut client = start(Path::new(log)).await;
        let cell = client.execute_well("1 + 1").await;
        assert_eq!(cell.result_text(), Some("2"));
        client.shutdown(false).await;
    }
}

#[tokio::test(flavor = "current_thread")]
async fn a_full_disk_under_the_log_stops_no_cell_and_leaves_whole_entries() {
    let folder = tempfile::tempdir().unwrap();
    let disk = folder.path().join("disk");
    fs::create_dir(&disk).unwrap();
    let disk = disk.to_str().unwrap().to_owned();
    // A disk of three pages, in a name space that goes with the kernel.
    let script = "mount -t tmpfs -o size=12k tmpfs \"$0\"; exec \"$@\"";
    let words = ["unshare", "--user", "--map-root-user", "--mount", "sh", "-euc", script, &disk];
    let environment = HashMap::from([("SEMIAXIS_LOG".to_owned(), disk.clone())]);
    let wrapper = words.map(str::to_owned).to_vec();
    let mut client = Client::start_with(Start { environment, wrapper, ..Start::default() }).await;
    for round in 0..6 {
        let code = format!("// {}\n{round}", "long ".repeat(800));
        let cell = client.execute_well(&code).await;
        assert_eq!(cell.result_text(), Some(round.to_string().as_str()));
    }
    // Only the cells see that disk.
    let look = format!(
        "let path = std::fs::read_dir({disk:?})?.next().ok_or(\"no log\")??.path();\n\
         let text = std::fs::read_to_string(path)?;\n\
         format!(\"{{}} {{}}\", text.lines().count(), text.ends_with(\"}}\\n\"))"
    );
    let cell = client.execute_well(&look).await;
    let told = cell.result_text().unwrap().to_owned();
    let n_lines: usize = told.split(' ').next().unwrap().parse().unwrap();
    assert!((2..6).contains(&n_lines) && told.ends_with("true"), "{told}");
    client.shutdown(false).await;
}

#[tokio::test(flavor = "current_thread")]
async fn two_kernels_at_once_keep_a_log_each() {
    let folder = tempfile::tempdir().unwrap();
    let (mut one, mut other) = (start(folder.path()).await, start(folder.path()).await);
    for round in 0..5 {
        one.execute_well(&format!("let one = {round};")).await;
        other.execute_well(&format!("let other = {round};")).await;
    }
    one.shutdown(false).await;
    other.shutdown(false).await;
    let listed = stdout(&log(folder.path(), &[]));
    assert_eq!(listed.lines().count(), 2, "{listed}");
    assert_eq!(listed.matches("5 cells").count(), 2, "{listed}");
    for line in listed.lines() {
        let id = line.split_whitespace().next().unwrap();
        let shown = log(folder.path(), &[id]);
        assert_eq!(shown.status.code(), Some(0), "{}", stderr(&shown));
    }
}
