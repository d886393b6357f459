//! The manners of messages.

use std::path::PathBuf;

use super::{ColumnCount, Error};

fn examples() -> Vec<Error> {
    let path = || PathBuf::from("tiles.csv");
    let names = |names: &[&str]| names.iter().map(|name| (*name).to_owned()).collect::<Vec<_>>();
    let counts = || vec![ColumnCount { column: "length".into(), count: 3 }];
    vec![
        Error::FileMissing { path: path(), working_dir: "/".into(), similar: names(&["tile.csv"]) },
        Error::IsFolder { path: path(), readable: vec![] },
        Error::UnknownExtension { path: path(), accepted: &["csv", "tsv"] },
        Error::EmptyFile { path: path() },
        Error::NotText { path: path(), line: 3, byte: 0xFF },
        Error::RaggedRows { path: path(), line: 3, expected: 2, found: 1, n_ragged: 4, n_rows: 9 },
        Error::WrongDelimiter { path: path(), used: ',', seen: '\t', n_fields: 3 },
        Error::UnclosedQuote { path: path(), line: 3 },
        Error::StrayQuote { path: path(), line: 3 },
        Error::BadDelimiter { delimiter: ',', decimal_comma: true },
        Error::UnnamedColumn { path: path(), position: 1 },
        Error::DuplicateColumns { columns: counts() },
        Error::BadJsonLine { path: path(), line: 3, reason: "expected value".into() },
        Error::MixedKinds {
            path: path(),
            column: "x".into(),
            first: ("text", 1),
            other: ("a number", 2),
        },
        Error::Unreadable { path: path(), format: "Parquet", reason: "cut".into() },
        Error::Io { action: "read", path: Some(path()), source: std::io::Error::other("full") },
        Error::UnknownColumn { name: "x".into(), nearest: None, available: names(&["y"]) },
        Error::UnknownLabel { label: "x".into(), nearest: Some("y".into()) },
        Error::RepeatedRequest { name: "x".into() },
        Error::WantedAndUnwanted { name: "x".into() },
        Error::NoColumnLike { pattern: "colour_*".into(), available: names(&["x"]) },
        Error::NoColumnOfType {
            number_type: crate::table::NumberType::Float,
            columns: vec![("x".into(), "i64".into())],
        },
        Error::NoColumnLeft { columns: counts(), n_rows: 9, share: 0.2 },
        Error::MissingWeights { column: "w".into(), row: 2, count: 1 },
        Error::NoNumericColumns { columns: vec![("x".into(), "str".into())] },
        Error::NotNumeric {
            column: "x".into(),
            dtype: "str".into(),
            example: Some(("a".into(), 2)),
        },
        Error::MixedColumn {
            column: "x".into(),
            n_numbers: 9,
            n_others: 1,
            example: ("a".into(), 2),
        },
        Error::MissingValues { columns: counts(), n_rows: 9, n_complete: 6 },
        Error::AllMissing { columns: names(&["x", "y"]) },
        Error::EmptyRows { labels: names(&["a"]) },
        Error::NoCompleteRow { columns: counts(), n_rows: 9 },
        Error::ConstantObserved { columns: vec![("x".into(), 2.5, 4)] },
        Error::TooFewObserved { n_components: 2, found: 20, needed: 31 },
        Error::NoNoise { n_components: 2 },
        Error::ScoresUndetermined { row: 4, label: "a".into(), n_observed: 1, n_components: 2 },
        Error::WeightsNotCovered { method: "the estimation of missing values" },
        Error::NonFinite {
            column: "x".into(),
            row: 2,
            label: "b".into(),
            value: f64::INFINITY,
            count: 2,
        },
        Error::ZeroRows { rows: names(&["x"]) },
        Error::DependentColumns { what: "the loadings", rank: 1, n_cols: 2 },
        Error::ZeroColumns { what: "the first matrix", columns: names(&["x"]) },
        Error::RotationCollapsed { rotation: "direct oblimin, γ = 0.8".into(), n_starts: 20 },
        Error::RowNamesDiffer {
            missing: names(&["x"]),
            extra: names(&["y"]),
            order: Some((2, "x".into(), "y".into())),
        },
        Error::NoRows,
        Error::NoColumns,
        Error::OptionNeeded { option: "keep", needed_by: "a randomised decomposition" },
        Error::RowsDiffer { missing: vec![], extra: vec![] },
        Error::SavedForm { part: "`mean`".into(), found: "x".into(), accepted: "y".into() },
        Error::SavedVersion { format: "semiaxis components", found: 2, known: 1 },
        Error::NotSaved { what: "scores", remedy: "project the rows" },
        Error::BadWeight { column: Some("w".into()), row: 2, label: "b".into(), value: -1.0 },
        Error::MissingLabels { column: "x".into(), row: 2, count: 1 },
        Error::RepeatedLabel { column: Some("x".into()), label: "a".into(), rows: (1, 2) },
        Error::ShapeMismatch { what: "labels of rows", expected: 2, found: 1 },
        Error::OutsideDomain {
            action: "the transformation (natural logarithm)".into(),
            column: "x".into(),
            row: 2,
            label: "b".into(),
            value: -1.0,
            accepted: "numbers above 0".into(),
        },
        Error::NoSpread { columns: vec![("x".into(), 0.5)], measure: "range" },
        Error::TransformationsDiffer { wanted: names(&["square root of x"]), found: vec![] },
        Error::SavedForm { part: "`total`".into(), found: "a list".into(), accepted: "1".into() },
        Error::TooFewRows { method: "parallel analysis", needed: 3, found: 1 },
        Error::TooFewColumns { method: "parallel analysis", needed: 2, found: 1 },
        Error::ConstantColumns { columns: vec![("x".into(), 0.5)] },
        Error::NoVariation { n_rows: 9 },
        Error::Magnitude { column: "x".into(), value: 1e200, least: 1e-145, most: 1e145 },
        Error::WeightsNotCovered { method: "the robust scatter" },
        Error::SingularScatter { method: "the robust scatter", rank: 3, order: 4 },
        Error::ExactFit {
            method: "the robust scatter",
            n_on: 8,
            n_rows: 10,
            coefficients: vec![("x".into(), 0.6), ("y".into(), -0.8)],
            constant: 2.0,
            off: names(&["a", "b"]),
        },
        Error::NoRobustSpread { columns: vec![("x".into(), 4.0)] },
        Error::ComponentOutOfRange { asked: 9, available: 3 },
        Error::VariablesDiffer {
            missing: names(&["x"]),
            extra: names(&["y"]),
            order: Some((1, "x".into(), "y".into())),
        },
        Error::OptionOutOfRange { option: "percentile", value: 100.0, accepted: "below 100" },
        Error::Interrupted,
        Error::NoConvergence { method: "the singular value decomposition" },
    ]
}

