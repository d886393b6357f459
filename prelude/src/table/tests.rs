//! Tables read, refused and turned into matrices. Files written by other programs are read in the
//! workspace's `tests/tests/tables.rs`.

use std::path::PathBuf;

use nalgebra::{DMatrix, dmatrix};
use polars::prelude::{DataFrame, DataType, df};
use proptest::prelude::*;

use super::nearest::nearest;
use super::{
    DataMatrix, FrameToMatrix, LabelSource, LeftOutReason, MatrixOptions, Missing, NamedMatrix,
    NumberType, TableOptions, describe_columns, missing_values, read_table, read_table_with,
};
use crate::error::{Error, Result};

/// Writes a file of that name, reads it, and keeps the folder until then.
fn read(name: &str, content: impl AsRef<[u8]>) -> Result<DataFrame> {
    read_with(name, content, TableOptions::new())
}

fn read_with(name: &str, content: impl AsRef<[u8]>, options: TableOptions) -> Result<DataFrame> {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join(name);
    std::fs::write(&path, content).unwrap();
    read_table_with(path, options)
}

fn fault(name: &str, content: impl AsRef<[u8]>) -> Error {
    read(name, content).expect_err("a fault")
}

fn texts(table: &DataFrame, column: &str) -> Vec<Option<String>> {
    table.column(column).unwrap().str().unwrap().iter().map(|c| c.map(str::to_owned)).collect()
}

fn floats(table: &DataFrame, column: &str) -> Vec<Option<f64>> {
    table.column(column).unwrap().f64().unwrap().iter().collect()
}

fn dtype(table: &DataFrame, column: &str) -> DataType {
    table.column(column).unwrap().dtype().clone()
}

#[test]
fn types_follow_from_all_cells() {
    let mut text = "whole,real,truth,day,name,late,mixed\n".to_owned();
    // Longer than the rows from which types are guessed at first.
    for row in 0..3000 {
        let late = if row == 2999 { "1.5" } else { "" };
        let mixed = if row == 2999 { "x" } else { "1" };
        text += &format!("{row},{row}.5,true,2026-01-31,n{row},{late},{mixed}\n");
    }
    let table = read("a.csv", text).unwrap();
    assert_eq!(table.shape(), (3000, 7));
    let types: Vec<DataType> = table.columns().iter().map(|c| c.dtype().clone()).collect();
    let expected = [
        DataType::Int64,
        DataType::Float64,
        DataType::Boolean,
        DataType::Date,
        DataType::String,
        DataType::Float64,
        DataType::String,
    ];
    assert_eq!(types, expected);
    assert_eq!(floats(&table, "late")[2999], Some(1.5));
    assert_eq!(texts(&table, "mixed")[2999].as_deref(), Some("x"));
}

#[test]
fn missing_cells_are_missing_in_every_spelling() {
    let table =
        read("a.csv", "x,y\n1.5,a\n,\nNA,NA\nN/A,n/a\nNaN,nan\nNULL,null\n\"NA\",\"\"\n").unwrap();
    assert_eq!(table.column("x").unwrap().null_count(), 6);
    assert_eq!(table.column("y").unwrap().null_count(), 6);
    assert_eq!(dtype(&table, "x"), DataType::Float64);
}

#[test]
fn quotes_marks_and_line_ends_are_understood() {
    let text = "\u{feff}tile,\"long, \"\"odd\"\" name\",note\r\na,1.5,\"two\r\nlines\"\r\n\
                b,2.5,\"a, b\"\r\n\r\n\r\n";
    let table = read("a.CSV", text).unwrap();
    assert_eq!(table.get_column_names(), ["tile", "long, \"odd\" name", "note"]);
    assert_eq!(floats(&table, "long, \"odd\" name"), [Some(1.5), Some(2.5)]);
    assert_eq!(texts(&table, "note")[0].as_deref(), Some("two\r\nlines"));
    // Carriage returns alone, as some old programs write.
    let table = read("a.csv", "x,y\r1.5,2\r3.5,4").unwrap();
    assert_eq!((table.shape(), floats(&table, "x")[1]), ((2, 2), Some(3.5)));
    let table = read("a.tsv", "x\ty\n1.5\ta b\n").unwrap();
    assert_eq!(texts(&table, "y")[0].as_deref(), Some("a b"));
    let table = read("a.csv", "x,y\n 1.5 ,1\n2.5, 2\n").unwrap();
    assert_eq!((floats(&table, "x")[0], floats(&table, "y")[1]), (Some(1.5), Some(2.0)));
}

