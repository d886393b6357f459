//! Adequacy, normality, sampling errors and resampling beside other programs, on open data.

use semiaxis::adequacy::{adequacy, multivariate_normality};
use semiaxis::components::{Scaling, principal_components};
use semiaxis::stability::{AsymptoticOptions, BootstrapOptions, asymptotic_errors, bootstrap};
use semiaxis_tests::compare::{assert_all_relative, assert_matrix, assert_relative, assert_zero};
use serde_json::Value;

use crate::files::{cases, data, load, matrix, numbers, scaling};

fn number(value: &Value) -> f64 {
    value.as_f64().unwrap()
}

#[test]
fn adequacy_and_normality_by_the_statistics_language() {
    let file = load("stability.json");
    let mut n_cases = 0;
    for case in file["adequacy"].as_array().unwrap() {
        let what = case["name"].as_str().unwrap();
        let found = adequacy(&data(case)).unwrap();
        assert_relative(found.overall(), number(&case["overall"]), 1e-10, what);
        let expected = numbers(&case["by_variable"]);
        assert_all_relative(found.by_variable().as_slice(), &expected, 1e-10, what);
        let sphericity = found.sphericity();
        assert_relative(sphericity.statistic, number(&case["chi_squared"]), 1e-10, what);
        assert_eq!(sphericity.freedom, number(&case["freedom"]));
        assert_relative(sphericity.p_value, number(&case["p_value"]), 1e-9, what);
        assert_relative(found.determinant(), number(&case["determinant"]), 1e-10, what);
        assert_relative(found.condition_number(), number(&case["condition_number"]), 1e-9, what);
        let (skewness, kurtosis) = (found.normality().skewness(), found.normality().kurtosis());
        // That package takes covariances with divisor n − 1, Mardia (1970) with divisor n: products
        // of rows differ by (n − 1) / n, skewness by its cube, kurtosis by its square.
        let n = found.normality().n_rows() as f64;
        let p = found.normality().n_variables() as f64;
        let factor = (n - 1.0) / n;
        let cube = factor.powi(3);
        assert_relative(skewness.skewness * cube, number(&case["b1"]), 1e-10, what);
        assert_relative(skewness.statistic * cube, number(&case["skew"]), 1e-10, what);
        let corrected = skewness.corrected_statistic * cube;
        assert_relative(corrected, number(&case["small_skew"]), 1e-10, what);
        assert_relative(kurtosis.kurtosis * factor * factor, number(&case["b2"]), 1e-10, what);
        let expected = p * (p + 2.0);
        let z = (kurtosis.kurtosis * factor * factor - expected) / (8.0 * expected / n).sqrt();
        assert_relative(z, number(&case["z"]), 1e-9, what);
        n_cases += 1;
    }
    assert_eq!(n_cases, 3);
}

#[test]
fn adequacy_normality_and_sampling_errors_by_other_packages() {
    let tables = load("components.json");
    let mut n_cases = 0;
    for case in load("adequacy.json")["cases"].as_array().unwrap() {
        let what = case["name"].as_str().unwrap();
        let table = cases(&tables).find(|table| table["name"] == case["name"]).unwrap();
        let x = data(table);
        let found = adequacy(&x).unwrap();
        assert_relative(found.overall(), number(&case["overall"]), 1e-9, what);
        let expected = numbers(&case["by_variable"]);
        assert_all_relative(found.by_variable().as_slice(), &expected, 1e-9, what);
        assert_relative(found.sphericity().p_value, number(&case["p_value"]), 1e-8, what);
        let test = found.normality().henze_zirkler();
        assert_relative(test.statistic, number(&case["henze_zirkler"]), 1e-9, what);
        // Its lognormal tail is some way out, where a relative error of the statistic of 1e-12
        // is 1e-9 of the tail.
        assert_relative(test.p_value, number(&case["henze_zirkler_p"]), 1e-7, what);
        let n_first = case["first_group_rows"].as_u64().unwrap() as usize;
        let first = x.rows_where(|label| label.parse::<usize>().unwrap() <= n_first).unwrap();
        let found = multivariate_normality(&first).unwrap();
        let test = found.henze_zirkler();
        assert_relative(test.statistic, number(&case["first_group"]), 1e-9, what);
        assert_relative(test.p_value, number(&case["first_group_p"]), 1e-9, what);
        for scaling in [Scaling::Correlation, Scaling::Covariance] {
            let what = format!("{what}, {scaling}");
            let expected = &case[scaling.to_string()];
            let pca = principal_components(&x, scaling).unwrap();
            let errors = asymptotic_errors(&pca, AsymptoticOptions::new()).unwrap();
            let by_root = numbers(&expected["variance_errors"]);
            // Central differences with a step of 1e-5: the reference has some six digits.
            assert_all_relative(errors.variance_errors().as_slice(), &by_root, 2e-5, &what);
            let by_loading = matrix(&expected["loading_errors"]);
            assert_matrix(errors.loading_errors(), &by_loading, 2e-5, &what);
        }
        n_cases += 1;
    }
    assert_eq!(n_cases, 2);
}

