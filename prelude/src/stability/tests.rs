//! Naive refits, closed forms, coverage and refusals. Values by other programs are in the
//! workspace's `tests/tests/references`.

use nalgebra::{DMatrix, DVector, dmatrix};
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::align::{Angles, Assignment};
use super::options::followed;
use super::refit::Refit;
use super::*;
use crate::compare::{assert_all_relative, assert_matrix, assert_relative, assert_zero};
use crate::components::{PrincipalComponents, Scaling, principal_components};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::random::Generator;
use crate::table::DataMatrix;

const BOTH: [Scaling; 2] = [Scaling::Covariance, Scaling::Correlation];

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

/// Normal rows with two hidden sequences of different strength, columns in different units. No two
/// columns are alike: at populations with exact blocks the errors of roots vanish to first order.
fn structured(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let hidden = noise(n, 2, seed);
    let own = noise(n, p, seed + 1000);
    DMatrix::from_fn(n, p, |i, j| {
        let common = (1.7 - 0.6 * j as f64 / p as f64) * hidden[(i, 0)];
        let contrast = if j % 2 == 0 { 0.8 } else { -0.6 } * hidden[(i, 1)];
        let value = common + contrast + (0.3 + 0.1 * (j % 3) as f64) * own[(i, j)];
        1000.0 * j as f64 + (1.0 + 0.3 * (j % 5) as f64) * value
    })
}

fn analysed(values: DMatrix<f64>, scaling: Scaling) -> PrincipalComponents {
    principal_components(&DataMatrix::from_unnamed(values).unwrap(), scaling).unwrap()
}

/// The analysis of rows that were copied out.
fn naive(x: &DMatrix<f64>, rows: &[usize], scaling: Scaling) -> PrincipalComponents {
    analysed(x.select_rows(rows), scaling)
}

/// Congruence of each component with its own place.
fn places_kept(a: &PrincipalComponents, b: &PrincipalComponents, k: usize) -> bool {
    (0..k).all(|c| {
        let own = a.loadings().values().column(c).dot(&b.loadings().values().column(c));
        own.abs() > 0.75
    })
}

#[test]
fn a_weighted_refit_is_the_analysis_of_copied_rows() {
    for (n, p) in [(40, 6), (12, 12), (15, 40)] {
        for scaling in BOTH {
            let x = structured(n, p, 3);
            let pca = analysed(x.clone(), scaling);
            let refit = Refit::new(&pca, 2, Alignment::Matching);
            let mut workspace = refit.workspace();
            let rows: Vec<usize> = (0..n).map(|i| (5 * i + i * i / 7) % n).collect();
            workspace.weights.fill(0.0);
            rows.iter().for_each(|&row| workspace.weights[row] += 1.0);
            let refitted = refit.weighted(&mut workspace).unwrap().unwrap();
            let expected = naive(&x, &rows, scaling);
            let what = format!("{n} x {p}, {scaling}");
            let r = expected.n_components();
            let leading = refitted.variances[..r].to_vec();
            assert_all_relative(&leading, expected.variances().as_slice(), 1e-9, &what);
            assert!(refitted.variances[r..].iter().all(|v| *v < 1e-9 * leading[0]), "{what}");
            assert!(places_kept(&pca, &expected, 2), "{what}: the test wants an order that stays");
            for c in 0..2 {
                let own = expected.loadings().values().column(c);
                let aligned = DVector::from_column_slice(&refitted.loadings[c * p..][..p]);
                assert_zero(1.0 - own.dot(&aligned).abs(), 1e-12, &what);
                let original = pca.loadings().values().column(c);
                assert!(original.dot(&aligned) > 0.0, "{what}: sign");
                let congruence = original.dot(&own).abs();
                assert_relative(refitted.congruences[c], congruence, 1e-10, &what);
            }
        }
    }
}