#[test]
fn a_table_of_one_column_may_have_blank_lines() {
    let table = read("a.csv", "x\n1.5\n\n2.5\n\n").unwrap();
    assert_eq!(floats(&table, "x"), [Some(1.5), None, Some(2.5)]);
}

#[test]
fn a_header_alone_is_a_table_without_rows() {
    let table = read("a.csv", "x,y\n").unwrap();
    assert_eq!(table.shape(), (0, 2));
    assert!(matches!(table.data_matrix(), Err(Error::NoNumericColumns { .. })));
}

#[test]
fn options_read_what_departs_from_the_usual() {
    let options = TableOptions::new().delimiter(';').decimal_comma().missing(["--"]).unnamed("id");
    let table = read_with("a.csv", ";x;y\n1;1,5;--\n2;-2,25;3,5\n", options.clone()).unwrap();
    assert_eq!(table.get_column_names(), ["id", "x", "y"]);
    assert_eq!(floats(&table, "x"), [Some(1.5), Some(-2.25)]);
    assert_eq!(floats(&table, "y"), [None, Some(3.5)]);
    for (delimiter, comma) in [('a', false), ('"', false), (',', true), ('→', false), ('.', false)]
    {
        let mut options = TableOptions::new().delimiter(delimiter);
        if comma {
            options = options.decimal_comma();
        }
        assert!(matches!(
            read_with("a.csv", "x\n1\n", options),
            Err(Error::BadDelimiter { delimiter: d, .. }) if d == delimiter
        ));
    }
}

#[test]
fn a_path_that_leads_nowhere_says_what_is_near() {
    let dir = tempfile::tempdir().unwrap();
    std::fs::write(dir.path().join("tiles.csv"), "x\n1\n").unwrap();
    match read_table(dir.path().join("tile.csv")) {
        Err(Error::FileMissing { similar, .. }) => assert_eq!(similar, ["tiles.csv"]),
        other => panic!("{other:?}"),
    }
    let error = read_table("no such folder/tiles.csv").unwrap_err();
    assert!(error.to_string().contains("relative paths start from"), "{error}");
    match read_table(dir.path()) {
        Err(Error::IsFolder { readable, .. }) => assert_eq!(readable, ["tiles.csv"]),
        other => panic!("{other:?}"),
    }
    for name in ["tiles.xlsx", "tiles"] {
        assert!(matches!(fault(name, "x\n1\n"), Error::UnknownExtension { accepted, .. }
            if accepted.contains(&"parquet")));
    }
    let missing = PathBuf::from("tiles.docx");
    assert!(matches!(read_table(missing), Err(Error::FileMissing { .. })));
}

#[test]
fn faults_of_form_are_named_with_their_line() {
    for name in ["a.csv", "a.jsonl", "a.parquet", "a.arrow"] {
        assert!(matches!(fault(name, ""), Error::EmptyFile { .. }), "{name}");
    }
    assert!(matches!(fault("a.csv", " \n\n"), Error::EmptyFile { .. }));
    assert!(matches!(fault("a.csv", b"x,y\n1,\0\n"), Error::NotText { line: 2, byte: 0, .. }));
    assert!(matches!(fault("a.csv", b"x,y\n1,M\xFCller\n"), Error::NotText { byte: 0xFC, .. }));
    assert!(matches!(fault("a.csv", b"\xFF\xFEx\0,\0"), Error::NotText { line: 1, .. }));
    assert!(matches!(
        fault("a.csv", "x,y\n1,2\n1,2,3\n1\n5,6\n"),
        Error::RaggedRows { line: 3, expected: 2, found: 3, n_ragged: 2, n_rows: 4, .. }
    ));
    assert!(matches!(
        fault("a.csv", "x,y\n1,2\n\n3,4\n"),
        Error::RaggedRows { line: 3, expected: 2, found: 0, .. }
    ));
    // A line break inside quotes counts as a line of the file, not as a row.
    assert!(matches!(
        fault("a.csv", "x,y\n\"a\nb\",2\n3\n"),
        Error::RaggedRows { line: 4, found: 1, n_rows: 2, .. }
    ));
    assert!(matches!(fault("a.csv", "x,y\n1,\"2\n3,4\n"), Error::UnclosedQuote { line: 2, .. }));
    assert!(matches!(fault("a.csv", "x,y\n1,5\" pipe\n"), Error::StrayQuote { line: 2, .. }));
    assert!(matches!(fault("a.csv", "x,y\n\"1\"2,3\n"), Error::StrayQuote { line: 2, .. }));
    assert!(matches!(fault("a.csv", ",x\n1,2\n"), Error::UnnamedColumn { position: 1, .. }));
    match fault("a.csv", "x,y,x,z,y,x\n1,2,3,4,5,6\n") {
        Error::DuplicateColumns { columns } => {
            let found: Vec<_> = columns.iter().map(|c| (c.column.as_str(), c.count)).collect();
            assert_eq!(found, [("x", 3), ("y", 2)]);
        }
        other => panic!("{other}"),
    }
}

