use nalgebra::{DMatrix, DVector};
use rand::RngExt;
use rand_distr::{Distribution, StandardNormal};

use super::em::{Limits, Parameters, climb};
use super::patterns::{Patterns, observed_spread};
use super::*;
use crate::compare::{assert_matrix, assert_relative, assert_zero};
use crate::components::{Scaling, principal_components};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::random::replicate_generator;
use crate::table::{DataMatrix, GappedMatrix};

/// Normal rows with three hidden scores behind eight variables of different size.
fn complete(n: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = replicate_generator(seed, 0);
    let mut normal = || -> f64 { StandardNormal.sample(&mut generator) };
    let loadings = DMatrix::from_fn(8, 3, |_, _| normal());
    let scores = DMatrix::from_fn(n, 3, |_, s| normal() * [2.0, 1.2, 0.8][s]);
    let noise = DMatrix::from_fn(n, 8, |_, _| 0.4 * normal());
    let mut x = scores * loadings.transpose() + noise;
    for (j, mut column) in x.column_iter_mut().enumerate() {
        column *= 1.0 + 0.3 * j as f64;
        column.add_scalar_mut(100.0 * j as f64);
    }
    x
}

/// The same with each cell missing by this chance; no row loses more than six of its cells.
fn with_holes(x: &DMatrix<f64>, share: f64, seed: u64) -> GappedMatrix {
    let mut generator = replicate_generator(seed, 1);
    let mut x = x.clone();
    for i in 0..x.nrows() {
        for j in 0..x.ncols() - 2 {
            if generator.random::<f64>() < share {
                x[(i, j)] = f64::NAN;
            }
        }
    }
    GappedMatrix::from_unnamed(x).unwrap()
}

const STRICT: Limits = Limits { n_iterations: 20_000, tolerance: 1e-11 };

#[test]
fn without_holes_the_climb_ends_at_the_closed_form() {
    let x = complete(60, 1);
    let spread = observed_spread(&x);
    let patterns = Patterns::new(&x, &spread.mean, &spread.deviation);
    let mut generator = replicate_generator(5, 0);
    for k in 1..=4 {
        let coefficients = (0..8 * (k + 1)).map(|_| StandardNormal.sample(&mut generator));
        let start =
            Parameters { n_components: k, coefficients: coefficients.collect(), noise: 1.0 };
        let end = climb(&patterns, start, STRICT).unwrap();
        assert!(end.converged);
        let data = DataMatrix::from_unnamed(x.clone()).unwrap();
        let closed = probabilistic_components(&data, k, ProbabilisticOptions::new()).unwrap();
        assert_eq!((closed.n_iterations(), closed.log_likelihoods().len()), (0, 1));
        let reached = end.log_likelihoods[end.log_likelihoods.len() - 1];
        assert_relative(reached, closed.log_likelihood(), 1e-12, "log-likelihood");
        assert_relative(end.parameters.noise, closed.noise_variance(), 1e-8, "noise");
        let w = DMatrix::from_fn(8, k, |j, s| end.parameters.coefficients[j * (k + 1) + s]);
        let theirs = closed.loadings().values();
        assert_matrix(&(&w * w.transpose()), &(theirs * theirs.transpose()), 1e-7, "W Wᵀ");
        for j in 0..8 {
            assert_zero(end.parameters.coefficients[j * (k + 1) + k], 1e-9, "mean");
        }
    }
}

#[test]
fn likelihood_never_falls() {
    let mut n_steps = 0;
    for (seed, share) in [(1, 0.1), (2, 0.3), (3, 0.5)] {
        let x = with_holes(&complete(50, seed), share, seed);
        for k in 1..=5 {
            for scaling in [Scaling::Correlation, Scaling::Covariance] {
                let options =
                    ProbabilisticOptions::new().scaling(scaling).random_starts(1).seed(seed);
                let ppca = probabilistic_components(&x, k, options).unwrap();
                assert!(ppca.converged(), "{share} {k} {scaling}");
                for pair in ppca.log_likelihoods().windows(2) {
                    // Sums of some 400 terms are known to no more digits than these.
                    assert!(pair[1] >= pair[0] - 1e-12 * pair[0].abs(), "{pair:?}");
                    n_steps += 1;
                }
            }
        }
    }
    assert!(n_steps > 300, "{n_steps}");
}

