//! A transformation as a table of its columns and the numbers it was fitted with.

use super::power::ExponentEstimate;
use super::result::{Exponent, Formula, Linear, Transformation};
use crate::exhibit::{Bundle, Exhibit, NumberFormat, Table, TableColumn, counted, stored};

const PARAMETERS: NumberFormat = NumberFormat::Significant(5);
const EXPONENTS: NumberFormat = NumberFormat::Decimals(3);
const LIKELIHOODS: NumberFormat = NumberFormat::Decimals(2);

/// The columns and the numbers of the fit.
impl Exhibit for Transformation {
    fn exhibit(&self) -> Bundle {
        let caption = format!("{} of {}", self.name(), counted(self.columns().len(), "column"));
        let table = Table::new(caption).column(
            TableColumn::texts("column", self.columns().iter().map(String::as_str)).as_row_heads(),
        );
        let table = match self.formula() {
            Formula::Log => table.note("y = ln x, the natural logarithm."),
            Formula::Log10 => table.note("y = log x to base 10."),
            Formula::LogPlus { .. } => {
                table.note(format!("y = {}, the natural logarithm.", self.name()))
            }
            Formula::SquareRoot => table.note("y = √x."),
            Formula::CentredLogRatio { total, closed } => log_ratio(table, *total, *closed),
            Formula::BoxCox { exponents } => powers(table, exponents),
            Formula::Linear { kind, middles, spreads } => linear(table, *kind, middles, spreads),
        };
        table.exhibit()
    }
}

fn log_ratio(table: Table, total: f64, closed: bool) -> Table {
    table
        .note(
            "y = ln x less the mean of ln x over these columns (Aitchison 1986, section 4.6); each \
             row sums to zero, so that one component has no variance.",
        )
        .note(if closed {
            format!("Every row had the total {}, which undoing restores.", stored(total, 6))
        } else {
            "Rows had different totals, which are lost: undoing gives parts of 1.".to_owned()
        })
}

fn powers(table: Table, exponents: &[Exponent]) -> Table {
    let table = table.column(TableColumn::numbers(
        "exponent",
        exponents.iter().map(|exponent| exponent.value),
        EXPONENTS,
    ));
    let rule = "y = (x^λ − 1) / λ, or ln x for λ = 0 (Box and Cox 1964).";
    if exponents.iter().all(|exponent| exponent.estimate.is_none()) {
        return table.note(format!("{rule} The exponent was given."));
    }
    let numbers = |heading: &str, format, of: fn(&ExponentEstimate) -> Option<f64>| {
        let values = exponents.iter().map(|exponent| exponent.estimate.as_ref().and_then(of));
        TableColumn::numbers_where(heading, values.collect::<Vec<_>>(), format)
    };
    let remark = |exponent: &Exponent| match exponent.estimate {
        Some(ExponentEstimate { at_bound: true, .. }) => "at a bound of the search",
        Some(ExponentEstimate { lower, upper, .. }) => {
            let holds = |plain: f64| {
                lower.is_none_or(|lower| lower <= plain) && upper.is_none_or(|upper| plain <= upper)
            };
            match (holds(1.0), holds(0.0), holds(0.5)) {
                (true, _, _) => "no change (1) would do",
                (_, true, _) => "the logarithm (0) would do",
                (_, _, true) => "the root (0.5) would do",
                _ => "",
            }
        }
        None => "given",
    };
    table
        .column(numbers("lower 95 %", EXPONENTS, |estimate| estimate.lower))
        .column(numbers("upper 95 %", EXPONENTS, |estimate| estimate.upper))
        .column(numbers("log-likelihood", LIKELIHOODS, |estimate| Some(estimate.log_likelihood)))
        .column(numbers("at exponent 1", LIKELIHOODS, |estimate| {
            Some(estimate.log_likelihood_untransformed)
        }))
        .column(TableColumn::texts("remark", exponents.iter().map(remark)))
        .note(format!(
            "{rule} Exponents by maximum likelihood, with the interval of those whose \
             log-likelihood is within 1.92 (half of χ²₀.₉₅ with 1 degree of freedom) of the \
             largest; an empty end lies beyond the bounds of the search."
        ))
        .note(
            "The most normal that a power can make a column need not be normal: look at it before \
             a test or limit is based on it.",
        )
}

fn linear(table: Table, kind: Linear, middles: &[f64], spreads: &[f64]) -> Table {
    let (middle, spread, note) = match kind {
        Linear::Centred => ("mean", "", "y = x − mean."),
        Linear::Standardised => {
            ("mean", "deviation", "y = (x − mean) / standard deviation, with divisor n − 1.")
        }
        Linear::RobustlyStandardised => (
            "median",
            "deviation",
            "y = (x − median) / deviation; deviation: 1.4826 × the median absolute deviation from \
             the median.",
        ),
        Linear::UnitRange => ("least", "range", "y = (x − least) / range."),
    };
    let table = table.column(TableColumn::numbers(middle, middles.iter().copied(), PARAMETERS));
    let table = match kind {
        Linear::Centred => table,
        _ => table.column(TableColumn::numbers(spread, spreads.iter().copied(), PARAMETERS)),
    };
    table.note(note).note("Numbers to 5 significant digits.")
}
