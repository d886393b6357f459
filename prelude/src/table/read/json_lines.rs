//! One JSON object a line.

use std::collections::BTreeMap;
use std::fmt;
use std::io::Cursor;
use std::path::Path;

use polars::prelude::DataFrame;
use polars_io::SerReader;
use polars_io::prelude::{JsonFormat, JsonReader};
use serde::Deserialize;
use serde::de::{Deserializer, MapAccess, Visitor};
use serde_json::Value;

use super::scan::check_text;
use crate::error::{ColumnCount, Error, Result};

pub(super) fn read(path: &Path, bytes: Vec<u8>) -> Result<DataFrame> {
    let start = check_text(path, &bytes)?;
    let text = &bytes[start..];
    check_lines(path, text)?;
    JsonReader::new(Cursor::new(text))
        .with_json_format(JsonFormat::JsonLines)
        .infer_schema_len(None)
        .finish()
        .map_err(|error| Error::Unreadable {
            path: path.to_owned(),
            format: "JSON lines",
            reason: error.to_string(),
        })
}

/// Checks every line by itself, and every column for values of one kind: the reader behind it may
/// turn a value of another kind into a missing one.
fn check_lines(path: &Path, text: &[u8]) -> Result<()> {
    let mut kinds: BTreeMap<String, (&'static str, usize)> = BTreeMap::new();
    for (place, line) in text.split(|byte| *byte == b'\n').enumerate() {
        let number = place + 1;
        if line.iter().all(u8::is_ascii_whitespace) {
            continue;
        }
        let Members(members) = serde_json::from_slice(line).map_err(|error| {
            let reason = error.to_string();
            // A line is parsed by itself, so the parser's own line number is always one.
            let reason = reason.replace(" at line 1 column", ", at column");
            Error::BadJsonLine { path: path.to_owned(), line: number, reason }
        })?;
        let mut seen: BTreeMap<&str, usize> = BTreeMap::new();
        for (name, value) in &members {
            *seen.entry(name).or_default() += 1;
            let Some(kind) = kind(value) else { continue };
            match kinds.get(name) {
                None => {
                    kinds.insert(name.clone(), (kind, number));
                }
                Some((known, _)) if *known == kind => {}
                Some(&(first, first_line)) => {
                    return Err(Error::MixedKinds {
                        path: path.to_owned(),
                        column: name.clone(),
                        first: (first, first_line),
                        other: (kind, number),
                    });
                }
            }
        }
        let columns: Vec<ColumnCount> = seen
            .into_iter()
            .filter(|(_, count)| *count > 1)
            .map(|(column, count)| ColumnCount { column: column.to_owned(), count })
            .collect();
        if !columns.is_empty() {
            return Err(Error::DuplicateColumns { columns });
        }
    }
    Ok(())
}

fn kind(value: &Value) -> Option<&'static str> {
    match value {
        Value::Null => None,
        Value::Bool(_) => Some("true or false"),
        Value::Number(_) => Some("a number"),
        Value::String(_) => Some("text"),
        Value::Array(_) => Some("a list"),
        Value::Object(_) => Some("an object"),
    }
}

/// The members of an object in their order, repeated names included.
struct Members(Vec<(String, Value)>);

impl<'de> Deserialize<'de> for Members {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Object;
        impl<'de> Visitor<'de> for Object {
            type Value = Members;

            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("an object, as in {\"length\": 40.1}")
            }

            fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<Members, A::Error> {
                let mut members = Vec::new();
                while let Some(member) = map.next_entry()? {
                    members.push(member);
                }
                Ok(Members(members))
            }
        }
        deserializer.deserialize_map(Object)
    }
}