#[test]
fn a_wide_ragged_file_is_refused_with_both_counts() {
    let header: Vec<String> = (0..200).map(|j| format!("v{j}")).collect();
    let row = vec!["1.5"; 200].join(",");
    let short = vec!["1.5"; 199].join(",");
    let text = format!("{}\n{row}\n{short}\n{row},9\n", header.join(","));
    match fault("wide.csv", text) {
        Error::RaggedRows { line, expected, found, n_ragged, .. } => {
            assert_eq!((line, expected, found, n_ragged), (3, 200, 199, 2));
        }
        other => panic!("{other}"),
    }
}

#[test]
fn a_wrong_delimiter_is_recognised_and_the_way_out_is_said() {
    for (name, text, expected) in [
        ("a.csv", "x;y;z\n1,5;2,5;3\n", ';'),
        ("a.csv", "x\ty\n1\t2\n", '\t'),
        ("a.tsv", "x,y\n1,2\n", ','),
        ("a.csv", "x|y\n", '|'),
    ] {
        let error = fault(name, text);
        assert!(matches!(error, Error::WrongDelimiter { seen, .. } if seen == expected), "{error}");
        assert!(error.to_string().contains("delimiter("), "{error}");
    }
    // One column whose name holds a semicolon is no mistake when its values do not.
    assert_eq!(read("a.csv", "x;y\n1.5\n").unwrap().shape(), (1, 1));
}

#[test]
fn json_lines_are_read_and_faults_named_by_line() {
    let table =
        read("a.jsonl", "{\"x\": 1, \"n\": \"a\"}\n\n{\"x\": 2.5}\n{\"n\": null}\n").unwrap();
    assert_eq!(floats(&table, "x"), [Some(1.0), Some(2.5), None]);
    assert_eq!(texts(&table, "n")[0].as_deref(), Some("a"));
    for text in ["{\"x\": 1}\n{\"x\": \n", "{\"x\": 1}\n[1]\n", "{\"x\": 1}\n{\"x\": NaN}\n"] {
        assert!(matches!(fault("a.ndjson", text), Error::BadJsonLine { line: 2, .. }), "{text}");
    }
    assert!(matches!(
        fault("a.jsonl", "{\"x\": 1}\n{\"x\": \"a\"}\n"),
        Error::MixedKinds { first: ("a number", 1), other: ("text", 2), .. }
    ));
    assert!(matches!(fault("a.jsonl", "{\"x\": 1, \"x\": 2}\n"), Error::DuplicateColumns { .. }));
}

#[test]
fn damaged_binary_files_are_refused() {
    for name in ["a.parquet", "a.arrow", "a.feather"] {
        assert!(matches!(fault(name, "not what it says"), Error::Unreadable { .. }), "{name}");
        assert!(matches!(fault(name, b"PAR1"), Error::Unreadable { .. }), "{name}");
        assert!(matches!(fault(name, b"ARROW1\0\0"), Error::Unreadable { .. }), "{name}");
    }
}

fn tiles() -> DataFrame {
    df! {
        "kiln" => ["north", "north", "south", "south"],
        "tile" => ["a", "b", "c", "d"],
        "length" => [Some(40.1), None, Some(39.8), Some(40.3)],
        "fired" => [3_i32, 1, 2, 4],
        "sound" => [true, true, false, true],
        "width" => [Some(20.3), Some(20.1), Some(20.2), None],
    }
    .unwrap()
}

