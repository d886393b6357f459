//! How far long work has come, for the person who waits for it.
//!
//! Work counts its steps; nothing else happens on its threads. The worker's own thread looks at the
//! counter a few times a second and reports it once the work has taken a second, so that quick work
//! shows nothing and counting costs one addition. Outside a worker nothing is ever shown.

use std::borrow::Cow;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::sync::{Arc, Mutex, PoisonError, Weak};
use std::time::{Duration, Instant};

use super::message::Line;

/// Work that is over sooner shows no line.
const PATIENCE: Duration = Duration::from_secs(1);

/// How often a line is brought up to date.
const EVERY: Duration = Duration::from_millis(200);

/// Counts the steps of long work, and shows in the notebook how far it has come; the line goes when
/// this is dropped.
///
/// While several are alive, the one that was made last is shown: it is the work inside the others.
///
/// ```
/// use semiaxis::live::Progress;
///
/// let progress = Progress::new("firing", 3);
/// for _ in 0..3 {
///     progress.advance(1);
/// }
/// assert_eq!(progress.done(), 3);
/// ```
#[derive(Debug)]
pub struct Progress {
    work: Arc<Work>,
}

#[derive(Debug)]
struct Work {
    what: Cow<'static, str>,
    total: Option<usize>,
    done: AtomicUsize,
    since: Instant,
}

/// The work under way, the innermost last.
static UNDER_WAY: Mutex<Vec<Weak<Work>>> = Mutex::new(Vec::new());

impl Progress {
    /// Starts counting work of this many steps.
    pub fn new(what: impl Into<Cow<'static, str>>, total: usize) -> Self {
        Self::of(what.into(), Some(total))
    }

    /// Starts counting work whose number of steps nobody knows.
    pub fn open_ended(what: impl Into<Cow<'static, str>>) -> Self {
        Self::of(what.into(), None)
    }

    fn of(what: Cow<'static, str>, total: Option<usize>) -> Self {
        let work = Arc::new(Work { what, total, done: AtomicUsize::new(0), since: Instant::now() });
        let mut under_way = UNDER_WAY.lock().unwrap_or_else(PoisonError::into_inner);
        under_way.push(Arc::downgrade(&work));
        Progress { work }
    }

    /// Says that more steps are done; any thread may.
    #[inline]
    pub fn advance(&self, steps: usize) {
        self.work.done.fetch_add(steps, Ordering::Relaxed);
    }

    /// How many steps are done.
    pub fn done(&self) -> usize {
        self.work.done.load(Ordering::Relaxed)
    }
}

impl Drop for Progress {
    fn drop(&mut self) {
        let mut under_way = UNDER_WAY.lock().unwrap_or_else(PoisonError::into_inner);
        under_way.retain(|work| !std::ptr::eq(work.as_ptr(), Arc::as_ptr(&self.work)));
    }
}

/// An iterator that counts what is taken from it as steps of work; made by [`counted`].
#[derive(Debug)]
pub struct Counted<I> {
    items: I,
    progress: Progress,
}

/// Shows how far a loop has come: `for batch in counted("batches", batches) { … }`.
///
/// The number of steps is the iterator's upper bound where it has one. The loop stops at an
/// interrupt, as every loop of a cell does.
///
/// ```
/// use semiaxis::live::counted;
///
/// let total: usize = counted("tiles", 1..=4).sum();
/// assert_eq!(total, 10);
/// ```
pub fn counted<I: IntoIterator>(
    what: impl Into<Cow<'static, str>>,
    items: I,
) -> Counted<I::IntoIter> {
    let items = items.into_iter();
    let progress = Progress::of(what.into(), items.size_hint().1);
    Counted { items, progress }
}

impl<I: Iterator> Iterator for Counted<I> {
    type Item = I::Item;

    fn next(&mut self) -> Option<I::Item> {
        super::checkpoint();
        let item = self.items.next()?;
        self.progress.advance(1);
        Some(item)
    }

