//! Closed forms, identities, and what is refused. Values of other programs are compared in the
//! workspace's `tests/tests/references/transform.rs`.

use nalgebra::{DMatrix, dmatrix};
use proptest::prelude::*;
use serde_json::{Value, json};

use super::{Exponent, Formula, Transform, Transformation};
use crate::compare::{assert_all_relative, assert_matrix, assert_relative, assert_zero};
use crate::error::Error;
use crate::table::DataMatrix;

fn tiles(values: DMatrix<f64>) -> DataMatrix {
    let names = ["length", "width", "uptake"].into_iter().take(values.ncols());
    let labels: Vec<String> = (1..=values.nrows()).map(|row| format!("tile {row}")).collect();
    DataMatrix::from_values(values, names, labels).unwrap()
}

fn three() -> DataMatrix {
    tiles(dmatrix![1.0, 4.0, 10.0; 2.0, 9.0, 100.0; 4.0, 25.0, 1000.0; 8.0, 1.0, 1.0])
}

fn every() -> Vec<Transform> {
    vec![
        Transform::log(),
        Transform::log10(),
        Transform::log_plus(0.5),
        Transform::square_root(),
        // At −5, say, large values crowd below 1/5 and lose their digits there.
        Transform::box_cox_between(-2.0, 2.0),
        Transform::box_cox_exponent(0.0),
        Transform::box_cox_exponent(-0.5),
        Transform::centre(),
        Transform::standardise(),
        Transform::standardise_robustly(),
        Transform::unit_range(),
    ]
}

// Hand values: logarithms and roots of whole powers; (x² − 1) / 2 and 1 − 1 / x.
#[test]
fn formulas_give_what_they_say() {
    let values = |transform: Transform, name: &str| {
        three().transformed(transform).unwrap().variable(name).unwrap().to_vec()
    };
    let ln2 = std::f64::consts::LN_2;
    let relative = |actual: Vec<f64>, expected: &[f64]| {
        for (actual, expected) in actual.iter().zip(expected) {
            assert_zero(actual - expected, 1e-15 * expected.abs().max(1.0), "value");
        }
    };
    relative(values(Transform::log(), "length"), &[0.0, ln2, 2.0 * ln2, 3.0 * ln2]);
    relative(values(Transform::log10(), "uptake"), &[1.0, 2.0, 3.0, 0.0]);
    relative(
        values(Transform::log_plus(7.0), "width").split_off(1),
        &[4.0 * ln2, 5.0 * ln2, 3.0 * ln2],
    );
    relative(values(Transform::square_root(), "width"), &[2.0, 3.0, 5.0, 1.0]);
    relative(values(Transform::box_cox_exponent(2.0), "length"), &[0.0, 1.5, 7.5, 31.5]);
    relative(values(Transform::box_cox_exponent(-1.0), "length"), &[0.0, 0.5, 0.75, 0.875]);
    relative(values(Transform::box_cox_exponent(0.0), "length"), &[0.0, ln2, 2.0 * ln2, 3.0 * ln2]);
    relative(values(Transform::centre(), "length"), &[-2.75, -1.75, 0.25, 4.25]);
    relative(values(Transform::unit_range(), "width"), &[0.125, 1.0 / 3.0, 1.0, 0.0]);
    // Median 3; distances 2, 1, 1, 5 have the median 1.5.
    let spread = 1.4826 * 1.5;
    let expected = [-2.0, -1.0, 1.0, 5.0].map(|distance| distance / spread);
    relative(values(Transform::standardise_robustly(), "length"), &expected);
}

// Aitchison (1986), section 4.6: for parts 1, 2, 4 the geometric mean is 2.
#[test]
fn log_ratios_of_hand_picked_parts() {
    let x = tiles(dmatrix![1.0, 2.0, 4.0; 30.0, 30.0, 30.0]);
    let y = x.transformed(Transform::centred_log_ratio()).unwrap();
    let ln2 = std::f64::consts::LN_2;
    assert_matrix(y.values(), &dmatrix![-ln2, 0.0, ln2; 0.0, 0.0, 0.0], 1e-15, "log-ratios");
    assert!(matches!(
        y.transformations()[0].formula(),
        Formula::CentredLogRatio { total: 1.0, closed: false }
    ));
    let parts = y.untransformed().unwrap();
    let expected = dmatrix![1.0 / 7.0, 2.0 / 7.0, 4.0 / 7.0; 1.0 / 3.0, 1.0 / 3.0, 1.0 / 3.0];
    assert_matrix(parts.values(), &expected, 1e-15, "parts of one");
}