#[test]
fn a_matrix_has_the_numeric_columns_and_the_first_telling_labels() {
    let table = tiles().drop("length").unwrap().drop("width").unwrap();
    let x = table.data_matrix().unwrap();
    assert_eq!(x.variables(), ["fired"]);
    assert_eq!(x.labels(), ["a", "b", "c", "d"]);
    assert_eq!(x.label_source(), &LabelSource::Column("tile".to_owned()));
    let left_out: Vec<_> = x.notes().left_out.iter().map(|l| (&*l.column, &l.reason)).collect();
    assert_eq!(left_out[1], ("tile", &LeftOutReason::Labels));
    assert_eq!(left_out[0], ("kiln", &LeftOutReason::NotNumeric("str".to_owned())));
    assert_eq!(left_out[2], ("sound", &LeftOutReason::NotNumeric("bool".to_owned())));
    let x = table.data_matrix_with(MatrixOptions::new().row_numbers()).unwrap();
    assert_eq!(x.labels(), ["1", "2", "3", "4"]);
}

#[test]
fn missing_values_are_refused_or_dropped_and_told() {
    match tiles().data_matrix() {
        Err(Error::MissingValues { columns, n_rows: 4, n_complete: 2 }) => {
            let found: Vec<_> = columns.iter().map(|c| (c.column.as_str(), c.count)).collect();
            assert_eq!(found, [("length", 1), ("width", 1)]);
        }
        other => panic!("{other:?}"),
    }
    let options = MatrixOptions::new().columns(["width", "fired"]).missing(Missing::DropRows);
    let x = tiles().data_matrix_with(options).unwrap();
    assert_eq!((x.n_rows(), x.notes().n_table_rows), (3, 4));
    assert_eq!(x.values(), &dmatrix![20.3, 3.0; 20.1, 1.0; 20.2, 2.0]);
    let dropped = &x.notes().dropped_rows[0];
    assert_eq!(
        (dropped.row, &*dropped.label, &dropped.missing_in[..]),
        (4, "d", &["width".into()][..])
    );
    let none = df! { "a" => [Some(1.0), None], "b" => [None, Some(1.0)] }.unwrap();
    let options = MatrixOptions::new().missing(Missing::DropRows);
    assert!(matches!(none.data_matrix_with(options), Err(Error::NoCompleteRow { n_rows: 2, .. })));
}

#[test]
fn requests_that_cannot_be_met_are_typed_errors() {
    let of = |names: &[&str]| tiles().data_matrix_of(names.iter().copied()).unwrap_err();
    assert!(
        matches!(of(&["lenght"]), Error::UnknownColumn { nearest: Some(n), .. } if n == "length")
    );
    assert!(matches!(of(&["fired", "fired"]), Error::RepeatedRequest { name } if name == "fired"));
    assert!(matches!(of(&[]), Error::NoColumns));
    match of(&["kiln"]) {
        Error::NotNumeric { column, example, .. } => {
            assert_eq!((column.as_str(), example), ("kiln", Some(("north".to_owned(), 1))));
        }
        other => panic!("{other}"),
    }
    let labelled =
        |name: &str| tiles().data_matrix_with(MatrixOptions::new().columns(["fired"]).label(name));
    assert_eq!(labelled("tile").unwrap().labels()[3], "d");
    assert!(matches!(labelled("fired"), Err(Error::RepeatedRequest { .. })));
    assert!(matches!(labelled("width"), Err(Error::MissingLabels { row: 4, count: 1, .. })));
    assert!(matches!(labelled("kiln"), Err(Error::RepeatedLabel { rows: (1, 2), .. })));
    let text = df! { "a" => ["x", "y"] }.unwrap();
    assert!(matches!(text.data_matrix(), Err(Error::NoNumericColumns { .. })));
    let empty = df! { "a" => [None::<f64>, None], "b" => [1.0, 2.0] }.unwrap();
    assert!(matches!(empty.data_matrix_of(["a"]), Err(Error::AllMissing { .. })));
    assert_eq!(empty.data_matrix().unwrap().notes().left_out[0].reason, LeftOutReason::Empty);
    let empty = empty.drop("b").unwrap();
    assert!(matches!(empty.data_matrix(), Err(Error::AllMissing { .. })));
}

