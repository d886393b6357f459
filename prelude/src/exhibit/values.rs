//! Exhibits of the values that stand around others: options, results, references, text.

use std::fmt::Debug;

use super::{Bundle, Exhibit};

/// `()` shows nothing.
impl Exhibit for () {
    fn exhibit(&self) -> Bundle {
        Bundle::new()
    }
}

impl<T: Exhibit + ?Sized> Exhibit for &T {
    fn exhibit(&self) -> Bundle {
        (**self).exhibit()
    }
}

impl<T: Exhibit + ?Sized> Exhibit for &mut T {
    fn exhibit(&self) -> Bundle {
        (**self).exhibit()
    }
}

impl<T: Exhibit + ?Sized> Exhibit for Box<T> {
    fn exhibit(&self) -> Bundle {
        (**self).exhibit()
    }
}

/// `Some` shows its value, `None` the word `None`.
impl<T: Exhibit> Exhibit for Option<T> {
    fn exhibit(&self) -> Bundle {
        match self {
            Some(value) => value.exhibit(),
            None => Bundle::new().with_plain("None"),
        }
    }
}

/// `Ok` shows its value, `Err` its error as plain text.
impl<T: Exhibit, E: Debug> Exhibit for Result<T, E> {
    fn exhibit(&self) -> Bundle {
        match self {
            Ok(value) => value.exhibit(),
            Err(error) => Bundle::new().with_plain(format!("Err({error:?})")),
        }
    }
}

/// Text shows as it is, without quotes.
impl Exhibit for str {
    fn exhibit(&self) -> Bundle {
        Bundle::new().with_plain(self)
    }
}

/// Text shows as it is, without quotes.
impl Exhibit for String {
    fn exhibit(&self) -> Bundle {
        self.as_str().exhibit()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn wrappers_show_what_they_hold() {
        let text = "tile";
        assert_eq!(Some(text).exhibit().text("text/plain"), Some("tile"));
        assert_eq!(Box::new(text.to_owned()).exhibit().text("text/plain"), Some("tile"));
        assert_eq!(Ok::<_, String>(text).exhibit().text("text/plain"), Some("tile"));
        assert_eq!(None::<String>.exhibit().text("text/plain"), Some("None"));
        assert_eq!(
            Err::<String, _>("no such tile").exhibit().text("text/plain"),
            Some("Err(\"no such tile\")")
        );
    }

    #[test]
    fn nothing_shows_nothing() {
        assert!(().exhibit().is_empty());
        assert!(Ok::<(), String>(()).exhibit().is_empty());
    }
}