#[test]
fn leaving_out_a_row_is_the_analysis_of_the_others() {
    for (n, p) in [(30, 5), (14, 25)] {
        for scaling in BOTH {
            let x = structured(n, p, 9);
            let pca = analysed(x.clone(), scaling);
            let influence = leave_out(&pca, LeaveOutOptions::new().components(2)).unwrap();
            for row in 0..n {
                let others: Vec<usize> = (0..n).filter(|&other| other != row).collect();
                let expected = naive(&x, &others, scaling);
                let what = format!("{n} x {p} without {row}, {scaling}");
                for c in 0..2 {
                    let change = expected.variances()[c] / pca.variances()[c] - 1.0;
                    let seen = influence.variance_changes().values()[(row, c)];
                    assert_zero(seen - change, 1e-10, &what);
                    let before = pca.loadings().values().column(c).into_owned();
                    let after = expected.loadings().values().column(c);
                    let seen = influence.loading_changes().values()[(row, c)];
                    assert_zero(seen - (1.0 - before.dot(&after).abs()), 1e-12, &what);
                }
                // The largest angle of two planes has the sine ‖P − Q‖ of their projectors.
                let plane = |pca: &PrincipalComponents| {
                    let v = pca.loadings().values().columns(0, 2).into_owned();
                    &v * v.transpose()
                };
                let sine = (plane(&pca) - plane(&expected)).svd(false, false).singular_values[0];
                let angle = influence.angles()[row].to_radians();
                assert_zero(angle.sin() - sine, 1e-10, &what);
            }
            let angles: Vec<f64> =
                influence.order().iter().map(|&row| influence.angles()[row]).collect();
            assert!(angles.is_sorted_by(|a, b| a >= b), "{n} x {p}");
        }
    }
}

#[test]
fn a_row_that_holds_nearly_all_variation_can_be_left_out() {
    // Without the last row the columns vary a hundred million times less.
    let mut x = structured(25, 3, 4);
    x.row_mut(24).iter_mut().for_each(|value| *value += 1e8);
    let others: Vec<usize> = (0..24).collect();
    for scaling in BOTH {
        let pca = analysed(x.clone(), scaling);
        let expected = naive(&x, &others, scaling);
        let refit = Refit::new(&pca, 1, Alignment::Matching);
        let refitted = refit.without(24, &mut refit.workspace()).unwrap().unwrap();
        // The data themselves are known to 1e8 × 1e-16 of their units only.
        let roots = expected.variances().as_slice();
        assert_all_relative(&refitted.variances[..3], roots, 1e-6, &format!("{scaling}"));
    }
}

#[test]
fn angles_of_planes_that_were_built() {
    for angle in [1e-9_f64, 1e-4, 0.3, 0.785, 0.8, 1.2, 1.57] {
        let a = dmatrix![1.0, 0.0; 0.0, 1.0; 0.0, 0.0; 0.0, 0.0];
        let b = dmatrix![
            angle.cos(), 0.0; 0.0, (0.5 * angle).cos(); angle.sin(), 0.0; 0.0, (0.5 * angle).sin()
        ];
        let angles = Angles::new(4, 2).between(&a, &b).unwrap();
        assert_relative(angles[0], 0.5 * angle, 1e-12, "smaller");
        // Cosines come as squares, so a right angle is known to a share of 1e-16 / cos only.
        assert_relative(angles[1], angle, if angle > 1.5 { 1e-9 } else { 1e-12 }, "larger");
    }
}

#[test]
fn the_assignment_is_the_best_of_all() {
    fn best(congruence: &DMatrix<f64>, row: usize, used: &mut Vec<bool>) -> f64 {
        if row == congruence.nrows() {
            return 0.0;
        }
        let mut most = f64::NEG_INFINITY;
        for column in 0..congruence.ncols() {
            if !used[column] {
                used[column] = true;
                let rest = best(congruence, row + 1, used);
                most = most.max(congruence[(row, column)].abs() + rest);
                used[column] = false;
            }
        }
        most
    }
    for seed in 0..40 {
        let (k, m) = (1 + seed as usize % 5, 5 + seed as usize % 2);
        let congruence = noise(k, m, seed).map(|value| value.tanh());
        let mut column_of = vec![0; k];
        Assignment::new(k, m).solve(&congruence, &mut column_of);
        let total: f64 =
            column_of.iter().enumerate().map(|(row, &c)| congruence[(row, c)].abs()).sum();
        let expected = best(&congruence, 0, &mut vec![false; m]);
        assert_relative(total, expected, 1e-12, &format!("{k} x {m}"));
        let mut distinct = column_of.clone();
        distinct.sort_unstable();
        distinct.dedup();
        assert_eq!(distinct.len(), k);
    }
}

