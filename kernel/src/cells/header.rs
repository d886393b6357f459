//! The header of a cell: TOML between two fence lines, as Rust's RFC 3502 and 3503 define it.
//!
//! ```text
//! ---
//! [dependencies]
//! rand_distr = "0.6"
//! [cell]
//! seed = 7
//! ---
//! ```
//!
//! The fence is a line that begins with three dashes or more, at the very start of the cell but for
//! blank lines; the closing line holds the same number of dashes. Behind the opening fence the word
//! `cargo` may stand.

use std::collections::BTreeMap;

/// What a header says.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Header {
    /// Extra crates: the name and the requirement as a TOML value in one line.
    pub dependencies: BTreeMap<String, String>,
    /// The optimisation level of this cell, 0 to 3.
    pub optimise: Option<u8>,
    /// The seed of this cell's random numbers.
    pub seed: Option<u64>,
}

/// Why a header cannot be used.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct HeaderFault {
    /// In words.
    pub message: String,
    /// Which bytes of the cell are at fault.
    pub range: std::ops::Range<usize>,
}

/// A cell without its header.
#[derive(Debug, Clone, PartialEq)]
pub struct Headed {
    /// What the header says; the default where there is none.
    pub header: Header,
    /// Where the Rust text of the cell begins.
    pub body_start: usize,
}

/// Takes the header off a cell.
///
/// # Errors
/// A fence that is not closed, TOML that does not parse, and keys or values that a header cannot
/// have; each with the bytes at fault.
pub fn read(cell: &str) -> Result<Headed, HeaderFault> {
    let Some(fence) = find_fence(cell)? else {
        return Ok(Headed { header: Header::default(), body_start: 0 });
    };
    let text = &cell[fence.toml.clone()];
    let at = |range: std::ops::Range<usize>| {
        fence.toml.start + range.start..fence.toml.start + range.end
    };
    let table: toml::Spanned<toml::de::DeTable<'_>> =
        toml::de::DeTable::parse(text).map_err(|error| HeaderFault {
            message: error.message().replace('\n', ", "),
            range: at(error.span().unwrap_or(0..text.len())),
        })?;
    let mut header = Header::default();
    for (key, value) in table.get_ref() {
        let fault = |message: String| HeaderFault { message, range: at(key.span()) };
        match (key.get_ref().as_ref(), value.get_ref()) {
            ("dependencies", toml::de::DeValue::Table(entries)) => {
                for (name, value) in entries {
                    let requirement = &text[value.span()];
                    check_dependency(name.get_ref(), value.get_ref())
                        .map_err(|message| HeaderFault { message, range: at(name.span()) })?;
                    header.dependencies.insert(name.get_ref().to_string(), one_line(requirement));
                }
            }
            ("cell", toml::de::DeValue::Table(entries)) => {
                for (name, value) in entries {
                    set(&mut header, name.get_ref(), value.get_ref()).map_err(|message| {
                        HeaderFault { message, range: at(name.span().start..value.span().end) }
                    })?;
                }
            }
            ("dependencies" | "cell", _) => {
                return Err(fault(format!("`{}` must be a table", key.get_ref())));
            }
            (other, _) => {
                return Err(fault(format!(
                    "`{other}` is nothing that a cell's header can hold; it holds `[dependencies]` and `[cell]`"
                )));
            }
        }
    }
    Ok(Headed { header, body_start: fence.end })
}

struct Fence {
    toml: std::ops::Range<usize>,
    end: usize,
}

fn find_fence(cell: &str) -> Result<Option<Fence>, HeaderFault> {
    let mut start = 0;
    let mut lines = cell.split_inclusive('\n');
    let opening = loop {
        match lines.next() {
            Some(line) if line.trim().is_empty() => start += line.len(),
            Some(line) if line.starts_with("---") => break line,
            _ => return Ok(None),
        }
    };
    let dashes = opening.chars().take_while(|c| *c == '-').count();
    let info = opening[dashes..].trim();
    let fault =
        |message: String| HeaderFault { message, range: start..start + opening.trim_end().len() };
    if !info.is_empty() && info != "cargo" {
        return Err(fault(format!(
            "the opening fence of a header is followed by nothing or by `cargo`, not by `{info}`"
        )));
    }
    let toml_start = start + opening.len();
    let mut at = toml_start;
    for line in lines {
        if line.starts_with("---") {
            let trimmed = line.trim_end();
            if trimmed.chars().all(|c| c == '-') && trimmed.len() == dashes {
                return Ok(Some(Fence { toml: toml_start..at, end: at + line.len() }));
            }
            return Err(HeaderFault {
                message: format!(
                    "the closing fence must be a line of {dashes} dashes and nothing else"
                ),
                range: at..at + trimmed.len(),
            });
        }
        at += line.len();
    }
    Err(fault(format!("the header is not closed: a line of {dashes} dashes must follow it")))
}

