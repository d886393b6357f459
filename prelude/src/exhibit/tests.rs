//! Exhibits of data frames, matrices and results: what is shown is what they hold.

use nalgebra::{DMatrix, DVector, dmatrix};
use polars::prelude::{Column, DataFrame, IntoLazy, NamedFrom, Series, col, df, lit};

use super::{Exhibit, significant};
use crate::components::{Scaling, principal_components};
use crate::parallel::{ParallelOptions, parallel_analysis};
use crate::table::{
    DataMatrix, FrameToMatrix, MatrixOptions, Missing, describe_columns, missing_values,
};
use crate::transform::Transform;

fn plain(value: &impl Exhibit) -> String {
    value.exhibit().text("text/plain").unwrap_or_default().to_owned()
}

fn html(value: &impl Exhibit) -> String {
    value.exhibit().text("text/html").unwrap_or_default().to_owned()
}

fn tiles() -> DataFrame {
    df![
        "tile" => ["T1", "T2", "T3"],
        "length" => [Some(420.5), None, Some(421.25)],
        "batch" => [7i64, 8, 9],
        "cracked" => [false, true, false],
    ]
    .unwrap()
}

fn matrix() -> DataMatrix {
    let values = DMatrix::from_fn(12, 4, |i, j| ((i + 1) as f64 * 0.7 * (j + 1) as f64).sin());
    let labels = (1..=12).map(|i| format!("tile {i}"));
    DataMatrix::from_values(values, ["length", "width", "weight", "warp"], labels).unwrap()
}

#[test]
fn data_frames_say_types_and_missing_counts() {
    let text = plain(&tiles());
    assert!(text.starts_with("3 rows × 4 columns\n"), "{text}");
    assert!(text.contains("f64, 1 missing"), "{text}");
    for part in ["str", "i64", "bool", "420.5", "421.25", "missing", "true"] {
        assert!(text.contains(part), "{part}: {text}");
    }
    let html = html(&tiles());
    assert!(html.contains("<small>f64, 1 missing</small>"));
    assert!(html.contains(">420.5</td>"));
}

#[test]
fn long_and_wide_data_frames_are_abridged_with_counts() {
    let columns: Vec<Column> =
        (0..50).map(|c| Column::new(format!("c{c}").into(), vec![c as f64; 1000])).collect();
    let frame = DataFrame::new(1000, columns).unwrap();
    let html = html(&frame);
    assert!(html.contains("1000 rows × 50 columns"));
    assert!(html.contains("… 982 more rows …"));
    assert!(html.contains("<small>32 more</small>"));
    assert_eq!(html.matches("<th scope=\"row\"").count(), 18);
    let text = plain(&frame);
    assert!(text.contains("… 982 more rows …"));
    assert!(text.contains(" more"));
    assert!(text.lines().all(|line| line.chars().count() <= 132), "{text}");
    // The last rows carry their own numbers, not those of their place in the exhibit.
    assert!(text.lines().any(|line| line.trim_start().starts_with("1000 ")), "{text}");
}

#[test]
fn hostile_names_and_values_are_harmless() {
    let frame = df![
        "<script>alert(1)</script>" => ["\"'&", "a\nb", "\u{1b}[2J"],
        "عرض" => ["🧱", "\u{202e}x", ""],
    ]
    .unwrap();
    let (html, text) = (html(&frame), plain(&frame));
    assert!(!html.contains("<script"));
    assert!(html.contains("&lt;script&gt;"));
    for shown in [&html, &text] {
        assert!(!shown.chars().any(|c| c.is_control() && c != '\n'));
        assert!(!shown.contains('\u{202e}'));
        assert!(shown.contains("🧱") && shown.contains("عرض"));
    }
}

#[test]
fn empty_data_frames_show_their_columns() {
    let frame = tiles().head(Some(0));
    assert!(plain(&frame).contains("0 rows × 4 columns"));
    assert!(plain(&frame).contains("length"));
    assert!(plain(&DataFrame::empty()).contains("0 rows × 0 columns"));
}

#[test]
fn series_and_columns_show_their_values() {
    let series = Series::new("length".into(), [1.5, f64::NAN, f64::INFINITY]);
    let text = plain(&series);
    for part in ["series of 3 values", "length", "1.5", "NaN", "inf"] {
        assert!(text.contains(part), "{part}: {text}");
    }
    assert!(plain(&Column::from(series)).contains("column of 3 values"));
}

#[test]
fn lazy_frames_show_columns_and_plan_without_computing() {
    let lazy = tiles().lazy().filter(col("batch").gt(lit(7))).select([col("tile"), col("length")]);
    let text = plain(&lazy);
    assert!(text.contains("lazy table of 2 columns, not computed yet"), "{text}");
    assert!(text.contains("f64") && text.contains("Plan:"), "{text}");
    assert!(html(&lazy).contains("<details>"));
    let wrong = tiles().lazy().select([col("no such column")]);
    assert!(plain(&wrong).contains("no such column"), "{}", plain(&wrong));
}

