//! A worker process under the kernel's eye.

use std::fs::File;
use std::io::{self, BufReader};
use std::os::fd::{AsRawFd, FromRawFd, OwnedFd};
use std::path::{Path, PathBuf};
use std::process::{ExitStatus, Stdio};
use std::time::Duration;

use tokio::io::unix::AsyncFd;
use tokio::sync::{mpsc, watch};
use tokio::time::Instant;

use crate::cells::types::{CellEvent, MimeBundle, StreamName};

use super::message::{
    Command, Ended, Form, INTERFACE, Report, Run, TableFile, read_frame, write_frame,
};

/// How long a cell that was asked to stop may take to reach a check.
const GRACE: Duration = Duration::from_millis(1500);

/// As much of what a dying worker last wrote to its stderr is repeated in the message about it.
const LAST_WORDS: usize = 2000;

/// What it takes to start a worker.
#[derive(Debug, Clone)]
pub struct Launch {
    /// The binary of the kernel.
    pub program: PathBuf,
    /// The prelude to load.
    pub prelude: PathBuf,
    /// Where its cells work.
    pub working_dir: Option<PathBuf>,
}

/// How a run ended for the kernel.
#[derive(Debug)]
pub enum Ending {
    /// The worker reported the end of the cell.
    Reported(Ended),
    /// The cell did not stop when asked to, and its worker was ended.
    Replaced,
    /// The worker has ended by itself.
    Died {
        /// In words: the exit status or the signal.
        how: String,
        /// The last it wrote to its standard error.
        last_words: String,
    },
}

/// A running worker.
pub struct Worker {
    child: tokio::process::Child,
    commands: File,
    reports: mpsc::UnboundedReceiver<Report>,
    /// Files that the running cell has read as tables.
    tables: Vec<TableFile>,
    stdout: Pipe,
    stderr: Pipe,
}

impl Worker {
    /// Starts a worker and waits until it is up.
    ///
    /// # Errors
    /// When the process cannot be started, or ends before it is up; the message has its last words.
    pub async fn start(launch: &Launch) -> io::Result<Self> {
        let (commands_read, commands) = pipe()?;
        let (reports, reports_write) = pipe()?;
        let (stdout, stdout_write) = pipe()?;
        let (stderr, stderr_write) = pipe()?;
        let inherited = [commands_read.as_raw_fd(), reports_write.as_raw_fd()];
        let mut command = tokio::process::Command::new(&launch.program);
        command
            .arg("worker")
            .arg(&launch.prelude)
            .args(inherited.map(|descriptor| descriptor.to_string()))
            .stdin(Stdio::null())
            .stdout(stdout_write)
            .stderr(stderr_write)
            .process_group(0)
            .kill_on_drop(true);
        if let Some(folder) = &launch.working_dir {
            command.current_dir(folder);
        }
        // SAFETY: between fork and exec only `fcntl` is called, which is allowed there.
        unsafe {
            command.pre_exec(move || {
                for descriptor in inherited {
                    if libc::fcntl(descriptor, libc::F_SETFD, 0) == -1 {
                        return Err(io::Error::last_os_error());
                    }
                }
                Ok(())
            });
        }
        let child = command.spawn()?;
        drop((command, commands_read, reports_write));
        let (sender, received) = mpsc::unbounded_channel();
        // A thread of its own may block on the pipe; it ends when the worker does.
        std::thread::Builder::new().name("reports".to_owned()).spawn(move || {
            let mut reports = BufReader::new(File::from(reports));
            while let Ok(Some(report)) = read_frame(&mut reports) {
                if sender.send(report).is_err() {
                    return;
                }
            }
        })?;
        let mut worker = Self {
            child,
            commands: File::from(commands),
            reports: received,
            tables: Vec::new(),
            stdout: Pipe::new(stdout)?,
            stderr: Pipe::new(stderr)?,
        };
        match worker.reports.recv().await {
            Some(Report::Ready { interface: INTERFACE }) => Ok(worker),
            Some(_) => Err(io::Error::other(
                "the worker speaks another language than the kernel; the prelude must be built again",
            )),
            None => {
                let (how, last_words) = worker.obituary().await;
                Err(io::Error::other(format!("the worker {how} before it was up: {last_words}")))
            }
        }
    }