fn set(header: &mut Header, name: &str, value: &toml::de::DeValue<'_>) -> Result<(), String> {
    let integer = match value {
        toml::de::DeValue::Integer(integer) => {
            u64::from_str_radix(integer.as_str(), integer.radix()).ok()
        }
        _ => None,
    };
    match name {
        "optimise" => match integer {
            Some(level @ 0..=3) => header.optimise = Some(level as u8),
            _ => return Err("`optimise` takes a whole number from 0 to 3".to_owned()),
        },
        "seed" => match integer {
            Some(seed) => header.seed = Some(seed),
            None => return Err("`seed` takes a whole number, 0 or more".to_owned()),
        },
        other => {
            return Err(format!("a cell has no setting `{other}`; it has `optimise` and `seed`"));
        }
    }
    Ok(())
}

fn check_dependency(name: &str, value: &toml::de::DeValue<'_>) -> Result<(), String> {
    let letters = name.chars().all(|c| c.is_ascii_alphanumeric() || c == '_' || c == '-');
    if name.is_empty() || !letters {
        return Err(format!("`{name}` is not the name of a crate"));
    }
    match value {
        toml::de::DeValue::String(_) | toml::de::DeValue::Table(_) => Ok(()),
        _ => Err(format!(
            "`{name}` takes a version such as \"1.2\" or a table such as {{ version = \"1.2\", features = [\"…\"] }}"
        )),
    }
}

/// TOML values of a dependency fit on one line; inside an inline table a line's end means nothing.
fn one_line(value: &str) -> String {
    value.split_whitespace().collect::<Vec<_>>().join(" ")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fault(cell: &str) -> (String, String) {
        let fault = read(cell).unwrap_err();
        (cell[fault.range].to_owned(), fault.message)
    }

    #[test]
    fn a_cell_without_a_fence_has_no_header() {
        for cell in ["", "let x = 1;", "--x", "\n\nlet y = 2;", "- 1"] {
            let headed = read(cell).unwrap();
            assert_eq!((headed.header, headed.body_start), (Header::default(), 0), "{cell:?}");
        }
    }

    #[test]
    fn a_header_gives_dependencies_and_settings() {
        let cell = "\n--- cargo\n[dependencies]\nrand_distr = \"0.6\"\nndarray = { version = \"0.16\", \
                    features = [\"rayon\"] }\n[cell]\noptimise = 3\nseed = 0x10\n---\nlet x = 1;";
        let headed = read(cell).unwrap();
        assert_eq!(headed.header.optimise, Some(3));
        assert_eq!(headed.header.seed, Some(16));
        assert_eq!(headed.header.dependencies["rand_distr"], "\"0.6\"");
        assert!(headed.header.dependencies["ndarray"].contains("rayon"));
        assert_eq!(&cell[headed.body_start..], "let x = 1;");
    }

    #[test]
    fn a_longer_fence_is_closed_by_its_like() {
        let headed = read("-----\n[cell]\nseed = 1\n-----\n").unwrap();
        assert_eq!(headed.header.seed, Some(1));
    }

    #[test]
    fn faults_point_at_their_place() {
        assert_eq!(fault("---\n[cell]\nseed = -1\n---\n").0, "seed = -1");
        assert_eq!(fault("---\n[cell]\noptimise = 4\n---\n").0, "optimise = 4");
        assert_eq!(fault("---\n[cell]\nspeed = 1\n---\n").0, "speed = 1");
        assert_eq!(fault("---\n[profile]\n---\n").0, "profile");
        assert_eq!(fault("---\n[dependencies]\nserde = 1\n---\n").0, "serde");
        assert_eq!(fault("---\nseed = 1\n").0, "---");
        assert_eq!(fault("---\n[cell]\n----\n").0, "----");
        assert_eq!(fault("---toml\n---\n").0, "---toml");
        let (at, message) = fault("---\n[cell]\nseed = \n---\n");
        assert!(at.trim().is_empty(), "{at:?} {message}");
    }
}
