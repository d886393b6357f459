//! The compiler's words, shown on the cell's own lines, and a line of advice where the kernel knows
//! better than the compiler what a person at a notebook meant.

use std::collections::BTreeMap;
use std::ops::Range;
use std::sync::Arc;

use annotate_snippets::{AnnotationKind, Group, Level, Renderer, Snippet};

use super::account::{Absent, Account};
use super::header::HeaderFault;
use super::rustc::{Answer, Said};
use super::source::{CellText, Generated, Origin, Place};
use super::types::CellFailure;

/// More than this many errors help nobody.
const MOST_ERRORS: usize = 12;

/// The failure of a cell that does not compile.
pub fn compile_failure(
    answer: &Answer,
    text: &Generated,
    account: &Account,
    file: &str,
) -> CellFailure {
    let mut errors: Vec<&Said> = answer.errors().collect();
    // What an error in the cell brings about in the text around it is no news.
    if errors.iter().any(|said| primary(said, text, file).is_some()) {
        errors.retain(|said| primary(said, text, file).is_some());
    }
    let mut traceback = Vec::new();
    for said in errors.iter().take(MOST_ERRORS) {
        push_lines(&mut traceback, &render(said, text, account, file));
    }
    if errors.len() > MOST_ERRORS {
        traceback.push(format!("… and {} more errors", errors.len() - MOST_ERRORS));
    }
    let (message, line) = match errors.first() {
        Some(first) => (headline(first), primary(first, text, file).map(|place| place.line())),
        None => ("the compiler failed without saying why".to_owned(), None),
    };
    if errors.is_empty() {
        push_lines(&mut traceback, &answer.other);
    }
    CellFailure { name: "CompileError".to_owned(), message, traceback, line }
}

/// A warning as text.
pub fn warning(said: &Said, text: &Generated, account: &Account, file: &str) -> String {
    render(said, text, account, file) + "\n"
}

/// The failure of a cell whose header cannot be read.
pub fn header_failure(cell: &Arc<CellText>, fault: &HeaderFault) -> CellFailure {
    let place = Place { cell: Arc::clone(cell), range: fault.range.clone() };
    let title = format!("in the header of the cell: {}", fault.message);
    failure_at("HeaderError", title.clone(), Some(&place), &title, &[])
}

/// The failure of a cell whose header names crates that cannot be had.
pub fn dependencies_failure(
    cell: &Arc<CellText>,
    header: Range<usize>,
    words: &str,
) -> CellFailure {
    // The line that names the table, or the whole header's first line.
    let table = cell.text[header.clone()].find("[dependencies]").map(|at| header.start + at);
    let start = table.unwrap_or(header.start);
    let end = cell.text[start..].find('\n').map_or(cell.text.len(), |at| start + at);
    let place = Place { cell: Arc::clone(cell), range: start..end };
    let title = "the crates of this header could not be had";
    let first = words.lines().find(|line| !line.trim().is_empty()).unwrap_or(title).trim();
    failure_at("HeaderError", format!("{title}: {first}"), Some(&place), title, &[words.to_owned()])
}

/// A failure with a title, a place in a cell and lines of notes below it.
pub fn failure_at(
    name: &str,
    message: String,
    place: Option<&Place>,
    title: &str,
    notes: &[String],
) -> CellFailure {
    let path;
    let mut group = match place {
        Some(place) => {
            path = label_of(&place.cell);
            let range = visible(&place.cell.text, place.range.clone());
            Level::ERROR.primary_title(title).element(
                Snippet::source(place.cell.text.as_str())
                    .path(path.as_str())
                    .annotation(AnnotationKind::Primary.span(range)),
            )
        }
        None => Group::with_title(Level::ERROR.primary_title(title)),
    };
    for note in notes {
        group = group.element(Level::NOTE.message(note.as_str()));
    }
    let mut traceback = Vec::new();
    push_lines(&mut traceback, &Renderer::styled().render(&[group]));
    CellFailure { name: name.to_owned(), message, traceback, line: place.map(Place::line) }
}

/// How a cell is called in messages.
pub fn label_of(cell: &CellText) -> String {
    format!("cell [{}]", cell.number)
}

fn push_lines(traceback: &mut Vec<String>, text: &str) {
    traceback.extend(text.lines().map(str::to_owned));
}

