//! One direct call of the compiler, and what it says taken apart.

use std::collections::BTreeMap;
use std::ffi::OsString;
use std::io;
use std::path::Path;
use std::process::Stdio;

use serde::{Deserialize, Serialize};

use super::generate::Without;
use super::source::{Generated, Origin};

/// What the compiler says about one thing, as it prints it in JSON.
#[derive(Debug, Clone, Serialize, Deserialize)]
pub struct Said {
    /// In words.
    pub message: String,
    /// `E0308` and the like, or the name of a lint.
    pub code: Option<Code>,
    /// `error`, `warning`, `note`, `help` and some more.
    pub level: String,
    /// Places in the text.
    pub spans: Vec<Span>,
    /// Notes and help that belong to it.
    pub children: Vec<Said>,
}

/// The code of a message.
#[derive(Debug, Clone, Serialize, Deserialize)]
pub struct Code {
    /// The code.
    pub code: String,
}

/// A place in the generated text.
#[derive(Debug, Clone, Serialize, Deserialize)]
pub struct Span {
    /// The file, to tell the cell from other crates.
    pub file_name: String,
    /// The first byte.
    pub byte_start: usize,
    /// The byte after the last.
    pub byte_end: usize,
    /// Whether the message is about this place first of all.
    pub is_primary: bool,
    /// What is said about this place.
    pub label: Option<String>,
    /// What to write here instead, where the compiler suggests something.
    pub suggested_replacement: Option<String>,
    /// Where the macro was called that this place is inside of.
    pub expansion: Option<Box<Expansion>>,
}

/// The call of a macro.
#[derive(Debug, Clone, Serialize, Deserialize)]
pub struct Expansion {
    /// Where it was called.
    pub span: Span,
}

impl Span {
    /// The span itself, or the call of the macro around it that stands in the file of the cell.
    pub fn in_file(&self, file: &str) -> Option<&Span> {
        let mut span = self;
        loop {
            if span.file_name == file {
                return Some(span);
            }
            span = &span.expansion.as_deref()?.span;
        }
    }

    /// Every place on the way from the inside of a macro out to the file.
    fn all_in<'a>(&'a self, file: &'a str) -> impl Iterator<Item = &'a Span> {
        let mut next = Some(self);
        std::iter::from_fn(move || {
            let span = next?;
            next = span.expansion.as_deref().map(|expansion| &expansion.span);
            Some(span)
        })
        .filter(move |span| span.file_name == file)
    }
}

/// How to call the compiler for one cell.
#[derive(Debug, Clone)]
pub struct Call<'a> {
    /// The compiler.
    pub rustc: &'a Path,
    /// The folder to work in.
    pub folder: &'a Path,
    /// The name of the crate; the text stands in the folder in a file of that name.
    pub crate_name: &'a str,
    /// 0 to 3.
    pub optimise: u8,
    /// Arguments that name other crates.
    pub crates: Vec<OsString>,
}

impl Call<'_> {
    /// The name of the file that holds the text.
    pub fn file(&self) -> String {
        format!("{}.rs", self.crate_name)
    }

    /// Flags that decide what comes out, in the order they are given.
    pub fn flags(optimise: u8) -> Vec<String> {
        [
            "--edition=2024",
            "--crate-type=dylib",
            "-Cprefer-dynamic",
            "-Cdebuginfo=0",
            "-Cdebug-assertions=no",
            "-Cembed-bitcode=no",
            // A cell is small: splitting it costs more than a second core gives.
            "-Ccodegen-units=1",
            // What the prelude has instantiated of generic code is not instantiated again.
            "-Zshare-generics=y",
            // A sum that does not fit is an error at every level of optimisation.
            "-Coverflow-checks=yes",
            "--error-format=json",
            "--diagnostic-width=100000",
            "-Ztrim-diagnostic-paths=no",
        ]
        .iter()
        .map(|flag| (*flag).to_owned())
        .chain([format!("-Copt-level={optimise}")])
        .collect()
    }

    /// Writes the text where the compiler will read it.
    ///
    /// # Errors
    /// When the folder cannot be written.
    pub fn write(&self, text: &Generated) -> io::Result<()> {
        std::fs::write(self.folder.join(self.file()), text.text())
    }

    /// Compiles what was written.
    ///
    /// # Errors
    /// When the compiler cannot be run at all.
    pub async fn compile(&self) -> io::Result<Answer> {
        let mut command = tokio::process::Command::new(self.rustc);
        command
            .current_dir(self.folder)
            .arg(self.file())
            .arg("--crate-name")
            .arg(self.crate_name)
            .args(Self::flags(self.optimise))
            .args(&self.crates)
            // The types of variables are asked for with a flag that stable compilers keep back.
            .env("RUSTC_BOOTSTRAP", "1")
            .env_remove("RUSTFLAGS")
            .env_remove("LD_LIBRARY_PATH")
            .stdin(Stdio::null())
            .stdout(Stdio::null())
            .stderr(Stdio::piped())
            .process_group(0)
            .kill_on_drop(true);
        let child = command.spawn()?;
        let group = Group(child.id());
        let output = child.wait_with_output().await?;
        group.ended();
        Ok(Answer::read(&output.stderr, output.status.success(), &self.file()))
    }
}

