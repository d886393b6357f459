//! The session log: what ran in each session, kept so that it can be found again.
//!
//! Each session writes one file of JSON lines into the user's data folder, readable by its owner only.
//! A line holds an entry and a hash over the entry and the hash of the line before, so that a changed,
//! added or missing line is noticed; what a crash cuts off at the end is the only loss that is not.
//! An entry is handed to the system before the cell's reply is sent, and pushed to the disk behind it.
//!
//! [`entry`] is what is kept, [`store`] writes, [`read`] reads and checks, [`tell`] shows sessions and
//! turns one into a notebook.

pub mod entry;
pub mod read;
pub mod store;
pub mod tell;
