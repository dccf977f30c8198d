//! One formula of the spec, from its levels to its measured range.

use std::rc::Rc;

use super::settle::SAFETY;
use super::sum::{self, LevelTerm, Sum};
use super::{Cache, reach, references};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::form::{self, Form};
use crate::outcome::{FormulaOutcome, Note, Valid, ValueKind};
use crate::pencil;
use crate::range::{self, Followed, Quantity, Ranged};
use crate::series;
use crate::spec::{CoefficientChoice, Formula, FormChoice, Spec, Target, TermKind};

/// Times that a formula is solved again with a larger basis because the exact
/// levels at the ends of its range had not settled.
const ROUNDS: usize = 4;

/// A formula with its outcome and what further number formats need.
pub struct Measured<'a> {
    /// What the record says, outputs aside.
    pub outcome: FormulaOutcome,
    /// The measured form.
    pub ranged: Ranged,
    /// The exact quantity, followed.
    pub followed: Followed<'a>,
}
