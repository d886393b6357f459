//! What every kind of chart is to the builder around it.

use std::fmt::Debug;

use serde_json::{Value, json};

use super::settings::{Setting, Settings};
use crate::error::Result;

/// A finished drawing, what it says in words, and the numbers that it draws.
pub(super) struct Drawing {
    pub svg: String,
    pub words: String,
    pub numbers: Value,
}

/// One kind of chart, with all that it draws: it can be drawn when the analysis is gone.
pub(super) trait Picture: Debug + Send + Sync {
    /// The kind in words, as an error message says it: "score plot".
    fn kind(&self) -> &'static str;

    /// The settings that this kind has besides title and size.
    fn takes(&self) -> &'static [Setting];

    /// Whether the settings fit what is drawn; that the kind has them is known.
    fn check(&self, settings: &Settings) -> Result<()>;

    /// Draws with settings that were checked.
    fn draw(&self, settings: &Settings) -> Result<Drawing>;
}

/// Numbers as they are handed on: twelve significant digits, more than a chart can show and fewer
/// than depend on the order of summation. What is not finite has no number in JSON.
pub(super) fn numbers(values: impl IntoIterator<Item = f64>) -> Value {
    values.into_iter().map(number).collect()
}

/// One number as it is handed on.
pub(super) fn number(value: f64) -> Value {
    let rounded = if value.is_finite() { format!("{value:.11e}").parse().ok() } else { None };
    match rounded {
        Some(0.0) => json!(0.0),
        Some::<f64>(rounded) => json!(rounded),
        None => Value::Null,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_keep_twelve_digits() {
        let value = numbers([1.0 / 3.0, -0.0, f64::NAN, 1.5e300, 0.1 + 0.2]);
        assert_eq!(value, json!([0.333333333333, 0.0, null, 1.5e300, 0.3]));
    }
}