/// The normal distribution of a row, from its covariance matrix; no scores, no patterns.
struct Naive {
    mean: DVector<f64>,
    covariance: DMatrix<f64>,
}

impl Naive {
    /// Mean and standard deviation of each hole, by inverting the covariance of what is observed.
    fn estimates(&self, x: &DMatrix<f64>) -> Vec<(usize, usize, f64, f64)> {
        let mut estimates = Vec::new();
        for i in 0..x.nrows() {
            let (gone, seen): (Vec<usize>, Vec<usize>) =
                (0..x.ncols()).partition(|&j| x[(i, j)].is_nan());
            let known = self.covariance.select_rows(&seen).select_columns(&seen);
            let inverse = known.try_inverse().unwrap();
            let off =
                DVector::from_iterator(seen.len(), seen.iter().map(|&j| x[(i, j)] - self.mean[j]));
            for &j in &gone {
                let shared = DVector::from_iterator(
                    seen.len(),
                    seen.iter().map(|&o| self.covariance[(j, o)]),
                );
                let by = &inverse * &shared;
                let variance = self.covariance[(j, j)] - shared.dot(&by);
                estimates.push((i, j, self.mean[j] + by.dot(&off), variance.sqrt()));
            }
        }
        estimates
    }

    fn log_likelihood(&self, x: &DMatrix<f64>) -> f64 {
        let mut total = 0.0;
        for i in 0..x.nrows() {
            let seen: Vec<usize> = (0..x.ncols()).filter(|&j| !x[(i, j)].is_nan()).collect();
            let known = self.covariance.select_rows(&seen).select_columns(&seen);
            let off =
                DVector::from_iterator(seen.len(), seen.iter().map(|&j| x[(i, j)] - self.mean[j]));
            let determinant = known.determinant();
            let distance = off.dot(&(known.try_inverse().unwrap() * &off));
            let constant = seen.len() as f64 * (2.0 * std::f64::consts::PI).ln();
            total -= 0.5 * (constant + determinant.ln() + distance);
        }
        total
    }
}

#[test]
fn estimates_are_those_of_the_conditional_normal_distribution() {
    let x = with_holes(&complete(40, 4), 0.25, 4);
    for scaling in [Scaling::Covariance, Scaling::Correlation] {
        let options = ProbabilisticOptions::new().scaling(scaling);
        let ppca = probabilistic_components(&x, 3, options).unwrap();
        let w = ppca.loadings().values();
        let unit = DMatrix::from_diagonal(ppca.scale());
        let inner = w * w.transpose() + DMatrix::identity(8, 8) * ppca.noise_variance();
        let naive = Naive { mean: ppca.mean().clone(), covariance: &unit * inner * &unit };
        let expected = naive.estimates(x.values());
        assert_eq!(ppca.cells().len(), x.n_missing());
        for (cell, (i, j, value, deviation)) in ppca.cells().iter().zip(expected) {
            assert_eq!((cell.row_idx, cell.column_idx), (i, j));
            assert_relative(cell.value, value, 1e-9, "value");
            assert_relative(cell.standard_deviation, deviation, 1e-9, "standard deviation");
        }
        // Standardising divides densities by the product of the scales.
        let n_seen = |j: usize| (40 - x.missing_by_column()[j]) as f64;
        let shift: f64 = (0..8).map(|j| n_seen(j) * ppca.scale()[j].ln()).sum();
        let reached = naive.log_likelihood(x.values());
        assert_relative(ppca.log_likelihood() - shift, reached, 1e-9, "log-likelihood");
    }
}

#[test]
fn scores_have_the_covariance_of_the_textbook_form() {
    let x = with_holes(&complete(30, 6), 0.3, 6);
    let ppca = probabilistic_components(&x, 2, ProbabilisticOptions::new()).unwrap();
    for i in 0..30 {
        let seen: Vec<usize> = (0..8).filter(|&j| !x.is_missing(i, j)).collect();
        let w = ppca.loadings().values().select_rows(&seen);
        // (I + Wᵀ W / σ²)⁻¹, the precision of the prior and of the cells added up.
        let precision = DMatrix::identity(2, 2) + w.transpose() * &w / ppca.noise_variance();
        let covariance = precision.try_inverse().unwrap();
        assert_matrix(ppca.score_covariance(i).unwrap(), &covariance, 1e-10, "covariance");
        let z = DVector::from_iterator(
            seen.len(),
            seen.iter().map(|&j| (x.values()[(i, j)] - ppca.mean()[j]) / ppca.scale()[j]),
        );
        let t = covariance * w.transpose() * z / ppca.noise_variance();
        for s in 0..2 {
            assert_zero(ppca.scores().values()[(i, s)] - t[s], 1e-9, "score");
        }
        let deviation = ppca.score_deviations().values()[(i, 1)];
        assert_relative(deviation, ppca.score_covariance(i).unwrap()[(1, 1)].sqrt(), 1e-14, "sd");
    }
    assert!(ppca.score_covariance(30).is_none());
}

