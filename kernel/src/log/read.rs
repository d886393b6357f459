//! Reading logs back, and finding out whether they are whole.

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use super::entry::{CellEntry, Entry, Line, ORIGIN, What};
use super::store::{ENDING, chained};

/// A session as its log tells it.
#[derive(Debug, Clone, PartialEq)]
pub struct Session {
    /// The name by which it is asked for.
    pub id: String,
    /// The file.
    pub path: PathBuf,
    /// The entries up to the first that cannot be trusted.
    pub entries: Vec<Entry>,
    /// How the file ends.
    pub state: State,
}

/// Whether a log is whole.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum State {
    /// It ends with an entry; the session may still go on.
    Whole,
    /// It ends in the middle of an entry, as a crash leaves it.
    CutShort,
    /// The entry of this number is not as it was written, or something is missing before it.
    Altered(u64),
}

/// Why a session cannot be told.
#[derive(Debug, thiserror::Error)]
pub enum LogError {
    /// The folder or a file.
    #[error("could not read {}: {source}", path.display())]
    Files {
        /// The path.
        path: PathBuf,
        /// What the system said.
        source: io::Error,
    },
    /// No session of this name.
    #[error("there is no session `{asked}`; `semiaxis log` lists those that there are")]
    Unknown {
        /// What was asked for.
        asked: String,
    },
    /// Several sessions of this beginning.
    #[error("`{asked}` could be {}; more of the name is needed", found.join(", "))]
    Several {
        /// What was asked for.
        asked: String,
        /// What it could be.
        found: Vec<String>,
    },
}

/// All sessions of a folder, oldest first.
///
/// # Errors
/// The folder is there and cannot be read.
pub fn sessions(folder: &Path) -> Result<Vec<Session>, LogError> {
    let entries = match fs::read_dir(folder) {
        Ok(entries) => entries,
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(Vec::new()),
        Err(source) => return Err(LogError::Files { path: folder.to_owned(), source }),
    };
    let mut paths: Vec<PathBuf> = entries
        .flatten()
        .map(|entry| entry.path())
        .filter(|path| path.extension().is_some_and(|ending| ending == ENDING))
        .collect();
    paths.sort();
    paths.iter().map(|path| session(path)).collect()
}

/// One session by its name, by the beginning of its name, or `last`.
///
/// # Errors
/// There is none, or more than one.
pub fn find(folder: &Path, asked: &str) -> Result<Session, LogError> {
    let mut all = sessions(folder)?;
    if asked == "last"
        && let Some(last) = all.pop()
    {
        return Ok(last);
    }
    let mut found: Vec<Session> =
        all.into_iter().filter(|session| session.id.starts_with(asked)).collect();
    match (found.pop(), found.is_empty()) {
        (Some(one), true) => Ok(one),
        (Some(last), false) => {
            let found = found.iter().chain([&last]).map(|session| session.id.clone()).collect();
            Err(LogError::Several { asked: asked.to_owned(), found })
        }
        (None, _) => Err(LogError::Unknown { asked: asked.to_owned() }),
    }
}

fn session(path: &Path) -> Result<Session, LogError> {
    let bytes =
        fs::read(path).map_err(|source| LogError::Files { path: path.to_owned(), source })?;
    let stem = path.file_stem().unwrap_or_default().to_string_lossy().into_owned();
    // Behind the time stands what the session was named.
    let id = stem.split_once('-').map_or(stem.clone(), |(_, id)| id.to_owned());
    let (entries, state) = parse(&bytes);
    Ok(Session { id, path: path.to_owned(), entries, state })
}

/// The entries of a log, up to the first that is not as it was written.
fn parse(bytes: &[u8]) -> (Vec<Entry>, State) {
    let mut entries = Vec::new();
    let mut before = ORIGIN.to_owned();
    let mut rest = bytes;
    while !rest.is_empty() {
        let Some(end) = rest.iter().position(|byte| *byte == b'\n') else {
            return (entries, State::CutShort);
        };
        let (line, after) = (&rest[..end], &rest[end + 1..]);
        let number = entries.len() as u64;
        let Some(line) = whole_line(line, &before).filter(|line| line.entry.n == number) else {
            return (entries, State::Altered(number));
        };
        before = line.hash;
        entries.push(line.entry);
        rest = after;
    }
    (entries, State::Whole)
}

/// An entry and its hash, if the line is as it was written behind another. What counts is the text
/// of the entry as it stands there: read and written again, a number may have another last digit.
fn whole_line(bytes: &[u8], before: &str) -> Option<Line> {
    let text = std::str::from_utf8(bytes).ok()?;
    let line: Line = serde_json::from_str(text).ok()?;
    let start = format!("{{\"hash\":\"{}\",\"before\":\"{before}\",\"entry\":", line.hash);
    let entry = text.strip_prefix(&start)?.strip_suffix('}')?;
    (line.hash == chained(before, entry)).then_some(line)
}

impl Session {
    /// The cells that were run, with their entries.
    pub fn cells(&self) -> impl Iterator<Item = (&Entry, &CellEntry)> {
        self.entries.iter().filter_map(|entry| match &entry.what {
            What::Cell(cell) => Some((entry, &**cell)),
            _ => None,
        })
    }

    /// Whether the wall clock went back while the session ran.
    pub fn clock_went_back(&self) -> bool {
        self.entries.windows(2).any(|pair| pair[1].at < pair[0].at)
    }
}
