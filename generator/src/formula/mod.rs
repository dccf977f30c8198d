//! The closed form in one number format, ready to print.
//!
//! In: a measured formula ([`FormulaOutcome`]) and a [`NumberFormat`]. Out: a
//! [`Formula`]: the numbers as the file evaluates them, value and slope as
//! small trees, the branches of the inverse, a derived bound on the rounding,
//! and the format's own range. Simplification happens here; printers do no
//! arithmetic. Bits are those of the runtime crate.
//!
//! Not here: syntax of any language.

mod bound;
mod fixed;
mod float;
mod tree;

pub use fixed::{Fixed, FixedForm, Ladder};
pub use float::{Float, FloatForm};
pub use tree::{Expr, horner, horner_slope};

use crate::diagnostic::{Diagnostic, Error, Place, Result};
use crate::outcome::{ControlOutcome, FormulaOutcome, OutputFormula, Valid};
use crate::spec::Count;

/// How numbers are held.
#[derive(Clone, Debug)]
pub enum NumberFormat {
    /// Double precision.
    F64,
    /// Single precision.
    F32,
    /// Integers that count steps.
    Fixed {
        /// The control's count.
        control: Count,
        /// The value's count.
        value: Count,
    },
}

impl NumberFormat {
    /// The record's word, which is also the default ending of the stem.
    #[must_use]
    pub fn word(&self) -> &'static str {
        match self {
            Self::F64 => "f64",
            Self::F32 => "f32",
            Self::Fixed { .. } => "fixed",
        }
    }
}

/// The numbers of one format.
#[derive(Clone, Debug, PartialEq)]
pub enum Numbers {
    /// Double precision.
    Double(Float),
    /// Single precision; every number is a single held as a double.
    Single(Float),
    /// Counts of steps.
    Fixed(Fixed),
}

/// One formula in one number format.
#[derive(Clone, Debug, PartialEq)]
pub struct Formula {
    /// What was measured; its `valid` is that of exact arithmetic.
    pub measured: FormulaOutcome,
    /// This format's own range, control's unit, ends that the format holds.
    pub valid: Valid,
    /// Bound on the difference from the formula with the record's coefficients, formula's unit.
    pub rounding: f64,
    /// Bound on |value(inverse(v)) - v|, formula's unit.
    pub inverse_rounding: f64,
    /// The numbers.
    pub numbers: Numbers,
}

/// The range on which the formula keeps its tolerance if so much rounding
/// comes on top; the unrounded answer of the range stage.
pub type OwnRange<'a> = &'a dyn Fn(f64) -> Result<Valid>;

impl Formula {
    /// Puts a measured formula into a number format.
    ///
    /// - `tolerance_place`: where the tolerance stands, for messages.
    /// - `own_range`: takes the rounding bound in the formula's unit.
    ///
    /// # Errors
    /// A tolerance, step or width that the format cannot hold (a mistake of the
    /// spec that names one that would do), or what `own_range` returns.
    pub fn new(
        measured: &FormulaOutcome,
        control: &ControlOutcome,
        format: &NumberFormat,
        tolerance_place: Option<&Place>,
        own_range: OwnRange<'_>,
    ) -> Result<Self> {
        match format {
            NumberFormat::F64 => float::double(measured, control, tolerance_place, own_range),
            NumberFormat::F32 => float::single(measured, control, tolerance_place, own_range),
            NumberFormat::Fixed { control: count, value } => {
                fixed::fixed(measured, control, count, value, tolerance_place, own_range)
            }
        }
    }

    /// The record's entry.
    #[must_use]
    pub fn output(&self) -> OutputFormula {
        let coefficients = match &self.numbers {
            Numbers::Double(float) | Numbers::Single(float) => float.coefficients(),
            Numbers::Fixed(fixed) => fixed.coefficients(),
        };
        OutputFormula {
            name: self.measured.name.clone(),
            rounding: self.rounding,
            coefficients,
            valid: self.valid.clone(),
        }
    }
}

/// What is left of the tolerance inside the range without any rounding is
/// negative already at the operating point.
fn empty(code: &'static str, message: String, place: Option<&Place>, found: String, action: String) -> Error {
    Error::accuracy(Diagnostic::new(code, message).at(place.cloned()).found(found).action(action))
}
