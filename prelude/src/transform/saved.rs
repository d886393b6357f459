//! Transformations as JSON.
//!
//! ```text
//! { "transformation": "box-cox", "columns": ["uptake"],
//!   "exponents": [ { "value": "0.25", "estimate": null } ] }
//! ```
//!
//! The tag says which transformation it is; every field is needed, and a tag or field that is not
//! known is refused. Numbers are text in the shortest form that reads back as the same double:
//! readers of JSON may round the last digit of a number, and rows that are compared by what they
//! went through would then differ.

use serde_json::{Map, Value, json};

use super::power::ExponentEstimate;
use super::result::{Exponent, Formula, Linear, Transformation};
use crate::error::{Error, Result};

const TAGS: &str = "log, log10, log-plus, square-root, centred-log-ratio, box-cox, centred, \
                    standardised, robustly-standardised, unit-range";

impl Transformation {
    /// The transformation as JSON that [`from_json`](Transformation::from_json) reads back without
    /// loss.
    ///
    /// ```
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    /// use semiaxis::transform::{Transform, Transformation};
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0; 4.0; 9.0])?;
    /// let fitted = Transform::standardise().fit(&x)?;
    /// assert_eq!(Transformation::from_json(&fitted.to_json())?, fitted);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    pub fn to_json(&self) -> Value {
        let (tag, rest) = match &self.formula {
            Formula::Log => ("log", json!({})),
            Formula::Log10 => ("log10", json!({})),
            Formula::LogPlus { constant } => ("log-plus", json!({ "constant": number(*constant) })),
            Formula::SquareRoot => ("square-root", json!({})),
            Formula::CentredLogRatio { total, closed } => {
                ("centred-log-ratio", json!({ "total": number(*total), "closed": closed }))
            }
            Formula::BoxCox { exponents } => {
                let exponents: Vec<Value> = exponents.iter().map(exponent).collect();
                ("box-cox", json!({ "exponents": exponents }))
            }
            Formula::Linear { kind, middles, spreads } => {
                (linear_tag(*kind), json!({ "middles": list(middles), "spreads": list(spreads) }))
            }
        };
        let mut saved = json!({ "transformation": tag, "columns": &*self.columns });
        if let (Some(saved), Value::Object(rest)) = (saved.as_object_mut(), rest) {
            saved.extend(rest);
        }
        saved
    }

    /// The transformation that was saved.
    ///
    /// # Errors
    ///
    /// [`Error::SavedForm`] names the part that is missing, unknown, or not what it should be.
    pub fn from_json(saved: &Value) -> Result<Self> {
        let fields = Fields::of(saved, "a transformation")?;
        let tag = fields.text("transformation")?;
        let columns = fields.texts("columns")?;
        if columns.is_empty() {
            return Err(fault("`columns`", "empty", "at least one name"));
        }
        crate::table::check_names(&columns)?;
        let n = columns.len();
        let (formula, known): (Formula, &[&str]) = match tag {
            "log" => (Formula::Log, &[]),
            "log10" => (Formula::Log10, &[]),
            "log-plus" => {
                (Formula::LogPlus { constant: fields.number("constant")? }, &["constant"])
            }
            "square-root" => (Formula::SquareRoot, &[]),
            "centred-log-ratio" => {
                let (total, closed) = (fields.number("total")?, fields.truth("closed")?);
                (Formula::CentredLogRatio { total, closed }, &["total", "closed"])
            }
            "box-cox" => {
                let read = |saved: &Value| read_exponent(saved);
                let exponents = fields.counted("exponents", n)?.iter().map(read);
                (Formula::BoxCox { exponents: exponents.collect::<Result<_>>()? }, &["exponents"])
            }
            tag => {
                let kind = linear_kind(tag)
                    .ok_or_else(|| fault("`transformation`", &format!("`{tag}`"), TAGS))?;
                let (middles, spreads) =
                    (fields.numbers("middles", n)?, fields.numbers("spreads", n)?);
                if !spreads.iter().all(|spread| *spread > 0.0) {
                    return Err(fault("`spreads`", "not all above 0", "numbers above 0"));
                }
                (Formula::Linear { kind, middles, spreads }, &["middles", "spreads"])
            }
        };
        fields.refuse_others(&[&["transformation", "columns"], known].concat())?;
        Ok(Transformation { columns: columns.into(), formula })
    }
}

fn linear_tag(kind: Linear) -> &'static str {
    match kind {
        Linear::Centred => "centred",
        Linear::Standardised => "standardised",
        Linear::RobustlyStandardised => "robustly-standardised",
        Linear::UnitRange => "unit-range",
    }
}

fn linear_kind(tag: &str) -> Option<Linear> {
    let kinds =
        [Linear::Centred, Linear::Standardised, Linear::RobustlyStandardised, Linear::UnitRange];
    kinds.into_iter().find(|kind| linear_tag(*kind) == tag)
}

