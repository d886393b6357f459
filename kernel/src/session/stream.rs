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

/// Text that a cell may write at once without being slowed down, in bytes.
const BURST: f64 = 64.0 * 1024.0 * 1024.0;

/// Text that a cell may write for ever, in bytes a second.
const SUSTAINED: f64 = 32.0 * 1024.0 * 1024.0;

/// Slows down a cell that writes without end.
///
/// The broadcast socket keeps what its clients have not read yet, and there is no asking it how
/// much that is; a notebook server reads some tens of megabytes a second. So the session stops
/// listening to a cell that has written a good deal more than that, and the cell waits in turn.
#[derive(Debug)]
pub struct Pacer {
    /// Bytes that clients are taken not to have read at `since`.
    unread: f64,
    since: Instant,
}

impl Pacer {
    /// Nothing has been written.
    pub fn new(now: Instant) -> Self {
        Self { unread: 0.0, since: now }
    }

    /// Text was sent.
    pub fn spend(&mut self, bytes: usize, now: Instant) {
        self.unread = self.unread_at(now) + bytes as f64;
        self.since = now;
    }

    /// Until when no more text is to be taken, if it is too much.
    pub fn pause(&self, now: Instant) -> Option<Instant> {
        let excess = self.unread_at(now) - BURST;
        (excess > 0.0).then(|| now + Duration::from_secs_f64(excess / SUSTAINED))
    }

    fn unread_at(&self, now: Instant) -> f64 {
        let read = now.saturating_duration_since(self.since).as_secs_f64() * SUSTAINED;
        (self.unread - read).max(0.0)
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
    fn a_burst_passes_and_what_goes_on_is_slowed_to_what_can_be_read() {
        let start = Instant::now();
        let mut pacer = Pacer::new(start);
        pacer.spend(60 << 20, start);
        assert_eq!(pacer.pause(start), None);
        // A gigabyte in pieces, each sent as soon as it may be.
        let mut now = start;
        for _ in 0..1024 {
            now = pacer.pause(now).unwrap_or(now);
            pacer.spend(1 << 20, now);
        }
        // 60 + 1024 MiB less the 64 at once, at 32 a second: 31.9 seconds.
        let taken = (now - start).as_secs_f64();
        assert!((31.5..32.5).contains(&taken), "{taken}");
        // After a rest a burst passes again.
        let later = now + Duration::from_secs(3);
        pacer.spend(60 << 20, later);
        assert_eq!(pacer.pause(later), None);
    }

    #[test]
    fn no_text_is_no_message() {
        let mut buffer = StreamBuffer::default();
        assert!(buffer.push(Stdout, String::new(), Instant::now()).is_empty());
        assert!(buffer.take().is_none());
    }
}
