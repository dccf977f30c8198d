//! How far a closed form follows the exact level.
//!
//! In: the solved levels that make up a formula, and candidate forms. Out: a
//! [`Ranged`] per candidate: the largest interval around the operating point
//! on which the form stays within its tolerance, why it ends there, the error
//! budget inside, and samples.
//!
//! Method: the exact level is followed outwards by isolation discs; on each
//! piece it is interpolated at Chebyshev points with a bounded error; ends are
//! found on the interpolants by proven bounds and polished by exact solves. Where
//! two levels come close, both are followed as a pair, and the walk goes over to the
//! other level where that is the same state and the form does not notice the gap.
//!
//! Not here: languages, number formats.

mod crossing;
mod exact;
mod follow;
mod followed;
mod formal;
mod interpolant;
mod measure;
mod overlap;
#[cfg(test)]
mod toy;
mod view;

pub use followed::{Followed, follow, follow_overlap};
pub use formal::Formal;

use crate::form::Form;
use crate::outcome::Note;
use crate::series::AnyLevel;

/// One level in a sum.
pub struct Term<'a> {
    /// Weight, the conversion from the model's unit to the formula's included.
    pub times: f64,
    /// Name of the system, for notes.
    pub system: &'a str,
    /// The solved level.
    pub level: &'a AnyLevel,
}

/// What is to be followed.
pub struct Request<'a> {
    /// Operating point.
    pub at: f64,
    /// Wanted interval, `from <= at <= to`.
    pub within: (f64, f64),
    /// The levels of the sum.
    pub terms: Vec<Term<'a>>,
    /// Constants and expressions of the sum, as change from the operating
    /// point; takes the control, gives the formula's unit, NaN where undefined.
    pub known_change: &'a dyn Fn(f64) -> f64,
    /// The whole quantity at the operating point; 0 if the formula gives the
    /// change from there.
    pub base: f64,
    /// Largest error allowed, formula's unit.
    pub tolerance: f64,
}

/// A squared overlap that is to be followed.
pub struct OverlapRequest<'a> {
    /// Operating point.
    pub at: f64,
    /// Wanted interval, `from <= at <= to`.
    pub within: (f64, f64),
    /// Names of both systems, for notes.
    pub systems: [&'a str; 2],
    /// The two levels.
    pub levels: [&'a AnyLevel; 2],
    /// The squared overlap at the operating point as the series has it; 0 if the formula
    /// gives the change from there.
    pub base: f64,
    /// Largest error allowed.
    pub tolerance: f64,
}

/// What belongs to one form in one number format.
pub struct Candidate<'a> {
    /// The form.
    pub form: &'a Form,
    /// Numerical error of the exact quantity at an offset d, formula's unit.
    pub numerical: &'a dyn Fn(f64) -> f64,
    /// Error of the written digits at an offset d, formula's unit.
    pub written: &'a dyn Fn(f64) -> f64,
    /// The number format's own rounding bound; 0 for the formula itself.
    pub rounding: f64,
}

/// Why a range ends; the words are those of the record.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Limit {
    /// As far as was asked.
    Within,
    /// The remainder of the form.
    Remainder,
    /// The followed state meets another level.
    Crossing,
    /// The carrier's level reaches the lowered outer edge.
    Escape,
    /// Rounding of the number format.
    Rounding,
    /// The squared half gap would be negative.
    HalfGap,
    /// Unbound levels: the series' own next orders.
    Formal,
    /// The quantity is not defined further out.
    Undefined,
}

impl Limit {
    /// The record's word.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Self::Within => "within",
            Self::Remainder => "remainder",
            Self::Crossing => "crossing",
            Self::Escape => "escape",
            Self::Rounding => "rounding",
            Self::HalfGap => "half_gap",
            Self::Formal => "formal",
            Self::Undefined => "undefined",
        }
    }
}

/// One exact value beside the form's.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sample {
    /// Control value.
    pub control: f64,
    /// Exact quantity (its change, with `shift`).
    pub exact: f64,
    /// The form's value.
    pub formula: f64,
}

/// A form with its measured range.
#[derive(Clone, Debug, PartialEq)]
pub struct Ranged {
    /// The form.
    pub form: Form,
    /// Both ends, unrounded.
    pub valid: (f64, f64),
    /// Why each side ends.
    pub limited_by: [Limit; 2],
    /// Per side, where the sum first exceeds the tolerance; `None` if not found.
    pub first_to_fail: [Option<f64>; 2],
    /// Largest remainder inside.
    pub remainder: f64,
    /// Largest numerical error inside.
    pub numerical: f64,
    /// Largest error of written digits inside.
    pub written: f64,
    /// At least 9 samples over the range, ends included; none for a candidate with rounding.
    pub samples: Vec<Sample>,
    /// Crossings and the like.
    pub notes: Vec<Note>,
}
