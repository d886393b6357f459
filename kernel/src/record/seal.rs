//! How the parts of a record hold together, and how they are taken apart again.
//!
//! The notebook, the outputs and the manifest stand in script elements of a type that browsers do not
//! run. The digest called `page` is that of the whole file with the manifest taken out and its digest
//! blanked; so every byte of the file is covered by some digest.

use std::path::Path;

use super::error::RecordError;
use super::evidence::{FORMAT, Manifest, Outputs, digest};

/// Stands for the digest of the manifest while the page's own digest is computed.
const BLANK: &str = "0000000000000000000000000000000000000000000000000000000000000000";

/// The last line of a record.
pub const END: &str = "</body>\n</html>\n";

/// Marks the head of a record and holds the digest of its manifest.
const SEAL: &str = "<meta name=\"semiaxis-manifest-sha256\" content=\"";

/// A part for programs.
#[derive(Debug, Clone, Copy)]
pub enum Part {
    /// The notebook as it was run, without outputs.
    Notebook,
    /// The outputs.
    Outputs,
    /// The manifest.
    Manifest,
}

impl Part {
    fn opening(self) -> String {
        format!("<script type=\"application/json\" id=\"semiaxis-{}\">", self.name())
    }

    /// The name by which the manifest calls it.
    pub fn name(self) -> &'static str {
        match self {
            Part::Notebook => "notebook",
            Part::Outputs => "outputs",
            Part::Manifest => "manifest",
        }
    }
}

const CLOSING: &str = "</script>\n";

/// JSON that can stand in a script element: no `<` can begin a tag or a comment there.
pub fn embedded(json: &str) -> String {
    let mut out = String::with_capacity(json.len());
    for c in json.chars() {
        match c {
            // Only strings hold these, and strings may hold escapes.
            '<' => out.push_str("\\u003c"),
            '>' => out.push_str("\\u003e"),
            '&' => out.push_str("\\u0026"),
            '\u{2028}' => out.push_str("\\u2028"),
            '\u{2029}' => out.push_str("\\u2029"),
            c => out.push(c),
        }
    }
    out
}

/// Puts a record together. `page` writes the visible page for a given line of the head and a given
/// digest to be shown.
pub fn sealed(
    mut manifest: Manifest,
    notebook: &str,
    outputs: &str,
    page: impl Fn(&str, &str) -> String,
) -> String {
    let (notebook, outputs) = (embedded(notebook), embedded(outputs));
    manifest.format = FORMAT;
    let whole = |manifest: &str, shown: &str| {
        let line = format!("{SEAL}{shown}\">\n");
        let mut text = page(&line, shown);
        for (part, json) in [
            (Part::Notebook, notebook.as_str()),
            (Part::Outputs, &outputs),
            (Part::Manifest, manifest),
        ] {
            text.push_str(&part.opening());
            text.push_str(json);
            text.push_str(CLOSING);
        }
        text.push_str(END);
        text
    };
    let digests = &mut manifest.digests;
    digests.insert(Part::Notebook.name().to_owned(), digest(notebook.as_bytes()));
    digests.insert(Part::Outputs.name().to_owned(), digest(outputs.as_bytes()));
    digests.insert("page".to_owned(), digest(whole("", BLANK).as_bytes()));
    let json = serde_json::to_string(&manifest).expect("a manifest is written without error");
    let json = embedded(&json);
    whole(&json, &digest(json.as_bytes()))
}

/// A record taken apart.
#[derive(Debug)]
pub struct Opened {
    /// The manifest.
    pub manifest: Manifest,
    /// The text of the notebook.
    pub notebook: String,
    /// The outputs.
    pub outputs: Outputs,
    /// The digest of the manifest.
    pub digest: String,
}

