//! A first pass over delimited text that finds every fault of form before a value is read.
//!
//! The reader behind it repairs some of these faults on its own (it renames repeated columns, for
//! one) and reports others without the line, so nothing is left for it to find.

use std::path::Path;

use crate::error::{Error, Result};

/// What the first pass learns.
#[derive(Debug, PartialEq, Eq)]
pub(super) struct Scan {
    /// The header's fields, without quotes.
    pub(super) header: Vec<String>,
    /// Where the rows begin and end, blank lines at the end left off.
    pub(super) body: std::ops::Range<usize>,
    pub(super) n_rows: usize,
    /// The byte that ends lines.
    pub(super) line_end: u8,
}

/// One record of the text.
struct Record {
    start: usize,
    /// Without its line end.
    end: usize,
    next: usize,
    n_fields: usize,
    /// The line it begins in, from 1.
    line: usize,
}

impl Record {
    fn is_blank(&self) -> bool {
        self.start == self.end
    }
}

/// Checks that the bytes are text and returns where it starts, past a byte order mark.
pub(super) fn check_text(path: &Path, bytes: &[u8]) -> Result<usize> {
    const UTF_8_MARK: &[u8] = b"\xEF\xBB\xBF";
    let start = if bytes.starts_with(UTF_8_MARK) { UTF_8_MARK.len() } else { 0 };
    let text = &bytes[start..];
    let place = match (first_control(text), std::str::from_utf8(text)) {
        (control, Err(fault)) => {
            let invalid = fault.valid_up_to();
            Some(control.map_or(invalid, |control| control.min(invalid)))
        }
        (control, Ok(_)) => control,
    };
    if let Some(place) = place {
        let line = 1 + text[..place].iter().filter(|byte| **byte == b'\n').count();
        return Err(Error::NotText { path: path.to_owned(), line, byte: text[place] });
    }
    if text.iter().all(u8::is_ascii_whitespace) {
        return Err(Error::EmptyFile { path: path.to_owned() });
    }
    Ok(start)
}

/// The place of the first control character other than white space.
fn first_control(text: &[u8]) -> Option<usize> {
    // Free of branches within a chunk, so that sound text passes at the speed of vectors.
    const CHUNK: usize = 256;
    let is_control = |byte: u8| (byte < 9) | ((byte > 13) & (byte < 32)) | (byte == 127);
    let holds = |chunk: &[u8]| chunk.iter().fold(false, |found, byte| found | is_control(*byte));
    let chunk = text.chunks(CHUNK).position(holds)?;
    let start = chunk * CHUNK;
    text[start..].iter().position(|byte| is_control(*byte)).map(|place| start + place)
}

/// Checks the form of delimited text: quotes, header, and as many fields in every row.
pub(super) fn scan(path: &Path, text: &[u8], delimiter: u8) -> Result<Scan> {
    // Only a file without a single line feed can use carriage returns alone.
    let line_end = if text.contains(&b'\n') || !text.contains(&b'\r') { b'\n' } else { b'\r' };
    let mut special = [false; 256];
    for byte in [delimiter, line_end, b'"'] {
        special[usize::from(byte)] = true;
    }
    let mut records = Records { path, text, delimiter, line_end, special, place: 0, line: 1 };
    let header = records.next_record()?.expect("text that is not all white space has a record");
    let body_start = header.next;
    let names = fields(&text[header.start..header.end], delimiter);
    let mut body_end = body_start;
    let (mut n_rows, mut n_ragged) = (0, 0);
    let mut first_ragged: Option<Record> = None;
    let mut blank: Option<Record> = None;
    let mut n_blank = 0;
    while let Some(record) = records.next_record()? {
        if n_rows == 0 && n_blank == 0 {
            check_delimiter(path, text, &header, &record, delimiter)?;
        }
        // A blank line is a missing value in a table of one column and a fault in any other,
        // unless nothing but blank lines follows.
        if record.is_blank() {
            n_blank += 1;
            blank.get_or_insert(record);
            continue;
        }
        n_rows += n_blank + 1;
        if let Some(blank) = blank.take()
            && header.n_fields > 1
        {
            n_ragged += n_blank;
            first_ragged.get_or_insert(Record { n_fields: 0, ..blank });
        }
        n_blank = 0;
        body_end = record.next;
        if record.n_fields != header.n_fields {
            n_ragged += 1;
            first_ragged.get_or_insert(record);
        }
    }
    if n_rows == 0 {
        let nothing = Record { start: 0, end: 0, next: 0, n_fields: 0, line: 0 };
        check_delimiter(path, text, &header, &nothing, delimiter)?;
    }
    if let Some(record) = first_ragged {
        return Err(Error::RaggedRows {
            path: path.to_owned(),
            line: record.line,
            expected: header.n_fields,
            found: record.n_fields,
            n_ragged,
            n_rows,
        });
    }
    Ok(Scan { header: names, body: body_start..body_end, n_rows, line_end })
}

