//! Check, compare, explain, report: what people ask about a finished run.
//!
//! In: outcomes, records and the texts of generated files. Out: text, or plain
//! data that the command line prints as JSON.
//!
//! Not here: files on disk, the terminal, solving.

pub mod check;
pub mod compare;
pub mod edits;
pub mod explain;
pub mod numbers;
pub mod plot;
pub mod report;
pub mod table;

#[cfg(test)]
pub(crate) mod example;
