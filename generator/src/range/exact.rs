//! Exact solves: the lowest levels at one control value, with their changes.

use crate::diagnostic::{Error, Result};
use crate::pencil::{Eigenpair, Scalar, State, lowest};
use crate::series::Level;

/// The lowest levels of the block at one control value.
pub(super) struct Solved<T: Scalar> {
    /// Ascending.
    pub pairs: Vec<Eigenpair<T>>,
}

/// The lowest levels at `x`, at least up to `number`, if there are so many.
pub(super) fn solve<T: Scalar>(level: &Level<T>, x: f64, number: usize) -> Result<Solved<T>> {
    let order = level.model.order();
    let pairs = lowest(&level.model.hamiltonian(x), number.min(order))?;
    if pairs.len() < number.min(order) {
        return Err(Error::internal("fewer levels were found than the matrix has"));
    }
    Ok(Solved { pairs })
}

/// True if the Hamiltonian is finite at `x`.
pub(super) fn defined<T: Scalar>(level: &Level<T>, x: f64) -> bool {
    let (low, high) = level.model.hamiltonian(x).bounds();
    low.is_finite() && high.is_finite()
}

impl<T: Scalar> Solved<T> {
    /// The level with this number.
    pub fn get(&self, number: usize) -> Result<&Eigenpair<T>> {
        self.pairs
            .get(number.wrapping_sub(1))
            .ok_or_else(|| Error::internal("a followed level is beyond the order of its matrix"))
    }

    /// Energy of a level; infinitely far away if there is none.
    fn energy(&self, number: usize) -> f64 {
        if number == 0 {
            return f64::NEG_INFINITY;
        }
        self.pairs.get(number - 1).map_or(f64::INFINITY, |pair| pair.energy)
    }

    /// Distances of the levels `low..=high` to the next lower and the next upper level.
    /// The caller has solved one level beyond `high`.
    pub fn apart(&self, (low, high): (usize, usize)) -> (f64, f64) {
        (self.energy(low) - self.energy(low.saturating_sub(1)), self.energy(high + 1) - self.energy(high))
    }

    /// The smaller of the two.
    pub fn isolation(&self, set: (usize, usize)) -> f64 {
        let (below, above) = self.apart(set);
        below.min(above)
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
