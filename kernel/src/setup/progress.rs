//! What setting up tells while it happens, and how a person sees it.

use std::fmt;
use std::io::{IsTerminal, Write};
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

/// How often a line is written where there is no terminal to redraw.
const LINE_EVERY: Duration = Duration::from_secs(15);

/// Something that happened while the kit was looked for or built.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum SetupEvent {
    /// A kit must be built.
    Needed(Reason),
    /// Somebody else is at it.
    Waiting {
        /// What is waited for.
        reason: String,
    },
    /// Cargo is building.
    Building {
        /// How many packages are compiled.
        done: usize,
        /// How many there are.
        total: usize,
        /// Those being compiled now.
        current: Vec<String>,
        /// Since the build began.
        elapsed: Duration,
    },
    /// The files are being put in their place.
    Assembling,
    /// The kit is there.
    Ready {
        /// Since the kit was looked for.
        elapsed: Duration,
    },
}

/// Why a kit must be built.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Reason {
    /// There was none.
    FirstBuild,
    /// The prelude, or what decides how it is built, is not what it was.
    SourcesChanged,
    /// The compiler is another one.
    CompilerChanged {
        /// The release that built the last kit.
        from: String,
        /// The release of now.
        to: String,
    },
    /// The kit's folder has lost files, or its compiler was replaced by one of the same version.
    Incomplete,
}

impl fmt::Display for Reason {
    fn fmt(&self, to: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Reason::FirstBuild => to.write_str(
                "building the prelude for the first time; where nothing is compiled yet, \
                 this takes about half an hour on two cores, once",
            ),
            Reason::SourcesChanged => to.write_str("the prelude changed; building it again"),
            Reason::CompilerChanged { from, to: new } => write!(
                to,
                "the compiler changed from {from} to {new}; building the prelude again with it"
            ),
            Reason::Incomplete => {
                to.write_str("the kit is not whole any more; putting it together again")
            }
        }
    }
}

/// Shows events to a person: one bar on a terminal, a line now and then elsewhere.
pub struct Reporter {
    bar: Option<ProgressBar>,
    on_terminal: bool,
    last_line: Option<Instant>,
    last_wait: Option<String>,
    built: bool,
}

impl Reporter {
    /// A reporter to standard error.
    pub fn new() -> Self {
        let on_terminal = std::io::stderr().is_terminal();
        Self { bar: None, on_terminal, last_line: None, last_wait: None, built: false }
    }

    /// Shows one event.
    pub fn show(&mut self, event: SetupEvent) {
        match event {
            SetupEvent::Needed(reason) => self.say(&reason.to_string()),
            SetupEvent::Waiting { reason } => {
                if self.last_wait.as_ref() != Some(&reason) {
                    self.say(&format!("waiting for {reason}"));
                    self.last_wait = Some(reason);
                }
            }
            SetupEvent::Building { done, total, current, elapsed } => {
                self.built = true;
                self.building(done, total, &current, elapsed);
            }
            SetupEvent::Assembling => {
                if let Some(bar) = self.bar.take() {
                    bar.finish_and_clear();
                }
            }
            SetupEvent::Ready { elapsed } => {
                if self.built {
                    self.say(&format!("the prelude is ready after {}", clock(elapsed)));
                }
            }
        }
    }

    fn building(&mut self, done: usize, total: usize, current: &[String], elapsed: Duration) {
        if self.on_terminal {
            let bar = self.bar.get_or_insert_with(|| {
                let bar =
                    ProgressBar::with_draw_target(Some(total as u64), ProgressDrawTarget::stderr());
                let style = "{pos:>4} of {len} crates [{bar:24}] {elapsed} {wide_msg}";
                bar.set_style(
                    ProgressStyle::with_template(style)
                        .unwrap_or_else(|_| ProgressStyle::default_bar())
                        .progress_chars("=> "),
                );
                bar
            });
            bar.set_position(done as u64);
            bar.set_message(current.join(", "));
            return;
        }
        let due = self.last_line.is_none_or(|last| last.elapsed() >= LINE_EVERY);
        // A rebuild in which everything is fresh is over before there is anything to say.
        if due && elapsed >= Duration::from_secs(1) {
            self.last_line = Some(Instant::now());
            let names = if current.is_empty() {
                String::new()
            } else {
                format!(": {}", current.join(", "))
            };
            self.say(&format!("{done} of {total} crates after {}{names}", clock(elapsed)));
        }
    }

    fn say(&self, line: &str) {
        match &self.bar {
            Some(bar) => bar.println(format!("semiaxis: {line}")),
            // A closed standard error is no reason to stop.
            None => drop(writeln!(std::io::stderr(), "semiaxis: {line}")),
        }
    }
}

impl Default for Reporter {
    fn default() -> Self {
        Self::new()
    }
}

/// A duration as minutes and seconds, or seconds with a digit if it is short.
pub fn clock(elapsed: Duration) -> String {
    let seconds = elapsed.as_secs();
    if seconds < 60 {
        format!("{:.1} s", elapsed.as_secs_f64())
    } else {
        format!("{} min {:02} s", seconds / 60, seconds % 60)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn durations_read_as_a_person_says_them() {
        assert_eq!(clock(Duration::from_millis(1240)), "1.2 s");
        assert_eq!(clock(Duration::from_secs(125)), "2 min 05 s");
    }

    #[test]
    fn a_reason_names_both_compilers() {
        let reason = Reason::CompilerChanged { from: "1.95.0".into(), to: "1.96.0".into() };
        assert!(reason.to_string().starts_with("the compiler changed from 1.95.0 to 1.96.0"));
    }
}
