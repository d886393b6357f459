//! How long decompositions and resampling take, beside other programs on the same shapes.
//!
//! ```text
//! cargo run --release -p semiaxis --example speed [-- PYTHON [RSCRIPT]]
//! ```
//!
//! PYTHON is an interpreter with numpy and scikit-learn, RSCRIPT one of R with robustbase; without
//! them only our own times are shown.
//! Each time is the smallest and the median of repeated runs on data in memory; the two programs
//! take turns shape by shape. Close everything else before believing any of it.

use std::process::Command;
use std::time::Instant;

use nalgebra::DMatrix;
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;
use semiaxis::components::{
    ComponentOptions, Decomposition, RandomisedOptions, Scaling, principal_components,
    principal_components_with,
};
use semiaxis::gaps::{ProbabilisticOptions, probabilistic_components};
use semiaxis::parallel::{ParallelOptions, parallel_analysis};
use semiaxis::random::Generator;
use semiaxis::robust::{RobustOptions, robust_scatter};
use semiaxis::stability::{BootstrapOptions, bootstrap};
use semiaxis::table::{DataMatrix, GappedMatrix};

const SHAPES: [(usize, usize); 6] =
    [(100, 5), (1000, 20), (10_000, 50), (20_000, 200), (200_000, 200), (200, 20_000)];

fn main() {
    let python = std::env::args().nth(1);
    println!("components of the covariance matrix, milliseconds, smallest (median)");
    for (n, p) in SHAPES {
        let x = data(n, p);
        let work = n as f64 * p as f64 * n.min(p) as f64;
        let runs = (2e10 / work).clamp(5.0, 200.0) as usize;
        let ours = timed(runs, || principal_components(&x, Scaling::Covariance).unwrap());
        report(
            &format!("{n} x {p}"),
            ours,
            python.as_deref(),
            &["components", &n.to_string(), &p.to_string()],
        );
    }
    println!("the first 10 components by a random search, milliseconds, smallest (median)");
    for (n, p) in [(20_000, 200), (200, 20_000), (4000, 4000)] {
        let x = data(n, p);
        let search = Decomposition::Randomised(RandomisedOptions::new().seed(1));
        let options = ComponentOptions::new(Scaling::Covariance).keep(10).decomposition(search);
        let ours = timed(5, || principal_components_with(&x, options).unwrap());
        let shape = [&n.to_string()[..], &p.to_string()[..]];
        report(&format!("{n} x {p}"), ours, python.as_deref(), &["random", shape[0], shape[1]]);
    }
    let peers = Peers { python: python.as_deref(), r: std::env::args().nth(2) };
    println!("resampling and robust fits, milliseconds, smallest (median)");
    for n in [500, 100_000] {
        let x = data(n, 20);
        let ours = timed(10, || parallel_analysis(&x, ParallelOptions::new().seed(1)).unwrap());
        // The other programs draw whole tables, which takes minutes for the longer one.
        let peers = if n < 10_000 { &peers } else { &Peers { python: None, r: None } };
        peers.report("parallel analysis, 1000 tables", "noise", (n, 20), ours);
    }
    let x = data(300, 14);
    let pca = principal_components(&x, Scaling::Correlation).unwrap();
    let options = BootstrapOptions::new().replicates(2000).seed(1);
    let ours = timed(10, || bootstrap(&pca, options).unwrap());
    peers.report("bootstrap, 2000 resamples", "bootstrap", (300, 14), ours);
    let x = data(1000, 10);
    let ours = timed(10, || robust_scatter(&x, RobustOptions::new().seed(1)).unwrap());
    peers.report("minimum covariance determinant", "scatter", (1000, 10), ours);
    let gapped = with_gaps(1000, 20, 4);
    let options = ProbabilisticOptions::new().scaling(Scaling::Covariance).tolerance(1e-7).seed(1);
    let ours = timed(10, || probabilistic_components(&gapped, 4, options).unwrap());
    peers.report("EM, a tenth missing, 4 components", "gaps", (1000, 20), ours);
}

