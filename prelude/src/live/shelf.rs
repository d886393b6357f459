//! The shelf: where variables stay between cells.
//!
//! A variable is stored by a generic `put`, which needs no name for its type, and taken back by a
//! cell whose text names the type that the compiler reported. The two agree because the kernel
//! keeps the account; the type's identity is checked all the same.

use std::any::{TypeId, type_name};
use std::collections::HashMap;
use std::panic::{AssertUnwindSafe, catch_unwind};

/// The variables of a session. It never leaves the thread on which cells run, so that values need
/// not be `Send`.
#[derive(Default)]
pub(super) struct Shelf {
    slots: HashMap<String, Slot>,
}

/// What the shelf must know of a type. The shelf's own code is compiled once, here, and takes this
/// instead of a type parameter, because whatever is generic is compiled again in every cell.
#[doc(hidden)]
#[derive(Clone, Copy)]
pub struct Kind {
    identity: TypeId,
    type_name: &'static str,
    size: usize,
    align: usize,
    /// Frees a value that was made by `Box::into_raw` on a box of the type.
    free: unsafe fn(*mut ()),
}

impl Kind {
    /// What there is to know of `T`.
    pub fn of<T: 'static>() -> Self {
        unsafe fn free<T>(value: *mut ()) {
            // SAFETY: the caller owns `value`, which came from `Box::into_raw` on a `Box<T>`.
            drop(unsafe { Box::from_raw(value.cast::<T>()) });
        }
        Self {
            identity: TypeId::of::<T>(),
            type_name: type_name::<T>(),
            size: size_of::<T>(),
            align: align_of::<T>(),
            free: free::<T>,
        }
    }
}

/// One stored value.
struct Slot {
    /// Made by `Box::into_raw` on a box of the type that `kind` stands for.
    value: *mut (),
    kind: Kind,
    /// The kernel vouches that the type's present name means the definition it was stored under.
    relabelled: bool,
}

impl Slot {
    fn fits(&self, kind: &Kind) -> bool {
        self.kind.identity == kind.identity
            || (self.relabelled && self.kind.size == kind.size && self.kind.align == kind.align)
    }
}

impl Drop for Slot {
    fn drop(&mut self) {
        // SAFETY: the slot owns its value; one that was taken out forgets its slot.
        unsafe { (self.kind.free)(self.value) }
    }
}

impl Shelf {
    pub(super) fn holds(&self, name: &str) -> bool {
        self.slots.contains_key(name)
    }

    /// Whether a variable can be taken as this type, and if not why.
    pub(super) fn fits(&self, name: &str, kind: &Kind) -> Result<(), String> {
        match self.slots.get(name) {
            None => Err(format!("there is no variable `{name}`")),
            Some(slot) if slot.fits(kind) => Ok(()),
            Some(slot) => {
                Err(format!("`{name}` holds a {}, not a {}", slot.kind.type_name, kind.type_name))
            }
        }
    }

    /// Takes a variable off the shelf: the content of a box of the type, which the caller now owns.
    pub(super) fn take(&mut self, name: &str, kind: &Kind) -> Result<*mut (), String> {
        self.fits(name, kind)?;
        let slot =
            self.slots.remove(name).ok_or_else(|| format!("there is no variable `{name}`"))?;
        let value = slot.value;
        std::mem::forget(slot);
        Ok(value)
    }

    /// Puts a variable on the shelf; the one that was there under its name comes back, for the
    /// caller to drop where a panic in its destructor does no harm.
    ///
    /// # Safety
    /// `value` must come from `Box::into_raw` on a box of the type of `kind`; the shelf owns it now.
    pub(super) unsafe fn put(
        &mut self,
        name: &str,
        value: *mut (),
        kind: Kind,
    ) -> Option<Discarded> {
        let slot = Slot { value, kind, relabelled: false };
        self.slots.insert(name.to_owned(), slot).map(Discarded)
    }

    pub(super) fn remove(&mut self, name: &str) -> Option<Discarded> {
        self.slots.remove(name).map(Discarded)
    }

    pub(super) fn relabel(&mut self, name: &str) {
        if let Some(slot) = self.slots.get_mut(name) {
            slot.relabelled = true;
        }
    }
}

/// A value on its way out.
pub(super) struct Discarded(Slot);

impl Discarded {
    /// A value that is not on the shelf.
    ///
    /// # Safety
    /// As for [`Shelf::put`].
    pub(super) unsafe fn new(value: *mut (), kind: Kind) -> Self {
        Self(Slot { value, kind, relabelled: false })
    }

    /// Drops the value; a panic in its destructor is reported instead of spread.
    pub(super) fn drop_quietly(self) -> Result<(), String> {
        catch_unwind(AssertUnwindSafe(|| drop(self.0)))
            .map_err(|panic| super::cell::words_of(&panic))
    }
}