    fn size_hint(&self) -> (usize, Option<usize>) {
        self.items.size_hint()
    }
}

/// Decides, whenever it is asked, whether a line is to be reported.
#[derive(Debug)]
pub(super) struct Reporter {
    shown: bool,
    last: Option<Instant>,
}

/// What is to be done about the line.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Change {
    Nothing,
    Show(Line),
    Remove,
}

impl Reporter {
    /// Nothing is shown.
    pub const fn new() -> Self {
        Reporter { shown: false, last: None }
    }

    /// What is to be shown now. Asked every few milliseconds while a cell runs.
    pub fn look(&mut self, now: Instant) -> Change {
        let under_way = UNDER_WAY.lock().unwrap_or_else(PoisonError::into_inner);
        let innermost = under_way.iter().rev().find_map(Weak::upgrade);
        drop(under_way);
        self.decide(innermost.as_deref(), now)
    }

    fn decide(&mut self, innermost: Option<&Work>, now: Instant) -> Change {
        match innermost {
            Some(work) if now.saturating_duration_since(work.since) >= PATIENCE => {
                if self.last.is_some_and(|last| now.saturating_duration_since(last) < EVERY) {
                    return Change::Nothing;
                }
                (self.shown, self.last) = (true, Some(now));
                Change::Show(Line {
                    what: work.what.clone().into_owned(),
                    done: work.done.load(Ordering::Relaxed),
                    total: work.total,
                    seconds: now.saturating_duration_since(work.since).as_secs_f64(),
                })
            }
            // Work inside longer work has begun or ended: the line stays until the next one.
            Some(_) => Change::Nothing,
            None => self.end(),
        }
    }

    /// The cell is over; a line that is still there goes.
    pub fn end(&mut self) -> Change {
        self.last = None;
        if std::mem::take(&mut self.shown) { Change::Remove } else { Change::Nothing }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // The list of work under way is the process's, and other tests work at the same time; so these
    // hand over the work to speak of.

    #[test]
    fn long_work_is_reported_now_and_then_and_removed_at_its_end() {
        let mut reporter = Reporter::new();
        let outer = Progress::new("outer", 10);
        let start = outer.work.since;
        let mut after = |work: Option<&Progress>, milliseconds: u64| {
            let now = start + Duration::from_millis(milliseconds);
            reporter.decide(work.map(|progress| &*progress.work), now)
        };
        assert_eq!(after(Some(&outer), 900), Change::Nothing);
        outer.advance(4);
        let Change::Show(line) = after(Some(&outer), 1100) else { panic!("no line") };
        assert_eq!((line.what.as_str(), line.done, line.total), ("outer", 4, Some(10)));
        assert!((line.seconds - 1.1).abs() < 1e-9);
        assert_eq!(after(Some(&outer), 1200), Change::Nothing);
        let inner = Progress::open_ended("inner");
        let Change::Show(line) = after(Some(&inner), 9000) else { panic!("no line") };
        assert_eq!((line.what.as_str(), line.total), ("inner", None));
        assert!(matches!(after(Some(&outer), 9400), Change::Show(line) if line.what == "outer"));
        assert_eq!(after(None, 9401), Change::Remove);
        assert_eq!(after(None, 9900), Change::Nothing);
        assert_eq!(reporter.end(), Change::Nothing);
    }

    #[test]
    fn work_is_under_way_until_it_is_dropped() {
        let listed = |work: &Arc<Work>| {
            let under_way = UNDER_WAY.lock().unwrap_or_else(PoisonError::into_inner);
            under_way.iter().any(|known| std::ptr::eq(known.as_ptr(), Arc::as_ptr(work)))
        };
        let progress = Progress::new("listed", 1);
        let work = Arc::clone(&progress.work);
        assert!(listed(&work));
        drop(progress);
        assert!(!listed(&work));
    }
}
