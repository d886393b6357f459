//! What a running cell has to do with the worker: its variables, its end, its error.

use std::any::Any;
use std::cell::RefCell;
use std::fmt::Debug;
use std::panic::{AssertUnwindSafe, Location, catch_unwind};

use super::message::{How, Place, Trouble};
use super::shelf::{Discarded, Kind, Shelf};
use crate::exhibit::Bundle;

/// The worker's side of one run of one cell. Compiled cells call these methods; nobody else does.
#[doc(hidden)]
pub struct Cell<'a> {
    shelf: &'a mut Shelf,
    how: How,
    result: Bundle,
    kept: Vec<String>,
    /// Taken off the shelf and not back yet.
    out: Vec<String>,
    /// Replaced values; dropped when the cell is over.
    discarded: Vec<Discarded>,
}

/// What is left to report when a cell is over.
pub(super) struct Finished {
    pub how: How,
    pub result: Bundle,
    pub kept: Vec<String>,
    pub gone: Vec<String>,
    pub trouble: Option<String>,
}

impl<'a> Cell<'a> {
    pub(super) fn new(shelf: &'a mut Shelf) -> Self {
        Self {
            shelf,
            how: How::Done,
            result: Bundle::new(),
            kept: Vec::new(),
            out: Vec::new(),
            discarded: Vec::new(),
        }
    }