/// Takes a record apart and checks every digest; the path is for messages only.
///
/// # Errors
/// It is no record, cut short, of a later format, or altered.
pub fn open(bytes: &[u8], path: &Path) -> Result<Opened, RecordError> {
    let path = || path.to_owned();
    let not = |message: &str| RecordError::NotARecord { path: path(), message: message.to_owned() };
    let altered = |what: String| RecordError::Altered { path: path(), what };
    let lossy = String::from_utf8_lossy(bytes);
    if !lossy.contains(SEAL) {
        return Err(match (lossy.contains("semiaxis-manifest"), lossy.ends_with(END)) {
            (true, true) => altered("its head does not hold the digest of its manifest".to_owned()),
            (true, false) => {
                RecordError::CutShort { path: path(), message: "most of it is missing".to_owned() }
            }
            (false, _) => not("it has no manifest; `semiaxis record` writes one"),
        });
    }
    // Before the end is looked for: a later format may end otherwise.
    let manifest_json = part(&lossy, Part::Manifest);
    let later = manifest_json.and_then(|json| serde_json::from_str::<serde_json::Value>(json).ok());
    if let Some(found) = later.and_then(|manifest| manifest["format"].as_u64())
        && found > FORMAT
    {
        return Err(RecordError::LaterFormat { path: path(), found, known: FORMAT });
    }
    let missing = [Part::Notebook, Part::Outputs, Part::Manifest]
        .into_iter()
        .find(|wanted| part(&lossy, *wanted).is_none());
    if let Some(missing) = missing {
        let message = format!("the part `{}` is not there, or not whole", missing.name());
        return Err(RecordError::CutShort { path: path(), message });
    }
    if !lossy.ends_with(END) {
        if END.starts_with(lossy.rsplit(CLOSING).next().unwrap_or_default()) {
            let message = "its last lines are missing".to_owned();
            return Err(RecordError::CutShort { path: path(), message });
        }
        return Err(altered("something follows its end".to_owned()));
    }
    let Ok(text) = std::str::from_utf8(bytes) else {
        return Err(altered("it holds bytes that are not UTF-8".to_owned()));
    };
    for wanted in [Part::Notebook, Part::Outputs, Part::Manifest] {
        if text.matches(&wanted.opening()).count() != 1 {
            return Err(altered(format!("the part `{}` is there twice", wanted.name())));
        }
    }
    let [notebook, outputs, json] = [Part::Notebook, Part::Outputs, Part::Manifest]
        .map(|wanted| part(text, wanted).unwrap_or_default());
    let found = digest(json.as_bytes());
    let shown = shown_digest(text).unwrap_or_default();
    if shown != found {
        return Err(altered(format!(
            "the digest of its manifest is {found}, and its head says {shown}"
        )));
    }
    let manifest: Manifest = serde_json::from_str(json)
        .map_err(|error| altered(format!("its manifest cannot be read: {error}")))?;
    let blank = text.replacen(json, "", usize::from(!json.is_empty())).replace(shown, BLANK);
    for (name, found) in [
        (Part::Notebook.name(), digest(notebook.as_bytes())),
        (Part::Outputs.name(), digest(outputs.as_bytes())),
        ("page", digest(blank.as_bytes())),
    ] {
        let expected = manifest.digests.get(name).map(String::as_str).unwrap_or("none");
        if expected != found {
            return Err(altered(format!(
                "the digest of its {name} is {found}, and its manifest says {expected}"
            )));
        }
    }
    let outputs: Outputs = serde_json::from_str(outputs)
        .map_err(|error| altered(format!("its outputs cannot be read: {error}")))?;
    Ok(Opened { manifest, notebook: notebook.to_owned(), outputs, digest: found })
}

fn part(text: &str, wanted: Part) -> Option<&str> {
    let opening = wanted.opening();
    let start = text.find(&opening)? + opening.len();
    let length = text[start..].find(CLOSING)?;
    Some(&text[start..start + length])
}

fn shown_digest(text: &str) -> Option<&str> {
    let start = text.find(SEAL)? + SEAL.len();
    let shown = text.get(start..start + BLANK.len())?;
    shown.bytes().all(|byte| byte.is_ascii_hexdigit()).then_some(shown)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sample() -> String {
        let manifest = Manifest { title: "a </script> b".to_owned(), ..Manifest::default() };
        let notebook = r#"{"source": "</script><!-- & \u2028"}"#;
        sealed(manifest, notebook, r#"{"cells": {}}"#, |head, shown| {
            format!("<!doctype html>\n<html>\n<head>{head}</head>\n<body>\n<p>{shown}</p>\n")
        })
    }

    fn refusal(bytes: &[u8]) -> String {
        open(bytes, Path::new("r.html")).unwrap_err().to_string()
    }

    #[test]
    fn what_was_sealed_opens() {
        let text = sample();
        let opened = open(text.as_bytes(), Path::new("r.html")).unwrap();
        assert_eq!(opened.manifest.title, "a </script> b");
        let notebook: serde_json::Value = serde_json::from_str(&opened.notebook).unwrap();
        assert_eq!(notebook["source"], "</script><!-- & \u{2028}");
        assert_eq!(text.matches(&opened.digest).count(), 2, "in the head and on the page");
        assert_eq!(text.matches("</script>").count(), 3);
    }

    /// Every byte, one after the other: none can be changed unnoticed.
    #[test]
    fn any_changed_byte_is_found() {
        let text = sample();
        let mut told = std::collections::BTreeMap::new();
        for at in 0..text.len() {
            for flip in [0x01, 0x20, 0x80] {
                let mut bytes = text.clone().into_bytes();
                bytes[at] ^= flip;
                let words = refusal(&bytes);
                let kind = ["altered", "cut short", "later", "not a record", "format"]
                    .into_iter()
                    .find(|kind| words.contains(kind))
                    .unwrap_or_else(|| panic!("byte {at}: {words}"));
                *told.entry(kind).or_insert(0) += 1;
            }
        }
        assert!(told["altered"] > told.values().sum::<i32>() / 2, "{told:?}");
    }

    #[test]
    fn any_missing_end_is_found() {
        let text = sample();
        for end in 0..text.len() {
            let words = refusal(&text.as_bytes()[..end]);
            assert!(
                words.contains("cut short") || words.contains("not a record"),
                "{end}: {words}"
            );
        }
        assert!(refusal(format!("{text}x").as_bytes()).contains("altered"));
    }

    #[test]
    fn a_later_format_is_named() {
        let text = sample().replace("{\"format\":1,", "{\"format\":7,");
        assert!(
            refusal(text.as_bytes()).contains("format 7, and this version reads up to format 1")
        );
        assert!(refusal(b"<html></html>").contains("no manifest"));
        assert!(refusal(b"").contains("not a record"));
    }
}