#[test]
fn columns_are_chosen_by_pattern_and_type_and_left_out() {
    let table = df! {
        "tile" => ["a", "b", "c"],
        "colour_name" => ["red", "red", "brown"],
        "colour_L" => [41.0, 44.0, 39.0],
        "colour_a" => [22.0, 20.0, 23.0],
        "cracks" => [0_i64, 1, 0],
        "length" => [40.1, 40.3, 39.8],
        "width" => [20.3, 20.1, 20.2],
    }
    .unwrap();
    let chosen =
        |options: MatrixOptions| table.data_matrix_with(options).unwrap().variables().join(" ");
    let new = MatrixOptions::new;
    assert_eq!(chosen(new().columns_like("colour_*")), "colour_L colour_a");
    assert_eq!(chosen(new().columns_like("*t*")), "length width");
    assert_eq!(
        chosen(new().columns_like("colour_?").columns(["length"])),
        "colour_L colour_a length"
    );
    // A column stands where the first choice that fits it puts it, and once.
    assert_eq!(chosen(new().columns(["width"]).columns_like("*th")), "width length");
    assert_eq!(chosen(new().columns_of_type(NumberType::Integer)), "cracks");
    assert_eq!(
        chosen(new().columns_of_type(NumberType::Float).without(["length"])),
        "colour_L colour_a width"
    );
    assert_eq!(chosen(new().without_like("colour_*").without(["cracks"])), "length width");
    let x = table.data_matrix_with(new().columns_like("*").without(["cracks", "tile"])).unwrap();
    let left_out: Vec<_> = x.notes().left_out.iter().map(|l| (&*l.column, &l.reason)).collect();
    assert_eq!(left_out[0], ("tile", &LeftOutReason::Labels));
    assert_eq!(left_out[1], ("colour_name", &LeftOutReason::NotNumeric("str".to_owned())));
    assert_eq!(left_out[2], ("cracks", &LeftOutReason::Unwanted));
    let refused = |options: MatrixOptions| table.data_matrix_with(options).unwrap_err();
    assert!(matches!(
        refused(new().columns_like("color_*")),
        Error::NoColumnLike { pattern, .. } if pattern == "color_*"
    ));
    assert!(matches!(refused(new().without_like("x*")), Error::NoColumnLike { .. }));
    assert!(matches!(refused(new().without(["lenght"])), Error::UnknownColumn { .. }));
    assert!(matches!(
        refused(new().columns(["length"]).without_like("len*")),
        Error::WantedAndUnwanted { name } if name == "length"
    ));
    assert!(matches!(refused(new().columns_like("colour_n*")), Error::NoColumns));
    assert!(matches!(refused(new().without_like("*")), Error::NoColumns));
    let whole = table.select(["tile", "cracks"]).unwrap();
    assert!(matches!(
        whole.data_matrix_with(new().columns_of_type(NumberType::Float)),
        Err(Error::NoColumnOfType { number_type: NumberType::Float, .. })
    ));
}

#[test]
fn a_weight_column_is_no_variable_and_is_checked() {
    let with = |weights: [Option<f64>; 4]| {
        tiles().with_column(polars::prelude::Column::new("pieces".into(), weights)).unwrap().clone()
    };
    let options =
        || MatrixOptions::new().columns(["width"]).weights("pieces").missing(Missing::DropRows);
    // The fourth row misses its width, so that its weight does not matter.
    let x = with([Some(1.0), Some(2.5), Some(1.0), None]).data_matrix_with(options()).unwrap();
    assert_eq!((x.weights(), x.n_rows()), (Some(&[1.0, 2.5, 1.0][..]), 3));
    assert_eq!(x.notes().weights.as_deref(), Some("pieces"));
    let refused = |weights| with(weights).data_matrix_with(options()).unwrap_err();
    assert!(matches!(
        refused([Some(1.0), None, Some(1.0), None]),
        Error::MissingWeights { row: 2, count: 1, column } if column == "pieces"
    ));
    for bad in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        match refused([Some(1.0), Some(2.0), Some(bad), None]) {
            Error::BadWeight { column: Some(column), row: 3, label, .. } => {
                assert_eq!((column.as_str(), label.as_str()), ("pieces", "c"));
            }
            other => panic!("{other}"),
        }
    }
    let options = MatrixOptions::new().weights("fired").missing(Missing::DropRows);
    let x = tiles().data_matrix_with(options).unwrap();
    assert_eq!(
        (x.variables().join(" "), x.weights()),
        ("length width".into(), Some(&[3.0, 2.0][..]))
    );
    let with_weights = |name: &str| MatrixOptions::new().columns(["fired"]).weights(name);
    let refused = |name: &str| tiles().data_matrix_with(with_weights(name)).unwrap_err();
    assert!(matches!(refused("fired"), Error::RepeatedRequest { .. }));
    assert!(matches!(refused("kiln"), Error::NotNumeric { .. }));
    assert!(matches!(refused("weight"), Error::UnknownColumn { .. }));
    let both = with_weights("width").label("width");
    assert!(tiles().data_matrix_with(both).is_err());
}