proptest! {
    /// Rows sum to zero, scaling a row changes nothing, undoing restores rows of one total, and
    /// the distance of two rows is Aitchison's (1986, section 8.3), a sum over pairs of parts.
    #[test]
    fn log_ratios_have_the_properties_of_compositions(
        parts in prop::collection::vec(0.01..100.0_f64, 8), factor in 0.001..1000.0_f64,
    ) {
        let mut values = DMatrix::from_row_slice(2, 4, &parts);
        let mut scaled = values.clone();
        scaled.row_mut(1).scale_mut(factor);
        let ratios = |values: &DMatrix<f64>| {
            DataMatrix::from_unnamed(values.clone()).unwrap()
                .transformed(Transform::centred_log_ratio()).unwrap()
        };
        let y = ratios(&values);
        for row in y.values().row_iter() {
            assert_zero(row.sum(), 1e-13, "sum of a row");
        }
        assert_zero((ratios(&scaled).values() - y.values()).amax(), 1e-12, "scaled row");
        let distance = (y.values().row(0) - y.values().row(1)).norm_squared();
        let mut pairs = 0.0;
        for i in 0..4 {
            for j in 0..i {
                let of = |row: usize| (values[(row, i)] / values[(row, j)]).ln();
                pairs += (of(0) - of(1)).powi(2) / 4.0;
            }
        }
        assert_zero(distance - pairs, 1e-11, "distance");
        for mut row in values.row_iter_mut() {
            let sum = row.sum();
            row *= 100.0 / sum;
        }
        let back = ratios(&values).untransformed().unwrap();
        assert_matrix(back.values(), &values, 1e-12, "closed to 100");
    }

    #[test]
    fn undoing_restores_the_rows_and_repeating_gives_the_same(
        values in prop::collection::vec(0.05..50.0_f64, 12),
    ) {
        // No two values of a column alike, so that each can be standardised.
        let values = values.iter().enumerate().map(|(place, value)| value + place as f64 * 1e-3);
        let x = DataMatrix::from_unnamed(DMatrix::from_iterator(6, 2, values)).unwrap();
        for transform in every() {
            let y = x.transformed(transform).unwrap();
            assert_matrix(y.untransformed().unwrap().values(), x.values(), 1e-10, "undone");
            prop_assert!(y.untransformed().unwrap().transformations().is_empty());
            let again = x.transformed_as(&y).unwrap();
            prop_assert_eq!(again.values(), y.values());
            let fitted = &y.transformations()[0];
            prop_assert_eq!(&Transformation::from_json(&fitted.to_json()).unwrap(), fitted);
            // Through text as well: no reader may lose a digit.
            let text = fitted.to_json().to_string();
            let read: Value = serde_json::from_str(&text).unwrap();
            prop_assert_eq!(&Transformation::from_json(&read).unwrap(), fitted);
        }
    }
}

/// The documented formula of the likelihood, coded naively.
#[test]
fn the_estimate_is_where_the_documented_likelihood_is_largest() {
    let x = [0.8, 1.1, 1.9, 2.4, 3.0, 4.4, 6.1, 9.5, 14.0, 33.0_f64];
    let likelihood = |lambda: f64| {
        let n = x.len() as f64;
        let y: Vec<f64> = x
            .iter()
            .map(|x| if lambda == 0.0 { x.ln() } else { (x.powf(lambda) - 1.0) / lambda })
            .collect();
        let mean = y.iter().sum::<f64>() / n;
        let variance = y.iter().map(|y| (y - mean).powi(2)).sum::<f64>() / n;
        -n / 2.0 * variance.ln() + (lambda - 1.0) * x.iter().map(|x| x.ln()).sum::<f64>()
    };
    let matrix = DataMatrix::from_unnamed(DMatrix::from_column_slice(10, 1, &x)).unwrap();
    let exponent = exponent_of(&Transform::box_cox().fit(&matrix).unwrap());
    let estimate = exponent.estimate.unwrap();
    assert_relative(estimate.log_likelihood, likelihood(exponent.value), 1e-12, "at the estimate");
    assert_relative(estimate.log_likelihood_untransformed, likelihood(1.0), 1e-12, "at one");
    for step in 1..200 {
        let lambda = -5.0 + f64::from(step) * 0.05;
        assert!(likelihood(lambda) <= estimate.log_likelihood, "{lambda}");
    }
    let drop = 0.5 * 3.841_458_820_694_124; // χ²₀.₉₅(1), R 4.2.2: qchisq(0.95, 1)
    for end in [estimate.lower.unwrap(), estimate.upper.unwrap()] {
        assert_relative(likelihood(exponent.value) - likelihood(end), drop, 1e-9, "interval");
    }
    assert!(!estimate.at_bound);
    // A weight of two is a row that stands twice, as far as the exponent goes.
    let weighted = matrix.with_weights((0..10).map(|row| if row < 3 { 2.0 } else { 1.0 })).unwrap();
    let twice: Vec<f64> = x.iter().chain(&x[..3]).copied().collect();
    let twice = DataMatrix::from_unnamed(DMatrix::from_vec(13, 1, twice)).unwrap();
    assert_relative(
        exponent_of(&Transform::box_cox().fit(&weighted).unwrap()).value,
        exponent_of(&Transform::box_cox().fit(&twice).unwrap()).value,
        1e-11,
        "weighted",
    );
}