struct Records<'a> {
    path: &'a Path,
    text: &'a [u8],
    delimiter: u8,
    line_end: u8,
    /// Whether a byte is the delimiter, the line end or a quote.
    special: [bool; 256],
    place: usize,
    line: usize,
}

impl Records<'_> {
    fn next_record(&mut self) -> Result<Option<Record>> {
        let (start, line, text) = (self.place, self.line, self.text);
        if start >= text.len() {
            return Ok(None);
        }
        let mut n_fields = 1;
        let mut at = start;
        let mut field_start = start;
        while let Some(step) = text[at..].iter().position(|byte| self.special[*byte as usize]) {
            at += step;
            let byte = text[at];
            if byte == self.delimiter {
                n_fields += 1;
                field_start = at + 1;
            } else if byte == self.line_end {
                break;
            } else if byte == b'"' {
                if at != field_start {
                    return Err(Error::StrayQuote { path: self.path.to_owned(), line: self.line });
                }
                at = self.quoted_end(at)?;
                continue;
            }
            at += 1;
        }
        if text.get(at) != Some(&self.line_end) {
            at = text.len();
        }
        let mut end = at;
        if self.line_end == b'\n' && end > start && text[end - 1] == b'\r' {
            end -= 1;
        }
        self.place = (at + 1).min(text.len());
        self.line += 1;
        Ok(Some(Record { start, end, next: self.place, n_fields, line }))
    }

    /// The place after the quoted field that opens at `open`.
    fn quoted_end(&mut self, open: usize) -> Result<usize> {
        let (text, opened_in) = (self.text, self.line);
        let mut at = open + 1;
        loop {
            match text.get(at) {
                None => {
                    return Err(Error::UnclosedQuote {
                        path: self.path.to_owned(),
                        line: opened_in,
                    });
                }
                Some(b'"') if text.get(at + 1) == Some(&b'"') => at += 2,
                Some(b'"') => break,
                Some(byte) => {
                    self.line += usize::from(*byte == self.line_end);
                    at += 1;
                }
            }
        }
        match text.get(at + 1) {
            None => Ok(at + 1),
            Some(next) if [self.delimiter, self.line_end].contains(next) => Ok(at + 1),
            Some(b'\r') if text.get(at + 2) == Some(&self.line_end) => Ok(at + 1),
            Some(_) => Err(Error::StrayQuote { path: self.path.to_owned(), line: self.line }),
        }
    }
}

/// The fields of one record without their quotes.
fn fields(record: &[u8], delimiter: u8) -> Vec<String> {
    let text = String::from_utf8_lossy(record);
    let mut fields = vec![String::new()];
    let mut quoted = false;
    let mut chars = text.chars().peekable();
    while let Some(c) = chars.next() {
        let field = fields.last_mut().expect("never empty");
        match c {
            '"' if quoted && chars.peek() == Some(&'"') => {
                field.push('"');
                chars.next();
            }
            '"' => quoted = !quoted,
            c if c == char::from(delimiter) && !quoted => fields.push(String::new()),
            c => field.push(c),
        }
    }
    fields
}

/// Refuses a header of one field that splits well at another delimiter, as the first row does.
fn check_delimiter(
    path: &Path,
    text: &[u8],
    header: &Record,
    row: &Record,
    used: u8,
) -> Result<()> {
    if header.n_fields > 1 {
        return Ok(());
    }
    let header = &text[header.start..header.end];
    let row = &text[row.start..row.end];
    let splits = |line: &[u8], by: u8| fields(line, by).len();
    let seen = [b';', b'\t', b',', b'|']
        .into_iter()
        .filter(|&other| other != used)
        .map(|other| (splits(header, other), other))
        .filter(|&(n_fields, other)| {
            n_fields > 1 && (row.is_empty() || splits(row, other) == n_fields)
        })
        .max_by_key(|&(n_fields, _)| n_fields);
    match seen {
        None => Ok(()),
        Some((n_fields, seen)) => Err(Error::WrongDelimiter {
            path: path.to_owned(),
            used: used.into(),
            seen: seen.into(),
            n_fields,
        }),
    }
}
