//! Writing a session's log.

use std::collections::BTreeMap;
use std::fs::{self, DirBuilder, File, OpenOptions};
use std::io::{self, Write};
use std::os::unix::fs::{DirBuilderExt, OpenOptionsExt, PermissionsExt};
use std::path::{Path, PathBuf};
use std::sync::mpsc;
use std::time::Instant;

use chrono::{DateTime, SecondsFormat, Utc};
use serde_json::Value;
use sha2::{Digest, Sha256};

use super::entry::{CellEntry, Entry, Line, ORIGIN, OutputEntry, What};
use crate::cells::types::{CellEvent, MimeBundle, StreamName};
use crate::record::evidence::{digest, finished};
use crate::setup::KitHome;

/// The ending of the files.
pub const ENDING: &str = "jsonl";

/// How large the files may become.
#[derive(Debug, Clone, Copy)]
pub struct Limits {
    /// One session.
    pub session: u64,
    /// All sessions together; the oldest go first.
    pub total: u64,
}

impl Default for Limits {
    fn default() -> Self {
        Self { session: 64 << 20, total: 512 << 20 }
    }
}

/// The variable by which a person puts logs elsewhere, or keeps none.
const ELSEWHERE: &str = "SEMIAXIS_LOG";

/// The folder of logs of this user: `log` beside the kits, unless `SEMIAXIS_LOG` names another.
///
/// # Errors
/// The environment names no folder for data, or `SEMIAXIS_LOG` is `off`.
pub fn folder() -> io::Result<PathBuf> {
    match std::env::var_os(ELSEWHERE) {
        Some(given) if given == "off" => {
            return Err(io::Error::other("SEMIAXIS_LOG is off"));
        }
        Some(given) if !given.is_empty() => return std::path::absolute(given),
        _ => {}
    }
    let home = KitHome::find().map_err(|error| io::Error::other(error.to_string()))?;
    Ok(home.kits.with_file_name("log"))
}

/// The log of one session, open for writing.
#[derive(Debug)]
pub struct Log {
    path: PathBuf,
    file: File,
    /// The hash of the last line.
    before: String,
    n: u64,
    /// The length of all whole lines.
    length: u64,
    limits: Limits,
    full: bool,
    began: Instant,
    /// Has the file pushed to the disk, behind what the session does.
    push: Option<mpsc::Sender<()>>,
}

impl Log {
    /// Begins the log of a session in a folder, which is made if need be, and removes the oldest logs
    /// if there is too much of them.
    ///
    /// # Errors
    /// The folder or the file cannot be made.
    pub fn begin(folder: &Path, id: &str, seed: u64, limits: Limits) -> io::Result<Self> {
        DirBuilder::new().recursive(true).mode(0o700).create(folder)?;
        fs::set_permissions(folder, fs::Permissions::from_mode(0o700))?;
        tidy(folder, limits.total);
        let started = Utc::now();
        let name = format!("{}-{id}.{ENDING}", started.format("%Y%m%dT%H%M%SZ"));
        let path = folder.join(name);
        let file = OpenOptions::new().append(true).create_new(true).mode(0o600).open(&path)?;
        // Held as long as the session lives, so that nobody tidies it away.
        file.lock()?;
        let mut log = Self {
            push: pusher(&path),
            path,
            file,
            before: ORIGIN.to_owned(),
            n: 0,
            length: 0,
            limits,
            full: false,
            began: Instant::now(),
        };
        let here = std::env::current_dir().unwrap_or_default();
        log.append(
            What::Began {
                semiaxis: env!("CARGO_PKG_VERSION").to_owned(),
                folder: here.display().to_string(),
                seed,
            },
            started,
        )?;
        Ok(log)
    }

    /// The file.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// Enters a cell that was run.
    ///
    /// # Errors
    /// The file cannot be written; it is left as it was before.
    pub fn cell(&mut self, cell: CellEntry) -> io::Result<()> {
        self.append(What::Cell(Box::new(cell)), Utc::now())
    }

    /// Enters that the session ends in order.
    ///
    /// # Errors
    /// As [`Log::cell`].
    pub fn end(&mut self) -> io::Result<()> {
        self.append(What::Ended, Utc::now())?;
        self.file.sync_data()
    }

    fn append(&mut self, what: What, at: DateTime<Utc>) -> io::Result<()> {
        if self.full {
            return Ok(());
        }
        let line = self.line(what, at)?;
        if self.length + line.0.len() as u64 > self.limits.session {
            self.full = true;
            let line = self.line(What::Full, at)?;
            return self.write(line);
        }
        self.write(line)
    }

