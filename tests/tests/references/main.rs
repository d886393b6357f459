//! Numbers from outside: books, and other programs on open data, a file for each statistical
//! family. `tests/references/README.md` says how the values were made.

mod comparison;
mod components;
mod gaps;
mod outliers;
mod parallel;
mod retention;
mod robust;
mod rotation;
mod stability;
mod tables;
mod transform;
mod weights_and_meaning;

mod files;
