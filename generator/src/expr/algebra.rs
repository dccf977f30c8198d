//! One walk over a tree for every kind of number: plain, power series,
//! difference, interval.

use super::{Function, Tree};

/// Highest power that is formed by multiplication.
const MULTIPLIED: f64 = 1024.0;

/// A kind of number in which a tree can be evaluated.
pub(super) trait Algebra: Clone {
    /// A constant.
    fn number(value: f64) -> Self;
    /// `-a`.
    fn negated(&self) -> Self;
    /// `a + b`.
    fn plus(&self, other: &Self) -> Self;
    /// `a - b`.
    fn minus(&self, other: &Self) -> Self;
    /// `a b`.
    fn times(&self, other: &Self) -> Self;
    /// `a / b`.
    fn over(&self, other: &Self) -> Self;
    /// `a^b` with a constant exponent.
    fn raised(&self, exponent: f64) -> Self;
    /// `a^b` with a positive base.
    fn raised_to(&self, exponent: &Self) -> Self {
        self.call(Function::Ln).times(exponent).call(Function::Exp)
    }
    /// A function of one argument.
    fn call(&self, function: Function) -> Self;
    /// The lesser of the two (`greatest` false) or the greater.
    fn extreme(&self, other: &Self, greatest: bool) -> Self;

    /// The value of a tree; operators of parts have none and count as `operator`.
    fn evaluate(tree: &Tree, control: &Self, position: &Self, operator: &Self) -> Self {
        let of = |tree: &Tree| Self::evaluate(tree, control, position, operator);
        match tree {
            Tree::Number(value) => Self::number(*value),
            Tree::Control => control.clone(),
            Tree::Position => position.clone(),
            Tree::Operator { .. } | Tree::Dot(..) => operator.clone(),
            Tree::Negative(inner) => of(inner).negated(),
            Tree::Add(a, b) => of(a).plus(&of(b)),
            Tree::Subtract(a, b) => of(a).minus(&of(b)),
            Tree::Multiply(a, b) => of(a).times(&of(b)),
            Tree::Divide(a, b) => of(a).over(&of(b)),
            Tree::Power(a, b) => match **b {
                Tree::Number(exponent) => of(a).raised(exponent),
                _ => of(a).raised_to(&of(b)),
            },
            Tree::Call(function, arguments) => match (function, arguments.as_slice()) {
                (Function::Min, [a, b]) => of(a).extreme(&of(b), false),
                (Function::Max, [a, b]) => of(a).extreme(&of(b), true),
                (function, [a]) => of(a).call(*function),
                _ => Self::number(f64::NAN),
            },
        }
    }
}

/// `base^exponent`; whole powers by multiplication, so that they are the same
/// for a number and for the powers of a series.
pub(super) fn power(base: f64, exponent: f64) -> f64 {
    if libm::floor(exponent) == exponent && exponent.abs() <= MULTIPLIED {
        let whole = repeated(&base, exponent.abs() as u32);
        if exponent < 0.0 { 1.0 / whole } else { whole }
    } else {
        libm::pow(base, exponent)
    }
}

/// A whole power by squaring.
pub(super) fn repeated<A: Algebra>(base: &A, exponent: u32) -> A {
    let mut out = A::number(1.0);
    let mut first = true;
    for bit in (0..32 - exponent.leading_zeros()).rev() {
        if !first {
            out = out.times(&out);
        }
        if exponent >> bit & 1 == 1 {
            out = if first { base.clone() } else { out.times(base) };
            first = false;
        }
    }
    out
}

impl Algebra for f64 {
    fn number(value: f64) -> Self {
        value
    }

    fn negated(&self) -> Self {
        -self
    }

    fn plus(&self, other: &Self) -> Self {
        self + other
    }

    fn minus(&self, other: &Self) -> Self {
        self - other
    }

    fn times(&self, other: &Self) -> Self {
        self * other
    }

    fn over(&self, other: &Self) -> Self {
        self / other
    }

    fn raised(&self, exponent: f64) -> Self {
        power(*self, exponent)
    }

    fn raised_to(&self, exponent: &Self) -> Self {
        // A negative base has values at isolated exponents only, which is no function.
        if *self < 0.0 { f64::NAN } else { libm::pow(*self, *exponent) }
    }

    fn call(&self, function: Function) -> Self {
        let x = *self;
        match function {
            Function::Sqrt => libm::sqrt(x),
            Function::Exp => libm::exp(x),
            Function::Ln => libm::log(x),
            Function::Sin => libm::sin(x),
            Function::Cos => libm::cos(x),
            Function::Tan => libm::tan(x),
            Function::Sinh => libm::sinh(x),
            Function::Cosh => libm::cosh(x),
            Function::Tanh => libm::tanh(x),
            Function::Abs => x.abs(),
            Function::Min | Function::Max => f64::NAN,
        }
    }

    fn extreme(&self, other: &Self, greatest: bool) -> Self {
        // Unlike the methods of f64, a NaN on either side comes through.
        if self.is_nan() || other.is_nan() {
            f64::NAN
        } else if (self > other) == greatest {
            *self
        } else {
            *other
        }
    }
}

impl Tree {
    /// The value at a control value and a position; not finite where the
    /// expression has none, NaN for operators of parts.
    #[must_use]
    pub fn value(&self, control: f64, position: f64) -> f64 {
        f64::evaluate(self, &control, &position, &f64::NAN)
    }
}
