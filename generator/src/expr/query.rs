//! Questions about the structure of a tree.

use super::{PartOperator, Tree};

impl Tree {
    /// True if the test holds for any node, leaves included.
    pub fn uses(&self, test: &mut dyn FnMut(&Self) -> bool) -> bool {
        if test(self) {
            return true;
        }
        match self {
            Self::Number(_) | Self::Control | Self::Position | Self::Operator { .. } | Self::Dot(..) => false,
            Self::Negative(inner) => inner.uses(test),
            Self::Add(a, b)
            | Self::Subtract(a, b)
            | Self::Multiply(a, b)
            | Self::Divide(a, b)
            | Self::Power(a, b) => a.uses(test) || b.uses(test),
            Self::Call(_, arguments) => arguments.iter().any(|argument| argument.uses(test)),
        }
    }

    /// True if the control stands in it.
    #[must_use]
    pub fn uses_control(&self) -> bool {
        self.uses(&mut |tree| matches!(tree, Self::Control))
    }

    /// True if the position stands in it.
    #[must_use]
    pub fn uses_position(&self) -> bool {
        self.uses(&mut |tree| matches!(tree, Self::Position))
    }

    /// True if an operator of a part stands in it.
    #[must_use]
    pub fn uses_operator(&self) -> bool {
        self.uses(&mut |tree| matches!(tree, Self::Operator { .. } | Self::Dot(..)))
    }

    /// The parts whose operators stand in it, ascending, each once.
    #[must_use]
    pub fn parts(&self) -> Vec<usize> {
        let mut out = Vec::new();
        self.uses(&mut |tree| {
            match tree {
                Self::Operator { part, .. } => out.push(*part),
                Self::Dot(a, b) => out.extend([*a, *b]),
                _ => {}
            }
            false
        });
        out.sort_unstable();
        out.dedup();
        out
    }

    /// The tree with every operator `X` in place of which the position stands, for
    /// functions of one coordinate.
    #[must_use]
    pub fn coordinate_as_position(&self) -> Self {
        let of = |tree: &Self| Box::new(tree.coordinate_as_position());
        match self {
            Self::Operator { operator: PartOperator::X, .. } => Self::Position,
            Self::Negative(inner) => Self::Negative(of(inner)),
            Self::Add(a, b) => Self::Add(of(a), of(b)),
            Self::Subtract(a, b) => Self::Subtract(of(a), of(b)),
            Self::Multiply(a, b) => Self::Multiply(of(a), of(b)),
            Self::Divide(a, b) => Self::Divide(of(a), of(b)),
            Self::Power(a, b) => Self::Power(of(a), of(b)),
            Self::Call(function, arguments) => {
                Self::Call(*function, arguments.iter().map(Self::coordinate_as_position).collect())
            }
            other => other.clone(),
        }
    }

    /// The tree with a number in place of the position, simplified.
    #[must_use]
    pub fn at_position(&self, position: f64) -> Self {
        let of = |tree: &Self| tree.at_position(position);
        match self {
            Self::Position => Self::Number(position),
            Self::Negative(inner) => of(inner).negated(),
            Self::Add(a, b) => of(a).plus(of(b)),
            Self::Subtract(a, b) => of(a).minus(of(b)),
            Self::Multiply(a, b) => of(a).times(of(b)),
            Self::Divide(a, b) => of(a).over(of(b)),
            Self::Power(a, b) => of(a).raised(of(b)),
            Self::Call(function, arguments) => Self::Call(*function, arguments.iter().map(of).collect()),
            other => other.clone(),
        }
    }

    /// Degree as a polynomial in the control; `None` if it is no polynomial as
    /// written. An upper bound where terms cancel.
    #[must_use]
    pub fn degree(&self) -> Option<usize> {
        if !self.uses_control() {
            return Some(0);
        }
        match self {
            Self::Control => Some(1),
            Self::Negative(inner) => inner.degree(),
            Self::Add(a, b) | Self::Subtract(a, b) => Some(a.degree()?.max(b.degree()?)),
            Self::Multiply(a, b) => a.degree()?.checked_add(b.degree()?),
            Self::Divide(a, b) if !b.uses_control() => a.degree(),
            Self::Power(a, b) => {
                let exponent = b.as_number()?;
                if libm::floor(exponent) == exponent && (0.0..=1024.0).contains(&exponent) {
                    a.degree()?.checked_mul(exponent as usize)
                } else {
                    None
                }
            }
            _ => None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::expr::Function;

    #[test]
    fn the_degree_counts_powers_of_the_control() {
        let c = || Tree::Control;
        assert_eq!(c().times(c()).plus(c()).degree(), Some(2));
        assert_eq!(c().plus(Tree::Position).raised(Tree::Number(3.0)).degree(), Some(3));
        assert_eq!(Tree::Number(1.0).over(c()).degree(), None);
        assert_eq!(Tree::Call(Function::Sin, vec![c()]).degree(), None);
        assert_eq!(Tree::Call(Function::Sin, vec![Tree::Position]).degree(), Some(0));
    }
}
