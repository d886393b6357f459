//! Properties and closed forms. A simulation by another program is in the workspace's
//! `tests/tests/references`.

use nalgebra::DMatrix;
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::{Noise, ParallelAnalysis, ParallelOptions, RootsOf, parallel_analysis};
use crate::compare::{assert_relative, assert_zero};
use crate::error::Error;
use crate::random::Generator;
use crate::table::DataMatrix;

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

fn analyse(values: DMatrix<f64>, options: ParallelOptions) -> ParallelAnalysis {
    parallel_analysis(&DataMatrix::from_unnamed(values).unwrap(), options).unwrap()
}

#[test]
fn two_variables_have_the_mean_of_the_closed_form() {
    // With two variables the larger root is 1 + |r|, and for independent normal columns r has the
    // density (1 − r²)^((n − 4)/2) / B(1/2, (n − 2)/2) (R. A. Fisher 1915). Integrating |r| gives
    // E|r| = 2 / ((n − 2) B(1/2, (n − 2)/2)). For n = 10, B(1/2, 4) = 32/35, so E|r| = 35/128.
    let expected = 1.0 + 35.0 / 128.0;
    for noise_kind in [Noise::Normal, Noise::Permuted] {
        let options = ParallelOptions::new().replicates(40_000).seed(3).noise(noise_kind);
        let result = analyse(noise(10, 2, 1), options);
        let error = result.noise_deviation()[0] / 200.0; // the root of 40 000 tables
        let off = result.noise_mean()[0] - expected;
        // Permutation holds the ten values fixed, which moves the mean by their departure from
        // the normal distribution: a few hundredths for ten values.
        let allowed = if noise_kind == Noise::Normal { 4.0 * error } else { 0.03 };
        assert_zero(off, allowed, &format!("{noise_kind}"));
    }
}

#[test]
fn roots_of_noise_sum_to_the_number_of_variables() {
    for noise_kind in [Noise::Normal, Noise::Permuted] {
        for (n, p) in [(30, 6), (6, 6), (6, 30)] {
            let options = ParallelOptions::new().replicates(50).seed(5).noise(noise_kind);
            let result = analyse(noise(n, p, 1), options);
            assert_relative(result.noise_mean().sum(), p as f64, 1e-12, "sum of mean roots");
            assert_relative(result.observed().sum(), p as f64, 1e-12, "sum of observed roots");
            assert_eq!(result.observed().len(), p.min(n - 1));
        }
    }
}

#[test]
fn both_kinds_of_noise_agree_on_normal_data() {
    let x = noise(200, 8, 17);
    let run = |noise_kind| {
        let options = ParallelOptions::new().replicates(4000).seed(2).noise(noise_kind);
        analyse(x.clone(), options)
    };
    let (normal, permuted) = (run(Noise::Normal), run(Noise::Permuted));
    for k in 0..8 {
        // Five standard errors of a difference of two means of 4 000 tables each.
        let error = normal.noise_deviation()[k] * (2.0_f64 / 4000.0).sqrt();
        assert_zero(normal.noise_mean()[k] - permuted.noise_mean()[k], 5.0 * error, "means");
    }
}

#[test]
fn structure_is_found_and_noise_is_not() {
    let hidden = noise(150, 2, 1);
    let own = noise(150, 8, 2);
    let x = DMatrix::from_fn(150, 8, |i, j| hidden[(i, j % 2)] + 0.7 * own[(i, j)]);
    let result = analyse(x, ParallelOptions::new().seed(1));
    assert_eq!((result.n_by_mean(), result.n_by_percentile()), (2, 2));
    let result = analyse(noise(150, 8, 5), ParallelOptions::new().percentile(99.0).seed(1));
    assert_eq!(result.n_by_percentile(), 0);
    assert!(result.noise_percentile() > result.noise_mean());
}

