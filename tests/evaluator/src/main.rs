//! An independent evaluator of Rust cells, for the tests to compare the kernel with.
//!
//! It reads requests as JSON lines from its standard input and answers each with one JSON line.
//! `{"fresh": true}` forgets everything that was defined. `{"code": "…"}` evaluates a cell and is
//! answered by
//!
//! - `kind`: `done`, `compile` (rustc refused the cell), `lost` (variables of a type that the cell
//!   defines anew), `ended` (the process that ran the cell is gone), or `refused` (anything else);
//! - `stdout`: what the cell wrote, by lines; `stderr`: what had arrived by then, for a reader only;
//! - `text`: the `text/plain` of the final expression, or null;
//! - `codes` and `message`: rustc's error codes, and the words of the failure.

use std::io::{BufRead, Write};
use std::sync::{Arc, Mutex};
use std::time::Duration;

use evcxr::{Error, EvalContext};
use serde_json::{Value, json};

fn main() -> Result<(), Box<dyn std::error::Error>> {
    // The library runs cells in a second process made from this very program, which this call
    // recognises and never returns from.
    evcxr::runtime_hook();

    let (mut context, outputs) = EvalContext::new()?;
    let stdout = Drain::start(move |patience| outputs.stdout.recv_timeout(patience).ok());
    let stderr = Drain::start(move |patience| outputs.stderr.recv_timeout(patience).ok());
    for line in std::io::stdin().lock().lines() {
        let request: Value = serde_json::from_str(&line?)?;
        if request["fresh"] == true {
            context.clear()?;
            stdout.take();
            stderr.take();
            answer(&json!({ "kind": "done" }))?;
            continue;
        }
        let code = request["code"].as_str().ok_or("a request has neither `fresh` nor `code`")?;
        let evaluated = context.eval(code);
        let (kind, text, codes, message) = match evaluated {
            Ok(values) => ("done", values.get("text/plain").map(str::to_owned), Vec::new(), None),
            Err(Error::CompilationErrors(errors)) => {
                let codes = errors.iter().filter_map(|e| e.code().map(str::to_owned)).collect();
                let words: Vec<String> = errors.iter().map(|error| error.message()).collect();
                ("compile", None, codes, Some(words.join("\n")))
            }
            Err(Error::TypeRedefinedVariablesLost(names)) => {
                ("lost", None, Vec::new(), Some(names.join(", ")))
            }
            Err(Error::SubprocessTerminated(words)) => ("ended", None, Vec::new(), Some(words)),
            Err(Error::Message(words)) => ("refused", None, Vec::new(), Some(words)),
        };
        answer(&json!({
            "kind": kind, "stdout": stdout.take(), "stderr": stderr.take(),
            "text": text, "codes": codes, "message": message,
        }))?;
    }
    Ok(())
}

fn answer(value: &Value) -> std::io::Result<()> {
    let mut out = std::io::stdout().lock();
    writeln!(out, "{value}")?;
    out.flush()
}

/// Collects the lines of one channel. The evaluation waits until somebody has taken all of them.
struct Drain(Arc<Mutex<String>>);

impl Drain {
    fn start(next: impl Fn(Duration) -> Option<String> + Send + 'static) -> Drain {
        let text = Arc::new(Mutex::new(String::new()));
        let filled = Arc::clone(&text);
        std::thread::spawn(move || {
            loop {
                // The lock is held while a line is on its way from the channel into the text, so
                // that whoever takes the text after an evaluation finds all of its lines there.
                let mut text = filled.lock().expect("no thread panics while it holds the text");
                if let Some(line) = next(Duration::from_millis(2)) {
                    text.push_str(&line);
                    text.push('\n');
                }
                drop(text);
                std::thread::sleep(Duration::from_micros(50));
            }
        });
        Drain(text)
    }

    fn take(&self) -> String {
        std::mem::take(&mut *self.0.lock().expect("no thread panics while it holds the text"))
    }
}