    /// Whether `take` will find a value of this type; asked for all variables before any is taken,
    /// because a failure in the middle would drop those taken already.
    pub fn ready<T: 'static>(&mut self, name: &str) -> bool {
        self.is_ready(name, &Kind::of::<T>())
    }

    #[inline(never)]
    fn is_ready(&mut self, name: &str, kind: &Kind) -> bool {
        let fits = self.shelf.fits(name, kind);
        if let Err(message) = &fits {
            self.not_started(message.clone());
        }
        fits.is_ok()
    }

    /// Takes a variable off the shelf.
    ///
    /// # Panics
    /// When `ready` was not asked, or said no.
    pub fn take<T: 'static>(&mut self, name: &str) -> T {
        let value = self.take_out(name, &Kind::of::<T>());
        // SAFETY: the shelf hands over the content of a box of this type.
        *unsafe { Box::from_raw(value.cast::<T>()) }
    }

    #[inline(never)]
    fn take_out(&mut self, name: &str, kind: &Kind) -> *mut () {
        let value = self.shelf.take(name, kind).expect("`ready` was asked before");
        self.out.push(name.to_owned());
        value
    }

    /// Puts a variable back that the cell did not move; one that the cell has declared anew
    /// replaces it.
    pub fn put_back<T: 'static>(&mut self, name: &str, value: T) {
        let value = Box::into_raw(Box::new(value)).cast();
        // SAFETY: the box is of the type.
        unsafe { self.return_to_shelf(name, value, Kind::of::<T>()) }
    }

    #[inline(never)]
    unsafe fn return_to_shelf(&mut self, name: &str, value: *mut (), kind: Kind) {
        self.out.retain(|out| out != name);
        if self.kept.iter().any(|kept| kept == name) {
            // SAFETY: as the caller vouches.
            self.discarded.push(unsafe { Discarded::new(value, kind) });
        } else {
            // SAFETY: as the caller vouches.
            self.discarded.extend(unsafe { self.shelf.put(name, value, kind) });
        }
    }

    /// Puts a variable on the shelf that the cell has declared.
    pub fn put<T: 'static>(&mut self, name: &str, value: T) {
        let value = Box::into_raw(Box::new(value)).cast();
        // SAFETY: the box is of the type.
        unsafe { self.keep(name, value, Kind::of::<T>()) }
    }

    #[inline(never)]
    unsafe fn keep(&mut self, name: &str, value: *mut (), kind: Kind) {
        // SAFETY: as the caller vouches.
        self.discarded.extend(unsafe { self.shelf.put(name, value, kind) });
        self.kept.push(name.to_owned());
    }

    /// Sets what the final expression shows.
    pub fn result(&mut self, bundle: Bundle) {
        self.result = bundle;
    }

    /// Runs the body of the cell; a panic ends the body, not the worker.
    pub fn run(&mut self, body: impl FnOnce(&mut Cell<'a>) -> Result<(), Failure>) {
        let mut body = Some(body);
        // One indirection, so that the machinery of catching is compiled here and not in each cell.
        self.run_dyn(&mut |cell| match body.take() {
            Some(body) => body(cell),
            None => Ok(()),
        });
    }

    #[inline(never)]
    fn run_dyn(&mut self, body: &mut dyn FnMut(&mut Cell<'a>) -> Result<(), Failure>) {
        LAST_PANIC.take();
        self.how = match catch_unwind(AssertUnwindSafe(|| body(self))) {
            Ok(Ok(())) => How::Done,
            Ok(Err(Failure(Ending::Left))) => How::Left,
            Ok(Err(Failure(Ending::Failed(trouble)))) => How::Failed(trouble),
            Err(panic) => how_panicked(panic),
        };
        if !matches!(self.how, How::Done | How::Left) {
            self.result = Bundle::new();
        }
    }

    pub(super) fn finish(self) -> Finished {
        let mut trouble = None;
        for value in self.discarded {
            trouble = trouble.or(value.drop_quietly().err());
        }
        let Self { how, result, kept, out: gone, .. } = self;
        Finished { how, result, kept, gone, trouble }
    }

    pub(super) fn not_started(&mut self, message: String) {
        self.how = How::NotStarted(Trouble { message, type_name: None, place: None });
    }

    pub(super) fn panicked(&mut self, panic: Box<dyn Any + Send>) {
        self.how = how_panicked(panic);
    }
}

/// The payload of the panic by which a cell leaves at a check after an interrupt.
pub(super) struct Interruption;

thread_local! {
    /// Words and place of the last panic of this thread, noted by the hook for the report.
    static LAST_PANIC: RefCell<Option<Trouble>> = const { RefCell::new(None) };
}

/// Notes panics of the cell's own thread instead of printing them; those of other threads, which
/// no report will carry, are printed as usual.
pub(super) fn note_panics(cell_thread: std::thread::ThreadId) {
    let usual = std::panic::take_hook();
    std::panic::set_hook(Box::new(move |info| {
        if info.payload().is::<Interruption>() {
            return;
        }
        if std::thread::current().id() != cell_thread {
            return usual(info);
        }
        let place = info.location().map(place_of);
        let message = words_of(info.payload());
        LAST_PANIC.set(Some(Trouble { message, type_name: None, place }));
    }));
}

fn how_panicked(panic: Box<dyn Any + Send>) -> How {
    if panic.is::<Interruption>() {
        return How::Interrupted;
    }
    let noted = LAST_PANIC.take();
    // A panic carried over from another thread (`resume_unwind`) passes no hook.
    let unnoted = || Trouble { message: words_of(&*panic), type_name: None, place: None };
    How::Panicked(noted.unwrap_or_else(unnoted))
}

/// The words of a panic, from what it carries.
pub(super) fn words_of(panic: &(dyn Any + Send)) -> String {
    // `&Box<dyn Any>` is itself `Any`; look inside it.
    if let Some(inner) = panic.downcast_ref::<Box<dyn Any + Send>>() {
        return words_of(&**inner);
    }
    if let Some(words) = panic.downcast_ref::<&str>() {
        (*words).to_owned()
    } else if let Some(words) = panic.downcast_ref::<String>() {
        words.clone()
    } else {
        "a panic that carries no words".to_owned()
    }
}

fn place_of(location: &Location<'_>) -> Place {
    Place { file: location.file().to_owned(), line: location.line(), column: location.column() }
}

/// What ends the body of a cell before its end: an error met by `?`, or an early `return`.
///
/// It converts from anything that has `Debug`, and has none itself; that keeps the conversion apart
/// from the standard one of a type into itself.
#[doc(hidden)]
pub struct Failure(Ending);

enum Ending {
    Left,
    Failed(Trouble),
}

impl<E: Debug + 'static> From<E> for Failure {
    #[track_caller]
    fn from(error: E) -> Self {
        Self::new(&error, &error, std::any::type_name::<E>(), Location::caller())
    }
}

