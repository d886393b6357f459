//! The fields of a JSON object, each asked for with what it should be.
//!
//! Numbers are taken from the text itself: a JSON reader may be off by a unit in the last digit.

use std::collections::HashSet;
use std::fmt;

use serde::de::{Deserialize, Deserializer, MapAccess, Visitor};
use serde_json::value::RawValue;

use crate::error::{Error, Result};

/// The fields of one object, all of them known and none of them missing.
pub(super) struct Fields<'a> {
    // How the object is called in messages, such as "`scores`: "; empty for the whole.
    within: &'static str,
    entries: Vec<(String, &'a RawValue)>,
}

impl<'a> Fields<'a> {
    /// The fields of an object as they stand there.
    pub(super) fn of(text: &'a str, within: &'static str) -> Result<Self> {
        let Entries(entries) =
            serde_json::from_str(text).map_err(|error| not_an_object(&error, text, within))?;
        let mut seen = HashSet::new();
        let fields = Fields { within, entries };
        match fields.entries.iter().find(|(name, _)| !seen.insert(name.as_str())) {
            Some((name, _)) => Err(fields.fault(name, "there twice", "one of each field")),
            None => Ok(fields),
        }
    }

    /// Refuses fields beside these, and the lack of one of them.
    pub(super) fn check_names(&self, known: &[&str]) -> Result<()> {
        for name in known {
            self.raw(name)?;
        }
        match self.entries.iter().find(|(name, _)| !known.contains(&name.as_str())) {
            Some((name, _)) => Err(self.fault(name, "not known", &known.join(", "))),
            None => Ok(()),
        }
    }

    /// The error that names a field.
    pub(super) fn fault(&self, name: &str, found: &str, accepted: &str) -> Error {
        fault(&format!("{}`{name}`", self.within), found, accepted)
    }

    pub(super) fn raw(&self, name: &str) -> Result<&'a str> {
        let entry = self.entries.iter().find(|(known, _)| known == name);
        let (_, raw) = entry.ok_or_else(|| self.fault(name, "missing", "a value"))?;
        Ok(raw.get())
    }

    pub(super) fn is_null(&self, name: &str) -> Result<bool> {
        Ok(self.raw(name)? == "null")
    }

    pub(super) fn text(&self, name: &str) -> Result<String> {
        self.read(name, "a text")
    }

    pub(super) fn list<T: Deserialize<'a>>(&self, name: &str) -> Result<Vec<T>> {
        self.read(name, "a list")
    }

    pub(super) fn texts(&self, name: &str) -> Result<Vec<String>> {
        self.read(name, "a list of texts")
    }

    pub(super) fn truth(&self, name: &str) -> Result<bool> {
        self.read(name, "true or false")
    }

    pub(super) fn integer(&self, name: &str) -> Result<u64> {
        self.read(name, "a whole number not below 0")
    }

    pub(super) fn count(&self, name: &str) -> Result<usize> {
        self.read(name, "a count")
    }

    pub(super) fn number(&self, name: &str) -> Result<f64> {
        let raw = self.raw(name)?;
        finite(raw).ok_or_else(|| self.fault(name, &shown(raw), "a finite number"))
    }

    /// As many numbers as stated.
    pub(super) fn numbers(&self, name: &str, count: usize) -> Result<Vec<f64>> {
        let numbers = self.number_list(name)?;
        self.check_length(name, numbers.len(), count)?;
        Ok(numbers)
    }

    /// Numbers, however many.
    pub(super) fn number_list(&self, name: &str) -> Result<Vec<f64>> {
        let list: Vec<&RawValue> = self.read(name, "a list of numbers")?;
        self.all_numbers(name, &list)
    }

    /// Columns of the same length, one after the other.
    pub(super) fn columns(&self, name: &str, n_rows: usize, n_cols: usize) -> Result<Vec<f64>> {
        let lists: Vec<Vec<&RawValue>> = self.read(name, "a list of lists of numbers")?;
        self.check_length(name, lists.len(), n_cols)?;
        let mut values = Vec::with_capacity(n_rows * n_cols);
        for (k, list) in lists.iter().enumerate() {
            self.check_length(&format!("{name}[{k}]"), list.len(), n_rows)?;
            values.extend(self.all_numbers(&format!("{name}[{k}]"), list)?);
        }
        Ok(values)
    }

    pub(super) fn check_length(&self, name: &str, found: usize, needed: usize) -> Result<()> {
        if found == needed {
            return Ok(());
        }
        Err(self.fault(name, &format!("a list of {found}"), &format!("a list of {needed}")))
    }

    fn all_numbers(&self, name: &str, list: &[&RawValue]) -> Result<Vec<f64>> {
        list.iter()
            .map(|raw| {
                let raw = raw.get();
                finite(raw).ok_or_else(|| self.fault(name, &with(raw), "finite numbers"))
            })
            .collect()
    }

    fn read<T: Deserialize<'a>>(&self, name: &str, accepted: &str) -> Result<T> {
        let raw = self.raw(name)?;
        serde_json::from_str(raw).map_err(|_| self.fault(name, &shown(raw), accepted))
    }
}

