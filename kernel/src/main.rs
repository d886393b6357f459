//! The one binary of Semiaxis: what clients start, and what a person types on the command line.

mod cells;
mod help;
mod log;
mod notebook;
mod record;
mod session;
mod setup;
mod wire;
mod worker;

use std::path::{Path, PathBuf};
use std::process::ExitCode;

use clap::{Parser, Subcommand};

use cells::Engine;
use cells::types::EngineOptions;
use setup::install::Place;
use setup::{Kit, Reporter};

/// Everything went as it should.
const OK: u8 = 0;
/// A cell failed.
const FAILED: u8 = 1;
/// There was nothing to fail: the notebook, the compiler or the place for results is missing.
const COULD_NOT: u8 = 2;

/// A notebook kernel for multivariate work in compiled Rust.
#[derive(Parser)]
#[command(name = "semiaxis", version)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Subcommand)]
enum Command {
    /// Run a notebook from top to bottom without any client, and write the executed notebook.
    ///
    /// The status is 0 if every cell ran, 1 if a cell failed, 2 if the notebook could not be run.
    Run {
        /// The notebook; it is not changed. Cells run in its folder.
        notebook: PathBuf,
        /// Where to write the executed notebook [default: NOTEBOOK with .executed before its ending]
        #[arg(long, value_name = "FILE")]
        output: Option<PathBuf>,
        /// A value for a variable that a cell tagged `parameters` declares; may be given again
        #[arg(long, value_name = "NAME=VALUE")]
        set: Vec<String>,
    },
    /// Run a notebook from top to bottom and write a record: one HTML file that needs nothing else.
    ///
    /// The status is 0 if the record was written, 1 if a cell failed, 2 if the notebook could not be
    /// run or the record not be written.
    Record {
        /// The notebook; it is not changed. Cells run in its folder.
        notebook: PathBuf,
        /// Where to write the record [default: NOTEBOOK with .record.html for its ending]
        #[arg(long, value_name = "FILE")]
        output: Option<PathBuf>,
        /// Write a record even if cells fail; it says so on its first page
        #[arg(long)]
        with_errors: bool,
        /// Print it through Chromium, too
        #[arg(long)]
        pdf: bool,
        /// A value for a variable that a cell tagged `parameters` declares; may be given again
        #[arg(long, value_name = "NAME=VALUE")]
        set: Vec<String>,
    },
    /// Run a record again and compare every output. This runs the cells of the record, as you.
    ///
    /// The status is 0 if all cells show the same, 1 if one shows something else, 2 if the record is
    /// altered or cannot be used, or if a cell could not run.
    Verify {
        /// The record.
        record: PathBuf,
        /// Where the data may be, searched by digest; may be given again [default: the record's folder]
        #[arg(long, value_name = "DIR")]
        data: Vec<PathBuf>,
        /// The relative difference up to which numbers count as the same
        #[arg(long, value_name = "NUMBER", default_value_t = record::compare::TOLERANCE)]
        tolerance: f64,
    },
    /// List the sessions that were logged, or show one of them.
    ///
    /// The status is 0 if the log is whole, 1 if it is cut short or altered, 2 if there is none.
    Log {
        /// The session: its name, the beginning of it, or `last`.
        session: Option<String>,
        /// Write the session's entries as JSON lines
        #[arg(long, requires = "session", conflicts_with = "notebook")]
        json: bool,
        /// Write a notebook of what ran, in order, without what was overwritten
        #[arg(long, value_name = "FILE", requires = "session")]
        notebook: Option<PathBuf>,
    },
    /// Say, without running anything, whether the saved outputs can come from a run from top to bottom.
    ///
    /// The status is 0 if they can, 1 if they cannot, 2 if the notebook cannot be read.
    Check {
        /// The notebook.
        notebook: PathBuf,
    },
    /// Serve a notebook client; clients start this themselves, with a connection file.
    ///
    /// The status is 0 after an orderly shutdown, 2 if the connection file cannot be used and 3 if
    /// a socket that it names cannot be bound.
    Kernel {
        /// The file in which the client says where it will look for the kernel.
        connection_file: PathBuf,
    },
    /// Register this program as a kernel, so that notebook clients offer it.
    Install {
        /// Register it for you alone; this is what happens without any option, too.
        #[arg(long, conflicts_with = "prefix")]
        user: bool,
        /// Register it in DIR/share/jupyter, for a Python environment or a whole machine.
        #[arg(long, value_name = "DIR")]
        prefix: Option<PathBuf>,
    },
    /// Build what cells compile against, as the first start of a kernel does, and say where it is.
    Prepare,
    /// Runs the cells of a kernel; kernels start this themselves.
    #[command(hide = true)]
    Worker {
        /// The prelude's library.
        prelude: PathBuf,
        /// The descriptor that commands come from.
        commands: i32,
        /// The descriptor that reports go to.
        reports: i32,
    },
}

