//! The Hamiltonian of a small model space as a power series of the control.
//!
//! In: orthonormal eigenstates `p_j` of `H_0` with energies `e_j` (one level, a
//! degenerate set, or a pair), and the powers `H_1, H_2, ...`. Out: Hermitian
//! matrices `W_0 ... W_5`; the eigenvalues of `W(d)` are the levels through
//! `d^5`.
//!
//! Method: the wave operator in intermediate normalisation to second order,
//!
//! ```text
//! (H_0 - e_j) w1_j = -Q H_1 p_j
//! (H_0 - e_j) w2_j = -Q (H_2 p_j + H_1 w1_j) + sum_i w1_i <p_i|H_1|p_j>
//! ```
//!
//! then the Ritz pencil of the states `p + d w1 + d^2 w2`. A space that is
//! right through `d^2` has Ritz values right through `d^5`. The reference energy is
//! subtracted from `H_0` before any product, and `H_0` never meets a state: its
//! action on `p`, `w1`, `w2` is known from the equations above. So no coefficient
//! is a difference of large numbers.
//!
//! Source: Bloch, Nucl. Phys. 6, 329 (1958), for the wave operator; the 2n+1
//! rule as in Hirschfelder, Byers Brown and Epstein, Adv. Quantum Chem. 1, 255
//! (1964).

use nalgebra::DMatrix;

use super::product::{bulk, inner};
use crate::diagnostic::Result;
use crate::pencil::{Hermitian, Scalar, State};

/// Number of coefficients of the series, powers 0 to 5.
pub(super) const COEFFICIENTS: usize = 6;

/// The series of a model space.
pub(super) struct Effective<T: Scalar> {
    /// `W_0` to `W_5`, the reference energy subtracted from `W_0`.
    pub series: [DMatrix<T>; COEFFICIENTS],
    /// Largest single term on the diagonal of each.
    pub terms: [f64; COEFFICIENTS],
    /// Estimated error of each: residuals of the solves, and rounding.
    pub doubt: [f64; COEFFICIENTS],
    /// `w1_j` and `w2_j`.
    pub corrections: [Vec<State<T>>; 2],
}

/// The reduced resolvent at the energy of the state with this index.
pub(super) type Resolve<'a, T> = dyn FnMut(usize, &State<T>) -> Result<State<T>> + 'a;

/// A model space.
pub(super) struct Space<'a, T: Scalar> {
    /// `H_0`, for residuals only.
    pub unperturbed: &'a Hermitian<T>,
    /// `H_1`, `H_2`, ...
    pub powers: &'a [&'a Hermitian<T>],
    /// `e_j`.
    pub energies: &'a [f64],
    /// Subtracted from `H_0`.
    pub reference: f64,
    /// `p_j`.
    pub states: &'a [State<T>],
}