#[test]
fn matrices_and_vectors_show_their_numbers() {
    let text = plain(&DMatrix::from_row_slice(2, 2, &[1.0, 2.5, -3.25, 4e-9]));
    for part in ["2 rows × 2 columns", "2.5", "-3.25", "4e-9", "counted from 1"] {
        assert!(text.contains(part), "{part}: {text}");
    }
    let text = plain(&DVector::from_element(100, 0.5));
    assert!(text.contains("vector of 100 values") && text.contains("… 82 more rows …"), "{text}");
    assert!(plain(&DMatrix::<f64>::zeros(0, 3)).contains("0 rows × 3 columns"));
}

#[test]
fn data_matrices_say_what_was_left_out() {
    let x = tiles().data_matrix_of(["batch"]).unwrap();
    assert!(plain(&x).contains("3 rows × 1 variable"), "{}", plain(&x));
    let frame = df!["tile" => ["a", "b", "c"], "x" => [1.0, 2.0, 4.0]].unwrap();
    let text = plain(&frame.data_matrix().unwrap());
    assert!(text.contains("Columns left out: tile"), "{text}");
}

#[test]
fn data_matrices_say_how_rows_count_and_what_values_went_through() {
    let options = MatrixOptions::new()
        .columns_like("*e*")
        .without(["tile"])
        .weights("batch")
        .missing(Missing::DropRows);
    let x = tiles().data_matrix_with(options).unwrap();
    let text = plain(&x.transformed(Transform::log10().of(["length"])).unwrap());
    for part in [
        "Rows weighted by column batch, from 7 to 9.",
        "Columns left out: tile: labels the rows, cracked: not numeric (bool).",
        "1 of 3 rows dropped for missing values: T2.",
        "Transformed, in this order: logarithm to base 10 of length.",
    ] {
        assert!(text.contains(part), "{part}: {text}");
    }
}

#[test]
fn gaps_are_shown_and_counted() {
    let text = plain(&tiles().gapped_matrix().unwrap());
    assert!(
        text.starts_with("matrix with gaps, 3 rows × 2 variables; 1 value missing (16.7 %)"),
        "{text}"
    );
    assert!(text.contains("Missing: 1 in length; 2 rows complete."), "{text}");
    assert!(text.contains(" missing ") && !text.contains("NaN"), "{text}");
}

#[test]
fn columns_that_say_nothing_of_their_own_are_listed() {
    let values = dmatrix![1.0, 10.0, 7.0, 1.0; 3.0, 30.0, 7.0, 3.0; 4.0, 40.0, 7.0, 4.0];
    let x =
        DataMatrix::from_values(values, ["cm", "mm", "kiln", "again"], ["a", "b", "c"]).unwrap();
    let text = plain(&x.check_columns());
    assert!(text.starts_with("3 of 4 columns say nothing of their own"), "{text}");
    for part in ["7 in every row", "equal to cm", "0 + 10 × cm"] {
        assert!(text.contains(part), "{part}: {text}");
    }
    let text = plain(&x.select(["cm"]).unwrap().check_columns());
    assert!(text.starts_with("1 column over 3 rows: each varies"), "{text}");
}

#[test]
fn descriptions_show_every_statistic() {
    let text = html(&describe_columns(&tiles()));
    // Means and extremes of 420.5 and 421.25, and of 7, 8, 9, by hand.
    for part in ["420.88", "420.5", "421.25", ">8</td>", "different", "divisor n − 1"] {
        assert!(text.contains(part), "{part}: {text}");
    }
    let text = plain(&missing_values(&tiles()));
    assert!(text.contains("1 value missing in 3 rows; 2 rows complete"), "{text}");
    assert!(text.contains("nothing (complete rows)"), "{text}");
}

#[test]
fn components_show_variances_shares_and_loadings() {
    let pca = principal_components(&matrix(), Scaling::Correlation).unwrap();
    let text = plain(&pca);
    for variance in pca.variances() {
        assert!(text.contains(&significant(*variance, 4)), "{variance}: {text}");
    }
    assert!(text.contains("100.0 %"));
    assert!(text.contains("divisor n − 1 = 11"));
    for variable in pca.variables() {
        assert!(text.contains(variable.as_str()));
    }
    // Four variables: the threshold is 1/√4.
    assert!(text.contains("1/√p = 0.500"), "{text}");
    let n_small = pca.loadings().values().iter().filter(|value| value.abs() < 0.5).count();
    assert!(n_small > 0);
    assert_eq!(html(&pca).matches("class=\"p d\"").count(), n_small);
}

#[test]
fn parallel_analyses_show_their_thresholds_and_seed() {
    let options = ParallelOptions::default().replicates(40).seed(11);
    let analysis = parallel_analysis(&matrix(), options).unwrap();
    let text = plain(&analysis);
    for (seen, limit) in analysis.observed().iter().zip(analysis.noise_percentile().iter()) {
        assert!(text.contains(&significant(*seen, 4)) && text.contains(&significant(*limit, 4)));
    }
    assert!(text.contains("40 tables") && text.contains("seed 11"), "{text}");
}

#[test]
fn reconstructions_name_the_rows_described_worst() {
    let pca = principal_components(&matrix(), Scaling::Correlation).unwrap();
    let described = pca.reconstruct(1).unwrap();
    let text = plain(&described);
    let residuals = described.row_residuals();
    let worst = residuals.imax();
    let first = text.lines().nth(4).unwrap_or_default();
    assert!(first.starts_with(&format!("tile {}", worst + 1)), "{text}");
    assert!(text.contains("not safety limits"));
}
