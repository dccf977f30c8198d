//! Where `abs`, `min` and `max` have their kinks.

use super::algebra::Algebra;
use super::interval::Interval;
use super::{Function, Tree};

/// Boxes looked at per argument before the search gives up.
const BOXES: usize = 4096;

/// A kink found inside the box of control and position.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Kink {
    /// The function that has it.
    pub function: Function,
    /// Control value near it.
    pub control: f64,
    /// Position near it.
    pub position: f64,
    /// True if it moves with the control or lies at one control value; false if it
    /// lies at a fixed position whatever the control.
    pub of_control: bool,
}

/// One kink for each `abs`, `min` or `max` whose argument, or difference of
/// arguments, changes sign within the box. Operators `.x` count as positions.
///
/// An argument that only touches zero has none. A change of sign narrower than
/// the search resolves (1/4096 of the box) may be missed where interval bounds
/// cannot exclude it.
#[must_use]
pub fn kinks(tree: &Tree, control: (f64, f64), position: (f64, f64)) -> Vec<Kink> {
    let mut out = Vec::new();
    visit(tree, &mut |function, difference| {
        if let Some((x, z)) = sign_change(difference, control, position) {
            out.push(Kink { function, control: x, position: z, of_control: difference.uses_control() });
        }
    });
    out
}

fn visit(tree: &Tree, found: &mut dyn FnMut(Function, &Tree)) {
    match tree {
        Tree::Number(_) | Tree::Control | Tree::Position | Tree::Operator { .. } | Tree::Dot(..) => {}
        Tree::Negative(inner) => visit(inner, found),
        Tree::Add(a, b)
        | Tree::Subtract(a, b)
        | Tree::Multiply(a, b)
        | Tree::Divide(a, b)
        | Tree::Power(a, b) => {
            visit(a, found);
            visit(b, found);
        }
        Tree::Call(function, arguments) => {
            match (function, arguments.as_slice()) {
                (Function::Abs, [argument]) => found(*function, argument),
                (Function::Min | Function::Max, [a, b]) => {
                    found(*function, &a.clone().minus(b.clone()));
                }
                _ => {}
            }
            arguments.iter().for_each(|argument| visit(argument, found));
        }
    }
}

/// A point near a change of sign.
fn sign_change(tree: &Tree, control: (f64, f64), position: (f64, f64)) -> Option<(f64, f64)> {
    let value = |x: f64, z: f64| f64::evaluate(tree, &x, &z, &z);
    let mut positive = None;
    let mut negative = None;
    let mut queue = std::collections::VecDeque::from([(control, position)]);
    let mut looked = 0;
    while let Some((x, z)) = queue.pop_front() {
        let bounds = Interval::evaluate(
            tree,
            &Interval::new(x.0, x.1),
            &Interval::new(z.0, z.1),
            &Interval::new(z.0, z.1),
        );
        // A box whose sign is certain still counts as a witness for its sign.
        for (x, z) in [(x.0, z.0), (x.1, z.1), (middle(x), middle(z)), (x.0, z.1), (x.1, z.0)] {
            let sample = value(x, z);
            if sample > 0.0 {
                positive = positive.or(Some((x, z)));
            } else if sample < 0.0 {
                negative = negative.or(Some((x, z)));
            }
        }
        if let (Some(a), Some(b)) = (positive, negative) {
            return Some(narrowed(&value, a, b));
        }
        looked += 1;
        if bounds.one_sign() || looked > BOXES {
            continue;
        }
        let share = |part: (f64, f64), whole: (f64, f64)| {
            if whole.1 > whole.0 { (part.1 - part.0) / (whole.1 - whole.0) } else { 0.0 }
        };
        let (wide_x, wide_z) = (share(x, control), share(z, position));
        if wide_x.max(wide_z) < 1.0 / 4096.0 {
            continue;
        }
        if wide_x >= wide_z {
            queue.push_back(((x.0, middle(x)), z));
            queue.push_back(((middle(x), x.1), z));
        } else {
            queue.push_back((x, (z.0, middle(z))));
            queue.push_back((x, (middle(z), z.1)));
        }
    }
    None
}

fn middle(ends: (f64, f64)) -> f64 {
    ends.0 + 0.5 * (ends.1 - ends.0)
}

/// Bisection along the line between a point of positive and one of negative value.
fn narrowed(value: &dyn Fn(f64, f64) -> f64, positive: (f64, f64), negative: (f64, f64)) -> (f64, f64) {
    let (mut a, mut b) = (positive, negative);
    for _ in 0..60 {
        let between = (middle((a.0, b.0)), middle((a.1, b.1)));
        if value(between.0, between.1) > 0.0 {
            a = between;
        } else {
            b = between;
        }
    }
    b
}

#[cfg(test)]
mod tests {
    use super::*;

    fn abs(inner: Tree) -> Tree {
        Tree::Call(Function::Abs, vec![inner])
    }

    #[test]
    fn kinks_are_found_where_the_argument_changes_sign() {
        let shifted = Tree::Control.minus(Tree::Number(0.3));
        let found = kinks(&abs(shifted.clone()), (-1.0, 1.0), (0.0, 0.0));
        assert_eq!(found.len(), 1);
        assert!((found[0].control - 0.3).abs() < 1e-12 && found[0].of_control);
        assert!(kinks(&abs(shifted), (0.4, 1.0), (0.0, 0.0)).is_empty());
        let both = Tree::Call(Function::Max, vec![Tree::Position, Tree::Number(2.0)]);
        let found = kinks(&both, (-1.0, 1.0), (0.0, 3.0));
        assert!((found[0].position - 2.0).abs() < 1e-12 && !found[0].of_control);
    }

    #[test]
    fn an_argument_that_only_touches_zero_has_none() {
        let square = Tree::Control.raised(Tree::Number(2.0));
        assert!(kinks(&abs(square), (-1.0, 1.0), (0.0, 0.0)).is_empty());
        let wave = Tree::Number(1.0).minus(Tree::Call(Function::Cos, vec![Tree::Control]));
        assert!(kinks(&abs(wave), (-1.0, 1.0), (0.0, 0.0)).is_empty());
    }

    /// A dip below zero far narrower than the interval.
    #[test]
    fn a_narrow_change_of_sign_is_found() {
        let dip =
            Tree::Control.minus(Tree::Number(0.123)).raised(Tree::Number(2.0)).minus(Tree::Number(1e-6));
        assert!(!kinks(&abs(dip), (-1.0, 1.0), (0.0, 0.0)).is_empty());
    }
}
