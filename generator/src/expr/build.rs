//! Trees that simplify as they are built: constants are folded and numeric
//! factors gathered in front of products.

use super::Tree;
use super::algebra::power;
use crate::units::decimal;

/// Highest power through which a numeric factor is taken out of a bracket.
const FACTORED_POWER: f64 = 8.0;

impl Tree {
    /// The value, if the tree is a plain number.
    #[must_use]
    pub fn as_number(&self) -> Option<f64> {
        match self {
            Self::Number(number) => Some(*number),
            _ => None,
        }
    }

    /// Numeric factor in front, and what is left (`None` for 1).
    #[must_use]
    pub fn into_factor(self) -> (f64, Option<Self>) {
        match self {
            Self::Number(number) => (number, None),
            Self::Multiply(left, right) => match *left {
                Self::Number(number) => (number, Some(*right)),
                left => (1.0, Some(Self::Multiply(Box::new(left), right))),
            },
            Self::Negative(inner) => {
                let (number, rest) = inner.into_factor();
                (-number, rest)
            }
            other => (1.0, Some(other)),
        }
    }

    fn joined(number: f64, rest: Option<Self>) -> Self {
        match rest {
            None => Self::Number(number),
            Some(_) if number == 0.0 => Self::Number(0.0),
            Some(rest) if number == 1.0 => rest,
            Some(rest) if number == -1.0 => Self::Negative(Box::new(rest)),
            Some(rest) => Self::Multiply(Box::new(Self::Number(number)), Box::new(rest)),
        }
    }

    /// `-a`.
    #[must_use]
    pub fn negated(self) -> Self {
        let (number, rest) = self.into_factor();
        Self::joined(-number, rest)
    }

    /// `a + b`.
    #[must_use]
    pub fn plus(self, other: Self) -> Self {
        match (self, other) {
            (Self::Number(a), Self::Number(b)) => Self::Number(a + b),
            (a, Self::Number(0.0)) => a,
            (Self::Number(0.0), b) => b,
            (a, b) => Self::Add(Box::new(a), Box::new(b)),
        }
    }

    /// `a - b`.
    #[must_use]
    pub fn minus(self, other: Self) -> Self {
        match (self, other) {
            (Self::Number(a), Self::Number(b)) => Self::Number(a - b),
            (a, Self::Number(0.0)) => a,
            (Self::Number(0.0), b) => b.negated(),
            (a, b) => Self::Subtract(Box::new(a), Box::new(b)),
        }
    }

    /// `a b`, in order.
    #[must_use]
    pub fn times(self, other: Self) -> Self {
        let (a, left) = self.into_factor();
        let (b, right) = other.into_factor();
        let rest = match (left, right) {
            (None, rest) | (rest, None) => rest,
            (Some(left), Some(right)) => Some(Self::Multiply(Box::new(left), Box::new(right))),
        };
        Self::joined(decimal::product(a, b), rest)
    }

    /// `a / b`.
    #[must_use]
    pub fn over(self, other: Self) -> Self {
        let (a, left) = self.into_factor();
        let (b, right) = other.into_factor();
        let rest = match (left, right) {
            (rest, None) => rest,
            (left, Some(right)) => {
                Some(Self::Divide(Box::new(left.unwrap_or(Self::Number(1.0))), Box::new(right)))
            }
        };
        Self::joined(decimal::quotient(a, b), rest)
    }

    /// `a^b`.
    #[must_use]
    pub fn raised(self, exponent: Self) -> Self {
        match (self, exponent) {
            (Self::Number(a), Self::Number(b)) => Self::Number(power(a, b)),
            (_, Self::Number(0.0)) => Self::Number(1.0),
            (a, Self::Number(1.0)) => a,
            (a, Self::Number(b)) if libm::floor(b) == b && b.abs() <= FACTORED_POWER => {
                let (number, rest) = a.into_factor();
                let raised = rest.map(|rest| Self::Power(Box::new(rest), Box::new(Self::Number(b))));
                Self::joined(power(number, b), raised)
            }
            (a, b) => Self::Power(Box::new(a), Box::new(b)),
        }
    }

    /// `factor * self`, taken into the terms of sums, so that a change of unit by
    /// a power of ten leaves every coefficient exact.
    #[must_use]
    pub fn scaled(self, factor: f64) -> Self {
        match self {
            Self::Add(a, b) => a.scaled(factor).plus(b.scaled(factor)),
            Self::Subtract(a, b) => a.scaled(factor).minus(b.scaled(factor)),
            other => Self::Number(factor).times(other),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn control() -> Tree {
        Tree::Control
    }

    #[test]
    fn numeric_factors_gather_in_front() {
        // (1e5 c) / 1e9 is 1e-4 c to the last bit, the V/nm in a kV/cm.
        let field = Tree::Number(1e5).times(control()).over(Tree::Number(1e9));
        assert_eq!(field, Tree::Multiply(Box::new(Tree::Number(1e-4)), Box::new(control())));
        assert_eq!(control().times(Tree::Number(2.0)).times(Tree::Number(0.5)), control());
        assert_eq!(control().negated().negated(), control());
        assert_eq!(control().times(Tree::Number(0.0)), Tree::Number(0.0));
        assert_eq!(control().raised(Tree::Number(0.0)), Tree::Number(1.0));
    }

    #[test]
    fn scaling_reaches_every_term() {
        let tree = Tree::Number(0.232).plus(Tree::Number(3.0).times(control())).scaled(1e3);
        assert_eq!(tree, Tree::Number(232.0).plus(Tree::Number(3000.0).times(control())));
    }
}