#[test]
fn without_holes_every_method_has_the_axes_of_plain_components() {
    let x = DataMatrix::from_unnamed(complete(40, 7)).unwrap();
    for scaling in [Scaling::Covariance, Scaling::Correlation] {
        let pca = principal_components(&x, scaling).unwrap();
        let axes = pca.loadings().first(3).unwrap();
        let share = 39.0 / 40.0;
        let options = ProbabilisticOptions::new().scaling(scaling);
        let ppca = probabilistic_components(&x, 3, options).unwrap();
        assert_matrix(ppca.axes().values(), axes.values(), 1e-9, "axes, signs included");
        for s in 0..3 {
            assert_relative(ppca.variances()[s], pca.variances()[s] * share, 1e-10, "variance");
        }
        let left: f64 = pca.variances().iter().skip(3).sum::<f64>() * share / 5.0;
        assert_relative(ppca.noise_variance(), left, 1e-9, "noise");
        // Least squares: the truncated reconstruction, here W Wᵀ = Σ λ v vᵀ.
        let limits = Limits { n_iterations: 5, tolerance: 1e-9 };
        let fit = iterative::iterate(x.values(), scaling, 3, false, limits, || 0.0).unwrap();
        let w = DMatrix::from_fn(8, 3, |j, s| fit.loadings(j)[s]);
        let lengths = DMatrix::from_diagonal(&(pca.variances().rows(0, 3) * share));
        let expected = axes.values() * lengths * axes.values().transpose();
        assert_matrix(&(&w * w.transpose()), &expected, 1e-10, "truncated reconstruction");
        assert!(fit.status.converged && fit.status.n_iterations == 0 && fit.ridge == 0.0);
    }
}

#[test]
fn a_filled_hole_is_what_the_truncated_components_of_the_filled_table_say() {
    let x = with_holes(&complete(50, 8), 0.15, 8);
    let options = GapOptions::new()
        .method(GapMethod::LeastSquares)
        .scaling(Scaling::Covariance)
        .components(3)
        .tolerance(1e-11)
        .iterations(50_000);
    let completed = estimate_missing(&x, options).unwrap();
    assert!(completed.converged());
    let pca = principal_components(completed.data(), Scaling::Covariance).unwrap();
    let rebuilt = pca.reconstruct(3).unwrap();
    for cell in completed.cells() {
        let place = (cell.row_idx, cell.column_idx);
        assert_zero(cell.value - rebuilt.values()[place], 1e-8, "fixed point");
        assert_eq!(cell.value, completed.data().values()[place]);
    }
}

#[test]
fn estimates_come_close_to_what_was_hidden_and_know_how_close() {
    let truth = complete(300, 9);
    let x = with_holes(&truth, 0.15, 9);
    let means = observed_spread(x.values()).mean;
    for method in [GapMethod::Probabilistic, GapMethod::Shrunken, GapMethod::LeastSquares] {
        let completed =
            estimate_missing(&x, GapOptions::new().method(method).components(3)).unwrap();
        assert!(completed.converged(), "{method}");
        let (mut ours, mut theirs, mut within, mut z_squares) = (0.0, 0.0, 0.0, 0.0);
        for cell in completed.cells() {
            let hidden = truth[(cell.row_idx, cell.column_idx)];
            ours += (cell.value - hidden).powi(2);
            theirs += (means[cell.column_idx] - hidden).powi(2);
            let z = (cell.value - hidden) / cell.standard_deviation;
            within += f64::from(u8::from(z.abs() < 1.96));
            z_squares += z * z;
        }
        let n = completed.cells().len() as f64;
        assert!(n > 200.0 && ours < 0.2 * theirs, "{method}: {ours} beside {theirs}");
        // 95 % within 1.96 standard deviations, give or take four standard errors of a share.
        let allowed = 4.0 * (0.05 * 0.95 / n).sqrt() + 0.01;
        assert_zero(within / n - 0.95, allowed, &format!("{method}: share within"));
        assert_zero(z_squares / n - 1.0, 4.0 * (2.0 / n).sqrt() + 0.05, "mean square of z");
    }
}