/// With two variables λ₁ = 1 + r, and r has the asymptotic variance (1 − ρ²)² / m
/// (R. A. Fisher 1915). The loadings are √½ whatever the rows.
#[test]
fn a_correlation_of_two_variables_has_the_error_of_r() {
    let x = noise(80, 2, 4);
    let x = DMatrix::from_fn(80, 2, |i, j| x[(i, 0)] + 0.8 * j as f64 * x[(i, 1)]);
    let pca = analysed(x, Scaling::Correlation);
    let errors = asymptotic_errors(&pca, AsymptoticOptions::new()).unwrap();
    let r = pca.variances()[0] - 1.0;
    let expected = (1.0 - r * r) / 79.0_f64.sqrt();
    assert_all_relative(errors.variance_errors().as_slice(), &[expected; 2], 1e-12, "errors");
    assert_zero(errors.loading_errors().values().amax(), 1e-8, "loadings");
}

#[test]
fn theory_for_covariances_is_the_formula() {
    let pca = analysed(structured(100, 4, 2), Scaling::Covariance);
    let errors = asymptotic_errors(&pca, AsymptoticOptions::new().confidence(0.9)).unwrap();
    let (roots, v) = (pca.variances(), pca.loadings().values());
    for k in 0..4 {
        let mut matrix = DMatrix::zeros(4, 4);
        for l in (0..4).filter(|&l| l != k) {
            let weight = roots[k] * roots[l] / (roots[l] - roots[k]).powi(2) / 99.0;
            matrix += weight * v.column(l) * v.column(l).transpose();
        }
        for j in 0..4 {
            let expected = matrix[(j, j)].sqrt();
            let actual = errors.loading_errors().values()[(j, k)];
            assert_relative(actual, expected, 1e-12, "loading");
            let (low, high) = (errors.loadings_low(), errors.loadings_high());
            let (low, high) = (low.values()[(j, k)], high.values()[(j, k)]);
            // 1.6448536 is the 95 per cent point of the normal distribution, from any table.
            assert_relative(high - low, 2.0 * 1.644_853_627 * expected, 1e-9, "width");
        }
        let reach = 1.644_853_627 * (2.0_f64 / 99.0).sqrt();
        let bands = errors.variance_bands();
        assert_relative(bands.low()[k], roots[k] / (1.0 + reach), 1e-9, "low");
        assert_relative(bands.high()[k], roots[k] / (1.0 - reach), 1e-9, "high");
    }
}