#[test]
fn columns_with_too_many_gaps_go_first_and_rows_after() {
    let table = df! {
        "a" => [Some(1.0), Some(2.0), None, Some(4.0), Some(5.0)],
        "b" => [None, None, Some(3.0), Some(4.0), Some(5.0)],
        "c" => [1.0, 2.0, 3.0, 5.0, 4.0],
    }
    .unwrap();
    let options = |share: f64| MatrixOptions::new().without_missing_above(share);
    let x = table.data_matrix_with(options(0.2).missing(Missing::DropRows)).unwrap();
    assert_eq!((x.variables().join(" "), x.n_rows()), ("a c".to_owned(), 4));
    assert_eq!(
        (x.notes().left_out[0].column.as_str(), &x.notes().left_out[0].reason),
        ("b", &LeftOutReason::Missing { n_missing: 2, n_rows: 5 })
    );
    // What is left is refused as ever.
    match table.data_matrix_with(options(0.2)) {
        Err(Error::MissingValues { columns, n_complete: 4, .. }) => assert_eq!(columns.len(), 1),
        other => panic!("{other:?}"),
    }
    assert_eq!(table.data_matrix_with(options(0.0)).unwrap().variables(), ["c"]);
    assert_eq!(table.gapped_matrix_with(options(0.4)).unwrap().n_missing(), 3);
    match table.data_matrix_with(options(0.1).columns(["a", "b"])) {
        Err(Error::NoColumnLeft { columns, n_rows: 5, .. }) => assert_eq!(columns[1].count, 2),
        other => panic!("{other:?}"),
    }
    for share in [-0.1, 1.0, f64::NAN] {
        assert!(matches!(
            table.data_matrix_with(options(share)),
            Err(Error::OptionOutOfRange { option: "without_missing_above", .. })
        ));
    }
}

#[test]
fn gaps_are_kept_for_those_who_ask() {
    let options = || MatrixOptions::new().label("tile").weights("fired");
    let x = tiles().gapped_matrix_with(options()).unwrap();
    assert_eq!((x.variables().join(" "), x.labels().len()), ("length width".to_owned(), 4));
    assert!(x.is_missing(1, 0) && x.is_missing(3, 1) && x.n_missing() == 2);
    assert_eq!((x.values()[(2, 0)], x.weights()), (39.8, Some(&[3.0, 1.0, 2.0, 4.0][..])));
    assert_eq!(x.complete_rows().unwrap().weights(), Some(&[3.0, 2.0][..]));
    let dropped = tiles().gapped_matrix_with(options().missing(Missing::DropRows)).unwrap();
    assert_eq!((dropped.n_missing(), dropped.notes().dropped_rows.len()), (0, 2));
    // Not a number is not missing, beside values that are.
    let nan = df! { "x" => [Some(1.0), None, Some(f64::NAN)], "y" => [1.0, 2.0, 3.0] }.unwrap();
    assert!(matches!(nan.gapped_matrix(), Err(Error::NonFinite { row: 3, count: 1, .. })));
    let empty = df! { "x" => [Some(1.0), None], "y" => [Some(1.0), None] }.unwrap();
    assert!(matches!(empty.gapped_matrix(), Err(Error::EmptyRows { labels }) if labels == ["2"]));
}

#[test]
fn infinities_and_slips_are_named_by_column_and_row() {
    let table = read("a.csv", "tile,x,y\na,1.5,2\nb,Inf,3\nc,-inf,4\n").unwrap();
    match table.data_matrix() {
        Err(Error::NonFinite { column, row: 2, label, value, count: 2 }) => {
            assert_eq!((column.as_str(), label.as_str(), value), ("x", "b", f64::INFINITY));
        }
        other => panic!("{other:?}"),
    }
    let nan = df! { "x" => [Some(1.0), None, Some(f64::NAN)] }.unwrap();
    let options = MatrixOptions::new().missing(Missing::DropRows);
    assert!(matches!(nan.data_matrix_with(options), Err(Error::NonFinite { row: 3, .. })));
    let table = read("a.csv", "x,y\n1.5,1\n2.5,2\n3.5o,3\n").unwrap();
    match table.data_matrix() {
        Err(Error::MixedColumn { column, n_numbers: 2, n_others: 1, example }) => {
            assert_eq!((column.as_str(), example), ("x", ("3.5o".to_owned(), 3)));
        }
        other => panic!("{other:?}"),
    }
}

