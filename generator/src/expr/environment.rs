//! What the holder of an expression says about its names.

use super::PartOperator;
use crate::units::{Fault, Value};

/// What a name stands for.
#[derive(Clone, Debug, PartialEq)]
pub enum Symbol {
    /// A number.
    Constant(Value),
    /// The control; the value is one of its units.
    Control(Value),
    /// The position; the value is one unit of the tree's position.
    Position(Value),
    /// A part of a product system; `vector` if `dot` takes it.
    Part {
        /// Position in the system's list.
        index: usize,
        /// True for a vector operator.
        vector: bool,
    },
    /// A known name that has no meaning here; the text says why.
    Forbidden(String),
}

/// An operator of a part.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct OperatorSymbol {
    /// Which operator.
    pub operator: PartOperator,
    /// What the operator's own unit is worth (1 for most; one nanometre for `.x`
    /// of a length).
    pub size: Value,
    /// True if functions may be taken of it: `.x` of an interval or oscillator.
    pub coordinate: bool,
}

/// Meaning of the names that are not built in.
pub trait Environment {
    /// What a name stands for.
    fn look_up(&self, name: &str) -> Option<Symbol>;

    /// An operator of a part; the arguments are those in brackets.
    ///
    /// # Errors
    /// If the part has no such operator; the stretch of the fault is ignored.
    fn operator(&self, part: usize, name: &str, arguments: &[usize]) -> Result<OperatorSymbol, Fault> {
        let _ = (part, arguments);
        Err(Fault::new("unknown-operator", 0..0, format!("`{name}` is no operator here")))
    }

    /// All names, for suggestions.
    fn names(&self) -> Vec<String>;
}