/// 400 tables of 200 normal rows; an interval of 95 per cent that holds what it says has a count
/// with a standard deviation of 1.1 per cent, and 4 of these together with 1.5 per cent for the
/// asymptotic theory at n = 200 are allowed.
#[test]
fn intervals_cover_the_population_as_often_as_they_say() {
    let p = 4;
    let roots = [5.0, 2.0, 0.8, 0.2];
    let turn = noise(p, p, 77).qr().q();
    let diagonal = DMatrix::from_diagonal(&DVector::from_column_slice(&roots));
    let sigma = &turn * &diagonal * turn.transpose();
    let scale = sigma.diagonal().map(|v| 1.0 / v.sqrt());
    let unit = DMatrix::from_diagonal(&scale);
    let population = (&unit * &sigma * &unit).symmetric_eigen();
    let factor = sigma.clone().cholesky().unwrap().unpack();
    for scaling in BOTH {
        let (mut values, mut vectors) = (roots.to_vec(), turn.clone());
        if scaling == Scaling::Correlation {
            let mut order: Vec<usize> = (0..p).collect();
            order.sort_by(|&a, &b| population.eigenvalues[b].total_cmp(&population.eigenvalues[a]));
            values = order.iter().map(|&k| population.eigenvalues[k]).collect();
            vectors = population.eigenvectors.select_columns(&order);
        }
        let (mut roots_held, mut loadings_held) = (0, 0);
        for table in 0..400 {
            let x = noise(200, p, 5000 + table) * factor.transpose();
            let pca = analysed(x, scaling);
            let errors = asymptotic_errors(&pca, AsymptoticOptions::new()).unwrap();
            let bands = errors.variance_bands();
            let (low, high) = (errors.loadings_low(), errors.loadings_high());
            for (k, value) in values.iter().enumerate().take(p) {
                roots_held += usize::from(bands.low()[k] <= *value && *value <= bands.high()[k]);
                let truth = vectors.column(k);
                let sign = truth.dot(&pca.loadings().values().column(k)).signum();
                for j in 0..p {
                    let (low, high) = (low.values()[(j, k)], high.values()[(j, k)]);
                    loadings_held += usize::from(low <= sign * truth[j] && sign * truth[j] <= high);
                }
            }
        }
        assert_zero(roots_held as f64 / 1600.0 - 0.95, 0.04, &format!("variances, {scaling}"));
        assert_zero(loadings_held as f64 / 6400.0 - 0.95, 0.04, &format!("loadings, {scaling}"));
    }
}

#[test]
fn resampling_and_theory_agree_on_normal_rows() {
    for scaling in BOTH {
        let pca = analysed(structured(2000, 6, 21), scaling);
        let theory = asymptotic_errors(&pca, AsymptoticOptions::new()).unwrap();
        let options = BootstrapOptions::new().components(2).seed(3);
        let spread = bootstrap(&pca, options).unwrap();
        for k in 0..2 {
            // The bootstrap's own error is 1/√4000 = 1.6 per cent; rows that are a sample add
            // the error of their fourth moments, some √(20/2000)/2 = 5 per cent.
            let actual = spread.variance_spread().standard_error()[k];
            assert_relative(actual, theory.variance_errors()[k], 0.16, &format!("{scaling} {k}"));
            for j in 0..6 {
                let actual = spread.loading_errors().values()[(j, k)];
                let expected = theory.loading_errors().values()[(j, k)];
                assert_relative(actual, expected, 0.2, &format!("{scaling} loading {j} {k}"));
            }
        }
        let interval = spread.variance_spread().bca();
        assert!(interval.low()[0] < pca.variances()[0] && pca.variances()[0] < interval.high()[0]);
    }
}

/// The empirical influence values behind the BCa intervals are n times the limit of leaving a row
/// out, so the acceleration is close to that of the jackknife (Efron 1987, section 7).
#[test]
fn accelerations_are_those_of_the_jackknife() {
    for scaling in BOTH {
        let x = structured(300, 4, 31).map(|value| value + 1e-3 * value * value % 1.0);
        let pca = analysed(x, scaling);
        let refit = Refit::new(&pca, 2, Alignment::Matching);
        let ours = influence::accelerations(&pca, &refit, 2);
        let mut workspace = refit.workspace();
        let refits: Vec<_> =
            (0..300).map(|row| refit.without(row, &mut workspace).unwrap().unwrap()).collect();
        let jackknife = |of: &dyn Fn(&refit::Refitted) -> f64| {
            let values: Vec<f64> = refits.iter().map(of).collect();
            let mean = values.iter().sum::<f64>() / 300.0;
            let cubes: f64 = values.iter().map(|v| (mean - v).powi(3)).sum();
            let squares: f64 = values.iter().map(|v| (mean - v).powi(2)).sum();
            cubes / (6.0 * squares.powf(1.5))
        };
        for k in 0..2 {
            let expected = jackknife(&|refitted| refitted.variances[k]);
            assert_zero(ours.variances[k] - expected, 2e-3, &format!("{scaling} {k}"));
            for j in 0..4 {
                let expected = jackknife(&|refitted| refitted.loadings[k * 4 + j]);
                let actual = ours.loadings[k * 4 + j];
                assert_zero(actual - expected, 3e-3, &format!("{scaling} {j} {k}"));
            }
        }
    }
}