    /// Runs one cell. `events` takes what happens meanwhile; `interrupts` changes at each interrupt.
    pub async fn run(
        &mut self,
        run: Run,
        events: &mpsc::Sender<CellEvent>,
        interrupts: &mut watch::Receiver<u64>,
    ) -> Ending {
        if self.send(&Command::Run(run)).is_err() {
            let (how, last_words) = self.obituary().await;
            return Ending::Died { how, last_words };
        }
        let mut deadline: Option<Instant> = None;
        loop {
            let late = deadline;
            let news = tokio::select! {
                biased;
                Ok(()) = interrupts.changed() => News::Interrupt,
                () = until(late) => News::Late,
                report = self.reports.recv() => News::Report(report),
                text = self.stdout.read() => News::Stdout(text),
                text = self.stderr.read() => News::Stderr(text),
            };
            match news {
                News::Interrupt => {
                    // A second interrupt does not shorten the time that the first one gave.
                    deadline = deadline.or(Some(Instant::now() + GRACE));
                    let _ = self.send(&Command::Interrupt);
                }
                News::Late => {
                    self.kill().await;
                    self.pass_on_the_rest(events).await;
                    return Ending::Replaced;
                }
                News::Stdout(text) => deliver(events, StreamName::Stdout, text).await,
                News::Stderr(text) => deliver(events, StreamName::Stderr, text).await,
                News::Report(Some(Report::Show { forms })) => {
                    self.pass_on_the_rest(events).await;
                    let _ = events.send(CellEvent::Display(bundle(forms))).await;
                    let _ = self.send(&Command::Proceed);
                }
                News::Report(Some(Report::Progress { line })) => {
                    let _ = events.send(CellEvent::Progress(line)).await;
                }
                News::Report(Some(Report::Read(file))) => self.tables.push(file),
                News::Report(Some(Report::Ended(ended))) => {
                    self.pass_on_the_rest(events).await;
                    return Ending::Reported(ended);
                }
                News::Report(Some(_)) => {}
                News::Report(None) => {
                    let (how, last_words) = self.obituary_passed_on(events).await;
                    return Ending::Died { how, last_words };
                }
            }
        }
    }

    /// Takes what the last cell has read as tables.
    pub fn take_tables(&mut self) -> Vec<TableFile> {
        std::mem::take(&mut self.tables)
    }

    /// Drops variables; gives what went wrong in a destructor. `Err` means that the worker died.
    pub async fn forget(&mut self, names: Vec<String>) -> Result<Option<String>, ()> {
        self.send(&Command::Forget { names }).map_err(|_| ())?;
        loop {
            match self.reports.recv().await {
                Some(Report::Forgotten { trouble }) => return Ok(trouble),
                Some(_) => {}
                None => return Err(()),
            }
        }
    }

    /// Ends the worker at once.
    pub async fn kill(&mut self) {
        if let Some(id) = self.child.id().and_then(|id| libc::pid_t::try_from(id).ok()) {
            // Processes that a cell has started are in the worker's group and go with it.
            // SAFETY: a signal to a process group that this kernel started and has not reaped.
            unsafe { libc::kill(-id, libc::SIGKILL) };
        }
        let _ = self.child.wait().await;
    }

    /// Whether the worker is still there.
    pub fn is_alive(&mut self) -> bool {
        matches!(self.child.try_wait(), Ok(None))
    }

    fn send(&mut self, command: &Command) -> io::Result<()> {
        write_frame(&mut self.commands, command)
    }

    /// Passes on all that was written so far; the worker writes before it reports, so nothing of
    /// the cell is still under way.
    async fn pass_on_the_rest(&mut self, events: &mpsc::Sender<CellEvent>) {
        deliver(events, StreamName::Stdout, self.stdout.rest()).await;
        deliver(events, StreamName::Stderr, self.stderr.rest()).await;
    }

