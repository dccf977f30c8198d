//! What the program says when it cannot go on, as data.
//!
//! Stages return an [`Error`]; wording, places and advice are in its
//! [`Diagnostic`]s, several where several mistakes were found. Only the outer
//! shell prints them.

use std::fmt;

/// Text without control and direction marks, which could forge a message or
/// take over a terminal; lines are kept.
#[must_use]
pub fn visible(text: &str) -> String {
    text.chars()
        .map(|c| {
            let hidden = matches!(c, '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2060}'..='\u{2069}'
                | '\u{feff}' | '\u{e0000}'..='\u{e007f}');
            if (c.is_control() && c != '\n') || hidden { '\u{fffd}' } else { c }
        })
        .collect()
}

/// The result of every fallible stage.
pub type Result<T> = std::result::Result<T, Error>;

/// A stretch of one input file, in bytes from its start.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Place {
    /// Name of the file as the user gave it.
    pub file: String,
    /// First byte.
    pub start: usize,
    /// One past the last byte; equal to `start` for a point.
    pub end: usize,
}

/// One message to the user.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Diagnostic {
    /// Word code, lower case with hyphens, for example `unknown-key`.
    pub code: &'static str,
    /// Headline, without a final full stop.
    pub message: String,
    /// Where the cause stands, if it stands in a file.
    pub place: Option<Place>,
    /// What was found there, in the user's units.
    pub found: Option<String>,
    /// What was expected, in the user's units.
    pub expected: Option<String>,
    /// What to do about it.
    pub action: Option<String>,
}

impl Diagnostic {
    /// A message with nothing but its code and headline.
    #[must_use]
    pub fn new(code: &'static str, message: impl Into<String>) -> Self {
        Self { code, message: message.into(), place: None, found: None, expected: None, action: None }
    }

    /// The same message, pointing at `place`.
    #[must_use]
    pub fn at(mut self, place: Option<Place>) -> Self {
        self.place = place;
        self
    }

    /// The same message with what was found.
    #[must_use]
    pub fn found(mut self, text: impl Into<String>) -> Self {
        self.found = Some(text.into());
        self
    }

    /// The same message with what was expected.
    #[must_use]
    pub fn expected(mut self, text: impl Into<String>) -> Self {
        self.expected = Some(text.into());
        self
    }

    /// The same message with advice.
    #[must_use]
    pub fn action(mut self, text: impl Into<String>) -> Self {
        self.action = Some(text.into());
        self
    }
}

/// Why a run ended without its result. The three kinds are the exit statuses
/// 2, 3 and 4.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Error {
    /// The spec or the call is wrong.
    Spec(Vec<Diagnostic>),
    /// The computation could not reach what was asked.
    Accuracy(Vec<Diagnostic>),
    /// The system refused: file, permission, disk.
    System(Vec<Diagnostic>),
}

impl Error {
    /// A mistake in the spec.
    #[must_use]
    pub fn spec(diagnostic: Diagnostic) -> Self {
        Self::Spec(vec![diagnostic])
    }

    /// An accuracy that was not reached.
    #[must_use]
    pub fn accuracy(diagnostic: Diagnostic) -> Self {
        Self::Accuracy(vec![diagnostic])
    }

    /// A refusal by the system.
    #[must_use]
    pub fn system(diagnostic: Diagnostic) -> Self {
        Self::System(vec![diagnostic])
    }

    /// A broken invariant of the program itself; asks for a report.
    #[must_use]
    pub fn internal(what: impl fmt::Display) -> Self {
        Self::Accuracy(vec![
            Diagnostic::new("internal", format!("the program broke a rule of its own: {what}"))
                .action("please report this with the spec that caused it"),
        ])
    }

    /// Exit status of the program: 2, 3 or 4.
    #[must_use]
    pub fn exit_status(&self) -> u8 {
        match self {
            Self::Spec(_) => 2,
            Self::Accuracy(_) => 3,
            Self::System(_) => 4,
        }
    }

    /// The messages, in order of their place.
    #[must_use]
    pub fn diagnostics(&self) -> &[Diagnostic] {
        match self {
            Self::Spec(list) | Self::Accuracy(list) | Self::System(list) => list,
        }
    }
}

impl fmt::Display for Error {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (idx, diagnostic) in self.diagnostics().iter().enumerate() {
            if idx > 0 {
                writeln!(out)?;
            }
            write!(out, "{} ({})", diagnostic.message, diagnostic.code)?;
        }
        Ok(())
    }
}

impl std::error::Error for Error {}
