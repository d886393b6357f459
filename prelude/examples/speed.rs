//! How long decompositions, random searches and parallel analyses take, beside another program on
//! the same shapes.
//!
//! ```text
//! cargo run --release -p semiaxis --example speed [-- PYTHON]
//! ```
//!
//! PYTHON is an interpreter with numpy and scikit-learn; without it only our own times are shown.
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
use semiaxis::parallel::{ParallelOptions, parallel_analysis};
use semiaxis::random::Generator;
use semiaxis::table::DataMatrix;

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
    println!("parallel analysis with 1000 tables, milliseconds, smallest (median)");
    for (n, p) in [(500, 20), (100_000, 20)] {
        let x = data(n, p);
        let ours = timed(10, || parallel_analysis(&x, ParallelOptions::new().seed(1)).unwrap());
        // The other program draws whole tables, which takes minutes for the longer one.
        let peer = python.as_deref().filter(|_| n < 10_000);
        report(&format!("{n} x {p}"), ours, peer, &["noise", &n.to_string(), &p.to_string()]);
    }
}

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
        let output = Command::new(python).arg(script).args(arguments).output().unwrap();
        let text = String::from_utf8_lossy(&output.stdout).into_owned();
        assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
        let mut words = text.split_whitespace();
        let mut number = || words.next().unwrap().parse::<f64>().unwrap();
        let (smallest, median) = (number(), number());
        let way = words.collect::<Vec<_>>().join(" ");
        print!(
            "   peer {smallest:>9.3} ({median:>9.3})  ratio {:.2}  {way}",
            ours.smallest / smallest
        );
    }
    println!();
}
