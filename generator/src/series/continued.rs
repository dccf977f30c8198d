//! A level's series beyond the orders that formulas use.
//!
//! In: a solved level. Out: E0 to E9, the first six those of the level itself. They
//! serve where no exact level exists and the series must judge itself.
//!
//! Method: the wave operator in intermediate normalisation, order by order,
//!
//! ```text
//! W_n = P sum_k H_k w_(n-k),   (H_0 - E_0) w_n = -Q sum_k H_k w_(n-k) + sum_k w_k W_(n-k)
//! ```
//!
//! and the branch of the small matrix `W(d)` that starts from the level's own state.
//! Where a set stays degenerate in first order, nothing beyond E5 is given.
//! Powers of the expansion above the fourth are left out.
//!
//! Source: Bloch, Nucl. Phys. 6, 329 (1958); Kato, *Perturbation Theory for Linear
//! Operators*, 2nd ed., section II.2 (both from memory).

use nalgebra::{DMatrix, DVector};

use super::product::inner;
use super::reduce::EQUAL;
use super::{AnyLevel, Level};
use crate::diagnostic::Result;
use crate::model::HIGHEST_POWER;
use crate::pencil::{Scalar, State, reduced_solve};
use crate::with_level;

/// Coefficients that are given at most.
const MOST: usize = 10;

/// E0 to E9, or to E5 where first order leaves the level degenerate.
///
/// # Errors
/// Those of the solves.
pub fn continued(level: &AnyLevel) -> Result<Vec<f64>> {
    with_level!(level, level => continue_one(level))
}

fn continue_one<T: Scalar>(level: &Level<T>) -> Result<Vec<f64>> {
    let model = level.model.as_ref();
    let matrix = model.expansion(0);
    let space = &level.set_states;
    let size = space.len();
    let own = level.set.iter().position(|&number| number == level.number).unwrap_or(0);
    let mut out = level.energies.to_vec();
    let mut waves: Vec<Vec<State<T>>> = vec![space.clone()];
    let mut effective: Vec<DMatrix<T>> = vec![DMatrix::zeros(size, size)];
    let mut starts: Vec<DVector<T>> =
        vec![DVector::from_fn(size, |row, _| if row == own { T::one() } else { T::zero() })];
    for order in 1..MOST {
        let mut images: Vec<State<T>> = vec![State::zeros(model.order()); size];
        for power in (1..=order.min(HIGHEST_POWER)).filter(|&power| !model.expansion(power).is_zero()) {
            for (image, wave) in images.iter_mut().zip(&waves[order - power]) {
                *image += model.expansion(power).apply(wave);
            }
        }
        effective.push(DMatrix::from_fn(size, size, |row, column| inner(&space[row], &images[column])));
        let mut next = Vec::with_capacity(size);
        for (column, image) in images.into_iter().enumerate() {
            let mut right = -image;
            for low in 1..order {
                for (row, wave) in waves[low].iter().enumerate() {
                    right.axpy(effective[order - low][(row, column)], wave, T::one());
                }
            }
            next.push(reduced_solve(matrix, level.energies[0], space, &right)?);
        }
        waves.push(next);
        if order >= 2 {
            let Some(start) = start(&effective, &out, &starts, own, order) else { break };
            starts.push(start);
        }
        if order < out.len() {
            continue;
        }
        let mut energy = T::zero();
        for low in 1..=order {
            energy += (&effective[low] * &starts[order - low])[own];
        }
        out.push(energy.real());
    }
    Ok(out)
}

/// The correction of order `order - 1` to the combination that the branch starts from:
/// component `order` of `W(d) a(d) = E(d) a(d)` outside the branch. `None` where
/// first order does not tell the branches apart.
fn start<T: Scalar>(
    effective: &[DMatrix<T>],
    energies: &[f64],
    starts: &[DVector<T>],
    own: usize,
    order: usize,
) -> Option<DVector<T>> {
    let first = &effective[1];
    let largest = first.camax();
    let mut rest: DVector<T> = DVector::zeros(starts[0].len());
    for low in 2..=order {
        let known = energies.get(low).copied();
        let before = &starts[order - low];
        rest -= &effective[low] * before;
        // The own component of `before` counts only for a(0), where the others vanish.
        if let Some(energy) = known {
            rest.axpy(T::from_real(energy), before, T::one());
        }
    }
    let mut out = DVector::zeros(rest.len());
    for row in (0..rest.len()).filter(|&row| row != own) {
        let split = first[(row, row)].real() - first[(own, own)].real();
        if split.abs() <= EQUAL * largest {
            return None;
        }
        out[row] = rest[row].unscale(split);
    }
    Some(out)
}

#[cfg(test)]
mod tests {
    use super::super::trial::{Trial, real};
    use super::*;
    use crate::series::level;

    fn series(order: usize, unperturbed: &[f64], couplings: &[(usize, usize)], number: usize) -> Vec<f64> {
        let h = vec![
            real(order, |i, j| if i == j { unperturbed[i] } else { 0.0 }),
            real(order, |i, j| f64::from(couplings.contains(&(i.min(j), i.max(j))))),
        ];
        continue_one(&level(&Trial::new(h).shared(), number).unwrap()).unwrap()
    }

    /// Two levels 0 and 1 coupled by d: `(1 - sqrt(1 + 4 d^2))/2`, whose coefficients are
    /// the Catalan numbers with changing sign.
    #[test]
    fn two_levels_give_catalan_numbers() {
        let found = series(2, &[0.0, 1.0], &[(0, 1)], 1);
        for (power, expected) in [0.0, 0.0, -1.0, 0.0, 1.0, 0.0, -2.0, 0.0, 5.0, 0.0].into_iter().enumerate()
        {
            assert!((found[power] - expected).abs() < 1e-12, "{power}: {found:?}");
        }
    }

    /// Levels 0, 0, 1 with d between the first two and between the first and the third:
    /// `E^3 - E^2 - 2 d^2 E + d^2 = 0`, solved here power by power for the branch that starts with `E = d`.
    #[test]
    fn a_branch_of_a_degenerate_pair_is_continued() {
        let found = series(3, &[0.0, 0.0, 1.0], &[(0, 1), (0, 2)], 2);
        let mut exact = [0.0; 12];
        exact[1] = 1.0;
        let product = |a: &[f64; 12], b: &[f64; 12]| {
            let mut out = [0.0; 12];
            for (i, x) in a.iter().enumerate() {
                for (j, y) in b.iter().enumerate().take(12 - i) {
                    out[i + j] += x * y;
                }
            }
            out
        };
        for power in 2..11 {
            // The coefficient of d^(power + 1), in which the unknown stands as -2 E_power.
            let square = product(&exact, &exact);
            let rest = product(&square, &exact)[power + 1] - square[power + 1] - 2.0 * exact[power - 1];
            exact[power] = 0.5 * rest;
        }
        assert!(found.len() == MOST, "{found:?}");
        for (power, value) in found.iter().enumerate() {
            assert!(
                (value - exact[power]).abs() < 1e-11 * exact[power].abs().max(1.0),
                "{power}: {found:?} {exact:?}"
            );
        }
    }
}