#[test]
fn a_matrix_from_values_is_checked() {
    let values = || dmatrix![1.0, 2.0; 3.0, 4.0];
    let make = |values, names: [&str; 2], labels: [&str; 2]| {
        DataMatrix::from_values(values, names, labels)
    };
    let x = make(values(), ["a", "b"], ["r", "s"]).unwrap();
    assert_eq!(x.variable("b").unwrap(), [2.0, 4.0]);
    assert_eq!(x.row("s").unwrap(), [3.0, 4.0]);
    assert_eq!(x.select(["b"]).unwrap().values(), &dmatrix![2.0; 4.0]);
    assert_eq!(x.select_rows(["s", "r"]).unwrap().labels(), ["s", "r"]);
    assert_eq!(x.rows_where(|label| label == "s").unwrap().row("s").unwrap(), [3.0, 4.0]);
    assert!(matches!(x.rows_where(|_| false), Err(Error::NoRows)));
    assert!(matches!(x.select(["b", "b"]), Err(Error::RepeatedRequest { .. })));
    assert!(matches!(x.select_rows(["t"]), Err(Error::UnknownLabel { .. })));
    assert!(matches!(x.select(["c"]), Err(Error::UnknownColumn { .. })));
    assert!(matches!(make(values(), ["a", "a"], ["r", "s"]), Err(Error::DuplicateColumns { .. })));
    assert!(matches!(
        make(values(), ["a", "b"], ["r", "r"]),
        Err(Error::RepeatedLabel { rows: (1, 2), column: None, .. })
    ));
    assert!(matches!(
        DataMatrix::from_values(values(), ["a"], ["r", "s"]),
        Err(Error::ShapeMismatch { expected: 2, found: 1, .. })
    ));
    let mut holed = values();
    holed[(1, 1)] = f64::NAN;
    holed[(1, 0)] = f64::NEG_INFINITY;
    match make(holed, ["a", "b"], ["r", "s"]) {
        Err(Error::NonFinite { column, row: 2, count: 2, .. }) => assert_eq!(column, "a"),
        other => panic!("{other:?}"),
    }
    assert!(matches!(DataMatrix::from_unnamed(DMatrix::zeros(0, 2)), Err(Error::NoRows)));
    assert!(matches!(DataMatrix::from_unnamed(DMatrix::zeros(2, 0)), Err(Error::NoColumns)));
}

#[test]
fn named_matrices_answer_by_name_and_act_as_matrices() {
    let names = |names: &[&str]| names.iter().map(|n| n.to_string()).collect::<Vec<_>>();
    let values = dmatrix![1.0, 2.0; 3.0, 4.0];
    let x = NamedMatrix::new(values, names(&["a", "b"]), names(&["PC1", "PC2"])).unwrap();
    assert_eq!((x.at("b", "PC1"), x.at("b", "PC3"), x[(0, 1)]), (Some(3.0), None, 2.0));
    assert_eq!(x.first(1).unwrap().column_names(), ["PC1"]);
    assert!(matches!(x.first(3), Err(Error::ComponentOutOfRange { asked: 3, available: 2 })));
    let wrong = NamedMatrix::new(dmatrix![1.0], names(&["a", "b"]), names(&["c"]));
    assert!(matches!(wrong, Err(Error::ShapeMismatch { .. })));
}

#[test]
fn summaries_count_values_holes_and_what_is_not_finite() {
    let table = df! {
        "x" => [Some(1.0), Some(2.0), None, Some(f64::INFINITY), Some(4.0)],
        "n" => [Some("a"), Some("a"), Some("b"), None, None],
        "one" => [Some(7.0), None, None, None, None],
    }
    .unwrap();
    let summary = describe_columns(&table).unwrap();
    let x = summary.column("x").unwrap();
    let numbers = x.numbers.unwrap();
    assert_eq!((x.count, x.missing, x.n_distinct, numbers.n_not_finite), (4, 1, 4, 1));
    assert_eq!((numbers.min, numbers.median, numbers.max), (1.0, 2.0, 4.0));
    assert!(summary.column("one").unwrap().numbers.unwrap().standard_deviation.is_nan());
    let n = summary.column("n").unwrap();
    assert_eq!((n.count, n.n_distinct, n.numbers), (3, 2, None));
    let missing = missing_values(&table);
    assert_eq!((missing.n_rows(), missing.n_missing(), missing.n_complete_rows()), (5, 7, 1));
    let first = &missing.patterns()[0];
    assert_eq!((first.columns.as_slice(), first.n_rows), (&["n".into(), "one".into()][..], 2));
}