#[test]
fn messages_are_lower_case_without_a_final_period() {
    for error in examples() {
        let message = error.to_string();
        let first = message.chars().next().unwrap();
        assert!(!first.is_uppercase(), "{message}");
        assert!(!message.ends_with('.') && !message.contains("  "), "{message}");
    }
}

#[test]
fn messages_name_the_offender_and_the_way_out() {
    let message = |error: &Error| error.to_string();
    let all: Vec<String> = examples().iter().map(message).collect();
    for expected in [
        "`tiles.csv`, line 3: 1 field where the header has 2; 4 of 9 rows differ from the header",
        "values are missing: 3 in `length`; 6 of 9 rows are complete; leave those columns out, \
         drop the incomplete rows with \
         `.data_matrix_with(MatrixOptions::new().missing(Missing::DropRows))`, \
         or keep the gaps for a method that estimates them with `.gapped_matrix()`",
        "column `x` holds inf in row 2 (`b`) and has 1 more value not finite; only \
         finite numbers are accepted",
        "parallel analysis needs at least 3 rows, there is 1",
        "9 components were asked for; accepted: 1 to 3",
    ] {
        assert!(all.iter().any(|message| message == expected), "{expected}\nin {all:#?}");
    }
}

#[test]
fn sources_stay_reachable() {
    let error = Error::from(std::io::Error::other("full"));
    assert!(std::error::Error::source(&error).is_some());
}
