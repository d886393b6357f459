//! The loop of the worker process.
//!
//! The process itself is a thin host that loads the prelude and calls [`semiaxis_worker`]; from
//! then on everything happens here, so that worker and cells share one standard library, one
//! allocator and one set of statics. The main thread reads commands, and so hears an interrupt
//! while a cell runs; one other thread, with a large stack, runs the cells.

use std::collections::HashMap;
use std::fs::File;
use std::io::{BufReader, Write};
use std::os::fd::FromRawFd;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::PathBuf;
use std::sync::mpsc::{self, Receiver, Sender};
use std::sync::{Condvar, Mutex, OnceLock, PoisonError};
use std::time::{Duration, Instant};

use super::cell::{Cell, note_panics};
use super::message::{
    Command, Ended, Form, How, INTERFACE, Report, Run, TableFile, Trouble, linker_words,
    read_frame, write_frame,
};
use super::progress::{Change, Reporter};
use super::shelf::Shelf;

/// Deep recursion in a cell is ordinary; only touched pages of the stack cost memory.
const CELL_STACK: usize = 256 << 20;

/// How long printed text without a line's end may wait in the buffer of standard output.
const ATTEND_EVERY: Duration = Duration::from_millis(25);

/// The two ends that threads of the worker share.
struct Lines {
    reports: Mutex<File>,
    /// Acknowledgements of shown exhibits; the lock also lets one exhibit through at a time.
    proceed: Mutex<Receiver<()>>,
}

static LINES: OnceLock<Lines> = OnceLock::new();

/// What the cell thread is asked to do.
enum Task {
    Run(Run),
    Forget(Vec<String>),
}

/// Serves the kernel on two inherited pipes until it closes them.
///
/// # Safety
/// The descriptors must be open, and owned by nobody else in this process.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn semiaxis_worker(commands: i32, reports: i32) -> i32 {
    // SAFETY: the caller hands over the descriptors.
    let (commands, reports) = unsafe { (File::from_raw_fd(commands), File::from_raw_fd(reports)) };
    let (proceed, proceeds) = mpsc::channel();
    let lines = Lines { reports: Mutex::new(reports), proceed: Mutex::new(proceeds) };
    if LINES.set(lines).is_err() {
        return 2;
    }
    let (tasks, inbox) = mpsc::channel();
    let cells = std::thread::Builder::new()
        .name("cell".to_owned())
        .stack_size(CELL_STACK)
        .spawn(move || serve_cells(&inbox));
    if let Err(error) = cells {
        eprintln!("the worker could not start its thread for cells: {error}");
        return 2;
    }
    std::thread::spawn(keep_attending);
    report(&Report::Ready { interface: INTERFACE });
    listen(&mut BufReader::new(commands), &tasks, &proceed);
    // The kernel has gone, or has let go of this worker; a running cell has no one to run for.
    0
}

/// Reads commands until the pipe ends.
fn listen(commands: &mut impl std::io::Read, tasks: &Sender<Task>, proceed: &Sender<()>) {
    while let Ok(Some(command)) = read_frame(commands) {
        let sent = match command {
            Command::Run(run) => tasks.send(Task::Run(run)).is_ok(),
            Command::Forget { names } => tasks.send(Task::Forget(names)).is_ok(),
            Command::Interrupt => {
                super::interrupt();
                true
            }
            Command::Proceed => proceed.send(()).is_ok(),
        };
        if !sent {
            return;
        }
    }
}

/// The cell thread: one task after the other.
fn serve_cells(inbox: &Receiver<Task>) {
    note_panics(std::thread::current().id());
    let mut shelf = Shelf::default();
    let mut libraries = Libraries::default();
    while let Ok(task) = inbox.recv() {
        let answer = match task {
            Task::Run(run) => {
                super::begin(run.seed);
                attend(true);
                let ended = run_cell(&mut shelf, &mut libraries, &run);
                attend(false);
                Report::Ended(ended)
            }
            Task::Forget(names) => {
                let discarded: Vec<_> =
                    names.iter().filter_map(|name| shelf.remove(name)).collect();
                let mut trouble = None;
                for value in discarded {
                    trouble = trouble.or(value.drop_quietly().err());
                }
                Report::Forgotten { trouble }
            }
        };
        let _ = std::io::stdout().flush();
        report(&answer);
    }
}

fn run_cell(shelf: &mut Shelf, libraries: &mut Libraries, run: &Run) -> Ended {
    for name in &run.relabelled {
        shelf.relabel(name);
    }
    let entry = libraries.load(&run.libraries, &run.symbol);
    let mut cell = Cell::new(shelf);
    match entry {
        Err(message) => cell.not_started(message),
        // The body of a cell catches its own panics; what is caught here escaped from around it.
        Ok(entry) => {
            if let Err(panic) = catch_unwind(AssertUnwindSafe(|| entry(&mut cell))) {
                cell.panicked(panic);
            }
        }
    }
    let finished = cell.finish();
    if let Some(trouble) = finished.trouble {
        eprintln!("dropping a replaced value panicked: {trouble}");
    }
    let gone = finished.gone.into_iter().filter(|name| !shelf.holds(name)).collect();
    Ended {
        how: finished.how,
        result: super::forms(&finished.result),
        gone,
        kept: finished.kept,
        opened: super::files::opened(),
    }
}

