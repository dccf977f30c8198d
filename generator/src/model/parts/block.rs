//! Conserved operators: the check that they commute, and the block that a level
//! reference selects.
//!
//! A diagonal operator selects product states. Any other one is diagonalised, one
//! connected group of states at a time, and the block is spanned by its
//! eigenvectors.

use nalgebra::{DMatrix, SymmetricEigen};

use super::sparse::{Sparse, modulus};
use crate::diagnostic::{Diagnostic, Error, Place, Result};
use crate::expr::Tree;
use crate::model::C64;

/// Two values closer than this, relative to the larger or 1, are one.
const SAME: f64 = 1e-9;

/// Largest commutator that counts as none, relative to the two operators.
pub(super) const COMMUTES: f64 = 1e-12;

/// Eigenvalues shown in a message.
const SHOWN: usize = 12;

/// A conserved operator over all product states.
pub(super) struct Conserved<'a> {
    pub name: &'a str,
    pub tree: &'a Tree,
    pub place: &'a Place,
    pub matrix: Sparse,
    /// Its diagonal, if it has nothing else.
    pub diagonal: Option<Vec<f64>>,
}

impl<'a> Conserved<'a> {
    /// # Errors
    /// If the operator is not Hermitian.
    pub fn new(name: &'a str, tree: &'a Tree, place: &'a Place, matrix: Sparse) -> Result<Self> {
        let largest = matrix.largest();
        let crooked = matrix
            .elements()
            .map(|(row, column, x)| modulus(x - matrix.get(column, row).conj()))
            .fold(0.0, f64::max);
        if crooked > COMMUTES * largest {
            return Err(Error::spec(
                Diagnostic::new("not-hermitian", format!("the conserved operator `{name}` is not Hermitian"))
                    .at(Some(place.clone()))
                    .found(format!("an element that differs by {crooked:.3e} from its mirror image")),
            ));
        }
        let diagonal = matrix
            .elements()
            .all(|(row, column, _)| row == column)
            .then(|| (0..matrix.order()).map(|idx| matrix.get(idx, idx).re).collect());
        Ok(Self { name, tree, place, matrix, diagonal })
    }

    /// The message that a term does not commute with it.
    pub fn does_not_commute(&self, term: usize, size: f64) -> Error {
        Error::spec(
            Diagnostic::new(
                "not-conserved",
                format!("`{}` does not commute with term {term} of the Hamiltonian", self.name),
            )
            .at(Some(self.place.clone()))
            .found(format!("a commutator with an element of {size:.6e}"))
            .expected("operators that commute with every term of the Hamiltonian as written")
            .action("take the operator out of `conserved`, or write terms that commute only together in one bracket"),
        )
    }

    /// The message that a value is none of its eigenvalues; its place is that of the
    /// level reference, which the caller knows.
    pub fn no_such_value(&self, value: f64, values: &[f64], infinite: bool) -> Error {
        let mut near: Vec<f64> = values.to_vec();
        near.sort_by(|a, b| (a - value).abs().total_cmp(&(b - value).abs()).then(a.total_cmp(b)));
        near.truncate(SHOWN);
        near.sort_by(f64::total_cmp);
        let more = if infinite || near.len() < values.len() { ", ..." } else { "" };
        let list = near.iter().map(|x| shown(*x)).collect::<Vec<_>>().join(", ");
        Error::spec(
            Diagnostic::new("no-such-block", format!("{} is no eigenvalue of `{}`", shown(value), self.name))
                .found(shown(value))
                .expected(format!("one of {list}{more}")),
        )
    }
}

/// A value without rounding noise.
fn shown(x: f64) -> String {
    let rounded = libm::round(x * 1e9) / 1e9;
    format!("{}", if rounded == 0.0 { 0.0 } else { rounded })
}

/// True if two values of a conserved operator are the same.
pub(super) fn same(a: f64, b: f64) -> bool {
    (a - b).abs() <= SAME * a.abs().max(b.abs()).max(1.0)
}

/// Distinct values, ascending.
pub(super) fn distinct(values: impl IntoIterator<Item = f64>) -> Vec<f64> {
    let mut sorted: Vec<f64> = values.into_iter().collect();
    sorted.sort_by(f64::total_cmp);
    sorted.dedup_by(|a, b| same(*a, *b));
    sorted
}

/// A sparse vector: (state, component).
pub(super) type Components = Vec<(usize, C64)>;

/// Eigenvalues and eigenvectors of a Hermitian sparse matrix, one connected group
/// of states at a time; vectors as (state, component).
///
/// # Errors
/// If an eigenvalue iteration does not converge.
pub(super) fn eigenvectors(matrix: &Sparse) -> Result<Vec<(f64, Components)>> {
    let order = matrix.order();
    let mut group = vec![usize::MAX; order];
    let mut out = Vec::new();
    for start in 0..order {
        if group[start] != usize::MAX {
            continue;
        }
        let mut members = vec![start];
        group[start] = start;
        let mut next = 0;
        while let Some(&state) = members.get(next) {
            next += 1;
            for &(column, _) in matrix.rows.get(state).map_or(&[][..], Vec::as_slice) {
                if let Some(slot) = group.get_mut(column)
                    && *slot == usize::MAX
                {
                    *slot = start;
                    members.push(column);
                }
            }
        }
        members.sort_unstable();
        let size = members.len();
        let real = members.iter().all(|&state| matrix.rows[state].iter().all(|(_, x)| x.im == 0.0));
        let failed = || Error::internal("a conserved operator could not be diagonalised");
        let steps = 100 * size.max(10);
        if real {
            let dense = DMatrix::from_fn(size, size, |r, c| matrix.get(members[r], members[c]).re);
            let eigen = SymmetricEigen::try_new(dense, f64::EPSILON, steps).ok_or_else(failed)?;
            for (value, vector) in eigen.eigenvalues.iter().zip(eigen.eigenvectors.column_iter()) {
                let components =
                    members.iter().zip(vector.iter()).map(|(&state, &x)| (state, C64::new(x, 0.0))).collect();
                out.push((*value, components));
            }
        } else {
            let dense = DMatrix::from_fn(size, size, |r, c| matrix.get(members[r], members[c]));
            let eigen = SymmetricEigen::try_new(dense, f64::EPSILON, steps).ok_or_else(failed)?;
            for (value, vector) in eigen.eigenvalues.iter().zip(eigen.eigenvectors.column_iter()) {
                out.push((*value, members.iter().copied().zip(vector.iter().copied()).collect()));
            }
        }
    }
    Ok(out)
}

/// `V^H O V` for vectors given by their components.
pub(super) fn projected(matrix: &Sparse, vectors: &[Components]) -> Sparse {
    let order = matrix.order();
    let zero = C64::new(0.0, 0.0);
    let mut rows = vec![Vec::new(); vectors.len()];
    let mut dense = vec![zero; order];
    for (column, vector) in vectors.iter().enumerate() {
        dense.fill(zero);
        for &(state, x) in vector {
            if let Some(slot) = dense.get_mut(state) {
                *slot = x;
            }
        }
        let image: Vec<C64> = matrix
            .rows
            .iter()
            .map(|row| {
                let mut sum = zero;
                for &(idx, x) in row {
                    sum += x * dense.get(idx).copied().unwrap_or(zero);
                }
                sum
            })
            .collect();
        for (row, left) in rows.iter_mut().zip(vectors) {
            let mut sum = zero;
            for &(state, x) in left {
                sum += x.conj() * image.get(state).copied().unwrap_or(zero);
            }
            if sum != zero {
                row.push((column, sum));
            }
        }
    }
    Sparse { rows }
}