#[test]
fn the_nearest_name_is_a_likely_slip_only() {
    let known = ["length", "width", "water_uptake"];
    assert_eq!(nearest("lenght", known).as_deref(), Some("length"));
    assert_eq!(nearest("Water Uptake", known).as_deref(), Some("water_uptake"));
    assert_eq!(nearest("colour", known), None);
    assert_eq!(nearest("", known), None);
    assert_eq!(nearest(&"x".repeat(100_000), known), None);
}

#[test]
fn hostile_names_cannot_forge_a_message() {
    let name = format!("x\u{1b}[2J\nError: {}", "y".repeat(500));
    let table = df! { name.as_str() => ["a", "b"] }.unwrap();
    let message = table.data_matrix().unwrap_err().to_string();
    assert!(!message.contains('\u{1b}') && !message.contains('\n'), "{message}");
    assert!(message.len() < 500, "{message}");
}

/// A field as RFC 4180 writes it when it holds anything special.
fn quoted(cell: &str) -> String {
    format!("\"{}\"", cell.replace('"', "\"\""))
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(256))]

    #[test]
    fn text_between_quotes_comes_back_as_it_was(
        cells in prop::collection::vec(("[a-z\",;\n\t |ä]{1,8}", "[a-z\",\n]{1,4}"), 1..20),
        crlf in any::<bool>(),
    ) {
        let end = if crlf { "\r\n" } else { "\n" };
        let mut text = format!("first,{}{end}", quoted("second, \"quoted\""));
        for (a, b) in &cells {
            text += &format!("{},{}{end}", quoted(a), quoted(b));
        }
        let table = read("a.csv", text).unwrap();
        let expected = |cell: &str| (!["nan", "null"].contains(&cell)).then(|| cell.to_owned());
        for (column, name) in ["first", "second, \"quoted\""].into_iter().enumerate() {
            let read = match table.column(name).unwrap().str() {
                Ok(text) => text.iter().map(|cell| cell.map(str::to_owned)).collect(),
                Err(_) => vec![None; cells.len()],
            };
            for (read, (a, b)) in read.iter().zip(&cells) {
                prop_assert_eq!(read, &expected(if column == 0 { a } else { b }));
            }
        }
    }

    #[test]
    fn any_text_is_a_table_or_a_typed_error(
        text in "[a1.,;\"\n\r\t -]{0,60}", name in prop::sample::select(vec!["a.csv", "a.tsv"]),
    ) {
        if let Err(error) = read(name, &text) {
            prop_assert!(!matches!(error, Error::Polars { .. } | Error::Io { .. }), "{}", error);
            // Whatever the reader behind the first pass refuses, the first pass should have.
            prop_assert!(!matches!(error, Error::Unreadable { .. }), "{}", error);
        }
    }

    #[test]
    fn any_bytes_are_a_table_or_a_typed_error(
        bytes in prop::collection::vec(any::<u8>(), 0..80),
        name in prop::sample::select(vec!["a.csv", "a.jsonl", "a.parquet", "a.arrow"]),
    ) {
        if let Err(error) = read(name, &bytes) {
            prop_assert!(!matches!(error, Error::Polars { .. } | Error::Io { .. }), "{}", error);
        }
    }

    #[test]
    fn numbers_come_back_to_the_last_digit(values in prop::collection::vec(any::<f64>(), 1..30)) {
        let values: Vec<f64> = values.into_iter().filter(|value| value.is_finite()).collect();
        prop_assume!(!values.is_empty());
        let text: String = values.iter().map(|value| format!("{value:?}\n")).collect();
        let table = read("a.csv", format!("x\n{text}")).unwrap();
        let read = floats(&table, "x");
        prop_assert_eq!(read, values.into_iter().map(Some).collect::<Vec<_>>());
    }
}
