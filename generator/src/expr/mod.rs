//! Expressions of the spec: text to tree, dimension check, derivative,
//! simplification, evaluation.
//!
//! Not here: YAML, matrices.

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
