//! What differs between the outputs of two runs.
//!
//! Text is compared exactly, numbers within a relative tolerance, pictures by the numbers behind
//! them. Where an exhibit gives no numbers its plain text is compared, and a picture with neither by
//! its bytes.

use std::fmt;

use serde_json::Value;

use super::evidence::{CellOutputs, Exhibit, Kept};

/// The relative difference up to which two numbers count as the same.
pub const TOLERANCE: f64 = 1e-9;

/// The first difference between two outputs.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Difference {
    /// Where it is.
    pub place: String,
    /// What the record has there.
    pub recorded: String,
    /// What this run has.
    pub now: String,
}

impl fmt::Display for Difference {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}: {} then, {} now", self.place, self.recorded, self.now)
    }
}

/// The first difference between the outputs of a cell, if there is one.
pub fn first_difference(
    then: &CellOutputs,
    now: &CellOutputs,
    tolerance: f64,
) -> Option<Difference> {
    let failure = |cell: &CellOutputs| match &cell.failure {
        Some((name, message)) => format!("{name}: {message}"),
        None => "no failure".to_owned(),
    };
    if then.failure != now.failure {
        return Some(Difference {
            place: "the end of the cell".to_owned(),
            recorded: failure(then),
            now: failure(now),
        });
    }
    text("standard output", &then.stdout, &now.stdout)
        .or_else(|| exhibits(&then.exhibits, &now.exhibits, tolerance))
        .or_else(|| text("standard error", &then.stderr, &now.stderr))
}

fn exhibits(then: &[Exhibit], now: &[Exhibit], tolerance: f64) -> Option<Difference> {
    if then.len() != now.len() {
        return Some(Difference {
            place: "exhibits".to_owned(),
            recorded: then.len().to_string(),
            now: now.len().to_string(),
        });
    }
    let mut pairs = then.iter().zip(now).enumerate();
    pairs.find_map(|(idx, (then, now))| {
        exhibit(&format!("exhibit {}", idx + 1), then, now, tolerance)
    })
}

fn exhibit(place: &str, then: &Exhibit, now: &Exhibit, tolerance: f64) -> Option<Difference> {
    if let (Some(then), Some(now)) = (&then.numbers, &now.numbers) {
        return values(place, then, now, tolerance);
    }
    if let (Some(then), Some(now)) = (&then.plain, &now.plain) {
        let found = text(place, then, now);
        if found.is_some() {
            return found;
        }
    }
    let kinds = |exhibit: &Exhibit| exhibit.forms.keys().cloned().collect::<Vec<_>>().join(", ");
    if !then.forms.keys().eq(now.forms.keys()) {
        let place = format!("{place}, its forms");
        return Some(Difference { place, recorded: kinds(then), now: kinds(now) });
    }
    let pictures = then.forms.iter().find(|(mime, digest)| now.forms.get(*mime) != Some(*digest));
    pictures.map(|(mime, digest)| Difference {
        place: format!("{place}, {mime}"),
        recorded: format!("SHA-256 {digest}"),
        now: format!("SHA-256 {}", now.forms.get(mime).map_or("none", String::as_str)),
    })
}

fn text(place: &str, then: &Kept, now: &Kept) -> Option<Difference> {
    if then == now {
        return None;
    }
    let mut lines = then.text.lines().zip(now.text.lines()).enumerate();
    if let Some((idx, (then, now))) = lines.find(|(_, (then, now))| then != now) {
        let (recorded, now) = around(then, now);
        return Some(Difference { place: format!("{place}, line {}", idx + 1), recorded, now });
    }
    let length = |kept: &Kept| match &kept.whole {
        Some((bytes, digest)) => format!("{bytes} bytes with SHA-256 {digest}"),
        None => format!("{} bytes, {} lines", kept.text.len(), kept.text.lines().count()),
    };
    let place = format!("{place}, behind what both begin with");
    Some(Difference { place, recorded: length(then), now: length(now) })
}

/// Two lines, cut to where they begin to differ.
fn around(then: &str, now: &str) -> (String, String) {
    const BEFORE: usize = 20;
    const SHOWN: usize = 80;
    let same = then.chars().zip(now.chars()).take_while(|(a, b)| a == b).count();
    let cut = |line: &str| {
        let from = same.saturating_sub(BEFORE);
        let part: String = line.chars().skip(from).take(SHOWN).collect();
        let start = if from > 0 { "…" } else { "" };
        let end = if line.chars().count() > from + SHOWN { "…" } else { "" };
        format!("{:?}", format!("{start}{part}{end}"))
    };
    (cut(then), cut(now))
}

