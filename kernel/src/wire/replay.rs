//! Replays: a message that was let in once is not let in again.
//!
//! Whoever can record the traffic of a kernel could send a signed message a second time, and its
//! signature would hold. So the kernel remembers the headers of the messages it has let in. A
//! header carries the message's id and date and is covered by the signature, hence two honest
//! messages never share one, and a recorded message cannot be given another.
//!
//! The memory is bounded; the oldest header is forgotten first. The reference client keeps the
//! same number of signatures (`Session.digest_history_size`).

use std::collections::{HashSet, VecDeque};

/// How many headers are remembered.
const REMEMBERED: usize = 65_536;

/// The headers seen lately, kept as digests of fixed size so that long ones cost no memory.
#[derive(Debug)]
pub struct ReplayGuard {
    /// Digests in the order they were seen; holds the same elements as `known`.
    order: VecDeque<[u8; 32]>,
    known: HashSet<[u8; 32]>,
    capacity: usize,
}

impl ReplayGuard {
    /// A guard that has seen nothing.
    pub fn new() -> Self {
        Self::with_capacity(REMEMBERED)
    }

    fn with_capacity(capacity: usize) -> Self {
        Self { order: VecDeque::new(), known: HashSet::new(), capacity }
    }

    /// Remembers a header and says whether it is new.
    pub fn is_new(&mut self, header: &[u8]) -> bool {
        let digest = *blake3::hash(header).as_bytes();
        if !self.known.insert(digest) {
            return false;
        }
        self.order.push_back(digest);
        if self.order.len() > self.capacity
            && let Some(oldest) = self.order.pop_front()
        {
            self.known.remove(&oldest);
        }
        true
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_header_is_new_once() {
        let mut guard = ReplayGuard::new();
        assert!(guard.is_new(b"one"));
        assert!(guard.is_new(b"two"));
        assert!(!guard.is_new(b"one"));
        assert!(!guard.is_new(b"two"));
    }

    #[test]
    fn the_oldest_header_is_forgotten_first_and_memory_stays_bounded() {
        let mut guard = ReplayGuard::with_capacity(3);
        for header in [b"a", b"b", b"c", b"d"] {
            assert!(guard.is_new(header));
        }
        assert_eq!((guard.order.len(), guard.known.len()), (3, 3));
        assert!(!guard.is_new(b"b"));
        assert!(guard.is_new(b"a"));
    }
}