fn exponent(exponent: &Exponent) -> Value {
    let estimate = exponent.estimate.map(|estimate| {
        json!({
            "log_likelihood": number(estimate.log_likelihood),
            "log_likelihood_untransformed": number(estimate.log_likelihood_untransformed),
            "lower": estimate.lower.map(number),
            "upper": estimate.upper.map(number),
            "at_bound": estimate.at_bound,
        })
    });
    json!({ "value": number(exponent.value), "estimate": estimate })
}

fn read_exponent(saved: &Value) -> Result<Exponent> {
    let fields = Fields::of(saved, "an exponent")?;
    fields.refuse_others(&["value", "estimate"])?;
    let estimate = match fields.field("estimate")? {
        Value::Null => None,
        estimate => Some(read_estimate(estimate)?),
    };
    Ok(Exponent { value: fields.number("value")?, estimate })
}

fn read_estimate(saved: &Value) -> Result<ExponentEstimate> {
    let fields = Fields::of(saved, "an estimate")?;
    fields.refuse_others(&[
        "log_likelihood",
        "log_likelihood_untransformed",
        "lower",
        "upper",
        "at_bound",
    ])?;
    Ok(ExponentEstimate {
        log_likelihood: fields.number("log_likelihood")?,
        log_likelihood_untransformed: fields.number("log_likelihood_untransformed")?,
        lower: fields.number_or_null("lower")?,
        upper: fields.number_or_null("upper")?,
        at_bound: fields.truth("at_bound")?,
    })
}

fn number(value: f64) -> Value {
    Value::String(format!("{value:?}"))
}

fn list(values: &[f64]) -> Vec<Value> {
    values.iter().copied().map(number).collect()
}

fn fault(part: &str, found: &str, accepted: &str) -> Error {
    let (part, found, accepted) = (part.to_owned(), found.to_owned(), accepted.to_owned());
    Error::SavedForm { part, found, accepted }
}

/// What a JSON value is, for messages.
fn kind(value: &Value) -> &'static str {
    match value {
        Value::Null => "nothing",
        Value::Bool(_) => "true or false",
        Value::Number(_) => "a number",
        Value::String(_) => "a text",
        Value::Array(_) => "a list",
        Value::Object(_) => "an object",
    }
}

/// The fields of a JSON object, each asked for with what it should be.
struct Fields<'a>(&'a Map<String, Value>);

impl<'a> Fields<'a> {
    fn of(saved: &'a Value, what: &str) -> Result<Self> {
        saved.as_object().map(Fields).ok_or_else(|| fault(what, kind(saved), "an object"))
    }

    fn field(&self, name: &str) -> Result<&'a Value> {
        self.0.get(name).ok_or_else(|| fault(&format!("`{name}`"), "missing", "a value"))
    }

    fn read<T>(
        &self,
        name: &str,
        accepted: &str,
        read: impl Fn(&'a Value) -> Option<T>,
    ) -> Result<T> {
        let value = self.field(name)?;
        read(value).ok_or_else(|| fault(&format!("`{name}`"), kind(value), accepted))
    }

    fn text(&self, name: &str) -> Result<&'a str> {
        self.read(name, "a text", Value::as_str)
    }

    fn truth(&self, name: &str) -> Result<bool> {
        self.read(name, "true or false", Value::as_bool)
    }

    fn texts(&self, name: &str) -> Result<Vec<String>> {
        let texts = |value: &Value| -> Option<Vec<String>> {
            value.as_array()?.iter().map(|text| text.as_str().map(str::to_owned)).collect()
        };
        self.read(name, "a list of texts", texts)
    }

    fn number(&self, name: &str) -> Result<f64> {
        self.read(name, "a finite number", finite)
    }

    fn number_or_null(&self, name: &str) -> Result<Option<f64>> {
        let read = |value: &Value| match value {
            Value::Null => Some(None),
            value => finite(value).map(Some),
        };
        self.read(name, "a finite number or nothing", read)
    }

    fn counted(&self, name: &str, count: usize) -> Result<&'a [Value]> {
        let accepted = format!("a list of {count}, one for each column");
        let list = |value: &'a Value| Some(value.as_array()?.as_slice());
        let list = self.read(name, &accepted, list)?;
        if list.len() == count {
            Ok(list)
        } else {
            Err(fault(&format!("`{name}`"), &format!("a list of {}", list.len()), &accepted))
        }
    }

    fn numbers(&self, name: &str, count: usize) -> Result<Vec<f64>> {
        let numbers: Option<Vec<f64>> = self.counted(name, count)?.iter().map(finite).collect();
        numbers.ok_or_else(|| fault(&format!("`{name}`"), "something else", "finite numbers"))
    }

    fn refuse_others(&self, known: &[&str]) -> Result<()> {
        match self.0.keys().find(|name| !known.contains(&name.as_str())) {
            None => Ok(()),
            Some(name) => Err(fault(&format!("`{name}`"), "not known", &known.join(", "))),
        }
    }
}

/// A number written as text, as it is saved, or as a number.
fn finite(value: &Value) -> Option<f64> {
    let number = match value {
        Value::String(text) => text.parse().ok()?,
        value => value.as_f64()?,
    };
    number.is_finite().then_some(number)
}
