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

/// One stored value: an owned allocation, and what is needed to hand it out or to drop it.
struct Slot {
    /// Made by `Box::into_raw` on a box of the type that `identity` stands for.
    value: *mut (),
    identity: TypeId,
    type_name: &'static str,
    size: usize,
    align: usize,
    /// Frees `value`; instantiated for its type by `Slot::new`.
    free: unsafe fn(*mut ()),
    /// The kernel vouches that the type's present name means the definition it was stored under.
    relabelled: bool,
}

impl Slot {
    fn new<T: 'static>(value: T) -> Self {
        unsafe fn free<T>(value: *mut ()) {
            // SAFETY: `value` came from `Box::into_raw` on a `Box<T>`, and is freed once.
            drop(unsafe { Box::from_raw(value.cast::<T>()) });
        }
        Self {
            value: Box::into_raw(Box::new(value)).cast(),
            identity: TypeId::of::<T>(),
            type_name: type_name::<T>(),
            size: size_of::<T>(),
            align: align_of::<T>(),
            free: free::<T>,
            relabelled: false,
        }
    }

    fn fits<T: 'static>(&self) -> bool {
        self.identity == TypeId::of::<T>()
            || (self.relabelled && self.size == size_of::<T>() && self.align == align_of::<T>())
    }

    fn into_value<T: 'static>(self) -> T {
        // SAFETY: `fits` was asked before; `self` is forgotten, so the value has one owner.
        let value = unsafe { Box::from_raw(self.value.cast::<T>()) };
        std::mem::forget(self);
        *value
    }
}

impl Drop for Slot {
    fn drop(&mut self) {
        // SAFETY: the slot owns its value, which was not taken out (that forgets the slot).
        unsafe { (self.free)(self.value) }
    }
}

impl Shelf {
    pub(super) fn holds(&self, name: &str) -> bool {
        self.slots.contains_key(name)
    }

    /// Takes a variable off the shelf, or says why that cannot be.
    pub(super) fn take<T: 'static>(&mut self, name: &str) -> Result<T, String> {
        let slot = self.slots.remove(name).ok_or_else(|| format!("there is no variable `{name}`"))?;
        if slot.fits::<T>() {
            return Ok(slot.into_value());
        }
        let found = slot.type_name;
        self.slots.insert(name.to_owned(), slot);
        Err(format!("`{name}` holds a {found}, not a {}", type_name::<T>()))
    }

    /// Whether `take` would succeed.
    pub(super) fn fits<T: 'static>(&self, name: &str) -> Result<(), String> {
        match self.slots.get(name) {
            None => Err(format!("there is no variable `{name}`")),
            Some(slot) if slot.fits::<T>() => Ok(()),
            Some(slot) => {
                Err(format!("`{name}` holds a {}, not a {}", slot.type_name, type_name::<T>()))
            }
        }
    }

    /// Puts a variable on the shelf; the one that was there under its name comes back, for the
    /// caller to drop where a panic in its destructor does no harm.
    pub(super) fn put<T: 'static>(&mut self, name: &str, value: T) -> Option<Discarded> {
        self.slots.insert(name.to_owned(), Slot::new(value)).map(Discarded)
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
    /// Drops the value; a panic in its destructor is reported instead of spread.
    pub(super) fn drop_quietly(self) -> Result<(), String> {
        catch_unwind(AssertUnwindSafe(|| drop(self.0))).map_err(|panic| super::cell::words_of(&panic))
    }
}
