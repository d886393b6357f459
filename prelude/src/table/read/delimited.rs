//! Delimited text: csv and tsv.

use std::io::Cursor;
use std::path::Path;
use std::sync::Arc;

use polars::prelude::{
    Column, DataFrame, DataType, IntoColumn, NamedFrom, PlSmallStr, Series, StringChunked,
};
use polars_io::SerReader;
use polars_io::prelude::{CsvParseOptions, CsvReadOptions, NullValues};

use super::options::TableOptions;
use super::scan::{Scan, check_text, scan};
use crate::error::{Error, Result};
use crate::table::matrix::check_names;

/// What a missing value is written as, beside nothing at all.
const MISSING: &[&str] = &["NA", "N/A", "n/a", "NaN", "nan", "NULL", "null"];

/// Rows from which types are guessed first; a wrong guess costs a second reading, not a value.
const FIRST_GUESS: usize = 1000;

pub(super) fn read(
    path: &Path,
    bytes: Vec<u8>,
    implied: char,
    options: &TableOptions,
) -> Result<DataFrame> {
    let delimiter = checked_delimiter(options.delimiter.unwrap_or(implied), options.decimal_comma)?;
    let start = check_text(path, &bytes)?;
    let text = &bytes[start..];
    let Scan { mut header, body, n_rows, line_end } = scan(path, text, delimiter)?;
    name_columns(path, &mut header, options)?;
    if n_rows == 0 {
        let empty = |name: &String| Column::new_empty(name.as_str().into(), &DataType::String);
        return Ok(DataFrame::new(0, header.iter().map(empty).collect())?);
    }
    let parse = CsvParseOptions::default()
        .with_separator(delimiter)
        .with_eol_char(line_end)
        .with_decimal_comma(options.decimal_comma)
        .with_null_values(Some(NullValues::AllColumns(missing_words(options))));
    // The header is checked and kept here, so the reader sees rows alone and cannot rename
    // anything. Owned memory may be read by many threads.
    let body: Arc<[u8]> = text[body].into();
    let read = |guess_from: Option<usize>| {
        CsvReadOptions::default()
            .with_has_header(false)
            .with_infer_schema_length(guess_from)
            .with_rechunk(true)
            .with_parse_options(parse.clone())
            .into_reader_with_file_handle(Cursor::new(body.clone()))
            .finish()
    };
    let unreadable = |reason: String| Error::Unreadable {
        path: path.to_owned(),
        format: "delimited text",
        reason,
    };
    let mut table = match read(Some(FIRST_GUESS)) {
        Ok(table) => table,
        Err(_) if n_rows > FIRST_GUESS => read(None).map_err(|e| unreadable(e.to_string()))?,
        Err(error) => return Err(unreadable(error.to_string())),
    };
    if table.shape() != (n_rows, header.len()) {
        let (rows, columns) = table.shape();
        let wanted = header.len();
        let reason = format!("{rows} rows of {columns} where {n_rows} rows of {wanted} stand");
        return Err(unreadable(reason));
    }
    table.set_column_names(&header)?;
    let refined = table.columns().iter().map(|column| refine(column, options.decimal_comma));
    Ok(DataFrame::new(n_rows, refined.collect())?)
}

fn checked_delimiter(delimiter: char, decimal_comma: bool) -> Result<u8> {
    let usable = matches!(delimiter, '\t' | ' '..='~')
        && !delimiter.is_ascii_alphanumeric()
        && !matches!(delimiter, '"' | '.' | '-' | '+')
        && (!decimal_comma || delimiter != ',');
    if usable { Ok(delimiter as u8) } else { Err(Error::BadDelimiter { delimiter, decimal_comma }) }
}

fn name_columns(path: &Path, header: &mut [String], options: &TableOptions) -> Result<()> {
    let mut name = options.unnamed.as_ref();
    for (place, column) in header.iter_mut().enumerate() {
        if column.trim().is_empty() {
            match name.take() {
                Some(name) => column.clone_from(name),
                None => {
                    let position = place + 1;
                    return Err(Error::UnnamedColumn { path: path.to_owned(), position });
                }
            }
        }
    }
    check_names(header)
}

/// The words for a missing value; the reader compares them with a field without its quotes.
fn missing_words(options: &TableOptions) -> Vec<PlSmallStr> {
    let words = MISSING.iter().copied().chain(options.missing.iter().map(String::as_str));
    words.map(PlSmallStr::from).collect()
}

/// Turns text that is numbers or dates throughout into what it is.
///
/// The reader knows numbers only without spaces around them and one way to write infinity, and
/// guesses from the first rows, where a column may still be empty.
fn refine(column: &Column, decimal_comma: bool) -> Column {
    let Ok(text) = column.str() else { return column.clone() };
    // Nothing between quotes is nothing too, but reaches this place as empty text.
    let text: StringChunked =
        text.iter().map(|cell| cell.filter(|cell| !cell.is_empty())).collect();
    let column = &text.clone().with_name(column.name().clone()).into_column();
    if text.null_count() == text.len() {
        return column.clone();
    }
    if let Some(numbers) = all_numbers(&text, decimal_comma) {
        return Series::new(column.name().clone(), numbers).into_column();
    }
    if let Some(days) = all_dates(&text)
        && let Ok(dates) = Series::new(column.name().clone(), days).cast(&DataType::Date)
    {
        return dates.into_column();
    }
    column.clone()
}

/// Days since 1970-01-01, which is how the library keeps dates; its own way from text to dates is
/// going away, and says so on the standard error of whoever reads a table.
fn all_dates(text: &StringChunked) -> Option<Vec<Option<i32>>> {
    let days = |cell: &str| {
        let date = is_iso_date(cell).then(|| cell.parse::<chrono::NaiveDate>().ok())??;
        i32::try_from((date - chrono::NaiveDate::default()).num_days()).ok()
    };
    text.iter().map(|cell| cell.map_or(Some(None), |cell| days(cell).map(Some))).collect()
}

fn all_numbers(text: &StringChunked, decimal_comma: bool) -> Option<Vec<Option<f64>>> {
    let number = |cell: &str| {
        let cell = cell.trim();
        // `NaN` is a missing value and has been taken out; anything else that the standard
        // parser would take for one (`+nan`) is not a number that somebody wrote.
        let parsed: f64 = if decimal_comma {
            (!cell.contains('.')).then(|| cell.replace(',', ".").parse().ok())??
        } else {
            cell.parse().ok()?
        };
        (!parsed.is_nan()).then_some(parsed)
    };
    text.iter().map(|cell| cell.map_or(Some(None), |cell| number(cell).map(Some))).collect()
}

fn is_iso_date(cell: &str) -> bool {
    let bytes = cell.as_bytes();
    bytes.len() == 10
        && bytes.iter().enumerate().all(|(place, byte)| match place {
            4 | 7 => *byte == b'-',
            _ => byte.is_ascii_digit(),
        })
}
