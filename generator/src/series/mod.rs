//! Perturbation series of one level.
//!
//! In: a [`Model`](crate::model::Model) and the number of the level, counted
//! as the spec language says. Out: a [`Level`]: E0 to E4 (E5 by the 2n+1
//! rule), their uncertainty, the zeros that a symmetry proves, contributions,
//! mixing and the zeroth- and first-order states.
//!
//! Method: the wave operator of the model space (one level, a degenerate set,
//! or a pair) to second order by reduced-resolvent solves, then the Ritz
//! pencil of the corrected states, whose eigenvalues are right to fifth order.
//!
//! Not here: files, languages, ranges.

mod continued;
mod effective;
mod level;
mod overlap;
mod pair;
mod product;
#[cfg(test)]
mod published;
mod reduce;
mod share;
#[cfg(test)]
mod trial;

use std::rc::Rc;

pub use continued::continued;
pub use level::{coefficients, level, solve};
pub use overlap::{OverlapSeries, overlap, points, squared_overlap, wave};
pub use pair::{pair, pair_of};

use level::SAFETY;

use crate::model::{C64, Model};
use crate::pencil::{Scalar, State};

/// One state's part in a second-order coefficient, model units.
#[derive(Clone, Debug, PartialEq)]
pub struct Contribution {
    /// Number of the other level in its block; `None` for the part of `H_2` itself.
    pub level: Option<usize>,
    /// Its energy at the operating point.
    pub energy: f64,
    /// Its share of the whole sum.
    pub share: f64,
    /// Its l and its number among the levels of that l, for shells where each has one.
    pub channel: Option<(usize, usize)>,
}

/// First-order amplitude of another level per control unit.
#[derive(Clone, Debug, PartialEq)]
pub struct Mixing {
    /// Number of the other level in its block.
    pub level: usize,
    /// Its energy at the operating point.
    pub energy: f64,
    /// The amplitude, signed where the model defines the sign of a state, else its modulus.
    pub coefficient: f64,
    /// Its l and its number among the levels of that l, for shells where each has one.
    pub channel: Option<(usize, usize)>,
}

/// The series of one level at one refinement.
#[derive(Clone)]
pub struct Level<T: Scalar> {
    /// The model it belongs to.
    pub model: Rc<dyn Model<T>>,
    /// Number in its block, from 1, just above the operating point.
    pub number: usize,
    /// E0 to E5; unit: model energy per control unit to the k.
    pub energies: [f64; 6],
    /// Estimated error of each at this refinement (residuals, disagreement of
    /// the two ways of summing), already times 4; the change with
    /// refinement is added by the caller, who has two of them.
    pub uncertainty: [f64; 6],
    /// Why a coefficient is exactly zero, where a symmetry proves it.
    pub zero: [Option<String>; 6],
    /// Largest single term summed for each coefficient, by which cancellation is judged.
    pub largest_term: [f64; 6],
    /// Zeroth-order state, right combination of its degenerate set.
    pub state: State<T>,
    /// First- and second-order states, orthogonal to the model space.
    pub corrections: [State<T>; 2],
    /// Numbers of all levels degenerate with this one at the operating point, itself included.
    pub set: Vec<usize>,
    /// Zeroth-order states of that set, in order of `set`.
    pub set_states: Vec<State<T>>,
    /// Contributions to E2, by falling |share|.
    pub contributions: Vec<Contribution>,
    /// First-order mixing, by falling |coefficient|.
    pub mixing: Vec<Mixing>,
    /// Energies of the first twelve levels of the block.
    pub levels: Vec<f64>,
    /// Remarks: `degenerate`, `cancellation`, ...
    pub notes: Vec<crate::outcome::Note>,
}

/// A level of a real or a complex model.
#[derive(Clone)]
pub enum AnyLevel {
    /// Real symmetric.
    Real(Box<Level<f64>>),
    /// Complex Hermitian.
    Complex(Box<Level<C64>>),
}

/// Series of the mean and the squared half gap of two levels.
#[derive(Clone, Debug, PartialEq)]
pub struct PairSeries {
    /// Numbers of both levels, the asked one first.
    pub numbers: [usize; 2],
    /// Powers 0 to 4 of (En + Ep)/2.
    pub mean: [f64; 5],
    /// Powers 0 to 4 of ((En - Ep)/2)^2.
    pub half_gap_squared: [f64; 5],
    /// +1 if the asked level is the upper one just above the operating point, else -1.
    pub sign: f64,
    /// Estimated errors of `mean`, times 4.
    pub mean_uncertainty: [f64; 5],
    /// Estimated errors of `half_gap_squared`, times 4.
    pub half_gap_squared_uncertainty: [f64; 5],
}

/// Runs one expression on the level inside an [`AnyLevel`], whatever its field.
#[macro_export]
macro_rules! with_level {
    ($any:expr, $level:ident => $body:expr) => {
        match $any {
            $crate::series::AnyLevel::Real($level) => $body,
            $crate::series::AnyLevel::Complex($level) => $body,
        }
    };
}

impl AnyLevel {
    /// Number in its block, from 1.
    #[must_use]
    pub fn number(&self) -> usize {
        with_level!(self, level => level.number)
    }

    /// E0 to E5, model units.
    #[must_use]
    pub fn energies(&self) -> &[f64; 6] {
        with_level!(self, level => &level.energies)
    }

    /// Their uncertainty at this refinement.
    #[must_use]
    pub fn uncertainty(&self) -> &[f64; 6] {
        with_level!(self, level => &level.uncertainty)
    }

    /// Why coefficients are exactly zero.
    #[must_use]
    pub fn zero(&self) -> &[Option<String>; 6] {
        with_level!(self, level => &level.zero)
    }

    /// Largest single term summed for each coefficient.
    #[must_use]
    pub fn largest_term(&self) -> &[f64; 6] {
        with_level!(self, level => &level.largest_term)
    }

    /// Contributions to E2.
    #[must_use]
    pub fn contributions(&self) -> &[Contribution] {
        with_level!(self, level => &level.contributions)
    }

    /// First-order mixing.
    #[must_use]
    pub fn mixing(&self) -> &[Mixing] {
        with_level!(self, level => &level.mixing)
    }

    /// Energies of the first twelve levels of the block.
    #[must_use]
    pub fn levels(&self) -> &[f64] {
        with_level!(self, level => &level.levels)
    }

    /// Remarks.
    #[must_use]
    pub fn notes(&self) -> &[crate::outcome::Note] {
        with_level!(self, level => &level.notes)
    }
}
