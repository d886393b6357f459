//! Measures what an analyst waits for, beside the floor that the compiler sets, in one run.
//!
//! `cargo run --release -p semiaxis-tests --bin bench`; with `--build` it also times a clean release
//! build in a folder of its own (half an hour) and a run of the tests after it. Every figure is a
//! whole request as a client sees it, from the request to the kernel's `idle`. The cache of compiled
//! cells is a fresh one, so a new cell is new in every run.

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use semiaxis_tests::client::{Client, Start, kernel_executable};
use semiaxis_tests::place::workspace;

/// How often a cell is measured; each time beside one compilation of nothing.
const ROUNDS: usize = 20;

/// How often a start is measured.
const STARTS: usize = 5;

const FIRST: &str = "let tiles = read_table(\"tiles.csv\")?;\n\
    let x = tiles.data_matrix_with(MatrixOptions::new().missing(Missing::DropRows))?;\n\
    let pca = principal_components(&x, Scaling::Correlation)?;\npca";

#[tokio::main(flavor = "current_thread")]
async fn main() {
    let build = std::env::args().any(|argument| argument == "--build");
    println!("preparing: the kernel, and what its cells compile against");
    let prepared = Command::new(kernel_executable()).arg("prepare").stdout(Stdio::null()).status();
    assert!(prepared.is_ok_and(|status| status.success()), "the kernel could not be prepared");
    let cache = tempfile::tempdir().expect("a temporary folder");
    let compiler = Compiler::find();

    heading("start to first decomposition shown (budget 1.0 s)");
    let (first, _) = session(cache.path()).await;
    line("cell never compiled before", &[first], None);
    let mut starts = Vec::new();
    let mut memory = Vec::new();
    for _ in 0..STARTS {
        let (elapsed, resident) = session(cache.path()).await;
        starts.push(elapsed);
        memory.push(resident);
    }
    line("cell compiled in an earlier session", &starts, None);

    heading("resident after the first decomposition (budget 150 MB)");
    memory.sort_by_key(Resident::total);
    let Resident { kernel, worker } = &memory[memory.len() / 2];
    println!("  kernel {kernel} MB, worker {worker} MB, together {} MB", kernel + worker);

    heading("a cell, request to idle, over an empty cdylib compile (budget 3.0 for new cells)");
    for (name, cell) in KINDS {
        cells(name, cell, cache.path(), &compiler).await;
    }

    heading("an unchanged cell in a later session (budget 30 ms)");
    unchanged(cache.path()).await;

    if build {
        heading("clean release build on this machine (budget 35 min on 2 cores)");
        clean_build();
    }
}

/// Kinds of cell; `#` stands for a number that makes each new.
const KINDS: [(&str, &str); 5] = [
    ("arithmetic", "let n# = (1..=#).map(|k| k as f64).sum::<f64>();\nn#"),
    (
        "prelude call",
        "let pca# = principal_components(&x, Scaling::Covariance)?;\npca#.proportions()[0] * #.0",
    ),
    (
        "table expressions",
        "let by_kiln# = tiles.clone().lazy().group_by([col(\"kiln\")])\
         .agg([col(\"mass_g\").mean() * lit(#.0)]).collect()?;\nby_kiln#",
    ),
    (
        "function and struct",
        "struct Load# { name: String, size: f64 }\n\
         fn largest#(x: &DataMatrix) -> Load# {\n    \
             let sums = x.values().row_sum_tr();\n    \
             let at = sums.imax();\n    \
             Load# { name: x.variables()[at].to_string(), size: sums[at] }\n}\n\
         let load# = largest#(&x);\nprintln!(\"{} {}\", load#.name, load#.size);",
    ),
    ("chart", "score_plot(&pca).title(\"number #\")"),
];

async fn cells(name: &str, cell: &str, cache: &Path, compiler: &Compiler) {
    let mut client = start(cache).await;
    client.execute_well(FIRST).await;
    let (mut times, mut floors) = (Vec::new(), Vec::new());
    for round in 0..ROUNDS {
        floors.push(compiler.compile_nothing());
        let started = Instant::now();
        client.execute_well(&cell.replace('#', &(round + 100).to_string())).await;
        times.push(started.elapsed());
    }
    client.shutdown(false).await;
    line(name, &times, Some(&floors));
}

async fn unchanged(cache: &Path) {
    let mut client = start(cache).await;
    client.execute_well(FIRST).await;
    let mut times = Vec::new();
    for round in 0..ROUNDS {
        // The cells of the kind "prelude call", as the session before compiled them.
        let cell = KINDS[1].1.replace('#', &(round + 100).to_string());
        let started = Instant::now();
        client.execute_well(&cell).await;
        times.push(started.elapsed());
    }
    client.shutdown(false).await;
    line("prelude call", &times, None);
}