    async fn obituary_passed_on(&mut self, events: &mpsc::Sender<CellEvent>) -> (String, String) {
        let status = self.child.wait().await;
        let stderr = self.stderr.rest();
        deliver(events, StreamName::Stdout, self.stdout.rest()).await;
        deliver(events, StreamName::Stderr, stderr.clone()).await;
        (describe(status), tail(&stderr))
    }

    async fn obituary(&mut self) -> (String, String) {
        let status = self.child.wait().await;
        (describe(status), tail(&self.stderr.rest()))
    }
}

enum News {
    Interrupt,
    Late,
    Report(Option<Report>),
    Stdout(String),
    Stderr(String),
}

async fn until(deadline: Option<Instant>) {
    match deadline {
        Some(deadline) => tokio::time::sleep_until(deadline).await,
        None => std::future::pending().await,
    }
}

async fn deliver(events: &mpsc::Sender<CellEvent>, name: StreamName, text: String) {
    if !text.is_empty() {
        // A receiver that has gone wants nothing more; the cell is run to its end all the same.
        let _ = events.send(CellEvent::Stream { name, text }).await;
    }
}

/// The forms of an exhibit as clients want them.
pub fn bundle(forms: Vec<Form>) -> MimeBundle {
    forms.into_iter().map(|form| (form.mime, form.content)).collect()
}

fn describe(status: io::Result<ExitStatus>) -> String {
    use std::os::unix::process::ExitStatusExt;
    match status {
        Err(error) => format!("ended in a way that could not be found out ({error})"),
        Ok(status) => match (status.code(), status.signal()) {
            (Some(code), _) => format!("ended with exit status {code}"),
            (None, Some(signal)) => {
                format!("was ended by signal {signal} ({})", signal_words(signal))
            }
            (None, None) => "ended".to_owned(),
        },
    }
}

fn signal_words(signal: i32) -> &'static str {
    match signal {
        libc::SIGSEGV => "it touched memory that is not its own",
        libc::SIGABRT => "it aborted",
        libc::SIGKILL => "it was killed, by a person or for want of memory",
        libc::SIGBUS => "it touched a part of a file that is not there",
        libc::SIGFPE => "an impossible integer operation",
        libc::SIGILL => "an impossible instruction",
        libc::SIGTERM => "it was asked to end",
        _ => "see signal(7)",
    }
}

fn tail(text: &str) -> String {
    let text = text.trim_end();
    let mut start = text.len().saturating_sub(LAST_WORDS);
    while !text.is_char_boundary(start) {
        start += 1;
    }
    text[start..].to_owned()
}

/// Both ends of a new pipe, closed in programs that are started unless something opens them.
fn pipe() -> io::Result<(OwnedFd, OwnedFd)> {
    let mut ends = [0; 2];
    // SAFETY: `ends` has room for the two descriptors.
    if unsafe { libc::pipe2(ends.as_mut_ptr(), libc::O_CLOEXEC) } == -1 {
        return Err(io::Error::last_os_error());
    }
    // SAFETY: the descriptors are new and have no other owner.
    Ok(unsafe { (OwnedFd::from_raw_fd(ends[0]), OwnedFd::from_raw_fd(ends[1])) })
}

/// The reading end of one of the worker's streams, and the beginning of a character cut in two.
struct Pipe {
    descriptor: AsyncFd<OwnedFd>,
    pending: Vec<u8>,
    ended: bool,
}

impl Pipe {
    fn new(descriptor: OwnedFd) -> io::Result<Self> {
        let raw = descriptor.as_raw_fd();
        // SAFETY: reading and setting the flags of a descriptor that is open.
        let done = unsafe {
            let flags = libc::fcntl(raw, libc::F_GETFL);
            flags != -1 && libc::fcntl(raw, libc::F_SETFL, flags | libc::O_NONBLOCK) != -1
        };
        if !done {
            return Err(io::Error::last_os_error());
        }
        // SAFETY: an `OwnedFd` names the same open descriptor for as long as it lives.
        let descriptor = unsafe { AsyncFd::register(descriptor)? };
        Ok(Self { descriptor, pending: Vec::new(), ended: false })
    }

