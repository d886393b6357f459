//! Transformations against the statistics language, scipy, scikit-learn and forty digits.

use nalgebra::DMatrix;
use semiaxis::table::DataMatrix;
use semiaxis::transform::{Exponent, ExponentEstimate, Formula, Transform};
use semiaxis_tests::compare::{assert_all_relative, assert_relative, assert_zero};
use serde_json::Value;

use crate::files::{cases, load, numbers};

fn one_column(case: &Value) -> DataMatrix {
    let values = numbers(&case["values"]);
    DataMatrix::from_unnamed(DMatrix::from_vec(values.len(), 1, values)).unwrap()
}

fn estimated(x: &DataMatrix) -> (f64, ExponentEstimate) {
    match Transform::box_cox().fit(x).unwrap().formula() {
        Formula::BoxCox { exponents } => match exponents[..] {
            [Exponent { value, estimate: Some(estimate) }] => (value, estimate),
            _ => panic!("{exponents:?}"),
        },
        other => panic!("{other:?}"),
    }
}

#[test]
fn exponents_by_scipy_and_in_forty_digits() {
    let file = load("transform_python.json");
    for case in cases(&file) {
        let what = case["name"].as_str().unwrap();
        let x = one_column(case);
        let (exponent, estimate) = estimated(&x);
        let number = |name: &str| case[name].as_f64().unwrap();
        // The slope of some hundred rows is rounded to about 1e-13 of its terms.
        assert_zero(exponent - number("exponent"), 1e-11, what);
        // Searches for a maximum find it to half the digits of what is maximised.
        for search in ["exponent_by_search", "exponent_by_other_search"] {
            assert_zero(exponent - number(search), 3e-8, what);
        }
        let ends = [estimate.lower.unwrap(), estimate.upper.unwrap()];
        for (end, expected) in ends.iter().zip(numbers(&case["interval"])) {
            assert_zero(end - expected, 1e-8, what);
        }
        assert_relative(estimate.log_likelihood, number("log_likelihood"), 1e-12, what);
        let untransformed = estimate.log_likelihood_untransformed;
        assert_relative(untransformed, number("log_likelihood_untransformed"), 1e-12, what);
        for (name, exponent) in [("transformed_by_half", 0.5), ("transformed_by_minus_one", -1.0)] {
            let values = x.transformed(Transform::box_cox_exponent(exponent)).unwrap();
            let expected = numbers(&case[name]);
            assert_all_relative(&values.values().as_slice()[..5], &expected, 1e-13, what);
        }
    }
}

#[test]
fn exponents_by_the_statistics_language() {
    for case in load("transform.json")["powers"].as_array().unwrap() {
        let what = case["name"].as_str().unwrap();
        let x = one_column(case);
        let (exponent, estimate) = estimated(&x);
        // A golden-section search for a maximum.
        assert_zero(exponent - case["exponent"].as_f64().unwrap(), 1e-6, what);
        let ends = [estimate.lower.unwrap(), estimate.upper.unwrap()];
        for (end, expected) in ends.iter().zip(numbers(&case["interval"])) {
            assert_zero(end - expected, 1e-7, what);
        }
        // The likelihood itself is seen at the exponents where a search that is given no room
        // must end. The reference takes λ = 0 for 0 and within 0.02 of it.
        let lambdas = numbers(&case["lambdas"]);
        for (lambda, expected) in lambdas.iter().zip(numbers(&case["above_untransformed"])) {
            let (least, most) =
                if *lambda < exponent { (lambda - 1.0, *lambda) } else { (*lambda, lambda + 1.0) };
            let fitted = Transform::box_cox_between(least, most).fit(&x).unwrap();
            let Formula::BoxCox { exponents } = fitted.formula() else { panic!() };
            let estimate = exponents[0].estimate.unwrap();
            assert_eq!((exponents[0].value, estimate.at_bound), (*lambda, true), "{what}");
            let above = estimate.log_likelihood - estimate.log_likelihood_untransformed;
            assert_zero(above - expected, 1e-10 * expected.abs().max(1.0), what);
        }
    }
}

#[test]
fn middles_and_spreads_by_the_statistics_language() {
    let parameters =
        |x: &DataMatrix, transform: Transform| match transform.fit(x).unwrap().formula() {
            Formula::Linear { middles, spreads, .. } => (middles[0], spreads[0]),
            other => panic!("{other:?}"),
        };
    for case in load("transform.json")["spreads"].as_array().unwrap() {
        let what = case["name"].as_str().unwrap();
        let x = one_column(case);
        let number = |name: &str| case[name].as_f64().unwrap();
        let (mean, deviation) = parameters(&x, Transform::standardise());
        assert_relative(mean, number("mean"), 1e-14, what);
        assert_relative(deviation, number("deviation"), 1e-14, what);
        let (median, spread) = parameters(&x, Transform::standardise_robustly());
        assert_relative(median, number("median"), 1e-15, what);
        assert_relative(spread, number("mad"), 1e-14, what);
        for (transform, name) in
            [(Transform::standardise(), "scaled"), (Transform::standardise_robustly(), "robust")]
        {
            let values = x.transformed(transform).unwrap();
            for (value, expected) in values.values().iter().zip(numbers(&case[name])) {
                assert_zero(value - expected, 1e-13, what);
            }
        }
        let weighted = x.with_weights(numbers(&case["weights"])).unwrap();
        let (mean, deviation) = parameters(&weighted, Transform::standardise());
        assert_relative(mean, number("weighted_mean"), 1e-13, what);
        assert_relative(deviation, number("weighted_deviation"), 1e-13, what);
    }
}
