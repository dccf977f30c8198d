//! The product space of all parts, and matrices of sums of products in it.
//!
//! In: parts with their bases, and products of words. Out: one sparse matrix for
//! each distinct coefficient, over a chosen list of product states.

use std::collections::BTreeMap;

use super::local::Local;
use super::sparse::{RowSum, Sparse};
use super::words::{Atom, Expander, Product};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::expr::{PartOperator, Tree};
use crate::model::C64;

/// Most coefficients with a matrix of their own.
const MOST_GROUPS: usize = 4096;

/// Most stored elements of all matrices together, 24 bytes each.
const MOST_ELEMENTS: usize = 30_000_000;

/// Product states of all parts, the first part slowest.
pub(super) struct Space {
    pub locals: Vec<Local>,
    strides: Vec<usize>,
    /// Number of product states before any choice.
    pub total: usize,
}

/// A coefficient of the control (`None` for 1) and what it multiplies.
#[derive(Clone, Debug)]
pub(super) struct Group {
    pub coefficient: Option<Tree>,
    pub matrix: Sparse,
}

/// A product with its words as matrices.
struct Formed {
    number: f64,
    matrices: Vec<Option<Sparse>>,
}

impl Space {
    /// `None` if the number of states overflows.
    pub fn new(locals: Vec<Local>) -> Option<Self> {
        let mut strides = vec![1usize; locals.len()];
        let mut total = 1usize;
        for (idx, local) in locals.iter().enumerate().rev() {
            strides[idx] = total;
            total = total.checked_mul(local.order())?;
        }
        Some(Self { locals, strides, total })
    }

    /// Position of a state in each part.
    pub fn indices(&self, state: usize) -> Vec<usize> {
        self.locals
            .iter()
            .zip(&self.strides)
            .map(|(local, stride)| state / stride % local.order().max(1))
            .collect()
    }

    /// A product state in words.
    pub fn describe(&self, state: usize, names: &[&str]) -> String {
        self.indices(state)
            .iter()
            .zip(&self.locals)
            .zip(names)
            .map(|((&idx, local), name)| format!("{name}: {}", local.describe(idx)))
            .collect::<Vec<_>>()
            .join("; ")
    }

    /// Matrices of a sum of products over the listed states (ascending), one for
    /// each coefficient in order of first appearance. An element that leads out of
    /// the list is given to `outside` as (state inside, state outside, element).
    ///
    /// # Errors
    /// If there are too many elements or coefficients.
    pub fn assemble(
        &self,
        expander: &Expander<'_>,
        products: &[Product],
        states: &[usize],
        outside: &mut dyn FnMut(usize, usize, C64),
    ) -> Result<Vec<Group>> {
        let mut order: Vec<Option<Tree>> = Vec::new();
        let mut groups: BTreeMap<String, (usize, Vec<Formed>)> = BTreeMap::new();
        for product in products {
            for (coefficient, formed) in self.formed(expander, product)? {
                let key = format!("{coefficient:?}");
                let next = order.len();
                let entry = groups.entry(key).or_insert_with(|| {
                    order.push(coefficient);
                    (next, Vec::new())
                });
                entry.1.push(formed);
            }
            if order.len() > MOST_GROUPS {
                return Err(too_large(
                    "too many different functions of the control",
                    order.len(),
                    MOST_GROUPS,
                ));
            }
        }
        let mut position = vec![usize::MAX; self.total];
        for (idx, &state) in states.iter().enumerate() {
            if let Some(slot) = position.get_mut(state) {
                *slot = idx;
            }
        }
        let mut sorted: Vec<(usize, Vec<Formed>)> = groups.into_values().collect();
        sorted.sort_by_key(|(idx, _)| *idx);
        let mut count = 0;
        let mut out = Vec::new();
        for (coefficient, (_, formed)) in order.into_iter().zip(sorted) {
            let mut sum = RowSum::new(self.total);
            let mut rows = Vec::with_capacity(states.len());
            for &state in states {
                let indices = self.indices(state);
                for one in &formed {
                    self.walk(one, &indices, 0, 0, C64::new(one.number, 0.0), &mut sum);
                }
                let mut row = Vec::new();
                for (column, element) in sum.take() {
                    match position.get(column) {
                        Some(&inside) if inside != usize::MAX => row.push((inside, element)),
                        _ => outside(state, column, element),
                    }
                }
                count += row.len();
                if count > MOST_ELEMENTS {
                    return Err(too_large("too many matrix elements", count, MOST_ELEMENTS));
                }
                rows.push(row);
            }
            out.push(Group { coefficient, matrix: Sparse { rows } });
        }
        Ok(out)
    }

