//! Systems given as matrices: `H(control) = h[0] + h[1] control + ...`.
//!
//! In: the matrices as read, Hermitian within the language's bound. Out: a
//! [`Built`] of fixed size, with real storage when no element has an imaginary
//! part. The expansion about the operating point is the binomial re-expansion
//! of the polynomial, so it is exact but for rounding.
//!
//! Not here: reading files, levels.

use std::rc::Rc;

use nalgebra::DMatrix;

use super::{AnyModel, Built, C64, HIGHEST_POWER, Model, Request};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::pencil::{Hermitian, Scalar, State};
use crate::spec::{Matrix, System};

/// Builds the model of a matrix system.
///
/// # Errors
/// If the level asked for does not exist, or an element is not finite at the operating point.
pub fn build(system: &System, matrix: &Matrix, request: &Request<'_>) -> Result<Built> {
    let order = matrix.h.first().map_or(0, DMatrix::nrows);
    if request.level > order {
        return Err(Error::spec(
            Diagnostic::new("no-such-level", format!("`{}` has no level {}", system.name, request.level))
                .found(format!("level {}", request.level))
                .expected(format!("at most {order}, the order of the matrices")),
        ));
    }
    // Half from each triangle: exact where both agree to the last bit.
    let symmetric: Vec<DMatrix<C64>> = matrix
        .h
        .iter()
        .map(|h| {
            DMatrix::from_fn(order, order, |row, column| {
                let (here, there) = (h[(row, column)], h[(column, row)].conj());
                if here == there { here } else { (here + there) * 0.5 }
            })
        })
        .collect();
    let real = symmetric.iter().all(|h| h.iter().all(|x| x.im == 0.0));
    let model = if real {
        AnyModel::Real(Rc::new(Polynomial::new(
            symmetric.iter().map(|h| h.map(|x| x.re)).collect(),
            request.at,
        )))
    } else {
        AnyModel::Complex(Rc::new(Polynomial::new(symmetric, request.at)))
    };
    Ok(Built {
        model,
        unit: matrix.unit.clone(),
        refinable: false,
        size: order,
        notes: Vec::new(),
        numbers: None,
        levels: Vec::new(),
        labelled: false,
        formal: false,
    })
}

/// A polynomial of the control with matrix coefficients.
struct Polynomial<T: Scalar> {
    powers: Vec<DMatrix<T>>,
    at: f64,
    expansion: Vec<Hermitian<T>>,
    parity: Option<String>,
    scale: f64,
}

/// `base^exponent` by repeated multiplication, the same bits everywhere.
fn power(base: f64, exponent: usize) -> f64 {
    (0..exponent).fold(1.0, |product, _| product * base)
}

/// Binomial coefficient as a double.
fn choose(n: usize, k: usize) -> f64 {
    (0..k).fold(1.0, |product, i| product * (n - i) as f64 / (i + 1) as f64)
}

/// A dense matrix in the cheapest storage that holds it.
fn stored<T: Scalar>(matrix: DMatrix<T>) -> Hermitian<T> {
    let order = matrix.nrows();
    let off_diagonal =
        (0..order).any(|row| (0..order).any(|column| row != column && matrix[(row, column)] != T::zero()));
    if off_diagonal {
        Hermitian::Dense(matrix)
    } else if matrix.iter().all(|x| *x == T::zero()) {
        Hermitian::Zero(order)
    } else {
        Hermitian::Diagonal((0..order).map(|idx| matrix[(idx, idx)].real()).collect())
    }
}

impl<T: Scalar> Polynomial<T> {
    fn new(powers: Vec<DMatrix<T>>, at: f64) -> Self {
        let mut model = Self { powers, at, expansion: Vec::new(), parity: None, scale: 0.0 };
        model.expansion = (0..=HIGHEST_POWER).map(|k| stored(model.coefficient(at, k))).collect();
        let (low, high) = model.expansion.first().map_or((0.0, 0.0), Hermitian::bounds);
        model.scale = 1e-12 * (high - low);
        let all: Vec<DMatrix<T>> = (0..model.powers.len()).map(|k| model.coefficient(at, k)).collect();
        model.parity = parity(&all);
        model
    }

    fn order(&self) -> usize {
        self.powers.first().map_or(0, DMatrix::nrows)
    }

    /// Coefficient of `d^k` of the expansion about `control`.
    fn coefficient(&self, control: f64, k: usize) -> DMatrix<T> {
        let order = self.order();
        let mut out = DMatrix::zeros(order, order);
        for (n, h) in self.powers.iter().enumerate().skip(k) {
            let factor = choose(n, k) * power(control, n - k);
            if factor != 0.0 {
                out.zip_apply(h, |sum, x| *sum += x.scale(factor));
            }
        }
        out
    }
}

impl<T: Scalar> Model<T> for Polynomial<T> {
    fn order(&self) -> usize {
        self.order()
    }

    fn at(&self) -> f64 {
        self.at
    }

    fn expansion(&self, power: usize) -> &Hermitian<T> {
        &self.expansion[power]
    }

    fn hamiltonian(&self, control: f64) -> Hermitian<T> {
        stored(self.coefficient(control, 0))
    }