fn main() -> ExitCode {
    match Arguments::parse().command {
        Command::Run { notebook, output, set } => run(&notebook, output.as_deref(), &set),
        Command::Record { notebook, output, with_errors, pdf, set } => {
            let seed = EngineOptions::default().seed;
            record(&record::command::Request { notebook, output, with_errors, pdf, set, seed })
        }
        Command::Verify { record, data, tolerance } => verify(&record, &data, tolerance),
        Command::Log { session, json, notebook } => {
            log(session.as_deref(), json, notebook.as_deref())
        }
        Command::Check { notebook } => check(&notebook),
        Command::Kernel { connection_file } => {
            session::serve(&connection_file, EngineOptions::default())
        }
        Command::Install { user: _, prefix } => install(&prefix.map_or(Place::User, Place::Prefix)),
        Command::Prepare => prepare(),
        Command::Worker { prelude, commands, reports } => {
            let status = worker::host::main(&prelude, commands, reports);
            std::process::exit(status)
        }
    }
}

fn install(place: &Place) -> ExitCode {
    match setup::install::install(place) {
        Ok(installed) => {
            println!("{installed}");
            ExitCode::from(OK)
        }
        Err(error) => could_not(&error),
    }
}

/// Finds or builds the kit while a person watches.
fn kit() -> Result<Kit, setup::SetupError> {
    let mut reporter = Reporter::new();
    setup::ensure(&mut |event| reporter.show(event))
}

fn prepare() -> ExitCode {
    match kit() {
        Ok(kit) => {
            println!("{}", kit.dir.display());
            ExitCode::from(OK)
        }
        Err(error) => could_not(&error),
    }
}

fn run(notebook: &Path, output: Option<&Path>, set: &[String]) -> ExitCode {
    let runtime = match tokio::runtime::Builder::new_current_thread().enable_all().build() {
        Ok(runtime) => runtime,
        Err(error) => return could_not(&error),
    };
    let working_dir = notebook.parent().and_then(|folder| match folder.as_os_str().is_empty() {
        true => std::env::current_dir().ok(),
        false => folder.canonicalize().ok(),
    });
    let start = async || {
        let kit = kit().map_err(|error| error.to_string())?;
        let options = EngineOptions { working_dir, ..EngineOptions::default() };
        Engine::start(kit, options).await.map_err(|error| error.to_string())
    };
    match runtime.block_on(notebook::run::run_file(notebook, output, set, RUST, start)) {
        Ok(summary) if summary.failed => ExitCode::from(FAILED),
        Ok(_) => ExitCode::from(OK),
        Err(error) => could_not(&error),
    }
}

fn runtime() -> std::io::Result<tokio::runtime::Runtime> {
    tokio::runtime::Builder::new_current_thread().enable_all().build()
}

/// An engine whose cells run in a folder.
async fn engine_in(folder: PathBuf, seed: u64) -> Result<Engine, String> {
    let kit = kit().map_err(|error| error.to_string())?;
    let options = EngineOptions { working_dir: Some(folder), seed };
    Engine::start(kit, options).await.map_err(|error| error.to_string())
}

