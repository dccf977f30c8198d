//! Proof that a stack is its own mirror image and the control enters oddly.
//!
//! Everything is decided on the given numbers and expressions, to the last
//! bit: a stack that is nearly symmetric is not symmetric.

use crate::expr::{Function, Tree};
use crate::spec::{Layer, Layers, Profile};

/// Why `V(z, at + d) = V(-z, at - d)` and `m(z) = m(-z)`, as a sentence; `None` if
/// that is not proved.
pub fn proof(layers: &Layers, at: f64) -> Option<String> {
    let total = layers.stack.len();
    let symmetric =
        layers.centred && (0..total).all(|idx| mirrored(&layers.stack[idx], &layers.stack[total - 1 - idx]));
    if !symmetric {
        return None;
    }
    let field = match &layers.field {
        None => return Some("the stack is its own mirror image and the control does not enter".into()),
        Some(field) => field,
    };
    // Odd about the operating point: an odd polynomial of the offset.
    let degree = field.degree()?;
    if degree > 4 {
        return None;
    }
    let taylor = field.taylor(at, 0.0);
    (taylor[0] == 0.0 && taylor[2] == 0.0 && taylor[4] == 0.0).then(|| {
        "the stack is its own mirror image about its middle and the field is odd in the offset".into()
    })
}

/// Whether one layer is the mirror image of another.
fn mirrored(one: &Layer, other: &Layer) -> bool {
    one.thickness == other.thickness && flipped(&one.edge, &other.edge) && flipped(&one.mass, &other.mass)
}

fn flipped(one: &Profile, other: &Profile) -> bool {
    match (one, other) {
        (Profile::Constant(a), Profile::Constant(b)) => a == b && !a.uses_control(),
        (Profile::Linear(a, b), Profile::Linear(c, d)) => {
            a == d && b == c && !a.uses_control() && !b.uses_control()
        }
        (Profile::Function(a), Profile::Function(b)) => {
            a == b && !a.uses_control() && position_parity(a) == Some(true)
        }
        _ => false,
    }
}

/// `Some(true)` for a function that is even in the position, `Some(false)` for an
/// odd one, `None` where neither is plain from its form.
fn position_parity(tree: &Tree) -> Option<bool> {
    let both = |a: &Tree, b: &Tree| Some((position_parity(a)?, position_parity(b)?));
    match tree {
        Tree::Number(_) | Tree::Control => Some(true),
        Tree::Position => Some(false),
        Tree::Negative(a) => position_parity(a),
        Tree::Add(a, b) | Tree::Subtract(a, b) => {
            let (a, b) = both(a, b)?;
            (a == b).then_some(a)
        }
        Tree::Multiply(a, b) | Tree::Divide(a, b) => {
            let (a, b) = both(a, b)?;
            Some(a == b)
        }
        Tree::Power(base, exponent) => match (position_parity(base)?, exponent.as_number()) {
            (true, _) if position_parity(exponent) == Some(true) => Some(true),
            (false, Some(n)) if n.abs() < 1e6 && libm::floor(n) == n => Some((n as i64) % 2 == 0),
            _ => None,
        },
        Tree::Call(function, arguments) => {
            let parities: Option<Vec<bool>> = arguments.iter().map(position_parity).collect();
            let parities = parities?;
            if parities.iter().all(|&even| even) {
                return Some(true);
            }
            match function {
                Function::Cos | Function::Cosh | Function::Abs => Some(true),
                Function::Sin | Function::Tan | Function::Sinh | Function::Tanh => Some(false),
                _ => None,
            }
        }
        Tree::Operator { .. } | Tree::Dot(..) => None,
    }
}