/// The compiled cells loaded so far. They are never unloaded: values on the shelf, threads and
/// statics may refer to their code.
#[derive(Default)]
struct Libraries {
    loaded: HashMap<PathBuf, libloading::Library>,
}

type Entry = fn(&mut Cell<'_>);

impl Libraries {
    /// Loads what is not loaded yet and finds the function of the last one.
    fn load(&mut self, paths: &[PathBuf], symbol: &str) -> Result<Entry, String> {
        for path in paths {
            if !self.loaded.contains_key(path) {
                // SAFETY: the library was compiled for this worker by its kernel; its initializers
                // are those of Rust code, which has none of its own.
                let library = unsafe { libloading::Library::new(path) }.map_err(|error| {
                    format!("the compiled cell would not load: {}", linker_words(&error))
                })?;
                self.loaded.insert(path.clone(), library);
            }
        }
        let library = paths.last().and_then(|path| self.loaded.get(path));
        let library = library.ok_or_else(|| "no compiled cell was named".to_owned())?;
        // SAFETY: the kernel generated the function under this name with this signature, for this
        // build of the prelude (its stamp is part of the library's own name).
        let entry = unsafe { library.get::<Entry>(symbol.as_bytes()) }
            .map_err(|error| format!("the compiled cell has no entry: {error}"))?;
        Ok(*entry)
    }
}

/// Sends a report; without a kernel to hear it the worker ends.
fn report(report: &Report) {
    let Some(lines) = LINES.get() else { return };
    let mut pipe = lines.reports.lock().unwrap_or_else(PoisonError::into_inner);
    if let Err(error) = write_frame(&mut *pipe, report) {
        if error.kind() != std::io::ErrorKind::InvalidData {
            std::process::exit(0);
        }
        let trouble = Trouble { message: error.to_string(), type_name: None, place: None };
        let ended = Ended {
            how: How::Failed(trouble),
            result: Vec::new(),
            gone: Vec::new(),
            kept: Vec::new(),
            opened: Vec::new(),
        };
        if write_frame(&mut *pipe, &Report::Ended(ended)).is_err() {
            std::process::exit(0);
        }
    }
}

/// Whether this process is a worker.
pub(super) fn is_here() -> bool {
    LINES.get().is_some()
}

/// Tells the kernel of a file that was read as a table.
pub(super) fn read(file: TableFile) {
    report(&Report::Read(file));
}

/// Sends an exhibit and waits until the kernel has passed on what was printed before it; false
/// outside a worker.
pub(super) fn show(forms: Vec<Form>) -> bool {
    let Some(lines) = LINES.get() else { return false };
    let proceed = lines.proceed.lock().unwrap_or_else(PoisonError::into_inner);
    let _ = std::io::stdout().flush();
    report(&Report::Show { forms });
    // An error means that the main thread has ended, and the process with it.
    let _ = proceed.recv();
    true
}

/// Whether a cell runs, and what is known of the line about its long work.
struct Attendance {
    on: bool,
    reporter: Reporter,
}

static ATTENDANCE: (Mutex<Attendance>, Condvar) =
    (Mutex::new(Attendance { on: false, reporter: Reporter::new() }), Condvar::new());

fn attend(on: bool) {
    let mut attendance = ATTENDANCE.0.lock().unwrap_or_else(PoisonError::into_inner);
    attendance.on = on;
    if !on {
        // Under the lock, so that no line about the cell can follow its end.
        tell(attendance.reporter.end());
    }
    ATTENDANCE.1.notify_one();
}

/// While a cell runs, flushes standard output now and then, so that a `print!` without a line's end
/// is seen whichever module of the cell wrote it, and tells how far long work has come.
fn keep_attending() {
    loop {
        let attendance = ATTENDANCE.0.lock().unwrap_or_else(PoisonError::into_inner);
        let mut attendance = ATTENDANCE
            .1
            .wait_while(attendance, |attendance| !attendance.on)
            .unwrap_or_else(PoisonError::into_inner);
        tell(attendance.reporter.look(Instant::now()));
        drop(attendance);
        let _ = std::io::stdout().flush();
        std::thread::sleep(ATTEND_EVERY);
    }
}

fn tell(change: Change) {
    match change {
        Change::Nothing => {}
        Change::Show(line) => report(&Report::Progress { line: Some(line) }),
        Change::Remove => report(&Report::Progress { line: None }),
    }
}