fn headline(said: &Said) -> String {
    match &said.code {
        Some(code) => format!("{}[{}]: {}", said.level, code.code, said.message),
        None => format!("{}: {}", said.level, said.message),
    }
}

fn primary(said: &Said, text: &Generated, file: &str) -> Option<Place> {
    let mut places = said.spans.iter().filter(|span| span.is_primary);
    places
        .find_map(|span| place_of(span, text, file))
        .or_else(|| said.spans.iter().find_map(|span| place_of(span, text, file)))
}

fn place_of(span: &super::rustc::Span, text: &Generated, file: &str) -> Option<Place> {
    let span = span.in_file(file)?;
    text.place(&(span.byte_start..span.byte_end))
}

/// One message with its places, notes, help and advice.
fn render(said: &Said, text: &Generated, account: &Account, file: &str) -> String {
    let level = match said.level.as_str() {
        "warning" => Level::WARNING,
        _ => Level::ERROR,
    };
    let mut title = level.primary_title(said.message.as_str());
    if let Some(code) = &said.code
        && code.code.starts_with('E')
    {
        title = title.id(code.code.as_str());
    }
    let places = places(said, text, file);
    let mut main = Group::with_title(title);
    for (cell, marks) in &places {
        main = main.element(snippet(cell, marks));
    }
    let mut groups = Vec::new();
    let children: Vec<_> =
        said.children.iter().map(|child| (child, self::places(child, text, file))).collect();
    for (child, child_places) in &children {
        let level = match child.level.as_str() {
            "help" => Level::HELP,
            "warning" => Level::WARNING,
            _ => Level::NOTE,
        };
        if child_places.is_empty() || !has_news(child_places) {
            // A suggestion to change text that nobody sees helps nobody.
            let hidden = child.spans.iter().any(|span| span.suggested_replacement.is_some());
            if !hidden || !child_places.is_empty() {
                main = main.element(level.message(child.message.as_str()));
            }
            continue;
        }
        let mut group = Group::with_title(level.secondary_title(child.message.as_str()));
        for (cell, marks) in child_places {
            group = group.element(snippet(cell, marks));
        }
        groups.push(group);
    }
    let advice = advice(said, text, account, file);
    for line in &advice {
        main = main.element(Level::HELP.with_name(Some("in this notebook")).message(line.as_str()));
    }
    let mut all = vec![main];
    all.extend(groups);
    Renderer::styled().render(&all)
}

/// A marked stretch of a cell.
struct Mark {
    range: Range<usize>,
    primary: bool,
    label: Option<String>,
    /// What to write instead.
    instead: Option<String>,
}

/// The marks of a message, by cell.
fn places(said: &Said, text: &Generated, file: &str) -> Vec<(Arc<CellText>, Vec<Mark>)> {
    let mut cells: BTreeMap<u32, (Arc<CellText>, Vec<Mark>)> = BTreeMap::new();
    for span in &said.spans {
        let Some(place) = place_of(span, text, file) else { continue };
        let range = visible(&place.cell.text, place.range);
        let entry = cells.entry(place.cell.number).or_insert_with(|| (place.cell, Vec::new()));
        entry.1.push(Mark {
            range,
            primary: span.is_primary,
            label: span.label.clone(),
            instead: span.suggested_replacement.clone(),
        });
    }
    cells.into_values().collect()
}

fn has_news(places: &[(Arc<CellText>, Vec<Mark>)]) -> bool {
    places
        .iter()
        .any(|(_, marks)| marks.iter().any(|mark| mark.label.is_some() || mark.instead.is_some()))
}

fn snippet<'a>(cell: &'a CellText, marks: &'a [Mark]) -> annotate_snippets::Element<'a> {
    let label = label_of(cell);
    if marks.iter().any(|mark| mark.instead.is_some()) {
        let patches = marks.iter().filter_map(|mark| {
            let instead = mark.instead.clone()?;
            Some(annotate_snippets::Patch::new(mark.range.clone(), instead))
        });
        return Snippet::source(cell.text.as_str()).path(label).patches(patches).into();
    }
    let annotations = marks.iter().map(|mark| {
        let kind = if mark.primary { AnnotationKind::Primary } else { AnnotationKind::Context };
        let annotation = kind.span(mark.range.clone());
        match &mark.label {
            Some(label) => annotation.label(label.as_str()),
            None => annotation,
        }
    });
    Snippet::source(cell.text.as_str()).path(label).annotations(annotations).into()
}

