//! One file per language: a [`Formula`](crate::formula) to text.
//!
//! Not here: physics.

pub mod record;

/// A finished file, not yet written.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Source {
    /// File name, no folder.
    pub file: String,
    /// Whole text.
    pub text: String,
}
