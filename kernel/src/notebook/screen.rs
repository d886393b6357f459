//! What a person sees while a notebook runs: one line that changes on a terminal, one line for each
//! cell elsewhere.

use std::fmt::Write as _;
use std::io::{IsTerminal, Write as _};

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

use crate::cells::types::CellFailure;
use crate::help::lexer::{FrontMatter, front_matter};

/// How many characters of a cell stand in its line.
const WIDTH: usize = 60;

/// Where progress and errors are written.
pub struct Screen {
    bar: Option<ProgressBar>,
    colours: bool,
    /// Whether cells are not reported one by one.
    silent: bool,
}

impl Screen {
    /// A screen on standard error.
    pub fn new() -> Self {
        let terminal = std::io::stderr().is_terminal();
        let colours = terminal && std::env::var_os("NO_COLOR").is_none_or(|value| value.is_empty());
        let bar = terminal.then(|| {
            let bar = ProgressBar::with_draw_target(None, ProgressDrawTarget::stderr());
            let style = ProgressStyle::with_template("{msg} {elapsed}");
            bar.set_style(style.unwrap_or_else(|_| ProgressStyle::default_spinner()));
            bar
        });
        Self { bar, colours, silent: false }
    }

    /// A screen that shows how far a run has come on a terminal and nothing anywhere else.
    pub fn quiet() -> Self {
        Self { silent: true, ..Self::new() }
    }

    /// A cell begins.
    pub fn begin(&self, place: usize, of: usize, code: &str) {
        if let Some(bar) = &self.bar {
            bar.reset_elapsed();
            bar.set_message(format!("cell {place} of {of}: {}", headline(code)));
        }
    }

    /// Long work of the cell has come this far, or is over.
    pub fn headway(&self, line: Option<&str>) {
        if let Some(bar) = &self.bar {
            let message = bar.message();
            let cell = message.split("  ").next().unwrap_or_default().to_owned();
            bar.set_message(match line {
                Some(line) => format!("{cell}  {line}"),
                None => cell,
            });
        }
    }

    /// Time goes by.
    pub fn tick(&self) {
        if let Some(bar) = &self.bar {
            bar.tick();
        }
    }

    /// A cell ended, and the run goes on.
    pub fn end(&self, place: usize, of: usize, code: &str, how: &str) {
        if self.bar.is_none() && !self.silent {
            self.say(&format!("cell {place} of {of}: {} ({how})", headline(code)));
        }
    }

    /// A cell failed.
    pub fn failed(&self, count: u32, place: usize, of: usize, failure: &CellFailure) {
        if self.silent {
            return;
        }
        let mut text = format!("cell [{count}] failed");
        if let Some(line) = failure.line {
            let _ = write!(text, " at its line {line}");
        }
        let _ = write!(text, " ({place} of {of} in the notebook)");
        if failure.traceback.is_empty() {
            let _ = write!(text, ": {}", failure.message);
        }
        for line in &failure.traceback {
            text.push('\n');
            text.push_str(line);
        }
        self.say(&if self.colours { text } else { without_colours(&text) });
    }

    /// Takes the changing line away.
    pub fn finish(&self) {
        if let Some(bar) = &self.bar {
            bar.finish_and_clear();
        }
    }

    /// A line of text.
    pub fn say(&self, text: &str) {
        match &self.bar {
            Some(bar) => bar.suspend(|| drop(writeln!(std::io::stderr(), "{text}"))),
            // A closed standard error is no reason to stop.
            None => drop(writeln!(std::io::stderr(), "{text}")),
        }
    }
}

impl Default for Screen {
    fn default() -> Self {
        Self::new()
    }
}

/// The first line of Rust in a cell that is not a comment, or else its first line.
fn headline(code: &str) -> String {
    let rust = match front_matter(code) {
        FrontMatter::Closed { rest, .. } => &code[rest..],
        _ => code,
    };
    let mut lines = rust.lines().map(str::trim).filter(|line| !line.is_empty());
    let first = lines.clone().find(|line| !line.starts_with("//")).or_else(|| lines.next());
    let line: String = first.unwrap_or_default().chars().filter(|c| !c.is_control()).collect();
    if line.chars().count() <= WIDTH {
        return line;
    }
    let cut: String = line.chars().take(WIDTH - 1).collect();
    format!("{cut}…")
}

/// Text without ANSI sequences for colours and the like (ECMA-48, "CSI").
pub fn without_colours(text: &str) -> String {
    let mut plain = String::with_capacity(text.len());
    let mut chars = text.chars().peekable();
    while let Some(c) = chars.next() {
        if c == '\u{1b}' && chars.peek() == Some(&'[') {
            chars.next();
            // A sequence ends with its first character from `@` to `~`.
            while chars.next().is_some_and(|c| !('@'..='~').contains(&c)) {}
        } else {
            plain.push(c);
        }
    }
    plain
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_headline_is_the_first_line_that_says_something() {
        assert_eq!(headline("---\n[cell]\nseed = 1\n---\n// why\n\n  let x = 1;\ny"), "let x = 1;");
        assert_eq!(headline("// only this"), "// only this");
        assert_eq!(headline(""), "");
        let long = "é".repeat(100);
        assert_eq!(headline(&long).chars().count(), WIDTH);
    }

    #[test]
    fn colours_are_taken_out_whole() {
        assert_eq!(without_colours("\u{1b}[1;31merror\u{1b}[0m: x\u{1b}[K!"), "error: x!");
        assert_eq!(without_colours("open\u{1b}[1"), "open");
    }
}