#[test]
fn a_seed_fixes_the_numbers_on_any_number_of_threads() {
    let x = DataMatrix::from_unnamed(noise(40, 7, 3)).unwrap();
    for noise_kind in [Noise::Normal, Noise::Permuted] {
        let run = |threads: usize, seed: u64| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            let options = ParallelOptions::new().replicates(200).seed(seed).noise(noise_kind);
            pool.install(|| parallel_analysis(&x, options).unwrap())
        };
        let one = run(1, 9);
        assert!((2..5).all(|threads| run(threads, 9) == one));
        assert!(run(1, 10).noise_mean() != one.noise_mean());
    }
}

#[test]
fn what_cannot_be_analysed_is_refused() {
    let refused = |values, options| {
        parallel_analysis(&DataMatrix::from_unnamed(values).unwrap(), options).unwrap_err()
    };
    let usual = ParallelOptions::new();
    assert!(matches!(refused(noise(2, 4, 1), usual), Error::TooFewRows { needed: 3, .. }));
    assert!(matches!(refused(noise(9, 1, 1), usual), Error::TooFewColumns { needed: 2, .. }));
    let mut constant = noise(9, 3, 1);
    constant.column_mut(2).fill(4.0);
    assert!(matches!(refused(constant, usual), Error::ConstantColumns { .. }));
    for (options, name) in [
        (usual.replicates(19), "replicates"),
        (usual.replicates(1_000_001), "replicates"),
        (usual.percentile(f64::NAN), "percentile"),
        (usual.percentile(100.0), "percentile"),
    ] {
        match refused(noise(9, 3, 1), options) {
            Error::OptionOutOfRange { option, .. } => assert_eq!(option, name),
            other => panic!("{other}"),
        }
    }
}

#[test]
fn squared_multiple_correlations_replace_the_diagonal() {
    // With two variables the squared multiple correlation of each is r², so the reduced matrix has
    // the roots r² ± |r|; here r = 1/2 by construction.
    let x = DMatrix::from_row_slice(3, 2, &[1.0, 1.0, 2.0, 3.0, 3.0, 2.0]);
    let options = ParallelOptions::new().replicates(4000).roots_of(RootsOf::ReducedCorrelation);
    let result = analyse(x, options.seed(1));
    assert_relative(result.observed()[0], 0.75, 1e-12, "r² + |r|");
    assert_relative(result.observed()[1], -0.25, 1e-12, "r² − |r|");
    // Noise of ten rows: E|r| = 35/128 as above, and E r² = 1/(n − 1) = 1/9.
    let result = analyse(noise(10, 2, 1), options.replicates(40_000).seed(2));
    let error = result.noise_deviation()[0] / 200.0; // the root of 40 000 tables
    let expected = 1.0 / 9.0 + 35.0 / 128.0;
    assert_zero(result.noise_mean()[0] - expected, 4.0 * error, "mean of noise");
    assert_eq!(result.roots_of(), RootsOf::ReducedCorrelation);
}

#[test]
fn reduced_correlations_need_an_inverse() {
    let options = ParallelOptions::new().roots_of(RootsOf::ReducedCorrelation).seed(1);
    let refused = |values| {
        parallel_analysis(&DataMatrix::from_unnamed(values).unwrap(), options).unwrap_err()
    };
    assert!(matches!(refused(noise(5, 5, 1)), Error::TooFewRows { needed: 6, found: 5, .. }));
    let mut redundant = noise(20, 3, 1);
    let sum = redundant.column(0) + redundant.column(1);
    redundant.set_column(2, &sum);
    assert!(matches!(refused(redundant), Error::SingularScatter { rank: 2, order: 3, .. }));
    let weighted = DataMatrix::from_unnamed(noise(20, 3, 1)).unwrap();
    let weighted = weighted.with_weights((0..20).map(|row| 1.0 + f64::from(row))).unwrap();
    let refused = parallel_analysis(&weighted, ParallelOptions::new()).unwrap_err();
    assert!(matches!(refused, Error::WeightsNotCovered { .. }));
}