    /// Waits for text; never comes back once the stream has ended.
    async fn read(&mut self) -> String {
        loop {
            if self.ended {
                return std::future::pending().await;
            }
            match self.descriptor.readable().await {
                Err(_) => self.ended = true,
                Ok(mut ready) => {
                    let mut chunk = Vec::new();
                    let state = fill(ready.get_inner(), &mut chunk);
                    if !matches!(state, Filled::Full) {
                        ready.clear_ready();
                    }
                    self.ended = matches!(state, Filled::Ended);
                    self.pending.append(&mut chunk);
                    let text = self.decode(false);
                    if !text.is_empty() {
                        return text;
                    }
                }
            }
        }
    }

    /// All that is there now, without waiting.
    fn rest(&mut self) -> String {
        let mut text = String::new();
        while !self.ended {
            let mut chunk = Vec::new();
            let state = fill(self.descriptor.get_ref(), &mut chunk);
            self.ended = matches!(state, Filled::Ended);
            self.pending.append(&mut chunk);
            text.push_str(&self.decode(false));
            if matches!(state, Filled::Empty) {
                break;
            }
        }
        text.push_str(&self.decode(true));
        text
    }

    /// Takes whole characters off the pending bytes; bytes that are no UTF-8 become `U+FFFD`.
    fn decode(&mut self, to_the_end: bool) -> String {
        let keep = if to_the_end { 0 } else { unfinished(&self.pending) };
        let bytes: Vec<u8> = self.pending.drain(..self.pending.len() - keep).collect();
        String::from_utf8_lossy(&bytes).into_owned()
    }
}

/// How many bytes at the end begin a character whose rest may still come.
fn unfinished(bytes: &[u8]) -> usize {
    for back in 1..=bytes.len().min(3) {
        let byte = bytes[bytes.len() - back];
        let length = match byte {
            0xc2..=0xdf => 2,
            0xe0..=0xef => 3,
            0xf0..=0xf4 => 4,
            0x80..=0xbf => continue,
            _ => return 0,
        };
        return if back < length { back } else { 0 };
    }
    0
}

enum Filled {
    /// Nothing more at the moment.
    Empty,
    /// The chunk is full; there may be more.
    Full,
    /// The other end is closed.
    Ended,
}

fn fill(descriptor: &impl AsRawFd, chunk: &mut Vec<u8>) -> Filled {
    const CHUNK: usize = 256 * 1024;
    chunk.resize(CHUNK, 0);
    let mut length = 0;
    let state = loop {
        if length == CHUNK {
            break Filled::Full;
        }
        let room = &mut chunk[length..];
        // SAFETY: `room` is writable for its length.
        let got =
            unsafe { libc::read(descriptor.as_raw_fd(), room.as_mut_ptr().cast(), room.len()) };
        match usize::try_from(got) {
            Ok(0) => break Filled::Ended,
            Ok(got) => length += got,
            Err(_) => match io::Error::last_os_error().kind() {
                io::ErrorKind::Interrupted => {}
                io::ErrorKind::WouldBlock => break Filled::Empty,
                _ => break Filled::Ended,
            },
        }
    };
    chunk.truncate(length);
    state
}

/// The launch of a worker by this very binary.
pub fn launch(prelude: &Path, working_dir: Option<&Path>) -> io::Result<Launch> {
    Ok(Launch {
        program: std::env::current_exe()?,
        prelude: prelude.to_owned(),
        working_dir: working_dir.map(Path::to_owned),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_character_cut_in_two_waits_for_its_rest() {
        assert_eq!(unfinished("aé".as_bytes()), 0);
        assert_eq!(unfinished(&"é".as_bytes()[..1]), 1);
        assert_eq!(unfinished(&"€".as_bytes()[..2]), 2);
        assert_eq!(unfinished(&"😀".as_bytes()[..3]), 3);
        assert_eq!(unfinished(&[b'a', 0xff]), 0);
        assert_eq!(unfinished(&[0x80, 0x80, 0x80, 0x80]), 0);
        assert_eq!(unfinished(&[]), 0);
    }

    #[test]
    fn the_end_of_a_text_is_cut_at_a_character() {
        let text = "é".repeat(LAST_WORDS);
        assert!(tail(&text).len() <= LAST_WORDS);
        assert_eq!(tail("short\n"), "short");
    }
}
