//! Logs written, broken and read back.

use std::fs;
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};

use super::*;
use crate::log::read::{find, sessions};
use crate::log::store::{Limits, Log};

fn cell(count: u32, id: &str, source: &str, uses: &str, makes: &str) -> CellEntry {
    let words = |text: &str| text.split_whitespace().map(str::to_owned).collect();
    CellEntry {
        count,
        cell_id: (!id.is_empty()).then(|| id.to_owned()),
        source: source.to_owned(),
        outcome: "done".to_owned(),
        // A number whose last digit a hasty reader gets wrong.
        compile_ms: 1068.0240000000001,
        run_ms: 0.30000000000000004,
        uses: words(uses),
        makes: words(makes),
        ..CellEntry::default()
    }
}

fn begin(folder: &Path, id: &str) -> Log {
    Log::begin(folder, id, 7, Limits::default()).unwrap()
}

/// A log of three cells, and its file.
fn sample(folder: &Path) -> PathBuf {
    let mut log = begin(folder, "aa11");
    for count in 1..=3 {
        log.cell(cell(count, "c", &format!("x{count} <\u{e9}>\n"), "", "x")).unwrap();
    }
    log.path().to_owned()
}

#[test]
fn what_was_written_is_read_back_by_its_owner_only() {
    let folder = tempfile::tempdir().unwrap();
    let folder = folder.path().join("deep/log");
    let path = sample(&folder);
    let mode = |path: &Path| fs::metadata(path).unwrap().permissions().mode() & 0o777;
    assert_eq!((mode(&folder), mode(&path)), (0o700, 0o600));
    let session = find(&folder, "aa").unwrap();
    assert_eq!(session.state, State::Whole);
    assert_eq!(session.cells().count(), 3);
    assert_eq!(session.cells().nth(1).unwrap().1.source, "x2 <\u{e9}>\n");
    assert!(
        list(std::slice::from_ref(&session)).contains("aa11")
            && show(&session).contains("    x3 <\u{e9}>")
    );
    assert_eq!(json_lines(&session).lines().count(), 4);
    assert_eq!(find(&folder, "last").unwrap().id, "aa11");
    assert!(find(&folder, "zz").unwrap_err().to_string().contains("no session `zz`"));
}

#[test]
fn a_log_cut_short_is_read_up_to_the_last_whole_entry() {
    let folder = tempfile::tempdir().unwrap();
    let path = sample(folder.path());
    let bytes = fs::read(&path).unwrap();
    let ends: Vec<usize> = (1..=bytes.len()).filter(|end| bytes[end - 1] == b'\n').collect();
    for cut in 0..bytes.len() {
        fs::write(&path, &bytes[..cut]).unwrap();
        let session = &sessions(folder.path()).unwrap()[0];
        let whole = ends.iter().filter(|end| **end <= cut).count();
        assert_eq!(session.entries.len(), whole, "cut at {cut}");
        let at_an_end = cut == 0 || ends.contains(&cut);
        assert_eq!(session.state, if at_an_end { State::Whole } else { State::CutShort });
    }
}

#[test]
fn any_changed_byte_and_any_missing_line_is_noticed() {
    let folder = tempfile::tempdir().unwrap();
    let path = sample(folder.path());
    let bytes = fs::read(&path).unwrap();
    for at in 0..bytes.len() - 1 {
        let mut changed = bytes.clone();
        changed[at] ^= 1;
        fs::write(&path, &changed).unwrap();
        let session = &sessions(folder.path()).unwrap()[0];
        assert!(matches!(session.state, State::Altered(_)), "byte {at}: {:?}", session.state);
        let line = bytes[..at].iter().filter(|byte| **byte == b'\n').count();
        assert!(session.entries.len() <= line, "nothing behind the change is believed");
    }
    let text = String::from_utf8(bytes).unwrap();
    let lines: Vec<&str> = text.split_inclusive('\n').collect();
    fs::write(&path, [lines[0], lines[1], lines[3]].concat()).unwrap();
    assert_eq!(sessions(folder.path()).unwrap()[0].state, State::Altered(2));
}

