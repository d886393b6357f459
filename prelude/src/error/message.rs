//! The words of the prelude's errors.
//!
//! Messages are lower case without a final period. Text that comes from outside is cut when long
//! and printed with its control characters escaped.

use std::fmt;

use super::Error;

impl fmt::Display for Error {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Error::FileMissing { path, working_dir, similar } => {
                write!(f, "there is no file {}", Name(&path.display().to_string()))?;
                if path.is_relative() {
                    let dir = working_dir.display().to_string();
                    write!(f, "; relative paths start from {}", Name(&dir))?;
                }
                if !similar.is_empty() {
                    write!(f, "; that folder has {}", Names(similar))?;
                }
                Ok(())
            }
            Error::IsFolder { path, readable } => {
                write!(f, "{} is a folder, not a file", Name(&path.display().to_string()))?;
                if readable.is_empty() {
                    write!(f, ", and no file in it can be read as a table")
                } else {
                    write!(f, "; files in it that can be read: {}", Names(readable))
                }
            }
            Error::UnknownExtension { path, accepted } => {
                let path_text = path.display().to_string();
                write!(f, "the name {} does not say what kind of file it is", Name(&path_text))?;
                write!(f, "; accepted extensions: {}", accepted.join(", "))
            }
            Error::EmptyFile { path } => {
                write!(f, "{} is empty; a header line was expected", file(path))
            }
            Error::NotText { path, line, byte } => write!(
                f,
                "{} is not text in UTF-8: line {line} holds the byte 0x{byte:02X}; \
                 save it as UTF-8 text, or name it after its real kind",
                file(path)
            ),
            Error::RaggedRows { path, line, expected, found, n_ragged, n_rows } => {
                write!(f, "{}, line {line}: {}", file(path), plural(*found, "field"))?;
                write!(f, " where the header has {expected}")?;
                if *n_ragged > 1 {
                    write!(f, "; {n_ragged} of {n_rows} rows differ from the header")?;
                }
                Ok(())
            }
            Error::WrongDelimiter { path, used, seen, n_fields } => write!(
                f,
                "{} was read with {} between fields, but its header looks like {n_fields} fields \
                 with {} between them; use `read_table_with(path, TableOptions::new().delimiter({seen:?}))`",
                file(path),
                delimiter(*used),
                delimiter(*seen)
            ),
            Error::UnclosedQuote { path, line } => {
                write!(
                    f,
                    "{}: the quoted field that opens in line {line} is never closed",
                    file(path)
                )
            }
            Error::StrayQuote { path, line } => write!(
                f,
                "{}, line {line}: a quote inside a field; put the whole field in quotes and \
                 double the quotes in it",
                file(path)
            ),
            Error::BadDelimiter { delimiter, decimal_comma } => {
                write!(f, "{delimiter:?} cannot stand between fields")?;
                if *decimal_comma && *delimiter == ',' {
                    write!(f, " when numbers are written with a comma")?;
                }
                write!(f, "; accepted: one ASCII character such as ',', ';', '|' or '\\t'")
            }
            Error::UnnamedColumn { path, position } => write!(
                f,
                "{}: column {position} has no name; name it in the header, or read it with \
                 `read_table_with(path, TableOptions::new().unnamed(\"row\"))`",
                file(path)
            ),
            Error::DuplicateColumns { columns } => {
                write!(f, "column names must differ, but ")?;
                list(f, columns, |f, c| {
                    write!(f, "{} stands there {} times", Name(&c.column), c.count)
                })
            }
            Error::BadJsonLine { path, line, reason } => {
                write!(f, "{}, line {line}: not a JSON object: {}", file(path), Plain(reason))
            }
            Error::MixedKinds { path, column, first, other } => write!(
                f,
                "{}, line {}: {} is {} here and {} in line {}",
                file(path),
                other.1,
                Name(column),
                other.0,
                first.0,
                first.1
            ),
            Error::Unreadable { path, format, reason } => write!(
                f,
                "{} cannot be read as {format}; it is damaged, cut short or of another kind: {}",
                file(path),
                Plain(reason)
            ),
            Error::Io { action, path, source } => match path {
                Some(path) => write!(f, "cannot {action} {}: {source}", file(path)),
                None => write!(f, "cannot {action}: {source}"),
            },
            Error::Polars { source } => write!(f, "{source}"),
            Error::UnknownColumn { name, nearest, available } => {
                write!(f, "there is no column {}", Name(name))?;
                match nearest {
                    Some(nearest) => write!(f, "; did you mean {}?", Name(nearest)),
                    None => write!(f, "; the columns are {}", Names(available)),
                }
            }
            Error::UnknownLabel { label, nearest } => {
                write!(f, "there is no row labelled {}", Name(label))?;
                match nearest {
                    Some(nearest) => write!(f, "; did you mean {}?", Name(nearest)),
                    None => Ok(()),
                }
            }
            Error::RepeatedRequest { name } => write!(f, "{} was asked for twice", Name(name)),
            Error::WantedAndUnwanted { name } => {
                write!(f, "{} was asked for by name and was also to be left out", Name(name))
            }
            Error::NoColumnLike { pattern, available } => write!(
                f,
                "no column has a name like {}, where * stands for any characters and ? for one; the \
                 columns are {}",
                Name(pattern),
                Names(available)
            ),
            Error::NoColumnOfType { number_type, columns } => {
                write!(f, "no column holds {number_type}: ")?;
                list(f, columns, |f, (name, dtype)| write!(f, "{} is {dtype}", Name(name)))
            }
            Error::NoColumnLeft { columns, n_rows, share } => {
                write!(f, "every column misses more than a share of {share} of {n_rows} values: ")?;
                list(f, columns, |f, c| write!(f, "{} misses {}", Name(&c.column), c.count))
            }
            Error::NoNumericColumns { columns } => {
                write!(f, "no column is numeric: ")?;
                list(f, columns, |f, (name, dtype)| write!(f, "{} is {dtype}", Name(name)))
            }
            Error::NotNumeric { column, dtype, example } => {
                write!(f, "column {} is not numeric but {dtype}", Name(column))?;
                match example {
                    Some((value, row)) => write!(f, "; row {row} holds {}", Name(value)),
                    None => Ok(()),
                }
            }
            Error::MixedColumn { column, n_numbers, n_others, example } => write!(
                f,
                "column {} holds {} and {} that are not, such as {} in row {}; mend it, name it \
                 missing with `TableOptions::new().missing([…])`, or choose columns with \
                 `.data_matrix_of([…])`",
                Name(column),
                plural(*n_numbers, "number"),
                plural(*n_others, "value"),
                Name(&example.0),
                example.1
            ),
            Error::MissingValues { columns, n_rows, n_complete } => {
                write!(f, "values are missing: ")?;
                list(f, columns, |f, c| write!(f, "{} in {}", c.count, Name(&c.column)))?;
                write!(f, "; {n_complete} of {n_rows} rows are complete")?;
                write!(f, "; leave those columns out, drop the incomplete rows with ")?;
                write!(
                    f,
                    "`.data_matrix_with(MatrixOptions::new().missing(Missing::DropRows))`, "
                )?;
                write!(
                    f,
                    "or keep the gaps for a method that estimates them with `.gapped_matrix()`"
                )
            }
            Error::AllMissing { columns } => {
                let (noun, verb) =
                    if columns.len() == 1 { ("column", "holds") } else { ("columns", "hold") };
                write!(
                    f,
                    "{noun} {} {verb} no value at all; leave out what is empty",
                    Names(columns)
                )
            }
            Error::EmptyRows { labels } => {
                let (noun, verb) =
                    if labels.len() == 1 { ("row", "holds") } else { ("rows", "hold") };
                write!(
                    f,
                    "{noun} {} {verb} no value at all; leave out what is empty",
                    Names(labels)
                )
            }
            Error::NoCompleteRow { columns, n_rows } => {
                write!(f, "none of {n_rows} rows is complete; missing values: ")?;
                list(f, columns, |f, c| write!(f, "{} in {}", c.count, Name(&c.column)))
            }
            Error::NonFinite { column, row, label, value, count } => {
                write!(f, "column {} holds {value} in row {row}", Name(column))?;
                if *label != row.to_string() {
                    write!(f, " ({})", Name(label))?;
                }
                if *count > 1 {
                    write!(f, " and has {} not finite", plural(count - 1, "more value"))?;
                }
                write!(f, "; only finite numbers are accepted")
            }
            Error::NoRows => write!(f, "there are no rows"),
            Error::NoColumns => write!(f, "there are no columns"),
            Error::MissingLabels { column, row, count } => write!(
                f,
                "the label column {} has {} missing, the first in row {row}",
                Name(column),
                plural(*count, "label")
            ),
            Error::RepeatedLabel { column, label, rows } => {
                if let Some(column) = column {
                    write!(f, "the label column {} does not tell rows apart: ", Name(column))?;
                }
                write!(f, "rows {} and {} are both labelled {}", rows.0, rows.1, Name(label))
            }
            Error::BadWeight { column, row, label, value } => {
                if let Some(column) = column {
                    write!(f, "the weight column {}: ", Name(column))?;
                }
                write!(f, "the weight of row {row}")?;
                if *label != row.to_string() {
                    write!(f, " ({})", Name(label))?;
                }
                write!(
                    f,
                    " is {value}; accepted: positive finite numbers; leave a row that must "
                )?;
                write!(f, "not count out with `.rows_where(…)`")
            }
            Error::MissingWeights { column, row, count } => write!(
                f,
                "the weight column {} has {} missing, the first in row {row}",
                Name(column),
                plural(*count, "weight")
            ),
            Error::ShapeMismatch { what, expected, found } => {
                write!(f, "{what}: {expected} needed, {found} given")
            }
            Error::OutsideDomain { action, column, row, label, value, accepted } => {
                write!(f, "{action}: column {} holds {value} in row {row}", Name(column))?;
                if *label != row.to_string() {
                    write!(f, " ({})", Name(label))?;
                }
                write!(f, "; accepted: {accepted}")
            }
            Error::NoSpread { columns, measure } => {
                write!(f, "columns without a {measure} to divide by: ")?;
                list(f, columns, |f, (name, middle)| write!(f, "{}, about {middle}", Name(name)))?;
                write!(f, "; leave them out, or transform the others by name with `.of([…])`")
            }
            Error::TransformationsDiffer { wanted, found } => {
                let chain = |f: &mut fmt::Formatter<'_>, chain: &[String]| match chain {
                    [] => write!(f, "none"),
                    chain => list(f, chain, |f, step| write!(f, "{}", Plain(step))),
                };
                write!(f, "the transformations differ; expected: ")?;
                chain(f, wanted)?;
                write!(f, "; found: ")?;
                chain(f, found)?;
                if wanted == found {
                    write!(f, ", fitted to other rows")?;
                }
                write!(
                    f,
                    "; bring rows as they were measured, and repeat the transformations with "
                )?;
                write!(f, "`.transformed_as(…)`, or for scores with `.project_raw(…)`")
            }
            Error::SavedForm { part, found, accepted } => {
                write!(f, "cannot read back what was saved: {} is ", Plain(part))?;
                write!(f, "{}; accepted: {}", Plain(found), Plain(accepted))
            }
            Error::SavedVersion { format, found, known } => write!(
                f,
                "what was saved has version {found} of \"{format}\"; this library knows version {known}"
            ),
            Error::NotSaved { what, remedy } => {
                write!(f, "the analysis was saved without its {what}; {remedy}")
            }
            Error::TooFewRows { method, needed, found } => {
                write!(
                    f,
                    "{method} needs at least {}, there {}",
                    plural(*needed, "row"),
                    are(*found)
                )
            }
            Error::TooFewColumns { method, needed, found } => {
                write!(
                    f,
                    "{method} needs at least {}, there {}",
                    plural(*needed, "column"),
                    are(*found)
                )
            }
            Error::ConstantColumns { columns } => {
                write!(f, "a column that does not vary has no correlation: ")?;
                list(f, columns, |f, (name, value)| {
                    write!(f, "{} is {value} in every row", Name(name))
                })?;
                write!(f, "; leave it out or use the covariance")
            }
            Error::NoVariation { n_rows } => {
                write!(f, "no column varies over the {n_rows} rows")
            }
            Error::Magnitude { column, value, least, most } => write!(
                f,
                "column {} deviates from its mean by up to {value:e}; \
                 squares stay exact only between {least:e} and {most:e}, so change its unit",
                Name(column)
            ),
            Error::WeightsNotCovered { method } => write!(
                f,
                "{method} is not defined for rows of unequal weight; \
                 take the weights off with `without_weights()`"
            ),
            Error::SingularScatter { method, rank, order } => write!(
                f,
                "{method} needs a scatter matrix of full rank; this one has rank {rank} and order \
                 {order}, so some variables can be computed from others: leave {} out",
                order - rank
            ),
            Error::ExactFit { method, n_on, n_rows, coefficients, constant, off } => {
                write!(f, "{method}: {n_on} of {n_rows} rows satisfy one equation exactly: ")?;
                list(f, coefficients, |f, (name, coefficient)| {
                    write!(f, "{coefficient:.6} × {}", Name(name))
                })?;
                write!(f, " sum to {constant:.6}")?;
                if !off.is_empty() {
                    write!(f, "; rows that do not: {}", Names(off))?;
                }
                write!(f, "; leave one of these variables out, or take a larger subset")
            }
            Error::NoRobustSpread { columns } => {
                write!(f, "half or more of the values of a column are equal: ")?;
                list(f, columns, |f, (name, value)| write!(f, "{} is often {value}", Name(name)))?;
                write!(f, "; leave it out or use the covariance")
            }
            Error::DegenerateResamples { usable, drawn, columns } => {
                write!(f, "only {usable} of {drawn} resamples could be analysed")?;
                if !columns.is_empty() {
                    write!(f, "; columns that did not vary in the others: ")?;
                    list(f, columns, |f, at| {
                        write!(f, "{} ({} times)", Name(&at.column), at.count)
                    })?;
                    write!(f, "; leave them out, or analyse covariances")?;
                }
                Ok(())
            }
            Error::ComponentOutOfRange { asked, available } => {
                write!(f, "{asked} components were asked for; accepted: 1 to {available}")
            }
            Error::ConstantObserved { columns } => {
                write!(f, "nothing can be estimated in a column that shows one value only: ")?;
                list(f, columns, |f, (name, value, count)| {
                    write!(f, "{} is {value} in {}", Name(name), plural(*count, "cell"))
                })?;
                write!(f, "; leave it out")
            }
            Error::TooFewObserved { n_components, found, needed } => write!(
                f,
                "{} need at least {} with a value, there {}; ask for fewer",
                plural(*n_components, "component"),
                plural(*needed, "cell"),
                are(*found)
            ),
            Error::NoNoise { n_components } => write!(
                f,
                "{} describe the observed cells exactly, so that no noise is left to estimate; \
                 ask for fewer",
                plural(*n_components, "component")
            ),
            Error::ScoresUndetermined { row, label, n_observed, n_components } => {
                write!(f, "row {row}")?;
                if *label != row.to_string() {
                    write!(f, " ({})", Name(label))?;
                }
                write!(
                    f,
                    " shows {}, too little to tell {} without shrinkage; ask for fewer, or for a \
                     method that shrinks",
                    plural(*n_observed, "value"),
                    plural(*n_components, "score")
                )
            }
            Error::VariablesDiffer { missing, extra, order } => {
                write!(f, "the variables are not those of the analysis")?;
                if !missing.is_empty() {
                    write!(f, "; missing: {}", Names(missing))?;
                }
                if !extra.is_empty() {
                    write!(f, "; unknown to it: {}", Names(extra))?;
                }
                if let Some((place, wanted, found)) = order {
                    write!(f, "; place {place} holds {} instead of {}", Name(found), Name(wanted))?;
                }
                if missing.is_empty() {
                    write!(f, "; bring them into its order with `x.select(pca.variables())?`")?;
                }
                Ok(())
            }
            Error::RowsDiffer { missing, extra } => {
                write!(f, "the rows are not those of the analysis")?;
                if !missing.is_empty() {
                    write!(f, "; missing: {}", Names(missing))?;
                }
                if !extra.is_empty() {
                    write!(f, "; unknown to it: {}", Names(extra))?;
                }
                if missing.is_empty() {
                    write!(f, "; bring them into its order with `x.select_rows(pca.labels())?`")?;
                }
                Ok(())
            }
            Error::OptionOutOfRange { option, value, accepted } => {
                write!(f, "the option `{option}` is {value}; accepted: {accepted}")
            }
            Error::OptionNeeded { option, needed_by } => {
                write!(f, "{needed_by} needs the option `{option}`")
            }
            Error::Interrupted => write!(f, "the computation was asked to stop"),
            Error::SettingNotForChart { setting, chart, available } => {
                write!(f, "a {chart} has no {setting}; it has {}", available.join(", "))
            }
            Error::ZeroRows { rows } => write!(
                f,
                "rows of zeros cannot be brought to unit length: {}; leave them out, or do without \
                 Kaiser normalisation",
                Names(rows)
            ),
            Error::DependentColumns { what, rank, n_cols } => write!(
                f,
                "{what} have {} but rank {rank}: some columns can be computed from others, so \
                 ask for fewer components",
                plural(*n_cols, "column")
            ),
            Error::ZeroColumns { what, columns } => {
                write!(f, "columns of zeros in {what} have no direction: {}", Names(columns))
            }
            Error::RotationCollapsed { rotation, n_starts } => write!(
                f,
                "{rotation}: two components fell together from {}; use a smaller γ, 0 being usual",
                plural(*n_starts, "start")
            ),
            Error::RowNamesDiffer { missing, extra, order } => {
                write!(f, "the rows of the two matrices are not the same")?;
                if !missing.is_empty() {
                    write!(f, "; only in the first: {}", Names(missing))?;
                }
                if !extra.is_empty() {
                    write!(f, "; only in the second: {}", Names(extra))?;
                }
                if let Some((place, first, second)) = order {
                    write!(
                        f,
                        "; place {place} holds {} in the first and {} in the second",
                        Name(first),
                        Name(second)
                    )?;
                }
                Ok(())
            }
            Error::NoConvergence { method } => {
                write!(f, "{method} did not converge; please report this with the data")
            }
        }
    }
}

