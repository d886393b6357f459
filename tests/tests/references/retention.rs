//! Rules for the number of components against other programs, naive computations and printed
//! numbers.

use nalgebra::DMatrix;
use semiaxis::components::{PrincipalComponents, Scaling, principal_components};
use semiaxis::parallel::{ParallelOptions, RootsOf, parallel_analysis};
use semiaxis::retention::{Effort, Retention, RetentionOptions, Rule, retention_with};
use semiaxis::table::DataMatrix;
use semiaxis_tests::compare::{assert_all_relative, assert_relative, assert_zero};
use serde_json::Value;

use crate::files::{cases, load, matrix, numbers, scaling};

/// Data of n rows whose correlation matrix is exactly the one given: perpendicular columns times
/// its Cholesky factor.
fn with_correlation(correlation: &DMatrix<f64>, n: usize) -> DMatrix<f64> {
    let p = correlation.nrows();
    let mut x = DMatrix::from_fn(n, p, |i, j| ((i * i + 3 * i * j + 7 * j) as f64 * 0.37).sin());
    for mut column in x.column_iter_mut() {
        let mean = column.mean();
        column.add_scalar_mut(-mean);
    }
    let factor = correlation.clone().cholesky().unwrap().l();
    x.qr().q() * ((n - 1) as f64).sqrt() * factor.transpose()
}

fn fit(x: DMatrix<f64>, scaling: Scaling) -> PrincipalComponents {
    principal_components(&DataMatrix::from_unnamed(x).unwrap(), scaling).unwrap()
}

fn formulas(pca: &PrincipalComponents) -> Retention {
    // A level close to one half keeps the sequences of tests going.
    let options = RetentionOptions::new().effort(Effort::Formulas).assume_normal(true).level(0.49);
    retention_with(pca, options.seed(1)).unwrap()
}

fn values(result: &Retention, rule: Rule) -> &[f64] {
    result.verdict(rule).comparison().unwrap().values()
}

fn thresholds(result: &Retention, rule: Rule) -> &[f64] {
    result.verdict(rule).comparison().unwrap().thresholds()
}

/// Numbers up to the first that is missing.
fn leading_numbers(value: &Value) -> Vec<f64> {
    value.as_array().unwrap().iter().map_while(Value::as_f64).collect()
}

/// psych, nFactors and vegan, by their own algorithms on the correlation matrix.
#[test]
fn formulas_agree_with_other_packages() {
    for case in cases(&load("retention_packages.json")) {
        let name = case["name"].as_str().unwrap();
        let n = case["n_rows"].as_u64().unwrap() as usize;
        let correlation = matrix(&case["correlation"]);
        let p = correlation.nrows();
        let result = formulas(&fit(with_correlation(&correlation, n), Scaling::Correlation));
        assert_all_relative(result.variances().as_slice(), &numbers(&case["roots"]), 1e-9, name);

        let stick = numbers(&case["broken_stick"]);
        assert_all_relative(thresholds(&result, Rule::BrokenStick), &stick, 1e-12, name);

        // The package's first place is the second variance.
        let bends: Vec<f64> =
            case["acceleration"].as_array().unwrap().iter().filter_map(Value::as_f64).collect();
        let ours = &values(&result, Rule::Acceleration)[1..];
        assert_eq!(ours.len(), bends.len(), "{name}");
        for (ours, theirs) in ours.iter().zip(&bends) {
            assert_zero(ours - theirs, 1e-9, name); // differences of numbers of order one
        }
        let lines = leading_numbers(&case["predicted"]);
        for (ours, theirs) in thresholds(&result, Rule::OptimalCoordinates).iter().zip(&lines) {
            assert_relative(*ours, theirs.max(1.0), 1e-9, name);
        }
        let kept = result.verdict(Rule::OptimalCoordinates).n_components().unwrap();
        assert_eq!(kept as u64, case["optimal_coordinates"].as_u64().unwrap(), "{name}");

        // The package starts with one component taken out; with all but one, every partial is
        // ±1 but for its rounding.
        let map = leading_numbers(&case["map"]);
        let ours = values(&result, Rule::AveragePartial);
        assert!(ours.len() >= p - 1, "{name}");
        assert_all_relative(&ours[1..p - 1], &map[..p - 2], 1e-7, name);

        let tests = case["tests"].as_array().unwrap();
        for (k, value) in values(&result, Rule::BartlettTest).iter().enumerate() {
            let theirs = tests[k]["bartlett.p"].as_f64().unwrap();
            // The package subtracts from one; below 1e-9 little is left of its digits.
            if theirs > 1e-9 {
                assert_relative(*value, theirs, 1e-6, &format!("{name}, {k} removed"));
            } else {
                assert!(*value < 1e-8, "{name}, {k} removed: {value:e}");
            }
        }
    }
}

/// W. F. Velicer (1976), table 1 (from memory, four decimals): eight physical measures of girls
/// have their smallest average squared partial with two components, .0664.
#[test]
fn velicers_own_example_keeps_two() {
    let file = load("retention_packages.json");
    let case = cases(&file).find(|case| case["name"] == "harman").unwrap();
    let x = with_correlation(&matrix(&case["correlation"]), 305);
    let result = formulas(&fit(x, Scaling::Correlation));
    let verdict = result.verdict(Rule::AveragePartial);
    assert_eq!(verdict.n_components(), Some(2));
    assert_zero(verdict.comparison().unwrap().values()[2] - 0.0664, 5e-5, "average partial");
}