    /// The line of an entry, and its hash.
    fn line(&self, what: What, at: DateTime<Utc>) -> io::Result<(String, String)> {
        let entry = Entry {
            n: self.n,
            at: at.to_rfc3339_opts(SecondsFormat::Millis, true),
            ms: u64::try_from(self.began.elapsed().as_millis()).unwrap_or(u64::MAX),
            what,
        };
        let hash = chained(&self.before, &serde_json::to_string(&entry)?);
        let line = Line { hash: hash.clone(), before: self.before.clone(), entry };
        Ok((serde_json::to_string(&line)? + "\n", hash))
    }

    fn write(&mut self, (line, hash): (String, String)) -> io::Result<()> {
        if let Err(error) = self.file.write_all(line.as_bytes()) {
            // Part of a line must not stand between whole ones.
            self.file.set_len(self.length)?;
            return Err(error);
        }
        self.length += line.len() as u64;
        self.before = hash;
        self.n += 1;
        if let Some(push) = &self.push {
            let _ = push.send(());
        }
        Ok(())
    }
}

/// The hash of an entry behind another.
pub fn chained(before: &str, entry: &str) -> String {
    digest(format!("{before}\n{entry}").as_bytes())
}

/// A thread that pushes what was written to the disk; without one, the system does it in its time.
fn pusher(path: &Path) -> Option<mpsc::Sender<()>> {
    // Opened anew, so that the lock ends with the session and not with this thread.
    let file = File::open(path).ok()?;
    let (sender, wishes) = mpsc::channel();
    let push = move || {
        while wishes.recv().is_ok() {
            while wishes.try_recv().is_ok() {}
            let _ = file.sync_data();
        }
    };
    std::thread::Builder::new().name("log".to_owned()).spawn(push).ok()?;
    Some(sender)
}

/// Removes the oldest logs of sessions that have ended until the rest is small enough.
fn tidy(folder: &Path, most: u64) {
    let entries = fs::read_dir(folder).into_iter().flatten().flatten();
    let mut logs: Vec<(PathBuf, u64)> = entries
        .map(|entry| entry.path())
        .filter(|path| path.extension().is_some_and(|ending| ending == ENDING))
        .filter_map(|path| fs::metadata(&path).ok().map(|found| (path, found.len())))
        .collect();
    // The names begin with the time.
    logs.sort();
    let mut total: u64 = logs.iter().map(|(_, bytes)| bytes).sum();
    for (path, bytes) in logs {
        if total <= most {
            return;
        }
        let over = File::open(&path).is_ok_and(|file| file.try_lock().is_ok());
        if over && fs::remove_file(&path).is_ok() {
            total -= bytes;
        }
    }
}

/// Takes the digests of what a cell shows while it shows it.
#[derive(Debug, Default)]
pub struct Listener {
    streams: BTreeMap<&'static str, (u64, Sha256)>,
    exhibits: Vec<OutputEntry>,
}

impl Listener {
    /// Something was shown.
    pub fn hear(&mut self, event: &CellEvent) {
        match event {
            CellEvent::Stream { name, text } => self.text(*name, text),
            CellEvent::Display(bundle) => self.exhibit("display", bundle),
            CellEvent::Result(bundle) => self.exhibit("result", bundle),
            CellEvent::Progress(_) => {}
        }
    }

    fn text(&mut self, name: StreamName, text: &str) {
        let (bytes, hasher) = self.streams.entry(name.as_str()).or_default();
        *bytes += text.len() as u64;
        hasher.update(text.as_bytes());
    }

    fn exhibit(&mut self, kind: &str, bundle: &MimeBundle) {
        let mut entry = OutputEntry { kind: kind.to_owned(), ..OutputEntry::default() };
        for (mime, content) in bundle {
            let bytes = match content {
                Value::String(text) => text.clone(),
                other => other.to_string(),
            };
            entry.bytes += bytes.len() as u64;
            entry.sha256.insert(mime.clone(), digest(bytes.as_bytes()));
        }
        self.exhibits.push(entry);
    }

    /// The outputs: the streams as wholes, then the exhibits in order.
    pub fn finish(self) -> Vec<OutputEntry> {
        let streams = self.streams.into_iter().map(|(kind, (bytes, hasher))| {
            let sha256 = BTreeMap::from([("text".to_owned(), finished(hasher))]);
            OutputEntry { kind: kind.to_owned(), bytes, sha256 }
        });
        streams.chain(self.exhibits).collect()
    }
}