async fn start(cache: &Path) -> Client {
    let environment = [("XDG_CACHE_HOME".to_owned(), cache.display().to_string())];
    let working_dir = Some(workspace().join("notebooks-demo"));
    let start = Start { environment: environment.into(), working_dir, ..Start::default() };
    Client::start_with(start).await
}

struct Resident {
    kernel: u64,
    worker: u64,
}

impl Resident {
    fn total(&self) -> u64 {
        self.kernel + self.worker
    }
}

/// From starting the kernel's process to the first decomposition.
async fn session(cache: &Path) -> (Duration, Resident) {
    let started = Instant::now();
    let mut client = start(cache).await;
    client.execute_well(FIRST).await;
    let elapsed = started.elapsed();
    let kernel = client.process.id().expect("the kernel runs");
    let worker = children(kernel).into_iter().map(resident).sum();
    let memory = Resident { kernel: resident(kernel), worker };
    client.shutdown(false).await;
    (elapsed, memory)
}

/// What a process holds in memory, in MB, pages shared with others counted in.
fn resident(process: u32) -> u64 {
    let status = std::fs::read_to_string(format!("/proc/{process}/status")).unwrap_or_default();
    let line = status.lines().find_map(|line| line.strip_prefix("VmRSS:")).unwrap_or_default();
    line.split_whitespace().next().and_then(|kb| kb.parse::<u64>().ok()).unwrap_or(0) / 1024
}

fn children(process: u32) -> Vec<u32> {
    let tasks = std::fs::read_dir(format!("/proc/{process}/task")).into_iter().flatten().flatten();
    let all: Vec<String> = tasks
        .filter_map(|task| std::fs::read_to_string(task.path().join("children")).ok())
        .collect();
    all.iter().flat_map(|line| line.split_whitespace()).filter_map(|id| id.parse().ok()).collect()
}

struct Compiler {
    rustc: PathBuf,
    folder: tempfile::TempDir,
}

impl Compiler {
    fn find() -> Self {
        let output =
            Command::new("rustc").args(["--print", "sysroot"]).output().expect("rustc runs");
        let sysroot = String::from_utf8_lossy(&output.stdout).trim().to_owned();
        let folder = tempfile::tempdir().expect("a temporary folder");
        std::fs::write(folder.path().join("nothing.rs"), "").expect("it can be written");
        Self { rustc: Path::new(&sysroot).join("bin/rustc"), folder }
    }

    fn compile_nothing(&self) -> Duration {
        let started = Instant::now();
        let status = Command::new(&self.rustc)
            .args(["--crate-type", "cdylib", "--edition", "2024", "nothing.rs"])
            .current_dir(self.folder.path())
            .status();
        assert!(status.is_ok_and(|status| status.success()), "an empty library compiles");
        started.elapsed()
    }
}

fn clean_build() {
    let folder = tempfile::tempdir_in(workspace().join("..")).expect("a temporary folder");
    let run = |what: &str, arguments: &[&str]| {
        let started = Instant::now();
        let status = Command::new("cargo")
            .args(arguments)
            .current_dir(workspace())
            .env("CARGO_TARGET_DIR", folder.path())
            .status();
        assert!(status.is_ok_and(|status| status.success()), "{what} failed");
        println!("  {what}: {:.1} min", started.elapsed().as_secs_f64() / 60.0);
    };
    run("build of everything", &["build", "--release", "--workspace", "--all-targets", "--quiet"]);
    run("tests after it", &["test", "--release", "--workspace", "--quiet"]);
}

fn heading(text: &str) {
    println!("\n{text}");
}

/// Median and range of some times; with floors also the median of the ratios, pair by pair.
fn line(name: &str, times: &[Duration], floors: Option<&[Duration]>) {
    let milliseconds = |times: &[Duration]| -> Vec<f64> {
        let mut all: Vec<f64> = times.iter().map(|time| time.as_secs_f64() * 1e3).collect();
        all.sort_by(f64::total_cmp);
        all
    };
    let sorted = milliseconds(times);
    let median = sorted[sorted.len() / 2];
    print!("  {name:36} {median:8.0} ms  ({:.0} to {:.0})", sorted[0], sorted[sorted.len() - 1]);
    if let Some(floors) = floors {
        let mut ratios: Vec<f64> =
            times.iter().zip(floors).map(|(a, b)| a.as_secs_f64() / b.as_secs_f64()).collect();
        ratios.sort_by(f64::total_cmp);
        let floor = milliseconds(floors)[floors.len() / 2];
        print!("  floor {floor:.0} ms  ratio {:.2}", ratios[ratios.len() / 2]);
    }
    println!();
}
