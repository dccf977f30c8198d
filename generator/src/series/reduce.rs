//! The branches of a degenerate set.
//!
//! In: the matrix series `M_0 + d M_1 + ...` of a small space, all orders that
//! are known. Out: the analytic branches: the coefficients of each and the
//! combination of basis states that it starts from, in ascending order just
//! above `d = 0`.
//!
//! Method: the leading matrix is diagonalised; each group of equal eigenvalues is
//! a model space of its own inside the small space, whose effective series, one
//! order shorter, is reduced in the same way.
//!
//! Source: Kato, *Perturbation Theory for Linear Operators*, 2nd ed., §II.2.3
//! (reduction process).

use nalgebra::DMatrix;

use super::effective::{COEFFICIENTS, Space, effective};
use crate::diagnostic::Result;
use crate::pencil::{Hermitian, Scalar, State, spectrum};

/// Coefficients count as equal below this part of the largest of them or of
/// the largest term.
pub(super) const EQUAL: f64 = 1e-10;

/// One branch.
pub(super) struct Branch<T: Scalar> {
    /// Coefficients, as many as matrices were given.
    pub energies: Vec<f64>,
    /// Normalised combination of the basis of the small space.
    pub start: State<T>,
    /// Estimated error of each coefficient.
    pub doubt: Vec<f64>,
}

/// All branches of the series; `terms` and `doubt` are the sizes of the terms
/// behind each matrix and their errors.
///
/// # Errors
/// If a small eigenvalue iteration fails.
pub(super) fn reduce<T: Scalar>(
    matrices: &[DMatrix<T>],
    terms: &[f64],
    doubt: &[f64],
) -> Result<Vec<Branch<T>>> {
    let Some((leading, rest)) = matrices.split_first() else {
        return Ok(Vec::new());
    };
    let order = leading.nrows();
    if order == 1 {
        return Ok(vec![Branch {
            energies: matrices.iter().map(|matrix| matrix[(0, 0)].real()).collect(),
            start: State::from_element(1, T::one()),
            doubt: doubt.to_vec(),
        }]);
    }
    let unperturbed = Hermitian::Dense(leading.clone());
    let pairs = spectrum(&unperturbed)?;
    let largest = pairs.iter().fold(terms[0], |size, pair| size.max(pair.energy.abs()));
    let mut branches = Vec::with_capacity(order);
    let mut from = 0;
    while from < order {
        let mut to = from + 1;
        while to < order && pairs[to].energy - pairs[to - 1].energy <= EQUAL * largest {
            to += 1;
        }
        let size = to - from;
        let energy = pairs[from..to].iter().fold(0.0, |sum, pair| sum + pair.energy) / size as f64;
        let states: Vec<State<T>> = pairs[from..to].iter().map(|pair| pair.state.clone()).collect();
        if rest.is_empty() {
            for state in states {
                branches.push(Branch { energies: vec![energy], start: state, doubt: doubt.to_vec() });
            }
            from = to;
            continue;
        }
        let powers: Vec<Hermitian<T>> = rest.iter().map(|matrix| Hermitian::Dense(matrix.clone())).collect();
        let powers: Vec<&Hermitian<T>> = powers.iter().collect();
        let space = Space {
            unperturbed: &unperturbed,
            powers: &powers,
            energies: &vec![energy; size],
            reference: energy,
            states: &states,
        };
        let inner = effective(&space, &mut |_, right| {
            let mut out = State::zeros(order);
            for pair in pairs[..from].iter().chain(&pairs[to..]) {
                let amount = pair.state.dotc(right).unscale(pair.energy - energy);
                out.axpy(amount, &pair.state, T::one());
            }
            Ok(out)
        })?;
        let last = rest.len().min(COEFFICIENTS - 1);
        // An error of one order reaches the next through the mixing of groups.
        let mixing = inner.corrections[0].iter().fold(0.0_f64, |size, state| size.max(state.norm()));
        let mut inner_terms = Vec::with_capacity(last);
        let mut inner_doubt = Vec::with_capacity(last);
        let mut carried = doubt[0];
        for power in 1..=last {
            carried = doubt[power] + 2.0 * mixing * carried;
            inner_terms.push(inner.terms[power].max(terms[power]));
            inner_doubt.push(carried + inner.doubt[power]);
        }
        for branch in reduce(&inner.series[1..=last], &inner_terms, &inner_doubt)? {
            let mut start = State::zeros(order);
            for (state, &amount) in states.iter().zip(branch.start.iter()) {
                start.axpy(amount, state, T::one());
            }
            let mut energies = vec![energy];
            energies.extend(branch.energies);
            let mut errors = vec![doubt[0]];
            errors.extend(branch.doubt);
            branches.push(Branch { energies, start, doubt: errors });
        }
        from = to;
    }
    Ok(branches)
}