fn exponent_of(fitted: &Transformation) -> Exponent {
    match fitted.formula() {
        Formula::BoxCox { exponents } => exponents[0],
        other => panic!("{other:?}"),
    }
}

/// If ln x is symmetric about its mean, the logarithm is the best power: λ = 0 by symmetry, since
/// turning the logarithms round turns λ into −λ.
#[test]
fn symmetric_logarithms_have_exponent_zero() {
    let x: Vec<f64> = (-10..=10).map(|step| (f64::from(step) * 0.3).exp()).collect();
    let x = DataMatrix::from_unnamed(DMatrix::from_vec(21, 1, x)).unwrap();
    let exponent = exponent_of(&Transform::box_cox().fit(&x).unwrap());
    assert_zero(exponent.value, 1e-13, "exponent");
    let estimate = exponent.estimate.unwrap();
    assert_relative(estimate.lower.unwrap(), -estimate.upper.unwrap(), 1e-9, "interval");
}

#[test]
fn an_exponent_at_a_bound_says_so() {
    // Little relative spread: the likelihood is nearly flat between the bounds.
    let x = DataMatrix::from_unnamed(dmatrix![1000.0; 1000.9; 1001.0; 1001.1; 1001.2]).unwrap();
    let exponent = exponent_of(&Transform::box_cox().fit(&x).unwrap());
    let estimate = exponent.estimate.unwrap();
    assert_eq!((exponent.value, estimate.at_bound), (5.0, true));
    assert_eq!((estimate.lower, estimate.upper), (None, None));
    let close = DataMatrix::from_unnamed(dmatrix![1e300; 1e300_f64.next_up(); 1e300]).unwrap();
    assert!(matches!(close.transformed(Transform::box_cox()), Err(Error::NoConvergence { .. })));
    // Values that span hundreds of powers of ten: the search keeps powers finite.
    let x = DataMatrix::from_unnamed(dmatrix![1e-200; 1e-3; 1.0; 1e5; 1e200]).unwrap();
    let value = exponent_of(&Transform::box_cox().fit(&x).unwrap()).value;
    assert!(value.abs() < 0.1, "{value}");
}

#[test]
fn values_outside_the_domain_are_named() {
    let mut values = three().values().clone();
    values[(2, 1)] = 0.0;
    let x = tiles(values);
    let refused = |transform: Transform| x.transformed(transform).unwrap_err();
    for (transform, expected) in [
        (Transform::log(), "numbers above 0"),
        (Transform::log10(), "numbers above 0"),
        (Transform::log_plus(-1.0), "numbers above 1"),
        (Transform::centred_log_ratio(), "numbers above 0"),
        (Transform::box_cox(), "numbers above 0"),
        (Transform::box_cox_exponent(1.0), "numbers above 0"),
    ] {
        match refused(transform.clone()) {
            Error::OutsideDomain { column, row, label, value, accepted, .. } => {
                assert!(accepted.starts_with(expected), "{accepted}");
                if transform != Transform::log_plus(-1.0) {
                    let place = (column.as_str(), row, label.as_str(), value);
                    assert_eq!(place, ("width", 3, "tile 3", 0.0));
                }
            }
            other => panic!("{other}"),
        }
    }
    assert!(x.transformed(Transform::square_root()).is_ok());
    let negative = tiles(dmatrix![-1.0; 1.0]);
    assert!(matches!(
        negative.transformed(Transform::square_root()),
        Err(Error::OutsideDomain { row: 1, .. })
    ));
    let large = tiles(dmatrix![1e200; 1.0]);
    assert!(large.transformed(Transform::box_cox_exponent(2.0)).is_err());
}

