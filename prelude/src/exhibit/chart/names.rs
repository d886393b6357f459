//! What can name the groups or the labels of a chart: lists of strings, columns of a table.

use polars::prelude::{AnyValue, Column, Series};

/// Names for the units of a chart, one each; `None` where a column has no value.
///
/// Implemented for vectors, arrays and slices of strings, and for columns of a table, whatever
/// their type. Anything else that yields strings can be collected into a vector first.
pub trait Names {
    /// The names, in order.
    fn into_names(self) -> Vec<Option<String>>;
}

impl<S: AsRef<str>> Names for Vec<S> {
    fn into_names(self) -> Vec<Option<String>> {
        self.as_slice().into_names()
    }
}

impl<S: AsRef<str>> Names for &Vec<S> {
    fn into_names(self) -> Vec<Option<String>> {
        self.as_slice().into_names()
    }
}

impl<S: AsRef<str>> Names for &[S] {
    fn into_names(self) -> Vec<Option<String>> {
        self.iter().map(|name| Some(name.as_ref().to_owned())).collect()
    }
}

impl<S: AsRef<str>, const N: usize> Names for [S; N] {
    fn into_names(self) -> Vec<Option<String>> {
        self.as_slice().into_names()
    }
}

impl<S: AsRef<str>, const N: usize> Names for &[S; N] {
    fn into_names(self) -> Vec<Option<String>> {
        self.as_slice().into_names()
    }
}

impl Names for &Series {
    fn into_names(self) -> Vec<Option<String>> {
        self.iter()
            .map(|value| match value {
                AnyValue::Null => None,
                value => Some(value.str_value().into_owned()),
            })
            .collect()
    }
}

impl Names for Series {
    fn into_names(self) -> Vec<Option<String>> {
        (&self).into_names()
    }
}

impl Names for &Column {
    fn into_names(self) -> Vec<Option<String>> {
        self.as_materialized_series().into_names()
    }
}

impl Names for Column {
    fn into_names(self) -> Vec<Option<String>> {
        (&self).into_names()
    }
}
