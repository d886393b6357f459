//! Text on its way out: gathered for a moment, so that a cell that writes a million short lines
//! sends a few hundred messages, yet soon enough that a prompt without a newline is seen at once.

use std::time::{Duration, Instant};

use crate::cells::types::StreamName;

/// How long text may wait for more of it.
const PATIENCE: Duration = Duration::from_millis(20);

/// How much text one message carries at most before it is sent.
const ENOUGH: usize = 64 * 1024;

/// Text of one stream that has not been sent yet.
#[derive(Debug)]
pub struct Gathered {
    /// The stream it was written to.
    pub name: StreamName,
    /// The text.
    pub text: String,
}

/// Gathers text until it is time to send it.
#[derive(Debug, Default)]
pub struct StreamBuffer {
    pending: Option<(Gathered, Instant)>,
}

impl StreamBuffer {
    /// Adds text and returns what is to be sent now, in this order.
    pub fn push(&mut self, name: StreamName, text: String, now: Instant) -> Vec<Gathered> {
        let mut out = Vec::new();
        if text.is_empty() {
            return out;
        }
        if self.pending.as_ref().is_some_and(|(gathered, _)| gathered.name != name) {
            out.extend(self.take());
        }
        match &mut self.pending {
            Some((gathered, _)) => gathered.text.push_str(&text),
            None => self.pending = Some((Gathered { name, text }, now + PATIENCE)),
        }
        if self.pending.as_ref().is_some_and(|(gathered, _)| gathered.text.len() >= ENOUGH) {
            out.extend(self.take());
        }
        out
    }

    /// Takes what was gathered, for instance because something else is to be shown after it.
    pub fn take(&mut self) -> Option<Gathered> {
        self.pending.take().map(|(gathered, _)| gathered)
    }

    /// When what was gathered is to be sent at the latest.
    pub fn due(&self) -> Option<Instant> {
        self.pending.as_ref().map(|(_, due)| *due)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use StreamName::{Stderr, Stdout};

    fn texts(out: &[Gathered]) -> Vec<(StreamName, &str)> {
        out.iter().map(|gathered| (gathered.name, gathered.text.as_str())).collect()
    }

    #[test]
    fn text_waits_a_moment_from_its_first_piece() {
        let mut buffer = StreamBuffer::default();
        let start = Instant::now();
        assert!(buffer.due().is_none());
        assert!(buffer.push(Stdout, "a".into(), start).is_empty());
        assert!(buffer.push(Stdout, "b".into(), start + Duration::from_millis(15)).is_empty());
        // Later pieces do not put off the first one, or a busy cell would never be heard.
        assert_eq!(buffer.due(), Some(start + PATIENCE));
        assert_eq!(texts(&[buffer.take().unwrap()]), [(Stdout, "ab")]);
        assert!(buffer.due().is_none() && buffer.take().is_none());
    }

    #[test]
    fn the_order_between_the_streams_is_kept() {
        let mut buffer = StreamBuffer::default();
        let now = Instant::now();
        assert!(buffer.push(Stdout, "out".into(), now).is_empty());
        assert_eq!(texts(&buffer.push(Stderr, "err".into(), now)), [(Stdout, "out")]);
        assert_eq!(texts(&buffer.push(Stdout, "more".into(), now)), [(Stderr, "err")]);
        assert_eq!(buffer.take().unwrap().text, "more");
    }

    #[test]
    fn much_text_goes_out_in_large_pieces_and_none_is_lost() {
        let mut buffer = StreamBuffer::default();
        let now = Instant::now();
        let line = "a line of forty characters, all counted\n";
        let mut sent = String::new();
        let mut messages = 0;
        for _ in 0..250_000 {
            for piece in buffer.push(Stdout, line.to_owned(), now) {
                messages += 1;
                sent.push_str(&piece.text);
            }
        }
        sent.extend(buffer.take().map(|gathered| gathered.text));
        assert_eq!(sent.len(), 10_000_000);
        assert!(messages < 200, "{messages} messages");
    }

    #[test]
    fn no_text_is_no_message() {
        let mut buffer = StreamBuffer::default();
        assert!(buffer.push(Stdout, String::new(), Instant::now()).is_empty());
        assert!(buffer.take().is_none());
    }
}