/// Other programs that do the same.
struct Peers<'a> {
    python: Option<&'a str>,
    r: Option<String>,
}

impl Peers<'_> {
    /// A line for our times, and one for each program that knows this kind of work.
    fn report(&self, what: &str, kind: &str, (n, p): (usize, usize), ours: Times) {
        println!("{what}, {n} x {p}");
        let shape = [kind, &n.to_string(), &p.to_string()];
        report("ours, by numpy", ours, self.python, &shape);
        if let Some(r) = self.r.as_deref().filter(|_| kind != "gaps") {
            let script = concat!(env!("CARGO_MANIFEST_DIR"), "/examples/speed.R");
            let (smallest, median, way) = asked(Command::new(r).arg(script).args(shape));
            println!(
                "{:>14}  peer {smallest:>9.3} ({median:>9.3})  ratio {:.3}  {way}",
                "by R",
                ours.smallest / smallest
            );
        }
    }
}

/// Rows around a plane of so many dimensions, a tenth of the cells missing.
fn with_gaps(n: usize, p: usize, k: usize) -> GappedMatrix {
    let mut generator = Generator::seed_from_u64(2);
    let mut normal = |rows, columns| {
        DMatrix::from_fn(rows, columns, |_, _| StandardNormal.sample(&mut generator))
    };
    let (scores, loadings, noise) = (normal(n, k), normal(p, k), normal(n, p));
    let chance: DMatrix<f64> = normal(n, p);
    let mut values: DMatrix<f64> = scores * loadings.transpose() + noise * 0.5;
    for (value, chance) in values.iter_mut().zip(chance.iter()) {
        // A standard normal value exceeds 1.2816 one time in ten.
        if *chance > 1.2816 {
            *value = f64::NAN;
        }
    }
    GappedMatrix::from_unnamed(values).unwrap()
}

#[derive(Clone, Copy)]
struct Times {
    smallest: f64,
    median: f64,
}

fn data(n: usize, p: usize) -> DataMatrix {
    let mut generator = Generator::seed_from_u64(1);
    let values = DMatrix::from_fn(n, p, |_, j| {
        let value: f64 = StandardNormal.sample(&mut generator);
        5.0 + value * (1.0 + j as f64 / p as f64)
    });
    DataMatrix::from_unnamed(values).unwrap()
}

fn timed<T>(runs: usize, mut run: impl FnMut() -> T) -> Times {
    let mut times: Vec<f64> = (0..runs)
        .map(|_| {
            let start = Instant::now();
            std::hint::black_box(run());
            start.elapsed().as_secs_f64() * 1e3
        })
        .collect();
    times.sort_by(f64::total_cmp);
    Times { smallest: times[0], median: times[runs / 2] }
}

fn report(shape: &str, ours: Times, python: Option<&str>, arguments: &[&str]) {
    print!("{shape:>14}  {:>9.3} ({:>9.3})", ours.smallest, ours.median);
    if let Some(python) = python {
        let script = concat!(env!("CARGO_MANIFEST_DIR"), "/examples/speed.py");
        let (smallest, median, way) = asked(Command::new(python).arg(script).args(arguments));
        print!(
            "   peer {smallest:>9.3} ({median:>9.3})  ratio {:.2}  {way}",
            ours.smallest / smallest
        );
    }
    println!();
}

/// What a peer prints: its smallest and median time, and what it did.
fn asked(command: &mut Command) -> (f64, f64, String) {
    let output = command.output().unwrap();
    let text = String::from_utf8_lossy(&output.stdout).into_owned();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    let mut words = text.split_whitespace();
    let mut number = || words.next().unwrap().parse::<f64>().unwrap();
    let (smallest, median) = (number(), number());
    (smallest, median, words.collect::<Vec<_>>().join(" "))
}
