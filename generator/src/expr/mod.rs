//! Expressions of the spec: text to tree, dimension check, derivatives,
//! simplification, evaluation.
//!
//! In: the text of an [`Expression`] and an [`Environment`] that knows its names.
//! Out: a [`Tree`] of plain numbers, the control, the position and operators of
//! parts, with its dimension ([`Resolved`]).
//!
//! Derivatives are exact, by truncated power series ([`Tree::taylor`]): the same
//! rules as symbolic differentiation, but in time proportional to the size of
//! the expression, whereas symbolic derivatives of nested functions grow with the
//! power of their order.
//!
//! Not here: YAML, matrices.

mod algebra;
mod build;
mod change;
mod environment;
mod interval;
mod jet;
mod kink;
mod print;
mod query;
mod resolve;
mod text;

pub use environment::{Environment, OperatorSymbol, Symbol};
pub use jet::TERMS;
pub use kink::{Kink, kinks};
pub use resolve::Resolved;
pub use text::Expression;

/// Functions of the language.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs, reason = "each name is the function")]
pub enum Function {
    Sqrt,
    Exp,
    Ln,
    Sin,
    Cos,
    Tan,
    Sinh,
    Cosh,
    Tanh,
    Abs,
    Min,
    Max,
}

impl Function {
    /// All of them.
    pub const ALL: [Self; 12] = [
        Self::Sqrt,
        Self::Exp,
        Self::Ln,
        Self::Sin,
        Self::Cos,
        Self::Tan,
        Self::Sinh,
        Self::Cosh,
        Self::Tanh,
        Self::Abs,
        Self::Min,
        Self::Max,
    ];

    /// Its name in the language.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Self::Sqrt => "sqrt",
            Self::Exp => "exp",
            Self::Ln => "ln",
            Self::Sin => "sin",
            Self::Cos => "cos",
            Self::Tan => "tan",
            Self::Sinh => "sinh",
            Self::Cosh => "cosh",
            Self::Tanh => "tanh",
            Self::Abs => "abs",
            Self::Min => "min",
            Self::Max => "max",
        }
    }

    /// The function of this name.
    #[must_use]
    pub fn of(name: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|function| function.word() == name)
    }
}

/// True if an expression could not use this name for something else: a function,
/// a built-in constant, or `z`.
#[must_use]
pub fn is_reserved(name: &str) -> bool {
    name == "z"
        || name == "dot"
        || Function::of(name).is_some()
        || crate::units::constants::NAMES.contains(&name)
}

/// A resolved expression: constants are numbers, units are gone.
///
/// Control values are in the control's unit, positions in the unit that the
/// system kind names (layers: nm), and the result is in the unit that the
/// holder of the tree names.
#[derive(Clone, Debug, PartialEq)]
pub enum Tree {
    /// A number.
    Number(f64),
    /// The control, in its own unit.
    Control,
    /// The position coordinate.
    Position,
    /// An operator of a part of a product system.
    Operator {
        /// Position of the part in the system's list.
        part: usize,
        /// Which operator.
        operator: PartOperator,
    },
    /// `dot` of two vector operators.
    Dot(usize, usize),
    /// Negative.
    Negative(Box<Tree>),
    /// Sum.
    Add(Box<Tree>, Box<Tree>),
    /// Difference.
    Subtract(Box<Tree>, Box<Tree>),
    /// Product, in order.
    Multiply(Box<Tree>, Box<Tree>),
    /// Quotient.
    Divide(Box<Tree>, Box<Tree>),
    /// Power.
    Power(Box<Tree>, Box<Tree>),
    /// Function of one or two arguments.
    Call(Function, Vec<Tree>),
}

/// Operators of parts, all kinds in one list; the spec stage checks which
/// part has which.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs, reason = "each name is the operator of the spec language")]
pub enum PartOperator {
    X,
    Y,
    Z,
    P,
    Raise,
    Lower,
    Sq,
    Number,
    Cos,
    Cos2,
    Sin,
    Projector(usize),
    Jump(usize, usize),
    Couple(usize, usize),
}