fn record(request: &record::command::Request) -> ExitCode {
    let runtime = match runtime() {
        Ok(runtime) => runtime,
        Err(error) => return could_not(&error),
    };
    let folder = record::command::folder_of(&request.notebook);
    let start = async || engine_in(folder, request.seed).await;
    match runtime.block_on(record::command::record(request, start)) {
        Ok(made) if made.failed => ExitCode::from(FAILED),
        Ok(_) => ExitCode::from(OK),
        Err(error) => {
            let status = match error {
                record::error::RecordError::CellFailed { .. } => FAILED,
                _ => COULD_NOT,
            };
            eprintln!("semiaxis: {error}");
            ExitCode::from(status)
        }
    }
}

fn verify(record: &Path, data: &[PathBuf], tolerance: f64) -> ExitCode {
    if !(0.0..=1.0).contains(&tolerance) {
        let given = tolerance.to_string();
        return could_not(&record::error::RecordError::BadTolerance { given });
    }
    let runtime = match runtime() {
        Ok(runtime) => runtime,
        Err(error) => return could_not(&error),
    };
    match runtime.block_on(record::verify::verify(record, data, tolerance, engine_in)) {
        Ok(verified) if verified.is_incomplete() => ExitCode::from(COULD_NOT),
        Ok(verified) if verified.differs() => ExitCode::from(FAILED),
        Ok(_) => ExitCode::from(OK),
        Err(error) => could_not(&error),
    }
}

fn log(session: Option<&str>, json: bool, notebook: Option<&Path>) -> ExitCode {
    let folder = match log::store::folder() {
        Ok(folder) => folder,
        Err(error) => return could_not(&error),
    };
    let print = |text: &str| {
        // A reader that closed its end has seen enough.
        let _ = std::io::Write::write_all(&mut std::io::stdout(), text.as_bytes());
    };
    let Some(asked) = session else {
        return match log::read::sessions(&folder) {
            Ok(sessions) => {
                print(&log::tell::list(&sessions));
                ExitCode::from(OK)
            }
            Err(error) => could_not(&error),
        };
    };
    let session = match log::read::find(&folder, asked) {
        Ok(session) => session,
        Err(error) => return could_not(&error),
    };
    if let Some(path) = notebook {
        match log::tell::write_notebook(&session, path, RUST) {
            Ok(n_cells) => print(&format!("notebook of {n_cells} cells: {}\n", path.display())),
            Err(error) => return could_not(&error),
        }
    } else if json {
        print(&log::tell::json_lines(&session));
    } else {
        print(&log::tell::show(&session));
    }
    match session.state {
        log::read::State::Whole => ExitCode::from(OK),
        log::read::State::CutShort => {
            eprintln!(
                "semiaxis: the log of this session is cut short; it was read up to the last whole entry"
            );
            ExitCode::from(FAILED)
        }
        log::read::State::Altered(n) => {
            eprintln!(
                "semiaxis: the log of this session is altered at entry {n}; it was read up to there"
            );
            ExitCode::from(FAILED)
        }
    }
}

fn check(notebook: &Path) -> ExitCode {
    let document = match notebook::document::Document::read(notebook) {
        Ok(document) => document,
        Err(error) => return could_not(&error),
    };
    let check = notebook::check::check(&document);
    for finding in &check.findings {
        println!("{finding}");
    }
    if !check.findings.is_empty() {
        println!(
            "the saved outputs cannot all come from a run from top to bottom in a fresh session"
        );
        return ExitCode::from(FAILED);
    }
    match check.n_counted {
        0 => println!(
            "no cell was run; nothing in the text keeps the notebook from running from top to bottom"
        ),
        n => println!("the outputs of all {n} cells can come from one run from top to bottom"),
    }
    ExitCode::from(OK)
}

/// The Rust release that cells can count on.
const RUST: &str = env!("CARGO_PKG_RUST_VERSION");

fn could_not(error: &dyn std::fmt::Display) -> ExitCode {
    eprintln!("semiaxis: {error}");
    ExitCode::from(COULD_NOT)
}