    fn change(&self, control: f64) -> Hermitian<T> {
        let d = control - self.at;
        let order = self.order();
        let mut out = DMatrix::zeros(order, order);
        for k in 1..self.powers.len() {
            let factor = power(d, k);
            out.zip_apply(&self.coefficient(self.at, k), |sum, x| *sum += x.scale(factor));
        }
        stored(out)
    }

    fn slope(&self, control: f64) -> Hermitian<T> {
        stored(self.coefficient(control, 1))
    }

    fn rates(&self, control: f64) -> [f64; HIGHEST_POWER] {
        std::array::from_fn(|idx| stored(self.coefficient(control, idx + 1)).half_spread())
    }

    fn parity(&self) -> Option<String> {
        self.parity.clone()
    }

    fn phase(&self, _state: &State<T>) -> Option<T> {
        None
    }

    fn degeneracy_scale(&self) -> f64 {
        self.scale
    }
}

/// A parity of the family: signs of the basis states, after the identity or the
/// reversal of their order, under which the coefficient of `d^k` is multiplied by
/// `(-1)^k`, exact to the last bit. `h` are all coefficients of the expansion.
fn parity<T: Scalar>(h: &[DMatrix<T>]) -> Option<String> {
    if h.iter().skip(1).step_by(2).all(|odd| odd.iter().all(|x| *x == T::zero())) {
        return Some("only even powers of the offset stand in the matrices".into());
    }
    let order = h.first()?.nrows();
    let same = |row: usize| row;
    let reversed = |row: usize| order - 1 - row;
    if signs(h, &same) {
        Some("signs of the basis states exist that reverse the odd matrices and keep the even ones".into())
    } else if signs(h, &reversed) {
        Some("reversing the basis, with signs, reverses the odd matrices and keeps the even ones".into())
    } else {
        None
    }
}

/// Whether signs `s` exist with `s_i s_j h_k[image(i), image(j)] = (-1)^k h_k[i, j]`:
/// two-colouring of the graph of nonzero elements.
fn signs<T: Scalar>(h: &[DMatrix<T>], image: &dyn Fn(usize) -> usize) -> bool {
    let Some(order) = h.first().map(DMatrix::nrows) else { return false };
    // Required product of the signs of a pair: Some(true) for equal signs.
    let required = |row: usize, column: usize| -> Option<Option<bool>> {
        let mut wanted = None;
        for (k, matrix) in h.iter().enumerate() {
            let (here, there) = (matrix[(row, column)], matrix[(image(row), image(column))]);
            if here == T::zero() && there == T::zero() {
                continue;
            }
            let even = k % 2 == 0;
            let equal = if there == here {
                even
            } else if there == -here {
                !even
            } else {
                return None;
            };
            if wanted.is_some_and(|other| other != equal) {
                return None;
            }
            wanted = Some(equal);
        }
        Some(wanted)
    };
    let mut sign = vec![None; order];
    for start in 0..order {
        if sign[start].is_some() {
            continue;
        }
        sign[start] = Some(true);
        let mut open = vec![start];
        while let Some(row) = open.pop() {
            for column in 0..order {
                let Some(wanted) = required(row, column) else { return false };
                let Some(equal) = wanted else { continue };
                let needed = sign[row].map(|mine| mine == equal);
                match (sign[column], needed) {
                    (None, _) => {
                        sign[column] = needed;
                        open.push(column);
                    }
                    (Some(is), Some(must)) if is != must => return false,
                    _ => {}
                }
            }
        }
    }
    true
}

#[cfg(test)]
mod tests {
    use super::*;

    fn real(rows: &[&[f64]]) -> DMatrix<f64> {
        DMatrix::from_fn(rows.len(), rows.len(), |r, c| rows[r][c])
    }

    #[test]
    fn a_two_level_crossing_is_even_only_about_its_centre() {
        let coupling = real(&[&[0.0, 0.5], &[0.5, 0.0]]);
        let sweep = real(&[&[1.0, 0.0], &[0.0, -1.0]]);
        assert!(Polynomial::new(vec![coupling.clone(), sweep.clone()], 0.0).parity().is_some());
        assert!(Polynomial::new(vec![coupling, sweep], 0.25).parity().is_none());
    }

    #[test]
    fn nearly_symmetric_is_not_symmetric() {
        let levels = real(&[&[0.0, 0.0, 0.0], &[0.0, 1.0, 0.0], &[0.0, 0.0, 3.0]]);
        let ladder = |tiny: f64| real(&[&[tiny, 1.0, 0.0], &[1.0, 0.0, 2.0], &[0.0, 2.0, 0.0]]);
        assert!(Polynomial::new(vec![levels.clone(), ladder(0.0)], 0.0).parity().is_some());
        assert!(Polynomial::new(vec![levels, ladder(1e-300)], 0.0).parity().is_none());
    }

    /// Re-expansion of `h0 + h1 c + h2 c^2` about c = 2 by hand.
    #[test]
    fn the_expansion_is_the_binomial_one() {
        let h = |x: f64| real(&[&[x]]);
        let model = Polynomial::new(vec![h(1.0), h(10.0), h(100.0)], 2.0);
        let value = |k: usize| model.expansion(k).to_dense()[(0, 0)];
        assert_eq!([value(0), value(1), value(2), value(3)], [421.0, 410.0, 100.0, 0.0]);
        assert_eq!(model.change(2.5).to_dense()[(0, 0)], 0.5 * 410.0 + 0.25 * 100.0);
    }
}