#[test]
fn cross_validation_finds_the_number_that_made_the_data() {
    // Noise of one size, as the model has it; else further components follow the differences.
    let mut generator = replicate_generator(10, 0);
    let mut normal = || -> f64 { StandardNormal.sample(&mut generator) };
    let scores = DMatrix::from_fn(150, 3, |_, s| normal() * [2.0, 1.5, 1.0][s]);
    let loadings = DMatrix::from_fn(3, 8, |_, _| normal());
    let x = scores * loadings + DMatrix::from_fn(150, 8, |_, _| 0.5 * normal());
    let x = with_holes(&x, 0.1, 10);
    for rule in [ComponentRule::CrossValidated { folds: 5 }, ComponentRule::Generalised] {
        for method in [GapMethod::Probabilistic, GapMethod::Shrunken] {
            let options = GapOptions::new()
                .method(method)
                .scaling(Scaling::Covariance)
                .components_by(rule)
                .seed(3);
            let choice = components_for_gaps(&x, options).unwrap();
            assert_eq!((choice.n_components(), choice.errors().len()), (3, 8), "{rule} {method}");
            assert_eq!(choice.n_predicted(), 150 * 8 - x.n_missing());
            let error = |k: usize| choice.errors()[k].mean_squared.unwrap();
            // Three components leave little beyond the noise, the column means everything.
            assert!(error(3) < 0.15 * error(0), "{:?}", choice.errors());
            assert!(choice.fewest_within_error().is_none_or(|fewest| fewest <= 3));
            let completed = estimate_missing(&x, options).unwrap();
            assert_eq!((completed.choice(), completed.n_components()), (Some(&choice), 3));
        }
    }
}

#[test]
fn unrelated_columns_are_left_to_their_means() {
    let mut generator = replicate_generator(77, 0);
    let x = DMatrix::from_fn(40, 5, |_, _| StandardNormal.sample(&mut generator));
    let x = with_holes(&x, 0.1, 2);
    let completed = estimate_missing(&x, GapOptions::new().seed(1)).unwrap();
    assert_eq!(completed.n_components(), 0);
    let spread = observed_spread(x.values());
    for cell in completed.cells() {
        assert_relative(cell.value, spread.mean[cell.column_idx], 1e-9, "column mean");
    }
}

#[test]
fn draws_spread_as_far_as_the_cells_are_unknown() {
    let x = with_holes(&complete(120, 11), 0.1, 11);
    for method in [GapMethod::Probabilistic, GapMethod::Shrunken] {
        let options = GapOptions::new().method(method).components(3).draws(200).seed(5);
        let completed = estimate_missing(&x, options).unwrap();
        assert_eq!(completed.draws().len(), 200);
        let mut ratio = 0.0;
        for cell in completed.cells() {
            let place = (cell.row_idx, cell.column_idx);
            let drawn: Vec<f64> =
                completed.draws().iter().map(|draw| draw.values()[place]).collect();
            let (mean, deviation) =
                (crate::quantile::mean(&drawn), crate::quantile::deviation(&drawn));
            // Five standard errors of a mean of 200, and the little that resampling shifts it.
            let allowed = (5.0 / 200.0_f64.sqrt() + 0.15) * deviation;
            assert_zero(mean - cell.value, allowed, &format!("{method}: mean of the draws"));
            ratio += deviation / cell.standard_deviation / completed.cells().len() as f64;
        }
        // Draws also hold what is unknown of the fit; noise fitted to resampled rows, some of them
        // twice, is a little too small.
        assert!((0.95..1.3).contains(&ratio), "{method}: {ratio}");
        let observed = x.values().iter().zip(completed.draws()[7].values().iter());
        assert!(observed.filter(|(x, _)| !x.is_nan()).all(|(x, drawn)| x == drawn));
    }
}