/// Both sides draw at random. With N resamples a mean is known to s/√N, a standard deviation to a
/// share of 1/√(2N) for normal statistics (twice that is allowed for tails), and an end of a 95 per
/// cent interval to some 2.7 s/√N. Each difference is allowed five such errors of its two sides.
#[test]
fn resampling_by_the_statistics_language() {
    let file = load("stability.json");
    let mut n_cases = 0;
    for case in file["bootstrap"].as_array().unwrap() {
        let what = case["name"].as_str().unwrap();
        let replicates = case["replicates"].as_u64().unwrap() as usize;
        let pca = principal_components(&data(case), scaling(case)).unwrap();
        let options = BootstrapOptions::new().replicates(replicates).components(2).seed(7);
        let spread = bootstrap(&pca, options).unwrap();
        let unit = 5.0 * (2.0 / replicates as f64).sqrt();
        let found = spread.variance_spread();
        check_spread(
            [found.mean().as_slice(), found.standard_error().as_slice()],
            [found.percentile().low().as_slice(), found.percentile().high().as_slice()],
            &case["variance_mean"],
            &case["variance_error"],
            &matrix(&case["variance_ends"]),
            unit,
            what,
        );
        // Signs of the reference follow its own loadings.
        let own = matrix(&case["loadings"]);
        let p = own.nrows();
        let signs: Vec<f64> = (0..2 * p)
            .map(|place| {
                let c = place / p;
                own.column(c).dot(&pca.loadings().values().column(c)).signum()
            })
            .collect();
        let turned = |values: &nalgebra::DMatrix<f64>| -> Vec<f64> {
            values.iter().zip(&signs).map(|(value, sign)| value * sign).collect()
        };
        let (low, high) = (turned(&spread.loadings_low()), turned(&spread.loadings_high()));
        let swapped = |a: &[f64], b: &[f64], of: fn(f64, f64) -> f64| -> Vec<f64> {
            a.iter().zip(b).map(|(a, b)| of(*a, *b)).collect()
        };
        check_spread(
            [&turned(&spread.loading_means()), spread.loading_errors().as_slice()],
            [&swapped(&low, &high, f64::min), &swapped(&low, &high, f64::max)],
            &case["loading_mean"],
            &case["loading_error"],
            &matrix(&case["loading_ends"]),
            unit,
            what,
        );
        let angles = numbers(&case["angle_quantiles"]);
        assert_relative(spread.angle_quantile(0.5).unwrap(), angles[0], unit, what);
        assert_relative(spread.angle_quantile(0.95).unwrap(), angles[1], unit, what);
        n_cases += 1;
    }
    assert_eq!(n_cases, 2);
}

/// Ends of corrected intervals depend on the share of resamples below the value as well, which is
/// known to half of 1/√N: the allowance of an uncorrected end (above) is doubled.
#[test]
fn corrected_intervals_by_the_statistics_language() {
    let file = load("stability.json");
    let mut n_cases = 0;
    for case in file["corrected"].as_array().unwrap() {
        let what = case["name"].as_str().unwrap();
        let tables = file["bootstrap"].as_array().unwrap();
        let table = tables.iter().find(|table| table["name"] == case["name"]).unwrap();
        let replicates = case["replicates"].as_u64().unwrap() as usize;
        let pca = principal_components(&data(table), scaling(case)).unwrap();
        let options = BootstrapOptions::new().replicates(replicates).seed(11);
        let spread = bootstrap(&pca, options).unwrap();
        let bands = spread.variance_spread().bca();
        let (error, ends) = (numbers(&case["error"]), matrix(&case["ends"]));
        let unit = 5.0 * (2.0 / replicates as f64).sqrt();
        for k in 0..2 {
            let allowed = 2.0 * 2.7 * unit * error[k];
            assert_zero(bands.low()[k] - ends[(0, k)], allowed, &format!("{what} {k}, low"));
            assert_zero(bands.high()[k] - ends[(1, k)], allowed, &format!("{what} {k}, high"));
        }
        n_cases += 1;
    }
    assert_eq!(n_cases, 2);
}

fn check_spread(
    [mean, error]: [&[f64]; 2],
    [low, high]: [&[f64]; 2],
    expected_mean: &Value,
    expected_error: &Value,
    expected_ends: &nalgebra::DMatrix<f64>,
    unit: f64,
    what: &str,
) {
    let (expected_mean, expected_error) = (numbers(expected_mean), numbers(expected_error));
    assert_eq!(mean.len(), expected_mean.len(), "{what}");
    for place in 0..mean.len() {
        let what = format!("{what} [{place}]");
        let size = expected_error[place];
        assert_zero(mean[place] - expected_mean[place], unit * size, &what);
        assert_relative(error[place], size, 2.0 * unit / 2.0_f64.sqrt(), &what);
        assert_zero(low[place] - expected_ends[(0, place)], 2.7 * unit * size, &what);
        assert_zero(high[place] - expected_ends[(1, place)], 2.7 * unit * size, &what);
    }
}