/// Solves the equations above; `resolve(j, right)` is the reduced resolvent at
/// `e_j`.
///
/// # Errors
/// Those of `resolve`.
pub(super) fn effective<T: Scalar>(
    space: &Space<'_, T>,
    resolve: &mut Resolve<'_, T>,
) -> Result<Effective<T>> {
    let n_states = space.states.len();
    let order = space.unperturbed.order();
    let apply = |power: usize, states: &[State<T>]| -> Vec<State<T>> {
        match space.powers.get(power - 1) {
            Some(matrix) if !matrix.is_zero() => states.iter().map(|state| matrix.apply(state)).collect(),
            _ => Vec::new(),
        }
    };
    let project = |state: &mut State<T>| {
        for member in space.states {
            let amount = member.dotc(state);
            state.axpy(-amount, member, T::one());
        }
    };
    let get = |list: &[State<T>], j: usize| list.get(j).cloned().unwrap_or_else(|| State::zeros(order));

    // images[b][c - 1][j] = H_c u_b[j]; an empty list stands for zeros.
    let mut images: Vec<Vec<Vec<State<T>>>> = Vec::with_capacity(3);
    images.push((1..COEFFICIENTS).map(|power| apply(power, space.states)).collect());
    let mut errors = Errors::default();
    for (j, state) in space.states.iter().enumerate() {
        let rest = space.rest(j, state, None);
        errors.state[0] = errors.state[0].max(resolve(j, &rest)?.norm());
    }
    let mut rights: [Vec<State<T>>; 2] = [Vec::new(), Vec::new()];
    let mut corrections: [Vec<State<T>>; 2] = [Vec::new(), Vec::new()];
    for j in 0..n_states {
        let mut right = -get(&images[0][0], j);
        project(&mut right);
        let first = solve_once(space, j, &right, resolve, &mut errors.state[1])?;
        errors.take(1, &first, &right);
        rights[0].push(right);
        corrections[0].push(first);
    }
    images.push((1..COEFFICIENTS).map(|power| apply(power, &corrections[0])).collect());
    for j in 0..n_states {
        let mut right = -(get(&images[0][1], j) + get(&images[1][0], j));
        project(&mut right);
        let image = get(&images[0][0], j);
        for (i, state) in space.states.iter().enumerate() {
            right.axpy(inner(state, &image), &corrections[0][i], T::one());
        }
        project(&mut right);
        let second = solve_once(space, j, &right, resolve, &mut errors.state[2])?;
        errors.take(2, &second, &right);
        rights[1].push(right);
        corrections[1].push(second);
    }
    images.push((1..COEFFICIENTS).map(|power| apply(power, &corrections[1])).collect());

    let mut ritz: [DMatrix<T>; COEFFICIENTS] = std::array::from_fn(|_| DMatrix::zeros(n_states, n_states));
    let mut norms: [DMatrix<T>; COEFFICIENTS] = std::array::from_fn(|_| DMatrix::zeros(n_states, n_states));
    let mut terms = [0.0_f64; COEFFICIENTS];
    let mut rounding = [0.0_f64; COEFFICIENTS];
    for (j, &energy) in space.energies.iter().enumerate() {
        let shift = energy - space.reference;
        ritz[0][(j, j)] = T::from_real(shift);
        norms[0][(j, j)] = T::one();
    }
    let sets: [&[State<T>]; 3] = [space.states, &corrections[0], &corrections[1]];
    let mut put = |power: usize, i: usize, j: usize, left: &State<T>, right: &State<T>| {
        if power >= COEFFICIENTS {
            return;
        }
        let value = inner(left, right);
        ritz[power][(i, j)] += value;
        rounding[power] = rounding[power].max(bulk(left, right));
        if i == j {
            terms[power] = terms[power].max(value.modulus());
        }
    };
    for (a, left) in sets.iter().enumerate() {
        for b in 0..3 {
            for power in 1..COEFFICIENTS {
                for (j, image) in images[b][power - 1].iter().enumerate() {
                    for (i, state) in left.iter().enumerate() {
                        put(a + b + power, i, j, state, image);
                    }
                }
            }
            if a == 0 || b == 0 {
                continue;
            }
            for j in 0..n_states {
                let mut image = rights[b - 1][j].clone();
                let shift = space.energies[j] - space.reference;
                if shift != 0.0 {
                    image.axpy(T::from_real(shift), &sets[b][j], T::one());
                }
                for (i, state) in left.iter().enumerate() {
                    put(a + b, i, j, state, &image);
                    norms[a + b][(i, j)] += inner(state, &sets[b][j]);
                }
            }
        }
    }
    let series = canonical(&ritz, &norms);
    for power in 2..COEFFICIENTS {
        for low in 1..=power - 2 {
            terms[power] = terms[power].max(series[low].camax() * norms[power - low].camax());
        }
    }
    Ok(Effective { doubt: errors.doubt(&rounding, &terms), series, terms, corrections })
}

impl<T: Scalar> Space<'_, T> {
    /// `(H_0 - e_j) state - right` outside the model space.
    fn rest(&self, j: usize, state: &State<T>, right: Option<&State<T>>) -> State<T> {
        let mut rest = self.unperturbed.apply(state);
        rest.axpy(T::from_real(-self.energies[j]), state, T::one());
        if let Some(right) = right {
            rest -= right;
        }
        for member in self.states {
            let amount = member.dotc(&rest);
            rest.axpy(-amount, member, T::one());
        }
        rest
    }
}

