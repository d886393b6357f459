//! How any value finds its exhibit: `Exhibit`, else `Display`, else `Debug`, else its type's name.
//!
//! Rust has no way to ask in a function whether a type implements a trait, but method lookup does
//! ask: of several traits that offer the same method for `&&&Seen<T>`, `&&Seen<T>` and so on, the
//! call takes the first whose bounds hold, in the order of the references it must strip. The macro
//! `bundle_of!` writes that call where the type is known, in the cell itself.

use std::fmt::{Debug, Display};

use crate::exhibit::{Bundle, Exhibit};

/// A plain text longer than this many characters is cut, and says so.
const LONGEST_PLAIN: usize = 100_000;

/// A value to be shown.
#[doc(hidden)]
pub struct Seen<'a, T: ?Sized>(pub &'a T);

#[doc(hidden)]
pub trait ByExhibit {
    /// The exhibit.
    fn semiaxis_bundle(&self) -> Bundle;
}
impl<T: Exhibit + ?Sized> ByExhibit for &&&Seen<'_, T> {
    fn semiaxis_bundle(&self) -> Bundle {
        self.0.exhibit()
    }
}

#[doc(hidden)]
pub trait ByDisplay {
    /// The exhibit.
    fn semiaxis_bundle(&self) -> Bundle;
}
impl<T: Display + ?Sized> ByDisplay for &&Seen<'_, T> {
    fn semiaxis_bundle(&self) -> Bundle {
        by_display(&self.0)
    }
}

#[doc(hidden)]
pub trait ByDebug {
    /// The exhibit.
    fn semiaxis_bundle(&self) -> Bundle;
}
impl<T: Debug + ?Sized> ByDebug for &Seen<'_, T> {
    fn semiaxis_bundle(&self) -> Bundle {
        by_debug(&self.0)
    }
}

#[doc(hidden)]
pub trait ByName {
    /// The exhibit.
    fn semiaxis_bundle(&self) -> Bundle;
}
impl<T: ?Sized> ByName for Seen<'_, T> {
    fn semiaxis_bundle(&self) -> Bundle {
        by_name(std::any::type_name::<T>())
    }
}

// These are compiled once, here, and not in every cell.

#[inline(never)]
fn by_display(value: &dyn Display) -> Bundle {
    plain(value.to_string())
}

#[inline(never)]
fn by_debug(value: &dyn Debug) -> Bundle {
    plain(format!("{value:?}"))
}

#[inline(never)]
fn by_name(name: &str) -> Bundle {
    plain(format!("a value of type {name}"))
}

fn plain(mut text: String) -> Bundle {
    if let Some((cut, _)) = text.char_indices().nth(LONGEST_PLAIN) {
        let left_out = text[cut..].chars().count();
        text.truncate(cut);
        text.push_str(&format!("… ({left_out} more characters)"));
    }
    Bundle::new().with_plain(text)
}

/// The exhibit of any value, by reference.
#[doc(hidden)]
#[macro_export]
macro_rules! bundle_of {
    ($value:expr) => {{
        #[allow(unused_imports)]
        use $crate::live::{ByDebug as _, ByDisplay as _, ByExhibit as _, ByName as _};
        (&&&&$crate::live::Seen($value)).semiaxis_bundle()
    }};
}

/// Shows a value now, in the middle of a cell.
///
/// ```
/// for kiln in ["north", "mill"] {
///     semiaxis::show!(format!("kiln {kiln}"));
/// }
/// ```
#[macro_export]
macro_rules! show {
    ($($value:expr),+ $(,)?) => {
        $(match &$value {
            value => $crate::live::show($crate::bundle_of!(value)),
        })+
    };
}