#[test]
fn observed_cells_stay_and_estimated_ones_are_marked() {
    let x = with_holes(&complete(30, 12), 0.2, 12);
    let completed = estimate_missing(&x, GapOptions::new().components(2)).unwrap();
    for (place, value) in x.values().iter().enumerate() {
        let estimated = completed.mask().as_slice()[place];
        assert_eq!(estimated, value.is_nan());
        assert!(estimated || completed.data().values().as_slice()[place] == *value);
    }
    let notes = &completed.data().notes().estimated;
    assert_eq!(notes.iter().map(|column| column.count).sum::<usize>(), x.n_missing());
    let first = &completed.cells()[0];
    assert_eq!(completed.cell(&first.label, &first.variable), Some(first));
    assert!(completed.cell(&first.label, "V8").is_none());
    // Without holes nothing happens.
    let whole = GappedMatrix::from_unnamed(complete(20, 1)).unwrap();
    let completed = estimate_missing(&whole, GapOptions::new().components(1).draws(2)).unwrap();
    assert_eq!((completed.data().values(), completed.cells().len()), (whole.values(), 0));
    assert!(completed.data().notes().estimated.is_empty());
}

#[test]
fn neither_order_nor_units_nor_threads_matter() {
    let x = with_holes(&complete(40, 13), 0.2, 13);
    let options = GapOptions::new().components(2).tolerance(1e-10);
    let plain = estimate_missing(&x, options).unwrap();
    let order: Vec<usize> = (0..40).map(|i| (i * 7 + 3) % 40).collect();
    let mut turned = x.values().select_rows(&order);
    for (j, mut column) in turned.column_iter_mut().enumerate() {
        column *= 10.0_f64.powi(j as i32 * 3 - 9);
    }
    let turned = estimate_missing(&GappedMatrix::from_unnamed(turned).unwrap(), options).unwrap();
    for cell in turned.cells() {
        let value = plain.data().values()[(order[cell.row_idx], cell.column_idx)];
        let unit = 10.0_f64.powi(cell.column_idx as i32 * 3 - 9);
        assert_relative(cell.value, value * unit, 1e-7, "value in other units and order");
    }
    let run = |threads: usize| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        let options = GapOptions::new().random_starts(3).draws(4).seed(8);
        pool.install(|| estimate_missing(&x, options).unwrap())
    };
    let (one, three) = (run(1), run(3));
    assert_eq!(one.data().values(), three.data().values());
    assert_eq!(one.draws()[3].values(), three.draws()[3].values());
    assert_eq!(one.choice(), three.choice());
}

#[test]
fn wide_tables_are_completed_too() {
    let mut generator = replicate_generator(21, 0);
    let mut normal = || -> f64 { StandardNormal.sample(&mut generator) };
    let scores = DMatrix::from_fn(12, 2, |_, _| normal());
    let axes = DMatrix::from_fn(40, 2, |_, _| normal());
    let truth = scores * axes.transpose() + DMatrix::from_fn(12, 40, |_, _| 0.1 * normal());
    let x = with_holes(&truth, 0.1, 21);
    for method in [GapMethod::Probabilistic, GapMethod::Shrunken] {
        for scaling in [Scaling::Covariance, Scaling::Correlation] {
            let options = GapOptions::new().method(method).scaling(scaling).components(2);
            let completed = estimate_missing(&x, options).unwrap();
            assert!(completed.converged());
            for cell in completed.cells() {
                let off = cell.value - truth[(cell.row_idx, cell.column_idx)];
                assert!(off.abs() < 1.0, "{method} {scaling}: {off}");
            }
        }
    }
}