#[test]
fn what_no_value_leads_to_cannot_be_undone() {
    let roots = three().transformed(Transform::square_root()).unwrap();
    let moved = roots.with_values(roots.values().add_scalar(-1.5)).unwrap();
    match moved.untransformed() {
        Err(Error::OutsideDomain { column, row: 1, value, .. }) => {
            assert_eq!((column.as_str(), value), ("length", -0.5));
        }
        other => panic!("{other:?}"),
    }
    let powers = three().transformed(Transform::box_cox_exponent(2.0)).unwrap();
    let moved = powers.with_values(powers.values().add_scalar(-1.0)).unwrap();
    match moved.untransformed() {
        Err(Error::OutsideDomain { accepted, .. }) => assert_eq!(accepted, "numbers above -0.5"),
        other => panic!("{other:?}"),
    }
}

#[test]
fn columns_that_do_not_spread_are_named() {
    let x = tiles(dmatrix![0.1, 1.0, 5.0; 0.1, 1.0, 6.0; 0.1, 1.0, 7.0; 0.1, 9.0, 8.0]);
    for transform in [Transform::standardise(), Transform::unit_range(), Transform::box_cox()] {
        match x.transformed(transform) {
            Err(Error::NoSpread { columns, .. }) => {
                assert_eq!(columns, [("length".to_owned(), 0.1)]);
            }
            other => panic!("{other:?}"),
        }
    }
    match x.transformed(Transform::standardise_robustly()) {
        Err(Error::NoSpread { columns, measure: "median absolute deviation" }) => {
            assert_eq!(columns.len(), 2);
            assert_eq!(columns[1], ("width".to_owned(), 1.0));
        }
        other => panic!("{other:?}"),
    }
    assert!(x.transformed(Transform::centre()).is_ok());
    let wide = tiles(dmatrix![-1e308; 1.5e308]);
    assert!(matches!(wide.transformed(Transform::unit_range()), Err(Error::NoSpread { .. })));
    let one = tiles(dmatrix![1.0]);
    assert!(matches!(one.transformed(Transform::standardise()), Err(Error::NoSpread { .. })));
    let two = tiles(dmatrix![1.0; 2.0]);
    assert!(matches!(two.transformed(Transform::box_cox()), Err(Error::TooFewRows { .. })));
    assert!(matches!(
        two.transformed(Transform::centred_log_ratio()),
        Err(Error::TooFewColumns { needed: 2, found: 1, .. })
    ));
}

#[test]
fn requests_are_checked() {
    let refused = |transform: Transform| three().transformed(transform).unwrap_err();
    assert!(matches!(
        refused(Transform::log().of(["lenght"])),
        Error::UnknownColumn { nearest: Some(name), .. } if name == "length"
    ));
    assert!(matches!(refused(Transform::log().of(["width"; 2])), Error::RepeatedRequest { .. }));
    assert!(matches!(refused(Transform::log().of([""; 0])), Error::NoColumns));
    for transform in [
        Transform::log_plus(f64::NAN),
        Transform::box_cox_exponent(f64::INFINITY),
        Transform::box_cox_between(1.0, 1.0),
        Transform::box_cox_between(f64::NAN, 1.0),
    ] {
        assert!(matches!(refused(transform), Error::OptionOutOfRange { .. }));
    }
}