#[test]
fn two_sessions_at_once_have_a_file_each() {
    let folder = tempfile::tempdir().unwrap();
    std::thread::scope(|scope| {
        for id in ["one", "two"] {
            let folder = folder.path();
            scope.spawn(move || {
                let mut log = begin(folder, id);
                for count in 1..=200 {
                    log.cell(cell(count, "", id, "", "")).unwrap();
                }
                log.end().unwrap();
            });
        }
    });
    let all = sessions(folder.path()).unwrap();
    assert_eq!(all.len(), 2);
    for session in all {
        assert_eq!((session.cells().count(), session.state.clone()), (200, State::Whole));
        assert!(session.cells().all(|(_, cell)| cell.source == session.id));
    }
}

#[test]
fn size_limits_end_a_log_and_remove_the_oldest() {
    let folder = tempfile::tempdir().unwrap();
    let limits = Limits { session: 4000, total: 3000 };
    let mut log = Log::begin(folder.path(), "big", 7, limits).unwrap();
    for count in 1..=100 {
        log.cell(cell(count, "", &"x".repeat(200), "", "")).unwrap();
    }
    let path = log.path().to_owned();
    assert!(fs::metadata(&path).unwrap().len() < 4500);
    let session = find(folder.path(), "big").unwrap();
    assert_eq!(session.entries.last().unwrap().what, What::Full);
    assert!(list(&[session]).contains("reached its size limit"));
    // It stays while its session lives.
    drop(Log::begin(folder.path(), "next", 7, limits).unwrap());
    assert!(path.exists());
    drop(log);
    drop(Log::begin(folder.path(), "third", 7, limits).unwrap());
    assert!(!path.exists());
}

#[test]
fn a_clock_that_was_set_back_is_told_and_the_order_stays() {
    let folder = tempfile::tempdir().unwrap();
    let mut session = {
        sample(folder.path());
        find(folder.path(), "aa11").unwrap()
    };
    assert!(!session.clock_went_back());
    session.entries[2].at = "1999-01-01T00:00:00.000Z".to_owned();
    assert!(list(&[session.clone()]).contains("the clock was set back"));
    let counts: Vec<u32> = session.cells().map(|(_, cell)| cell.count).collect();
    assert_eq!(counts, [1, 2, 3]);
}

fn clean(cells: &[CellEntry]) -> Vec<String> {
    let folder = tempfile::tempdir().unwrap();
    let mut log = begin(folder.path(), "n");
    for cell in cells {
        log.cell(cell.clone()).unwrap();
    }
    let document = notebook(&find(folder.path(), "n").unwrap());
    let path = Path::new("x.ipynb");
    assert_eq!(Document::parse(document.text().as_bytes(), path).unwrap(), document);
    (0..document.n_cells()).map(|idx| document.source(idx)).collect()
}

#[test]
fn the_notebook_of_a_session_holds_what_its_end_rests_on() {
    let failed = CellEntry { outcome: "failed".to_owned(), ..cell(9, "z", "bad", "", "") };
    // Overwritten before anything used it: gone. Failed: gone.
    assert_eq!(
        clean(&[
            cell(1, "a", "let x = 1;", "", "x"),
            failed,
            cell(2, "a", "let x = 2;", "", "x"),
            cell(3, "b", "let y = x;", "x", "y"),
        ]),
        ["let x = 2;", "let y = x;"]
    );
    // Overwritten after something that stayed was made from it: both stay, in order.
    assert_eq!(
        clean(&[
            cell(1, "a", "let x = 1;", "", "x"),
            cell(2, "b", "let y = x;", "x", "y"),
            cell(3, "a", "let x = 2;", "", "x"),
        ]),
        ["let x = 1;", "let y = x;", "let x = 2;"]
    );
    // Clients that name no cells: all that ran.
    assert_eq!(clean(&[cell(1, "", "1", "", ""), cell(2, "", "1", "", "")]), ["1", "1"]);
    // Changed twice by one cell: both changes happened.
    assert_eq!(
        clean(&[
            cell(1, "a", "let mut v = vec![];", "", "v"),
            cell(2, "b", "v.push(1);", "v", "v"),
            cell(3, "b", "v.push(2);", "v", "v"),
        ]),
        ["let mut v = vec![];", "v.push(1);", "v.push(2);"]
    );
}