/// How many names or entries a message lists before it says "and n more".
const LISTED: usize = 12;

/// How many characters of one name a message shows.
const SHOWN: usize = 80;

/// A name that comes from data, made safe to print.
struct Name<'a>(&'a str);

impl fmt::Display for Name<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "`{}`", Plain(self.0))
    }
}

/// Text that comes from outside, cut and with control characters escaped.
struct Plain<'a>(&'a str);

impl fmt::Display for Plain<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let limit = SHOWN.max(if self.0.contains(' ') { 300 } else { 0 });
        for (place, c) in self.0.chars().enumerate() {
            if place == limit {
                return f.write_str("…");
            }
            if c.is_control() { write!(f, "{}", c.escape_debug())? } else { write!(f, "{c}")? }
        }
        Ok(())
    }
}

struct Names<'a>(&'a [String]);

impl fmt::Display for Names<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        list(f, self.0, |f, name| write!(f, "{}", Name(name)))
    }
}

fn list<T>(
    f: &mut fmt::Formatter<'_>,
    items: &[T],
    one: impl Fn(&mut fmt::Formatter<'_>, &T) -> fmt::Result,
) -> fmt::Result {
    for (place, item) in items.iter().take(LISTED).enumerate() {
        if place > 0 {
            f.write_str(", ")?;
        }
        one(f, item)?;
    }
    if items.len() > LISTED {
        write!(f, " and {} more", items.len() - LISTED)?;
    }
    Ok(())
}

fn file(path: &std::path::Path) -> String {
    format!("{}", Name(&path.display().to_string()))
}

fn plural(count: usize, noun: &str) -> String {
    if count == 1 { format!("1 {noun}") } else { format!("{count} {noun}s") }
}

fn are(count: usize) -> String {
    if count == 1 { "is 1".to_owned() } else { format!("are {count}") }
}

fn delimiter(c: char) -> String {
    match c {
        '\t' => "a tab".to_owned(),
        ',' => "a comma".to_owned(),
        ';' => "a semicolon".to_owned(),
        '|' => "a bar".to_owned(),
        ' ' => "a space".to_owned(),
        other => format!("{other:?}"),
    }
}