#[test]
fn rotation_onto_the_data_leaves_the_subspace_only() {
    // Two equal variances: their directions are arbitrary, their plane is not.
    let x = noise(400, 5, 8);
    let x = DMatrix::from_fn(400, 5, |i, j| if j < 2 { 5.0 } else { 1.0 } * x[(i, j)]);
    let pca = analysed(x, Scaling::Covariance);
    let usual = BootstrapOptions::new().replicates(400).components(2).seed(2);
    let matched = bootstrap(&pca, usual).unwrap();
    let rotated = bootstrap(&pca, usual.alignment(Alignment::Procrustes)).unwrap();
    assert!(matched.loading_errors().values().amax() > 0.2);
    assert!(rotated.loading_errors().values().amax() < 0.05);
    assert_eq!(matched.angles(), rotated.angles());
    assert!(matched.any_order_change() > 0.02, "{}", matched.any_order_change());
    assert!(rotated.loadings_bca_low().values().iter().all(|value| value.is_nan()));
    // All components together fill the space.
    let all = bootstrap(&pca, usual.components(5)).unwrap();
    assert_zero(all.angle_quantile(1.0).unwrap(), 1e-5, "angle of the whole space");
}

#[test]
fn a_seed_fixes_the_numbers_on_any_number_of_threads() {
    let pca = analysed(structured(30, 4, 5), Scaling::Correlation);
    let run = |threads: usize, seed: u64| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        let options = BootstrapOptions::new().replicates(100).components(2).seed(seed);
        pool.install(|| bootstrap(&pca, options).unwrap())
    };
    let one = run(1, 4);
    assert!((2..5).all(|threads| run(threads, 4) == one));
    assert!(run(1, 5).variance_spread() != one.variance_spread());
}

#[test]
fn resamples_without_variation_are_counted() {
    // One row differs in the last column: a share (1 − 1/20)^20 = 0.358 of resamples misses it.
    let mut x = structured(20, 3, 6);
    x.column_mut(2).fill(7.0);
    x[(11, 2)] = 8.0;
    let pca = analysed(x.clone(), Scaling::Correlation);
    let options = BootstrapOptions::new().replicates(1000).components(1).seed(1);
    let spread = bootstrap(&pca, options).unwrap();
    // Four standard deviations of a count of 1 000 with share 0.358 are 61.
    assert_zero(spread.n_degenerate() as f64 - 358.5, 61.0, "count");
    assert_eq!(spread.degenerate_columns()[0].column, "V3");
    assert_eq!(spread.degenerate_columns()[0].count, spread.n_degenerate());
    assert_eq!(spread.angles().nrows(), 1000 - spread.n_degenerate());
    let shown = spread.exhibit();
    assert!(shown.text("text/plain").unwrap().contains("V3"));
    let influence = leave_out(&pca, LeaveOutOptions::new()).unwrap();
    assert_eq!(influence.needed(), [("12".to_owned(), vec!["V3".to_owned()])]);
    assert_eq!(influence.most_influential().next(), Some("12"));
    assert!(influence.exhibit().text("text/plain").unwrap().contains("cannot be made"));
    // Covariances do not ask every column to vary.
    let pca = analysed(x, Scaling::Covariance);
    assert_eq!(bootstrap(&pca, options).unwrap().n_degenerate(), 0);
}