#[test]
fn a_chain_is_repeated_and_undone_in_order() {
    let x = three().with_weights([1.0, 2.0, 1.0, 1.0]).unwrap();
    let y = x
        .transformed(Transform::log().of(["uptake", "length"]))
        .unwrap()
        .transformed(Transform::standardise())
        .unwrap();
    assert_eq!(y.transformations().len(), 2);
    assert_eq!((y.weights(), y.labels()), (x.weights(), x.labels()));
    assert_matrix(y.untransformed().unwrap().values(), x.values(), 1e-13, "undone");
    // One new row, with the columns in another order and one more.
    let new = DataMatrix::from_values(
        dmatrix![100.0, 9.0, 2.0, -7.0],
        ["uptake", "width", "length", "colour"],
        ["new"],
    )
    .unwrap();
    let same = new.transformed_as(&y).unwrap();
    for name in ["uptake", "width", "length"] {
        let expected = y.variable(name).unwrap()[1];
        assert_all_relative(same.variable(name).unwrap(), &[expected], 1e-15, name);
    }
    assert_eq!(same.variable("colour").unwrap(), [-7.0]);
    // Done again, nothing is left to do.
    assert_eq!(same.transformed_as(&y).unwrap().values(), same.values());
    let lacking = new.select(["uptake", "width"]).unwrap();
    assert!(matches!(
        lacking.transformed_as(&y),
        Err(Error::VariablesDiffer { missing, .. }) if missing == ["length"]
    ));
    let rooted = new.transformed(Transform::square_root().of(["width"])).unwrap();
    assert!(matches!(rooted.transformed_as(&y), Err(Error::TransformationsDiffer { .. })));
    assert!(y.check_transformations(same.transformations()).is_ok());
    assert!(x.check_transformations(y.transformations()).is_err());
    let first = &y.transformations()[0];
    assert!(matches!(first.undo(&y), Err(Error::TransformationsDiffer { .. })));
}

#[test]
fn a_selection_keeps_the_transformations_of_its_columns() {
    let y = three().transformed(Transform::standardise()).unwrap();
    let part = y.select(["uptake", "length"]).unwrap();
    let expected = three().select(["uptake", "length"]).unwrap();
    assert_matrix(part.untransformed().unwrap().values(), expected.values(), 1e-13, "undone");
    assert_eq!(expected.transformed_as(&part).unwrap().values(), part.values());
    let y = three().transformed(Transform::log().of(["width"])).unwrap();
    assert!(y.select(["uptake"]).unwrap().transformations().is_empty());
    assert_eq!(y.select_rows(["tile 2"]).unwrap().transformations(), y.transformations());
    // A part of a composition cannot be brought back without the others.
    let ratios = three().transformed(Transform::centred_log_ratio()).unwrap();
    assert!(matches!(
        ratios.select(["width"]).unwrap().untransformed(),
        Err(Error::VariablesDiffer { missing, .. }) if missing == ["length", "uptake"]
    ));
}

#[test]
fn what_was_not_saved_by_us_is_refused() {
    let fitted = Transform::standardise().fit(&three()).unwrap().to_json();
    let with = |name: &str, value: Value| {
        let mut saved = fitted.clone();
        saved[name] = value;
        saved
    };
    let mut lacking = fitted.clone();
    lacking.as_object_mut().unwrap().remove("spreads");
    for (saved, part) in [
        (with("transformation", json!("cube")), "`transformation`"),
        (with("transformation", json!(1)), "`transformation`"),
        (with("middles", json!(["1", "2"])), "`middles`"),
        (with("middles", json!(["1", "2", "x"])), "`middles`"),
        (with("spreads", json!(["1", "2", "inf"])), "`spreads`"),
        (with("spreads", json!(["1", "2", "0"])), "`spreads`"),
        (with("columns", json!([])), "`columns`"),
        (with("columns", json!("length")), "`columns`"),
        (with("unit", json!("mm")), "`unit`"),
        (lacking, "`spreads`"),
        (json!([]), "a transformation"),
    ] {
        match Transformation::from_json(&saved) {
            Err(Error::SavedForm { part: found, .. }) => assert_eq!(found, part, "{saved}"),
            other => panic!("{other:?} from {saved}"),
        }
    }
    let twice = Transformation::from_json(&with("columns", json!(["a", "a", "b"])));
    assert!(matches!(twice, Err(Error::DuplicateColumns { .. })));
    // The form is fixed: files that were written before must stay readable.
    let log = Transform::log_plus(0.5).of(["width"]).fit(&three()).unwrap();
    let form = json!({ "transformation": "log-plus", "columns": ["width"], "constant": "0.5" });
    assert_eq!(log.to_json(), form);
}

#[test]
fn exhibits_say_what_was_done() {
    let shown = |transform: Transform| {
        use crate::exhibit::Exhibit;
        let fitted = transform.fit(&three()).unwrap();
        fitted.exhibit().text("text/plain").unwrap().to_owned()
    };
    let text = shown(Transform::box_cox());
    assert!(text.contains("Box–Cox power of 3 columns") && text.contains("would do"), "{text}");
    let text = shown(Transform::standardise_robustly().of(["length"]));
    assert!(text.contains("1.4826") && text.contains("2.2239"), "{text}");
    let text = shown(Transform::centred_log_ratio());
    assert!(text.contains("undoing gives parts of 1"), "{text}");
}