/// An empty range is shown as the character after it, within the text.
fn visible(text: &str, range: Range<usize>) -> Range<usize> {
    let end = range.end.min(text.len());
    let start = range.start.min(end);
    start..end
}

/// What the kernel knows beyond the compiler.
fn advice(said: &Said, text: &Generated, account: &Account, file: &str) -> Vec<String> {
    let mut advice = Vec::new();
    let code = said.code.as_ref().map(|code| code.code.as_str()).unwrap_or_default();
    match code {
        "E0425" | "E0433" | "E0412" | "E0423" | "E0405" => {
            for name in quoted(&said.message) {
                if let Some(absent) = account.absent.get(name) {
                    advice.push(why_absent(name, absent));
                } else if let Some((near, cell)) = nearest(account, name) {
                    advice.push(format!("cell [{cell}] has `{near}`"));
                }
            }
            if code == "E0433" && advice.is_empty() && said.message.contains("crate or module") {
                advice.push(name_the_crate(said));
            }
        }
        "E0432" if said.message.contains("unresolved import") => advice.push(name_the_crate(said)),
        "E0384" | "E0596" | "E0594" => {
            for name in quoted(&said.message) {
                let name = name.split(['.', '[']).next().unwrap_or(name).trim_start_matches('*');
                if let Some(variable) = account.variables.get(name)
                    && !variable.mutable
                {
                    advice.push(format!(
                        "`{name}` was declared without `mut` in cell [{}]; declare it with `let mut {name}` there, or write `let mut {name} = {name};` first",
                        variable.cell
                    ));
                }
            }
        }
        "E0382" | "E0505" | "E0507" => advice.push(
            "a value that is used again must be borrowed (`&x`) or copied (`x.clone()`) where it would be moved".to_owned(),
        ),
        "E0599" if said.message.contains("for enum `std::result::Result") || said.message.contains("for enum `Result") => {
            advice.push("the value is a `Result`: put `?` behind the call that made it".to_owned());
        }
        "E0308" if labels(said).any(|label| label.contains("found `Result") || label.contains("found `std::result::Result")) => {
            advice.push("the value is a `Result`: put `?` behind the call that made it".to_owned());
        }
        "E0308" if labels(said).any(|label| label.contains("DataFrame")) && labels(said).any(|label| label.contains("DataMatrix")) => {
            advice.push("a table becomes a matrix by `.data_matrix()?`".to_owned());
        }
        "E0277" if said.message.contains("`?`") && said.message.contains("Option") => {
            advice.push("at the top level of a cell `?` takes a `Result`; `.ok_or(\"what is missing\")?` makes one of an `Option`".to_owned());
        }
        _ => {}
    }
    // A value that could not be taken off the shelf: the type's name is at fault, not the cell.
    for span in said.spans.iter().filter_map(|span| span.in_file(file)) {
        if let Some(Origin::Take(name)) = text.origin(&(span.byte_start..span.byte_end))
            && let Some(variable) = account.variables.get(name)
            && primary(said, text, file).is_none()
        {
            advice.push(format!(
                "`{name}` of cell [{}] has a type that this cell cannot name: {}; keep it in a `Box<dyn …>`, or use it in the cell that makes it",
                variable.cell, variable.type_text
            ));
        }
    }
    advice.dedup();
    advice
}

/// The variable or item whose name differs from this one by a slip, and its cell.
fn nearest<'a>(account: &'a Account, name: &str) -> Option<(&'a str, u32)> {
    let variables = account.variables.iter().map(|(known, v)| (known.as_str(), v.cell));
    let items = account.items.iter().map(|((_, known), d)| (known.as_str(), d.part.cell.number));
    let near = variables.chain(items).map(|(known, cell)| (slips(name, known), known, cell));
    let allowed = if name.chars().count() < 4 { 1 } else { 2 };
    let best = near.filter(|(slips, known, _)| *slips <= allowed && *known != name).min();
    best.map(|(_, known, cell)| (known, cell))
}