/// One reduced-resolvent solve with one step of refinement. `error` keeps the
/// largest correction of that step: what is left after it is rounding of the
/// same size at most.
fn solve_once<T: Scalar>(
    space: &Space<'_, T>,
    j: usize,
    right: &State<T>,
    resolve: &mut Resolve<'_, T>,
    error: &mut f64,
) -> Result<State<T>> {
    if right.iter().all(|x| x.modulus_squared() == 0.0) {
        return Ok(State::zeros(right.len()));
    }
    let mut out = resolve(j, right)?;
    let correction = resolve(j, &space.rest(j, &out, Some(right)))?;
    *error = error.max(correction.norm());
    out -= correction;
    Ok(out)
}

/// `N^(-1/2) A N^(-1/2)` as a series, `N_0 = 1`, made Hermitian to the last bit.
fn canonical<T: Scalar>(
    ritz: &[DMatrix<T>; COEFFICIENTS],
    norms: &[DMatrix<T>; COEFFICIENTS],
) -> [DMatrix<T>; COEFFICIENTS] {
    let order = ritz[0].nrows();
    let zeros = || std::array::from_fn(|_| DMatrix::<T>::zeros(order, order));
    // root * root = N, then inverse * root = 1.
    let mut root: [DMatrix<T>; COEFFICIENTS] = zeros();
    let mut inverse: [DMatrix<T>; COEFFICIENTS] = zeros();
    root[0] = DMatrix::identity(order, order);
    inverse[0] = DMatrix::identity(order, order);
    for power in 1..COEFFICIENTS {
        let mut sum = norms[power].clone();
        for low in 1..power {
            sum -= &root[low] * &root[power - low];
        }
        root[power] = sum.unscale(2.0);
        let mut sum = DMatrix::zeros(order, order);
        for low in 1..=power {
            sum -= &root[low] * &inverse[power - low];
        }
        inverse[power] = sum;
    }
    let mut out: [DMatrix<T>; COEFFICIENTS] = zeros();
    for power in 0..COEFFICIENTS {
        let mut sum = DMatrix::zeros(order, order);
        for a in 0..=power {
            for b in 0..=power - a {
                sum += &inverse[a] * &ritz[b] * &inverse[power - a - b];
            }
        }
        out[power] = (&sum + sum.adjoint()).unscale(2.0);
    }
    out
}

/// Estimated errors of the states of order 0, 1 and 2, with norms of the states
/// and of the right-hand sides that they answer.
#[derive(Default)]
struct Errors {
    state: [f64; 3],
    norm: [f64; 3],
    right: [f64; 3],
}

impl Errors {
    fn take<T: Scalar>(&mut self, order: usize, state: &State<T>, right: &State<T>) {
        self.norm[order] = self.norm[order].max(state.norm());
        self.right[order] = self.right[order].max(right.norm());
    }

    /// Error of each coefficient, to first order in the errors of the states of
    /// order `j`: `sum_j 2 |state error_j| |right_(k-j)|`, the right-hand sides of orders 3
    /// to 5 continued geometrically, and a few units of rounding of what was
    /// summed.
    fn doubt(&self, rounding: &[f64; COEFFICIENTS], terms: &[f64; COEFFICIENTS]) -> [f64; COEFFICIENTS] {
        let ratio = if self.norm[1] > 0.0 { (self.norm[2] / self.norm[1]).max(self.norm[1]) } else { 0.0 };
        let mut rights = [0.0, self.right[1], self.right[2], 0.0, 0.0, 0.0];
        for power in 3..COEFFICIENTS {
            rights[power] = rights[power - 1] * ratio;
        }
        let mut out = [0.0; COEFFICIENTS];
        for power in 1..COEFFICIENTS {
            let mut sum = 4.0 * f64::EPSILON * rounding[power].max(terms[power]);
            for (j, error) in self.state.iter().enumerate().filter(|(j, _)| *j < power) {
                sum += 2.0 * error * rights[power - j];
            }
            out[power] = sum;
        }
        out
    }
}
