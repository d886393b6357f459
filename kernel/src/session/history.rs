//! What was run in this session, for clients that let their user page back through it.
//!
//! The history lives as long as the kernel and has one session, number 1. Cells are kept in the
//! order they were run, by the number shown beside them; cells that asked not to be stored, and
//! silent ones, are not in it.
//!
//! Source: "History" in <https://jupyter-client.readthedocs.io/en/stable/messaging.html>.

use std::collections::HashSet;

use jupyter_protocol::{HistoryEntry, HistoryRequest};

/// The number of the one session there is.
const SESSION: usize = 1;

/// The cells that were run.
#[derive(Debug, Default)]
pub struct History {
    entries: Vec<Entry>,
}

#[derive(Debug, Clone)]
struct Entry {
    line: usize,
    input: String,
    /// The plain text of what the cell's final expression showed.
    output: Option<String>,
}

impl History {
    /// Stores a cell that is about to run.
    pub fn push(&mut self, line: usize, input: &str) {
        self.entries.push(Entry { line, input: input.to_owned(), output: None });
    }

    /// Stores what the newest cell with this number showed.
    pub fn set_output(&mut self, line: usize, output: &str) {
        if let Some(entry) = self.entries.iter_mut().rev().find(|entry| entry.line == line) {
            entry.output = Some(output.to_owned());
        }
    }

    /// The entries a client asked for, oldest first.
    pub fn answer(&self, request: &HistoryRequest) -> Vec<HistoryEntry> {
        match request {
            HistoryRequest::Tail { n, output, .. } => {
                dress(last(self.entries.iter().collect(), *n), *output)
            }
            HistoryRequest::Range { session, start, stop, output, .. } => {
                dress(self.range(*session, *start, *stop), *output)
            }
            HistoryRequest::Search { pattern, unique, output, n, .. } => {
                let found: Vec<_> = self
                    .entries
                    .iter()
                    .filter(|entry| matches_glob(pattern, &entry.input))
                    .collect();
                let found = if *unique { newest_of_each(found) } else { found };
                dress(last(found, *n), *output)
            }
        }
    }

    /// Session 0 is the current one, a negative number counts back from it.
    fn range(&self, session: Option<i32>, start: i32, stop: i32) -> Vec<&Entry> {
        let current = session.is_none_or(|session| session == 0 || session == SESSION as i32);
        let lines = usize::try_from(start).unwrap_or(0)..usize::try_from(stop).unwrap_or(0);
        self.entries.iter().filter(|entry| current && lines.contains(&entry.line)).collect()
    }
}

fn last(mut entries: Vec<&Entry>, n: i32) -> Vec<&Entry> {
    let keep = usize::try_from(n).unwrap_or(0);
    let surplus = entries.len().saturating_sub(keep);
    entries.drain(..surplus);
    entries
}

fn newest_of_each(entries: Vec<&Entry>) -> Vec<&Entry> {
    let mut seen = HashSet::new();
    let mut kept: Vec<_> =
        entries.into_iter().rev().filter(|entry| seen.insert(entry.input.as_str())).collect();
    kept.reverse();
    kept
}

fn dress(entries: Vec<&Entry>, with_output: bool) -> Vec<HistoryEntry> {
    let dressed = |entry: &Entry| {
        let input = entry.input.clone();
        if with_output {
            let output = entry.output.clone().unwrap_or_default();
            HistoryEntry::InputOutput(SESSION, entry.line, (input, output))
        } else {
            HistoryEntry::Input(SESSION, entry.line, input)
        }
    };
    entries.into_iter().map(dressed).collect()
}