/// The compiler and the linker it has started; both end when the call is given up.
struct Group(Option<u32>);

impl Group {
    fn ended(mut self) {
        self.0 = None;
    }
}

impl Drop for Group {
    fn drop(&mut self) {
        if let Some(id) = self.0.and_then(|id| libc::pid_t::try_from(id).ok()) {
            // SAFETY: a signal to a process group of our own making; at worst it has gone already.
            unsafe { libc::kill(-id, libc::SIGKILL) };
        }
    }
}

/// What came of a call.
#[derive(Debug, Clone)]
pub struct Answer {
    /// Whether there is a library now.
    pub success: bool,
    /// Errors and warnings.
    pub said: Vec<Said>,
    /// What was printed and is no message, such as a crash of the compiler.
    pub other: String,
    file: String,
}

impl Answer {
    fn read(stderr: &[u8], success: bool, file: &str) -> Self {
        let (mut said, mut other) = (Vec::new(), String::new());
        for line in String::from_utf8_lossy(stderr).lines() {
            match serde_json::from_str::<Said>(line) {
                Ok(message) => said.push(message),
                // Other kinds of JSON (artifact notes, future incompatibilities) are not for people.
                Err(_) if line.starts_with('{') => {}
                Err(_) => {
                    other.push_str(line);
                    other.push('\n');
                }
            }
        }
        Self { success, said, other, file: file.to_owned() }
    }

    /// Errors that are worth telling; the closing counts are not.
    pub fn errors(&self) -> impl Iterator<Item = &Said> {
        self.said.iter().filter(|said| said.level.starts_with("error")).filter(|said| {
            !(said.spans.is_empty()
                && (said.message.starts_with("aborting due to")
                    || said.message.starts_with("could not compile")))
        })
    }

    /// Warnings about the person's own text.
    pub fn warnings(&self, text: &Generated) -> Vec<Said> {
        let own = |said: &&Said| {
            said.level == "warning"
                && said.spans.iter().filter_map(|span| span.in_file(&self.file)).any(|span| {
                    matches!(text.origin(&(span.byte_start..span.byte_end)), Some(Origin::Cell(..)))
                })
        };
        self.said.iter().filter(own).cloned().collect()
    }

    /// The types of declared variables, as the compiler shows them.
    pub fn types(&self, text: &Generated) -> BTreeMap<String, String> {
        let mut types = BTreeMap::new();
        for said in &self.said {
            if said.code.as_ref().is_none_or(|code| code.code != "dropping_references") {
                continue;
            }
            for span in said.spans.iter().filter(|span| span.file_name == self.file) {
                let Some(Origin::Type(name)) = text.origin(&(span.byte_start..span.byte_end))
                else {
                    continue;
                };
                let label = span
                    .label
                    .as_deref()
                    .and_then(|label| label.strip_prefix("argument has type `&"));
                if let Some(shown) = label.and_then(|label| label.strip_suffix('`')) {
                    types.insert(name.clone(), shown.to_owned());
                }
            }
        }
        types
    }

    /// If all that is wrong is wrong with lines of the kernel's own that can be left out: which.
    pub fn can_do_without(&self, text: &Generated) -> Option<Without> {
        let mut without = Without::default();
        for said in self.errors() {
            let mut found = Without::default();
            let code = said.code.as_ref().map(|code| code.code.as_str());
            // Used after it was moved, or without ever having got a value.
            let spent = matches!(code, Some("E0382" | "E0381"));
            // Whatever the message names, the line that cannot be had is the kernel's.
            let spans =
                said.spans.iter().chain(said.children.iter().flat_map(|child| &child.spans));
            for span in spans.flat_map(|span| span.all_in(&self.file)) {
                match text.origin(&(span.byte_start..span.byte_end)) {
                    Some(Origin::Return(name)) => _ = found.returns.insert(name.clone()),
                    Some(Origin::Keep(name) | Origin::Type(name)) if spent => {
                        found.spent.insert(name.clone());
                    }
                    Some(Origin::Keep(name)) => _ = found.keeps.insert(name.clone()),
                    Some(Origin::Import(idx)) => _ = found.uses.insert(*idx),
                    _ => {}
                }
            }
            if found.is_empty() {
                return None;
            }
            without.extend(found);
        }
        // A new variable that borrows from a taken one keeps the taken one from going back; without
        // the new one it may go.
        if !without.keeps.is_empty() {
            without.returns.clear();
        }
        (!without.is_empty()).then_some(without)
    }
}
