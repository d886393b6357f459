//! Records: a notebook run from top to bottom and written down so that it can be handed over, read
//! without any program but a browser, checked, and run again.
//!
//! A record is one HTML file. What a person reads and what `semiaxis verify` compares are both in it:
//! the notebook, the outputs with the numbers behind them, and a manifest of everything that they
//! rest on. The manifest holds digests of all other parts and of the page itself, and its own digest
//! stands on the page, so that a change of one byte anywhere is found. A digest protects against
//! accidents and careless edits; against somebody who computes all digests anew only the manifest's
//! digest helps that was handed over by another way.
//!
//! [`gather`] runs the notebook, [`evidence`] is what is kept, [`page`] writes it down with
//! [`narrative`], [`exhibits`] and [`appendix`]; [`seal`] holds the parts together and takes them
//! apart; [`compare`] says what differs, and [`verify`] runs a record again.

pub mod appendix;
pub mod command;
pub mod compare;
pub mod data;
pub mod error;
pub mod evidence;
pub mod exhibits;
pub mod gather;
pub mod highlight;
pub mod host;
pub mod markup;
pub mod narrative;
pub mod page;
pub mod sanitise;
pub mod seal;
pub mod verify;