/// Every table from which a row, a column or a cell was left out, decomposed one by one; evidence
/// by scikit-learn; test statistics by numpy and scipy.
#[test]
fn costly_rules_agree_with_naive_computation() {
    for case in cases(&load("retention.json")) {
        let scaling = scaling(case);
        let what = format!("{}, {scaling}", case["name"].as_str().unwrap());
        let pca = fit(matrix(&case["data"]), scaling);
        let options = RetentionOptions::new().replicates(20).assume_normal(true).level(0.49);
        let result = retention_with(&pca, options.seed(1)).unwrap();

        // Cross-products square the condition number; the last places rest on small roots.
        let w = numbers(&case["w"]);
        let ours = values(&result, Rule::RowColumnValidation);
        assert_eq!(ours.len(), w.len(), "{what}");
        for (ours, theirs) in ours.iter().zip(&w) {
            assert_zero(ours - theirs, 1e-8, &what);
        }
        let cells = numbers(&case["cells"]);
        assert_all_relative(values(&result, Rule::CellValidation), &cells, 1e-8, &what);
        let threshold = thresholds(&result, Rule::SingularThreshold)[0];
        assert_relative(threshold, case["singular_threshold"].as_f64().unwrap(), 1e-9, &what);

        let Some(mle) = case["mle"].as_u64() else { continue };
        let evidence = values(&result, Rule::Evidence);
        assert_all_relative(&evidence[1..], &numbers(&case["log_evidence"]), 1e-9, &what);
        // The other program never considers keeping none.
        let best = (1..evidence.len()).max_by(|a, b| evidence[*a].total_cmp(&evidence[*b]));
        assert_eq!(best, Some(mle as usize), "{what}");
        let ours = values(&result, Rule::LawleyTest);
        assert_all_relative(ours, &numbers(&case["lawley_p"])[..ours.len()], 1e-9, &what);
        if scaling == Scaling::Covariance {
            let ours = values(&result, Rule::LikelihoodRatioTest);
            let theirs = numbers(&case["likelihood_ratio_p"]);
            assert_all_relative(ours, &theirs[..ours.len()], 1e-9, &what);
        } else {
            for (rule, name) in
                [(Rule::AveragePartial, "partial_2"), (Rule::AveragePartialFourth, "partial_4")]
            {
                let theirs = numbers(&case[name]);
                assert_all_relative(&values(&result, rule)[..theirs.len()], &theirs, 1e-9, &what);
            }
        }
    }
}

/// Tails by the second Painlevé equation in 40 digits; the statistics by numpy.
#[test]
fn roots_are_held_against_the_law_of_the_largest_root() {
    let file = load("retention.json");
    let law: Vec<(f64, f64)> = file["tracy_widom"]
        .as_array()
        .unwrap()
        .iter()
        .map(|row| (row["s"].as_f64().unwrap(), row["upper_tail"].as_f64().unwrap()))
        .collect();
    for case in cases(&file) {
        let result = formulas(&fit(matrix(&case["data"]), scaling(case)));
        let ours = values(&result, Rule::TracyWidom);
        let statistics = numbers(&case["tracy_widom_statistics"]);
        // The law is tabulated at few places: the p-value must lie between those of the nearest.
        for (value, s) in ours.iter().zip(&statistics) {
            let above =
                law.iter().filter(|(place, _)| place <= s).map(|(_, tail)| *tail).next_back();
            let below = law.iter().find(|(place, _)| place > s).map(|(_, tail)| *tail);
            assert!(above.is_none_or(|above| *value <= above), "{value:e} at {s}");
            assert!(below.is_none_or(|below| *value >= below), "{value:e} at {s}");
        }
        assert!(!ours.is_empty());
    }
}

/// psych's squared multiple correlations on the diagonal, of the data and of 4 000 whole tables.
#[test]
fn reduced_correlations_have_the_roots_of_an_independent_simulation() {
    let file = load("retention_packages.json");
    for case in cases(&file) {
        let n = case["n_rows"].as_u64().unwrap() as usize;
        let x = with_correlation(&matrix(&case["correlation"]), n);
        let options =
            ParallelOptions::new().replicates(20).roots_of(RootsOf::ReducedCorrelation).seed(1);
        let result = parallel_analysis(&DataMatrix::from_unnamed(x).unwrap(), options).unwrap();
        for (ours, theirs) in result.observed().iter().zip(numbers(&case["reduced_roots"])) {
            assert_zero(ours - theirs, 1e-9, case["name"].as_str().unwrap());
        }
    }
    let simulated = &file["reduced_parallel"];
    let x = DMatrix::from_fn(50, 6, |i, j| ((i * i + 3 * i * j + 7 * j) as f64 * 0.37).sin());
    let replicates = simulated["replicates"].as_u64().unwrap() as usize;
    let options = ParallelOptions::new()
        .replicates(replicates)
        .roots_of(RootsOf::ReducedCorrelation)
        .seed(20);
    let result = parallel_analysis(&DataMatrix::from_unnamed(x).unwrap(), options).unwrap();
    let (mean, deviation) = (numbers(&simulated["mean"]), numbers(&simulated["deviation"]));
    let percentile = numbers(&simulated["percentile_95"]);
    for k in 0..6 {
        // As for components: five standard errors, and three times that for the percentile.
        let error = deviation[k] * (2.0 / replicates as f64).sqrt();
        assert_zero(result.noise_mean()[k] - mean[k], 5.0 * error, "mean");
        assert_zero(result.noise_percentile()[k] - percentile[k], 15.0 * error, "percentile");
    }
}