#[test]
fn what_cannot_be_answered_is_refused() {
    let pca = analysed(structured(12, 4, 1), Scaling::Covariance);
    let usual = BootstrapOptions::new().replicates(60);
    for (options, name) in [
        (usual.replicates(49), "replicates"),
        (usual.confidence(0.5), "confidence"),
        (usual.confidence(f64::NAN), "confidence"),
    ] {
        match bootstrap(&pca, options).unwrap_err() {
            Error::OptionOutOfRange { option, .. } => assert_eq!(option, name),
            other => panic!("{other}"),
        }
    }
    let too_many = Error::ComponentOutOfRange { asked: 5, available: 4 }.to_string();
    assert_eq!(bootstrap(&pca, usual.components(5)).unwrap_err().to_string(), too_many);
    let options = LeaveOutOptions::new().components(5);
    assert_eq!(leave_out(&pca, options).unwrap_err().to_string(), too_many);
    let wide = analysed(structured(5, 8, 1), Scaling::Covariance);
    let error = asymptotic_errors(&wide, AsymptoticOptions::new()).unwrap_err();
    assert!(matches!(error, Error::TooFewRows { needed: 10, found: 5, .. }), "{error}");
    let mut singular = structured(30, 3, 1);
    let sum = singular.column(0) + singular.column(1);
    singular.set_column(2, &sum);
    let singular = analysed(singular, Scaling::Covariance);
    let error = asymptotic_errors(&singular, AsymptoticOptions::new()).unwrap_err();
    assert!(matches!(error, Error::SingularScatter { rank: 2, order: 3, .. }), "{error}");
    let two = analysed(dmatrix![1.0, 2.0; 2.0, 5.0], Scaling::Covariance);
    assert!(matches!(bootstrap(&two, usual).unwrap_err(), Error::TooFewRows { .. }));
    let x = DataMatrix::from_unnamed(structured(12, 3, 1)).unwrap();
    let x = x.with_weights((1..=12).map(f64::from)).unwrap();
    let weighted = principal_components(&x, Scaling::Covariance).unwrap();
    assert!(matches!(bootstrap(&weighted, usual), Err(Error::WeightsNotCovered { .. })));
    let refused = leave_out(&weighted, LeaveOutOptions::new());
    assert!(matches!(refused, Err(Error::WeightsNotCovered { .. })));
    let refused = asymptotic_errors(&weighted, AsymptoticOptions::new());
    assert!(matches!(refused, Err(Error::WeightsNotCovered { .. })));
    // One row in ten thousand resamples that differ: nearly all are degenerate.
    let mut lone = structured(60, 2, 1);
    lone.column_mut(0).fill(1.0);
    lone[(0, 0)] = 2.0;
    let lone = analysed(lone, Scaling::Correlation);
    let refused = bootstrap(&lone, usual.seed(1)).unwrap_err();
    assert!(matches!(refused, Error::DegenerateResamples { .. }), "{refused}");
}

#[test]
fn components_are_followed_by_the_mean_variance_unless_said() {
    let pca = analysed(structured(50, 6, 1), Scaling::Correlation);
    let above = pca.variances().iter().filter(|variance| **variance > 1.0).count();
    assert_eq!(followed(None, &pca).unwrap(), above);
    assert_eq!(followed(Some(4), &pca).unwrap(), 4);
}

#[test]
fn a_shortened_analysis_is_completed() {
    use crate::components::{ComponentOptions, principal_components_with};
    let x = DataMatrix::from_unnamed(structured(40, 5, 2)).unwrap();
    let whole = principal_components(&x, Scaling::Correlation).unwrap();
    let options = ComponentOptions::new(Scaling::Correlation).keep(2);
    let short = principal_components_with(&x, options).unwrap();
    let errors = |pca| asymptotic_errors(pca, AsymptoticOptions::new()).unwrap();
    assert_matrix(
        errors(&short).loading_errors().values(),
        errors(&whole).loading_errors().values(),
        1e-12,
        "errors",
    );
}

#[test]
fn exhibits_say_what_was_found() {
    let pca = analysed(structured(60, 5, 2), Scaling::Correlation);
    let options = BootstrapOptions::new().replicates(100).components(2).seed(8);
    let text = bootstrap(&pca, options).unwrap().exhibit();
    let text = text.text("text/plain").unwrap();
    for part in ["seed 8", "100 resamples of 60 rows", "Efron", "not safety limits"] {
        assert!(text.contains(part), "{part} in {text}");
    }
    let text = asymptotic_errors(&pca, AsymptoticOptions::new()).unwrap().exhibit();
    assert!(text.text("text/plain").unwrap().contains("Konishi"));
}