    /// Adds one row of a product of matrices, part by part.
    fn walk(
        &self,
        formed: &Formed,
        indices: &[usize],
        part: usize,
        column: usize,
        element: C64,
        sum: &mut RowSum,
    ) {
        let (Some(matrix), Some(&row), Some(&stride)) =
            (formed.matrices.get(part), indices.get(part), self.strides.get(part))
        else {
            sum.add(column, element);
            return;
        };
        match matrix {
            None => self.walk(formed, indices, part + 1, column + row * stride, element, sum),
            Some(matrix) => {
                for &(target, x) in matrix.rows.get(row).map_or(&[][..], Vec::as_slice) {
                    self.walk(formed, indices, part + 1, column + target * stride, element * x, sum);
                }
            }
        }
    }

    /// A product's words as matrices in the kept bases; a function of coordinate and
    /// control becomes one product per node of its quadrature.
    fn formed(&self, expander: &Expander<'_>, product: &Product) -> Result<Vec<(Option<Tree>, Formed)>> {
        let mut out = vec![(
            expander.coefficient(&product.scalars),
            Formed { number: product.number, matrices: vec![None; self.locals.len()] },
        )];
        for (part, word) in &product.words {
            let local = self.locals.get(*part).ok_or_else(|| Error::internal("a word of no part"))?;
            let mut next = Vec::new();
            for (scalar, matrix) in word_matrices(local, &expander.word(word))? {
                for (coefficient, formed) in &out {
                    let (number, coefficient) = match (coefficient, &scalar) {
                        (any, None) => (1.0, any.clone()),
                        (None, Some(scalar)) => scalar.clone().into_factor(),
                        (Some(a), Some(scalar)) => a.clone().times(scalar.clone()).into_factor(),
                    };
                    let mut matrices = formed.matrices.clone();
                    if let Some(slot) = matrices.get_mut(*part) {
                        *slot = Some(matrix.clone());
                    }
                    if number != 0.0 {
                        next.push((coefficient, Formed { number: formed.number * number, matrices }));
                    }
                    if next.len() > MOST_GROUPS {
                        return Err(too_large(
                            "too many different functions of the control",
                            next.len(),
                            MOST_GROUPS,
                        ));
                    }
                }
            }
            out = next;
        }
        Ok(out)
    }
}

/// Matrices of a word in the kept basis, each with its own function of the
/// control.
fn word_matrices(local: &Local, word: &[&Atom]) -> Result<Vec<(Option<Tree>, Sparse)>> {
    let momenta = |atom: &&Atom| match atom {
        Atom::Local(tree) if local.splits_momenta() => usize::from(
            tree.uses(&mut |node| matches!(node, Tree::Operator { operator: PartOperator::P, .. })),
        ),
        _ => 0,
    };
    let half = word.iter().map(momenta).sum::<usize>() / 2;
    // Alternatives: a function with the control is a sum over the nodes.
    let mut out: Vec<(Option<Tree>, Sparse, Sparse)> = vec![(None, local.unit(), local.unit())];
    let mut seen = 0;
    for atom in word {
        let left = seen < half;
        seen += momenta(atom);
        let multiply = |matrix: &Sparse, a: &Sparse, b: &Sparse| {
            if left { (a.times(matrix), b.clone()) } else { (a.clone(), b.times(matrix)) }
        };
        match atom {
            Atom::Local(tree) => {
                let matrix = local.expression(tree, left)?;
                for (_, a, b) in &mut out {
                    (*a, *b) = multiply(&matrix, a, b);
                }
            }
            Atom::Function(tree) => {
                let mut next = Vec::new();
                for (idx, &node) in local.nodes().iter().enumerate() {
                    let value = tree.at_position(node);
                    let projector = local.function(|other| f64::from(u8::from(other == idx)));
                    for (scalar, a, b) in &out {
                        let scalar = match scalar {
                            None => value.clone(),
                            Some(scalar) => scalar.clone().times(value.clone()),
                        };
                        let (a, b) = multiply(&projector, a, b);
                        next.push((Some(scalar), a, b));
                    }
                    if next.len() > MOST_GROUPS {
                        return Err(too_large(
                            "too many different functions of the control",
                            next.len(),
                            MOST_GROUPS,
                        ));
                    }
                }
                out = next;
            }
        }
    }
    Ok(out.into_iter().map(|(scalar, a, b)| (scalar, local.kept(&a, &b))).collect())
}

fn too_large(what: &str, found: usize, limit: usize) -> Error {
    Error::spec(
        Diagnostic::new("too-large", format!("the Hamiltonian is too large: {what}"))
            .found(format!("{found} or more"))
            .expected(format!("at most {limit}"))
            .action("fix smaller bases with `size`, or use `conserved` to split the problem into blocks"),
    )
}