/// An error about something that was saved.
pub(super) fn fault(part: &str, found: &str, accepted: &str) -> Error {
    let (part, found, accepted) = (part.to_owned(), found.to_owned(), accepted.to_owned());
    Error::SavedForm { part, found, accepted }
}

fn not_an_object(error: &serde_json::Error, text: &str, within: &str) -> Error {
    let part = if within.is_empty() { "the text" } else { within.trim_end_matches(": ") };
    let place = format!("at line {}, column {}", error.line(), error.column());
    let found = match error.classify() {
        _ if text.trim().is_empty() => "empty".to_owned(),
        serde_json::error::Category::Eof => format!("cut short {place}"),
        // A number that ends after its point or exponent is at fault where the text ends.
        serde_json::error::Category::Syntax if is_at_end(error, text) => {
            format!("cut short {place}")
        }
        serde_json::error::Category::Syntax => format!("not JSON {place}"),
        _ => shown(text),
    };
    fault(part, &found, "an analysis that `.save(path)` or `.to_json()` wrote")
}

fn is_at_end(error: &serde_json::Error, text: &str) -> bool {
    let last = text.lines().last().unwrap_or("");
    error.line() == text.lines().count() && error.column() >= last.len()
}

/// The number that a piece of JSON is, to the last digit, if it is finite.
fn finite(raw: &str) -> Option<f64> {
    // Rust reads words such as "inf" as numbers; JSON has them in quotes or not at all.
    raw.parse().ok().filter(|number: &f64| number.is_finite())
}

/// What stands there, for messages.
fn shown(raw: &str) -> String {
    match raw.trim_start().chars().next() {
        Some('{') => "an object".to_owned(),
        Some('[') => "a list".to_owned(),
        Some('"') => format!("the text {}", cut(raw)),
        _ => cut(raw),
    }
}

fn with(raw: &str) -> String {
    format!("a list with {}", shown(raw))
}

fn cut(raw: &str) -> String {
    const SHOWN: usize = 40;
    let cut: String = raw.chars().take(SHOWN).collect();
    if cut.len() < raw.len() { format!("{cut}…") } else { cut }
}

/// A JSON object as its fields in order, so that repeated ones are seen.
struct Entries<'a>(Vec<(String, &'a RawValue)>);

impl<'de> Deserialize<'de> for Entries<'de> {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> std::result::Result<Self, D::Error> {
        struct Object;
        impl<'de> Visitor<'de> for Object {
            type Value = Entries<'de>;

            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("an object")
            }

            fn visit_map<M: MapAccess<'de>>(
                self,
                mut map: M,
            ) -> std::result::Result<Self::Value, M::Error> {
                let mut entries = Vec::new();
                while let Some(entry) = map.next_entry()? {
                    entries.push(entry);
                }
                Ok(Entries(entries))
            }
        }
        deserializer.deserialize_map(Object)
    }
}
