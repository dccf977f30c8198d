//! A mistake inside one scalar text, before anyone knows the file.

use std::fmt;
use std::ops::Range;

use crate::diagnostic::{Diagnostic, Place};

/// A mistake in a unit, quantity or expression, with its stretch of that text.
///
/// The stage that knows where the text stands turns it into a [`Diagnostic`].
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// Word code, lower case with hyphens.
    pub code: &'static str,
    /// Bytes of the text that are wrong; empty for a point. Both ends are
    /// character boundaries inside the text.
    pub span: Range<usize>,
    /// Headline, without a final full stop.
    pub message: String,
    /// What was found.
    pub found: Option<Box<str>>,
    /// What was expected.
    pub expected: Option<Box<str>>,
    /// What to do about it.
    pub action: Option<Box<str>>,
}

impl Fault {
    /// A fault with nothing but code, stretch and headline.
    #[must_use]
    pub fn new(code: &'static str, span: Range<usize>, message: impl Into<String>) -> Self {
        Self { code, span, message: message.into(), found: None, expected: None, action: None }
    }

    /// The same fault with what was found.
    #[must_use]
    pub fn found(mut self, text: impl Into<String>) -> Self {
        self.found = Some(text.into().into_boxed_str());
        self
    }

    /// The same fault with what was expected.
    #[must_use]
    pub fn expected(mut self, text: impl Into<String>) -> Self {
        self.expected = Some(text.into().into_boxed_str());
        self
    }

    /// The same fault with advice.
    #[must_use]
    pub fn action(mut self, text: impl Into<String>) -> Self {
        self.action = Some(text.into().into_boxed_str());
        self
    }

    /// The same fault in a longer text that holds this one from byte `offset` on.
    #[must_use]
    pub fn moved(mut self, offset: usize) -> Self {
        self.span = self.span.start.saturating_add(offset)..self.span.end.saturating_add(offset);
        self
    }

    /// The message to the user, pointing at `place`.
    #[must_use]
    pub fn diagnostic(self, place: Option<Place>) -> Diagnostic {
        Diagnostic {
            code: self.code,
            message: self.message,
            place,
            found: self.found.map(String::from),
            expected: self.expected.map(String::from),
            action: self.action.map(String::from),
        }
    }
}

impl fmt::Display for Fault {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(out, "{} ({})", self.message, self.code)
    }
}

impl std::error::Error for Fault {}