/// Whether a text matches a pattern in which `*` stands for any text and `?` for one character.
///
/// Remembers only the last `*`, so the time is at most the product of the two lengths whatever
/// pattern a client sends.
fn matches_glob(pattern: &str, text: &str) -> bool {
    let pattern: Vec<char> = pattern.chars().collect();
    let text: Vec<char> = text.chars().collect();
    let (mut p, mut t) = (0, 0);
    // Where to go on if what follows the last star does not match: the star, and the text it has
    // taken so far.
    let mut retry: Option<(usize, usize)> = None;
    while t < text.len() {
        match pattern.get(p) {
            Some('*') => {
                retry = Some((p, t));
                p += 1;
            }
            Some(&expected) if expected == '?' || expected == text[t] => {
                p += 1;
                t += 1;
            }
            _ => {
                let Some((star, taken)) = retry else { return false };
                retry = Some((star, taken + 1));
                p = star + 1;
                t = taken + 1;
            }
        }
    }
    pattern[p..].iter().all(|&rest| rest == '*')
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::{Value, json};

    fn sample() -> History {
        let mut history = History::default();
        for (line, input) in
            [(1, "let a = 1;"), (2, "a + 1"), (3, "let b = 2;"), (4, "a + 1"), (5, "b")]
        {
            history.push(line, input);
        }
        history.set_output(4, "2");
        history
    }

    fn ask(request: Value) -> Value {
        let request = serde_json::from_value(request).unwrap();
        serde_json::to_value(sample().answer(&request)).unwrap()
    }

    #[test]
    fn tail_gives_the_last_cells_oldest_first() {
        let tail =
            |n: i32| ask(json!({"hist_access_type": "tail", "n": n, "output": false, "raw": true}));
        assert_eq!(tail(2), json!([[1, 4, "a + 1"], [1, 5, "b"]]));
        assert_eq!(tail(99).as_array().unwrap().len(), 5);
        assert_eq!(tail(0), json!([]));
        assert_eq!(tail(-3), json!([]));
    }

    #[test]
    fn range_leaves_out_its_end_and_knows_one_session() {
        let range = |session: i32, start: i32, stop: i32| {
            ask(json!({"hist_access_type": "range", "session": session, "start": start,
                "stop": stop, "output": false, "raw": true}))
        };
        assert_eq!(range(0, 1, 3), json!([[1, 1, "let a = 1;"], [1, 2, "a + 1"]]));
        assert_eq!(range(1, 5, i32::MAX), json!([[1, 5, "b"]]));
        assert_eq!(range(-1, 1, 3), json!([]));
        assert_eq!(range(7, 1, 3), json!([]));
        assert_eq!(range(0, -5, 2), json!([[1, 1, "let a = 1;"]]));
        assert_eq!(range(0, 3, 1), json!([]));
    }

    #[test]
    fn search_matches_globs_and_can_drop_repeats() {
        let search = |pattern: &str, unique: bool, n: i32| {
            ask(json!({"hist_access_type": "search", "pattern": pattern, "unique": unique,
                "n": n, "output": false, "raw": true}))
        };
        assert_eq!(search("let*", false, 9), json!([[1, 1, "let a = 1;"], [1, 3, "let b = 2;"]]));
        assert_eq!(search("a ? 1", false, 9), json!([[1, 2, "a + 1"], [1, 4, "a + 1"]]));
        assert_eq!(search("a ? 1", true, 9), json!([[1, 4, "a + 1"]]));
        assert_eq!(search("*", false, 1), json!([[1, 5, "b"]]));
        assert_eq!(search("none", false, 9), json!([]));
    }

    #[test]
    fn outputs_come_when_asked_for() {
        let answer = ask(json!({"hist_access_type": "tail", "n": 2, "output": true, "raw": true}));
        assert_eq!(answer, json!([[1, 4, ["a + 1", "2"]], [1, 5, ["b", ""]]]));
    }

    #[test]
    fn globs() {
        for (pattern, text, expected) in [
            ("", "", true),
            ("", "a", false),
            ("*", "", true),
            ("?", "", false),
            ("*b*d", "abcbd", true),
            ("*b*d", "abcbde", false),
            ("a*", "ä", false),
            ("?", "ä", true),
            ("***", "xyz", true),
            ("a", "ab", false),
        ] {
            assert_eq!(matches_glob(pattern, text), expected, "{pattern:?} on {text:?}");
        }
    }

    #[test]
    fn a_hostile_pattern_ends() {
        let pattern = "*a".repeat(200) + "b";
        assert!(!matches_glob(&pattern, &"a".repeat(5000)));
    }
}