/// The first difference between two JSON values; numbers may differ within the tolerance.
fn values(place: &str, then: &Value, now: &Value, tolerance: f64) -> Option<Difference> {
    match (then, now) {
        (Value::Number(a), Value::Number(b)) => {
            let (a, b) = (a.as_f64().unwrap_or(f64::NAN), b.as_f64().unwrap_or(f64::NAN));
            if is_close(a, b, tolerance) {
                return None;
            }
        }
        (Value::Array(a), Value::Array(b)) => {
            if a.len() == b.len() {
                let mut pairs = a.iter().zip(b).enumerate();
                return pairs.find_map(|(idx, (a, b))| {
                    values(&format!("{place}, {}", idx + 1), a, b, tolerance)
                });
            }
            return Some(Difference {
                place: place.to_owned(),
                recorded: format!("{} values", a.len()),
                now: format!("{} values", b.len()),
            });
        }
        (Value::Object(a), Value::Object(b)) => {
            let keys: std::collections::BTreeSet<&String> = a.keys().chain(b.keys()).collect();
            return keys.into_iter().find_map(|key| {
                let place = match &a.get("heading") {
                    Some(Value::String(heading)) if key == "values" => {
                        format!("{place}, column {heading:?}")
                    }
                    _ => format!("{place}, {key}"),
                };
                let of = |side: &serde_json::Map<String, Value>| side.get(key).cloned();
                match (of(a), of(b)) {
                    (Some(a), Some(b)) => values(&place, &a, &b, tolerance),
                    (a, b) => Some(Difference {
                        place,
                        recorded: shown(a.as_ref()),
                        now: shown(b.as_ref()),
                    }),
                }
            });
        }
        (a, b) if a == b => return None,
        _ => {}
    }
    Some(Difference { place: place.to_owned(), recorded: shown(Some(then)), now: shown(Some(now)) })
}

/// Whether two numbers differ by no more than the tolerance times the larger of them.
fn is_close(a: f64, b: f64, tolerance: f64) -> bool {
    a == b || (a - b).abs() <= tolerance * a.abs().max(b.abs())
}

fn shown(value: Option<&Value>) -> String {
    let Some(value) = value else { return "nothing".to_owned() };
    let text = value.to_string();
    match text.char_indices().nth(120) {
        Some((end, _)) => format!("{}…", &text[..end]),
        None => text,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::record::evidence::NUMBERS;
    use serde_json::json;

    fn cell(outputs: Value) -> CellOutputs {
        CellOutputs::of(outputs.as_array().unwrap())
    }

    fn numbers(value: Value) -> CellOutputs {
        cell(json!([{"output_type": "display_data", "data":
            {NUMBERS: value, "image/svg+xml": "<svg/>", "text/plain": "about"}}]))
    }

    fn told(then: &CellOutputs, now: &CellOutputs) -> String {
        first_difference(then, now, TOLERANCE).map_or("same".to_owned(), |found| found.to_string())
    }

    #[test]
    fn numbers_may_differ_within_the_tolerance_and_no_further() {
        let table = |x: f64| numbers(json!({"columns": [{"heading": "mean", "values": [1, x]}]}));
        assert_eq!(told(&table(2.0), &table(2.0 + 1e-10)), "same");
        assert_eq!(
            told(&table(2.0), &table(2.1)),
            "exhibit 1, columns, 1, column \"mean\", 2: 2.0 then, 2.1 now"
        );
        assert_eq!(told(&table(0.0), &table(0.0)), "same");
        assert!(
            told(&table(0.0), &table(1e-300)).contains("then"),
            "a relative tolerance has no floor"
        );
        assert!(first_difference(&table(2.0), &table(2.1), 0.1).is_none());
        assert!(first_difference(&table(2.0), &table(2.0 + 1e-12), 0.0).is_some());
    }

    #[test]
    fn shapes_kinds_and_texts_are_told() {
        let told_of = |a: Value, b: Value| told(&numbers(a), &numbers(b));
        assert_eq!(told_of(json!([1]), json!([1, 2])), "exhibit 1: 1 values then, 2 values now");
        assert_eq!(told_of(json!({"a": 1}), json!({})), "exhibit 1, a: 1 then, nothing now");
        assert_eq!(told_of(json!(null), json!(0)), "exhibit 1: null then, 0 now");
        let out =
            |text: &str| cell(json!([{"output_type": "stream", "name": "stdout", "text": text}]));
        assert_eq!(
            told(&out("a\nb"), &out("a\nc")),
            "standard output, line 2: \"b\" then, \"c\" now"
        );
        assert_eq!(
            told(&out("a"), &out("a\nc")),
            "standard output, behind what both begin with: 1 bytes, 1 lines then, 3 bytes, 2 lines now"
        );
        assert_eq!(told(&out("a"), &out("a")), "same");
        let long = |end: &str| out(&format!("{}{end}", "x\n".repeat(400_000)));
        assert_eq!(told(&long("y"), &long("y")), "same");
        assert!(told(&long("y"), &long("z")).contains("800001 bytes with SHA-256"));
        let fails = cell(json!([{"output_type": "error", "ename": "Panic", "evalue": "no"}]));
        assert_eq!(told(&out(""), &fails), "the end of the cell: no failure then, Panic: no now");
    }

    #[test]
    fn pictures_without_numbers_are_compared_by_their_bytes() {
        let picture = |data: &str| {
            cell(json!([{"output_type": "display_data", "data": {"image/png": data}}]))
        };
        assert_eq!(told(&picture("AAAA"), &picture("AAAA")), "same");
        assert!(
            told(&picture("AAAA"), &picture("AAAB")).starts_with("exhibit 1, image/png: SHA-256")
        );
        let redrawn = |svg: &str| {
            cell(json!([{"output_type": "display_data", "data":
            {NUMBERS: [1.5], "image/svg+xml": svg}}]))
        };
        assert_eq!(
            told(&redrawn("<svg/>"), &redrawn("<svg />")),
            "same",
            "drawn otherwise, same numbers"
        );
    }
}
