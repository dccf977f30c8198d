//! Exact solves: the lowest levels at one control value, with their changes.

use crate::diagnostic::{Error, Result};
use crate::pencil::{Eigenpair, Hermitian, Scalar, State, factor, isolated, lowest, within};
use crate::series::Level;

/// Consecutive levels of the block at one control value.
pub(super) struct Solved<T: Scalar> {
    /// Ascending.
    pub pairs: Vec<Eigenpair<T>>,
    /// Number of levels below the first of them.
    below: usize,
}

/// The lowest levels at `x`, at least up to `number`, if there are so many.
pub(super) fn solve<T: Scalar>(level: &Level<T>, x: f64, number: usize) -> Result<Solved<T>> {
    let order = level.model.order();
    let pairs = lowest(&level.model.hamiltonian(x), number.min(order))?;
    if pairs.len() < number.min(order) {
        return Err(Error::internal("fewer levels were found than the matrix has"));
    }
    Ok(Solved { pairs, below: 0 })
}

/// The levels `low..=high` at `x`, from nearby states in the same order: where the matrix
/// is a band, each costs a few factorisations. `window` holds these levels and no other,
/// where that is known.
pub(super) fn solve_near<T: Scalar>(
    level: &Level<T>,
    x: f64,
    (low, high): (usize, usize),
    guesses: &[State<T>],
    window: Option<(f64, f64)>,
) -> Result<Solved<T>> {
    let matrix = level.model.hamiltonian(x);
    if !matches!(matrix, Hermitian::Banded(_)) || guesses.len() != high + 1 - low {
        return solve(level, x, high);
    }
    if let Some(window) = window
        && let Some(pairs) = within(&matrix, low, guesses, window)?
    {
        return Ok(Solved { pairs, below: low - 1 });
    }
    let pairs = (low..=high)
        .zip(guesses)
        .map(|(number, guess)| isolated(&matrix, number, guess, None).map(|found| found.0))
        .collect::<Result<Vec<_>>>()?;
    Ok(Solved { pairs, below: low - 1 })
}

/// The energies at `x` between which the levels `low..=high` lie and no other: no level moves
/// by more than the change of the Hamiltonian does (Weyl's inequality). `None` where that
/// change is not diagonal, so that its bounds cost as much as a solve, or is too large.
pub(super) fn window<T: Scalar>(
    level: &Level<T>,
    (here, solved): (&Hermitian<T>, &Solved<T>),
    x: f64,
    (low, high): (usize, usize),
) -> Option<(f64, f64)> {
    let (Hermitian::Diagonal(before), Hermitian::Diagonal(after)) = (here, level.model.change(x)) else {
        return None;
    };
    let (mut least, mut most) = (f64::INFINITY, f64::NEG_INFINITY);
    for (before, after) in before.iter().zip(&after) {
        least = least.min(after - before);
        most = most.max(after - before);
    }
    let window = (solved.energy(low.checked_sub(1)?) + most, solved.energy(high + 1) + least);
    let own = (solved.energy(low) + least, solved.energy(high) + most);
    (window.0 < own.0 && own.1 < window.1).then_some(window)
}

/// How many levels lie below each of two energies at `x`.
pub(super) fn counts<T: Scalar>(level: &Level<T>, x: f64, energies: [f64; 2]) -> Result<[usize; 2]> {
    // Behind open ends, what lies above the outer edge belongs to the basis, not to the system.
    let edge = level.model.escape_edge(x).unwrap_or(f64::INFINITY);
    let energies = energies.map(|energy| energy.min(edge));
    let matrix = level.model.hamiltonian(x);
    if matches!(matrix, Hermitian::Banded(_)) {
        return Ok([factor(&matrix, energies[0])?.below(), factor(&matrix, energies[1])?.below()]);
    }
    let pairs = lowest(&matrix, matrix.order())?;
    Ok(energies.map(|limit| pairs.iter().filter(|pair| pair.energy < limit).count()))
}

/// True if the Hamiltonian is finite at `x`.
pub(super) fn defined<T: Scalar>(level: &Level<T>, x: f64) -> bool {
    level.model.hamiltonian(x).is_finite()
}

impl<T: Scalar> Solved<T> {
    /// The level with this number.
    pub fn get(&self, number: usize) -> Result<&Eigenpair<T>> {
        self.pairs
            .get(number.wrapping_sub(1 + self.below))
            .ok_or_else(|| Error::internal("a followed level is beyond the order of its matrix"))
    }

    /// Energy of a level; infinitely far away if there is none.
    fn energy(&self, number: usize) -> f64 {
        if number == 0 {
            return f64::NEG_INFINITY;
        }
        self.pairs.get((number - 1).wrapping_sub(self.below)).map_or(f64::INFINITY, |pair| pair.energy)
    }

    /// Distances of the levels `low..=high` to the next lower and the next upper level.
    /// The caller has solved all levels up to one beyond `high`.
    pub fn apart(&self, (low, high): (usize, usize)) -> (f64, f64) {
        (self.energy(low) - self.energy(low.saturating_sub(1)), self.energy(high + 1) - self.energy(high))
    }

    /// The smaller of the two.
    pub fn isolation(&self, set: (usize, usize)) -> f64 {
        let (below, above) = self.apart(set);
        below.min(above)
    }

    /// States of the levels `low..=high`.
    pub fn states(&self, (low, high): (usize, usize)) -> Result<Vec<State<T>>> {
        (low..=high).map(|number| self.get(number).map(|pair| pair.state.clone())).collect()
    }

    /// Mean change from the operating point of the levels `low..=high`.
    pub fn change(&self, level: &Level<T>, x: f64, (low, high): (usize, usize)) -> Result<f64> {
        if low == high {
            return Ok(change(level, x, &self.get(low)?.state));
        }
        let mut projected = State::zeros(level.model.order());
        for number in low..=high {
            let state = &self.get(number)?.state;
            projected.axpy(state.dotc(&level.state), state, T::one());
        }
        if projected.norm_squared() > 0.5 * level.state.norm_squared() {
            return Ok(change(level, x, &projected));
        }
        let mut sum = 0.0;
        for number in low..=high {
            sum += change(level, x, &self.get(number)?.state);
        }
        Ok(sum / (high + 1 - low) as f64)
    }
}

/// `E(x) - E(at)`: from `<0|H(x) - H(at)|x> / <0|x>`, which keeps the digits of
/// a small shift, while the states overlap well; else from both quotients.
fn change<T: Scalar>(level: &Level<T>, x: f64, state: &State<T>) -> f64 {
    let model = level.model.as_ref();
    let overlap = level.state.dotc(state);
    if overlap.modulus_squared() > 0.5 * level.state.norm_squared() * state.norm_squared() {
        (model.change(x).element(&level.state, state) / overlap).real()
    } else {
        model.energy(x, state) - model.energy(model.at(), &level.state)
    }
}