#[test]
fn what_cannot_be_estimated_is_refused_by_name() {
    let gap = f64::NAN;
    let whole = complete(10, 14);
    let given = |x: &DMatrix<f64>, options| {
        estimate_missing(&GappedMatrix::from_unnamed(x.clone()).unwrap(), options)
    };
    let options = GapOptions::new().components(2);
    let mut x = whole.clone();
    x.column_mut(3).fill(gap);
    (x[(2, 3)], x[(5, 3)]) = (7.5, 7.5);
    match given(&x, options) {
        Err(Error::ConstantObserved { columns }) => {
            assert_eq!(columns, [("V4".to_owned(), 7.5, 2)]);
        }
        other => panic!("{other:?}"),
    }
    for asked in [0, 7, 8, 100] {
        match given(&whole, GapOptions::new().components(asked)) {
            Err(Error::ComponentOutOfRange { asked: found, available: 7 }) => {
                assert_eq!(found, asked);
            }
            other => assert!(asked == 7 && other.is_ok(), "{asked}: {other:?}"),
        }
    }
    let mut x = whole.clone();
    (0..10).for_each(|i| (0..8).filter(|j| (i + j) % 3 > 0).for_each(|j| x[(i, j)] = gap));
    match given(&x, GapOptions::new().components(4)) {
        Err(Error::TooFewObserved { n_components: 4, found, needed: 35 }) => assert!(found < 35),
        other => panic!("{other:?}"),
    }
    let mut x = whole.clone();
    (1..8).for_each(|j| x[(4, j)] = gap);
    let bare = options.method(GapMethod::LeastSquares);
    match given(&x, bare) {
        Err(Error::ScoresUndetermined { row: 5, n_observed: 1, n_components: 2, label }) => {
            assert_eq!(label, "5");
        }
        other => panic!("{other:?}"),
    }
    // Shrinkage makes do with what there is.
    assert!(given(&x, options.method(GapMethod::Shrunken)).is_ok());
    let exact = DMatrix::from_fn(10, 4, |i, j| (i * i) as f64 + 3.0 * (j as f64) * i as f64);
    assert!(matches!(given(&exact, options), Err(Error::NoNoise { n_components: 2 })));
    let mut holed = exact.clone();
    holed[(3, 2)] = gap;
    assert!(matches!(given(&holed, options), Err(Error::NoNoise { n_components: 2 })));
    assert!(matches!(
        given(&whole.rows(0, 2).into_owned(), options),
        Err(Error::TooFewRows { needed: 3, found: 2, .. })
    ));
    assert!(matches!(
        given(&whole.columns(0, 1).into_owned(), options),
        Err(Error::TooFewColumns { needed: 2, found: 1, .. })
    ));
    let weighted =
        DataMatrix::from_unnamed(whole.clone()).unwrap().with_weights([1.0; 10]).unwrap();
    assert!(matches!(
        probabilistic_components(&weighted, 2, ProbabilisticOptions::new()),
        Err(Error::WeightsNotCovered { .. })
    ));
    for options in [
        GapOptions::new().tolerance(0.0),
        GapOptions::new().tolerance(f64::NAN),
        GapOptions::new().iterations(0),
        GapOptions::new().draws(10_001),
        GapOptions::new().random_starts(1001),
        GapOptions::new().components_by(ComponentRule::CrossValidated { folds: 1 }),
    ] {
        assert!(matches!(given(&whole, options), Err(Error::OptionOutOfRange { .. })));
    }
    let most = GapOptions::new().most_components(8);
    assert!(matches!(given(&whole, most), Err(Error::ComponentOutOfRange { available: 7, .. })));
}

#[test]
fn an_iteration_that_did_not_end_says_so() {
    let x = with_holes(&complete(40, 15), 0.2, 15);
    for method in [GapMethod::Probabilistic, GapMethod::Shrunken] {
        let options = GapOptions::new().method(method).components(3).iterations(2);
        let completed = estimate_missing(&x, options).unwrap();
        assert!(!completed.converged() && completed.n_iterations() == 2);
        assert!(completed.last_change() > 1e-7 && completed.last_change().is_finite());
        let text = completed.exhibit();
        assert!(text.text("text/plain").unwrap().contains("NOT CONVERGED in 2 iterations"));
    }
}

#[test]
fn exhibits_say_how_many_cells_by_what_and_what_to_beware_of() {
    let x = with_holes(&complete(40, 16), 0.1, 16);
    let completed = estimate_missing(&x, GapOptions::new().draws(3).seed(11)).unwrap();
    let bundle = completed.exhibit();
    let text = bundle.text("text/plain").unwrap();
    for part in [
        &format!("{} cells of 320 estimated", x.n_missing()),
        "by cross-validation in 5 parts",
        "converged after",
        "seed 11",
        "3 completed tables drawn",
        "no measurements",
        "3 components predict best",
    ] {
        assert!(text.contains(part), "{part} in {text}");
    }
    let ppca = probabilistic_components(&x, 2, ProbabilisticOptions::new()).unwrap();
    let bundle = ppca.exhibit();
    let text = bundle.text("text/plain").unwrap();
    assert!(text.contains("2 probabilistic components") && text.contains("divisor n"), "{text}");
}