impl Failure {
    #[inline(never)]
    fn new(error: &dyn Any, debug: &dyn Debug, type_name: &str, place: &Location<'_>) -> Self {
        Self(Ending::Failed(Trouble {
            message: describe(error, debug),
            type_name: Some(type_name.to_owned()),
            place: Some(place_of(place)),
        }))
    }
}

/// An error in words: by `Display`, with its causes, for the types in use; by `Debug` for others,
/// since a conversion cannot ask whether a type has `Display`.
fn describe(any: &dyn Any, debug: &dyn Debug) -> String {
    use std::error::Error;
    fn chain(error: &(dyn Error + 'static)) -> String {
        let mut words = error.to_string();
        let mut cause = error.source();
        while let Some(inner) = cause {
            let inner_words = inner.to_string();
            if !words.contains(&inner_words) {
                words.push_str(": ");
                words.push_str(&inner_words);
            }
            cause = inner.source();
        }
        words
    }
    macro_rules! try_as {
        ($($type:ty),+ $(,)?) => {
            $(if let Some(error) = any.downcast_ref::<$type>() {
                return chain(error);
            })+
        };
    }
    if let Some(words) = any.downcast_ref::<String>() {
        return words.clone();
    }
    if let Some(words) = any.downcast_ref::<&'static str>() {
        return (*words).to_owned();
    }
    if let Some(error) = any.downcast_ref::<Box<dyn Error>>() {
        return chain(&**error);
    }
    if let Some(error) = any.downcast_ref::<Box<dyn Error + Send + Sync>>() {
        return chain(&**error);
    }
    try_as!(
        crate::Error,
        polars::error::PolarsError,
        std::io::Error,
        std::fmt::Error,
        std::num::ParseIntError,
        std::num::ParseFloatError,
        std::num::TryFromIntError,
        std::str::Utf8Error,
        std::string::FromUtf8Error,
        std::env::VarError,
        std::time::SystemTimeError,
    );
    format!("{debug:?}")
}

/// What an early `return;` at the top level of a cell gives back.
///
/// # Errors
/// Always: it is the way out.
#[doc(hidden)]
pub fn left() -> Result<(), Failure> {
    Err(Failure(Ending::Left))
}

/// How a value given to an early `return` ends the cell: a `Result` well or as a failure, any other
/// value is shown as a final expression would be.
#[doc(hidden)]
pub mod leaving {
    use super::{Bundle, Cell, Debug, Ending, Failure, Location};

    /// A value given to `return`.
    #[derive(Clone, Copy)]
    pub struct Parting<T>(pub T);

    /// For `Result`; found first.
    pub trait LeaveByResult {
        /// Ends the cell.
        fn semiaxis_leave(self, cell: &mut Cell<'_>, show: impl FnOnce() -> Bundle) -> Failure;
    }
    impl<T, E: Debug + 'static> LeaveByResult for &Parting<&Result<T, E>> {
        #[track_caller]
        fn semiaxis_leave(self, _: &mut Cell<'_>, _: impl FnOnce() -> Bundle) -> Failure {
            match self.0 {
                Ok(_) => Failure(Ending::Left),
                Err(error) => {
                    Failure::new(error, error, std::any::type_name::<E>(), Location::caller())
                }
            }
        }
    }

    /// For everything else.
    pub trait LeaveByValue {
        /// Ends the cell.
        fn semiaxis_leave(self, cell: &mut Cell<'_>, show: impl FnOnce() -> Bundle) -> Failure;
    }
    impl<T> LeaveByValue for Parting<&T> {
        fn semiaxis_leave(self, cell: &mut Cell<'_>, show: impl FnOnce() -> Bundle) -> Failure {
            cell.result(show());
            Failure(Ending::Left)
        }
    }
}

/// The value of an early `return` at the top level of a cell.
#[doc(hidden)]
#[macro_export]
macro_rules! leave {
    ($cell:ident, $value:expr) => {{
        #[allow(unused_imports)]
        use $crate::live::leaving::{LeaveByResult as _, LeaveByValue as _, Parting};
        let value = &$value;
        ::core::result::Result::Err(
            (&Parting(value)).semiaxis_leave($cell, || $crate::bundle_of!(value)),
        )
    }};
}