/// How many letters must be put in, taken out or replaced to make one word of the other.
fn slips(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (idx, left) in a.chars().enumerate() {
        let mut diagonal = std::mem::replace(&mut row[0], idx + 1);
        for (at, right) in b.iter().enumerate() {
            let replaced = diagonal + usize::from(left != *right);
            diagonal = row[at + 1];
            row[at + 1] = replaced.min(diagonal + 1).min(row[at] + 1);
        }
    }
    row[b.len()]
}

fn labels(said: &Said) -> impl Iterator<Item = &str> {
    let children = said.children.iter().map(|child| child.message.as_str());
    said.spans.iter().filter_map(|span| span.label.as_deref()).chain(children)
}

/// What stands between backquotes.
fn quoted(message: &str) -> impl Iterator<Item = &str> {
    message.split('`').skip(1).step_by(2)
}

fn name_the_crate(said: &Said) -> String {
    let name = said
        .spans
        .iter()
        .find(|span| span.is_primary)
        .and_then(|span| span.label.as_deref())
        .and_then(|label| quoted(label).next())
        .or_else(|| quoted(&said.message).next())
        .and_then(|path| path.split("::").next())
        .unwrap_or("name");
    format!(
        "a crate from the registry is named in the header of a cell: a line `---`, `[dependencies]`, `{name} = \"1\"` with its version, a line `---`"
    )
}

/// Why a name stands for nothing any more, in words.
pub fn why_absent(name: &str, absent: &Absent) -> String {
    match absent {
        Absent::Moved { cell } => format!("`{name}` was moved in cell [{cell}]"),
        Absent::Borrowing { cell } => format!(
            "`{name}` borrowed from another value and ended with cell [{cell}]; `.clone()` or `.to_owned()` there would make it last"
        ),
        Absent::Nameless { cell, type_text } => {
            format!("`{name}` ended with cell [{cell}]: {}", nameless_words(type_text))
        }
        Absent::Redefined { cell, type_name } => {
            format!("`{name}` was dropped when cell [{cell}] redefined its type `{type_name}`")
        }
        Absent::Lost { cell } => {
            format!("`{name}` was lost with the worker; cell [{cell}] makes it again")
        }
    }
}

/// Why a type cannot be named from another cell, and what to do.
pub fn nameless_words(type_text: &str) -> String {
    if type_text.starts_with("{closure") {
        "a closure's type has no name; box it (`Box<dyn Fn(f64) -> f64>`), or write it as a function".to_owned()
    } else if type_text.starts_with("fn(") && type_text.contains('{') {
        "a function's own type has no name; give the variable a type such as `fn(f64) -> f64`"
            .to_owned()
    } else if type_text.contains("{closure") || type_text.contains("impl ") {
        "its type has no name that another cell could write; collect the values (`.collect::<Vec<_>>()`), or box it (`Box<dyn …>`)".to_owned()
    } else {
        format!("its type cannot be named from another cell: {type_text}")
    }
}

/// The failure of a running cell: the words, the line of the cell, the notes.
pub fn run_failure(
    name: &str,
    words: &str,
    title: &str,
    place: Option<(Arc<Generated>, u32, u32)>,
    notes: &[String],
) -> CellFailure {
    let place = place.and_then(|(text, line, column)| {
        let at = text.byte_at(line, column)?;
        let mut place = text.place(&(at..at + 1))?;
        place.range = word_at(&place.cell.text, place.range.start);
        Some(place)
    });
    failure_at(name, words.to_owned(), place.as_ref(), title, notes)
}

/// The word, or the single character, that begins here.
fn word_at(text: &str, start: usize) -> Range<usize> {
    let rest = &text[start..];
    let word: usize =
        rest.chars().take_while(|c| c.is_alphanumeric() || *c == '_').map(char::len_utf8).sum();
    let length = if word > 0 { word } else { rest.chars().next().map_or(0, char::len_utf8) };
    start..start + length
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn slips_are_counted_letter_by_letter() {
        assert_eq!(slips("thicknes", "thickness"), 1);
        assert_eq!(slips("kitten", "sitting"), 3);
        assert_eq!(slips("", "abc"), 3);
        assert_eq!(slips("same", "same"), 0);
    }

    #[test]
    fn a_word_is_marked_whole_and_anything_else_by_its_first_character() {
        assert_eq!(word_at("let größe = 1", 4), 4..11);
        assert_eq!(word_at("a + b", 2), 2..3);
        assert_eq!(word_at("a", 1), 1..1);
    }
}
