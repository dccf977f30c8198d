//! Eigenpairs, inertia and resolvents of a [`Hermitian`] matrix.
//!
//! Bands go through [`banded`](super::banded), at a cost linear in their order;
//! everything else through a full eigendecomposition.

use nalgebra::{DMatrix, SymmetricEigen};

use super::banded::{BandFactor, Ladder, Pencil};
use super::{Hermitian, Scalar, State};
use crate::diagnostic::{Error, Result};

/// A level and its state, normalised to 1.
#[derive(Clone, Debug)]
pub struct Eigenpair<T: Scalar> {
    /// Position in ascending order, from 1.
    pub number: usize,
    /// Energy, in the matrix's unit.
    pub energy: f64,
    /// Eigenvector; the phase is arbitrary.
    pub state: State<T>,
}

/// Factors of `H - shift`.
#[derive(Clone, Debug)]
pub struct Factor<T: Scalar>(Kind<T>);

#[derive(Clone, Debug)]
enum Kind<T: Scalar> {
    Whole { shift: f64, energies: Vec<f64>, states: DMatrix<T> },
    Band(BandFactor<T>),
}

impl<T: Scalar> Factor<T> {
    /// Number of levels below the shift.
    #[must_use]
    pub fn below(&self) -> usize {
        match &self.0 {
            Kind::Whole { shift, energies, .. } => energies.iter().filter(|&e| e < shift).count(),
            Kind::Band(factor) => factor.below(),
        }
    }

    /// Solves `(H - shift) x = right`.
    #[must_use]
    pub fn solve(&self, right: &State<T>) -> State<T> {
        match &self.0 {
            Kind::Whole { shift, energies, states } => {
                let mut out = State::zeros(right.len());
                for (idx, &energy) in energies.iter().enumerate() {
                    let column = states.column(idx);
                    let amount = column.dotc(right).unscale(energy - shift);
                    out.axpy(amount, &column, T::one());
                }
                out
            }
            Kind::Band(factor) => factor.solve(right),
        }
    }
}

/// All levels, ascending.
///
/// # Errors
/// If a matrix element is not finite or the iteration does not converge.
pub fn spectrum<T: Scalar>(matrix: &Hermitian<T>) -> Result<Vec<Eigenpair<T>>> {
    let dense = matrix.to_dense();
    if dense.iter().any(|x| !x.is_finite()) {
        return Err(Error::internal("a matrix element is not finite"));
    }
    let order = dense.nrows();
    let eigen = SymmetricEigen::try_new(dense, f64::EPSILON, 100 * order.max(10))
        .ok_or_else(|| Error::internal("an eigenvalue iteration did not converge"))?;
    let mut ranks: Vec<usize> = (0..order).collect();
    ranks.sort_by(|&a, &b| eigen.eigenvalues[a].total_cmp(&eigen.eigenvalues[b]));
    Ok(ranks
        .into_iter()
        .enumerate()
        .map(|(idx, column)| Eigenpair {
            number: idx + 1,
            energy: eigen.eigenvalues[column],
            state: eigen.eigenvectors.column(column).into_owned(),
        })
        .collect())
}

/// Factors of `H - shift`.
///
/// # Errors
/// As [`spectrum`].
pub fn factor<T: Scalar>(matrix: &Hermitian<T>, shift: f64) -> Result<Factor<T>> {
    if let Hermitian::Banded(band) = matrix {
        return Ok(Factor(Kind::Band(Pencil::new(band)?.factor(shift))));
    }
    let pairs = spectrum(matrix)?;
    let order = pairs.len();
    Ok(Factor(Kind::Whole {
        shift,
        energies: pairs.iter().map(|pair| pair.energy).collect(),
        states: DMatrix::from_fn(order, order, |row, column| pairs[column].state[row]),
    }))
}

/// The lowest `count` levels, fewer if the matrix is smaller.
///
/// # Errors
/// As [`spectrum`].
pub fn lowest<T: Scalar>(matrix: &Hermitian<T>, count: usize) -> Result<Vec<Eigenpair<T>>> {
    if let Hermitian::Banded(band) = matrix {
        return Ladder::new(band)?.lowest(count);
    }
    let mut pairs = spectrum(matrix)?;
    pairs.truncate(count);
    Ok(pairs)
}

/// The level with this number, counted from 1; its number is certified by an
/// inertia count.
///
/// # Errors
/// As [`spectrum`]; `number` beyond the order is an internal error.
pub fn eigenpair<T: Scalar>(matrix: &Hermitian<T>, number: usize) -> Result<Eigenpair<T>> {
    if number == 0 || number > matrix.order() {
        return Err(Error::internal("a level beyond the order of its matrix was asked for"));
    }
    if let Hermitian::Banded(band) = matrix {
        return Ladder::new(band)?.level(number, &[]);
    }
    spectrum(matrix)?
        .into_iter()
        .nth(number.wrapping_sub(1))
        .ok_or_else(|| Error::internal("a level beyond the order of its matrix was asked for"))
}

/// The energy of the level with this number to about a tenth of its size, where
/// only the scale matters.
///
/// # Errors
/// As [`eigenpair`].
pub fn rough_energy<T: Scalar>(matrix: &Hermitian<T>, number: usize) -> Result<f64> {
    match matrix {
        Hermitian::Banded(band) if number > 0 && number <= band.order => Ok(Ladder::new(band)?.rough(number)),
        _ => Ok(eigenpair(matrix, number)?.energy),
    }
}

/// The level whose state overlaps most with `guess`, looked for near `energy`;
/// its number is certified by an inertia count.
///
/// # Errors
/// As [`spectrum`].
pub fn eigenpair_near<T: Scalar>(
    matrix: &Hermitian<T>,
    energy: f64,
    guess: &State<T>,
) -> Result<Eigenpair<T>> {
    let _ = energy;
    if let Hermitian::Banded(band) = matrix
        && let Some(pair) = Ladder::new(band)?.near(guess)
    {
        return Ok(pair);
    }
    spectrum(matrix)?
        .into_iter()
        .max_by(|a, b| {
            a.state.dotc(guess).modulus_squared().total_cmp(&b.state.dotc(guess).modulus_squared())
        })
        .ok_or_else(|| Error::internal("a matrix of order 0"))
}

/// The level with this number, found from a nearby state, and a lower bound of its
/// distance from its nearest neighbour (within a fifth; exact for full
/// decompositions). `hint` is a guess of that distance; `None` asks for no distance
/// and gives 0.
///
/// # Errors
/// As [`spectrum`].
pub fn isolated<T: Scalar>(
    matrix: &Hermitian<T>,
    number: usize,
    guess: &State<T>,
    hint: Option<f64>,
) -> Result<(Eigenpair<T>, f64)> {
    if let Hermitian::Banded(band) = matrix {
        let mut ladder = Ladder::new(band)?;
        let pair = match ladder.near(guess).filter(|pair| pair.number == number) {
            Some(pair) => pair,
            None => ladder.level(number, &[])?,
        };
        let gap = hint.map_or(0.0, |hint| ladder.gap(&pair, hint));
        return Ok((pair, gap));
    }
    let pairs = spectrum(matrix)?;
    let pair = pairs.get(number.wrapping_sub(1)).cloned();
    let pair = pair.ok_or_else(|| Error::internal("a followed level is beyond the order of its matrix"))?;
    let gap = pairs
        .iter()
        .filter(|other| other.number != number)
        .map(|other| (other.energy - pair.energy).abs())
        .fold(f64::INFINITY, f64::min);
    Ok((pair, gap))
}

/// The levels of a band from nearby states, where `window` is known to hold exactly as many
/// levels as there are states, numbered from `first`; `None` if that did not find them.
///
/// # Errors
/// If a matrix element is not finite.
pub fn within<T: Scalar>(
    matrix: &Hermitian<T>,
    first: usize,
    guesses: &[State<T>],
    window: (f64, f64),
) -> Result<Option<Vec<Eigenpair<T>>>> {
    match matrix {
        Hermitian::Banded(band) => Ok(Ladder::new(band)?.within(first, guesses, window)),
        _ => Ok(None),
    }
}

/// The reduced resolvent of a band at one energy, for several right-hand sides.
pub struct Resolvent<'a, T: Scalar> {
    pencil: Pencil<'a, T>,
    factor: BandFactor<T>,
    energy: f64,
}

impl<'a, T: Scalar> Resolvent<'a, T> {
    /// Factors a band; `None` for other matrices.
    ///
    /// # Errors
    /// If a matrix element is not finite.
    pub fn new(matrix: &'a Hermitian<T>, energy: f64) -> Result<Option<Self>> {
        let Hermitian::Banded(band) = matrix else { return Ok(None) };
        let pencil = Pencil::new(band)?;
        let factor = pencil.factor(energy);
        Ok(Some(Self { pencil, factor, energy }))
    }

    /// As [`reduced_solve`].
    #[must_use]
    pub fn solve(&self, model_space: &[State<T>], right: &State<T>) -> State<T> {
        self.pencil.reduced(&self.factor, self.energy, model_space, right)
    }
}

/// The level of a band with this number and a lower bound of its distance from the others, 0
/// if that is hardly any; `None` for other matrices.
///
/// # Errors
/// As [`eigenpair`].
pub fn alone<T: Scalar>(matrix: &Hermitian<T>, number: usize) -> Result<Option<(Eigenpair<T>, f64)>> {
    let Hermitian::Banded(band) = matrix else { return Ok(None) };
    let mut ladder = Ladder::new(band)?;
    let pair = ladder.level(number, &[])?;
    let gap = ladder.apart(&pair);
    Ok(Some((pair, gap)))
}

/// The reduced resolvent: the solution of `(H - energy) x = right` orthogonal
/// to `model_space`, the part of `right` inside `model_space` being removed
/// first. `model_space` holds orthonormal eigenvectors of `H` and includes every
/// one whose level is at or very near `energy`.
///
/// # Errors
/// As [`spectrum`].
pub fn reduced_solve<T: Scalar>(
    matrix: &Hermitian<T>,
    energy: f64,
    model_space: &[State<T>],
    right: &State<T>,
) -> Result<State<T>> {
    if let Some(resolvent) = Resolvent::new(matrix, energy)? {
        return Ok(resolvent.solve(model_space, right));
    }
    let mut clean = right.clone();
    let project = |state: &mut State<T>| {
        for member in model_space {
            let amount = member.dotc(state);
            state.axpy(-amount, member, T::one());
        }
    };
    project(&mut clean);
    let mut out = State::zeros(right.len());
    for pair in spectrum(matrix)? {
        let inside: f64 = model_space.iter().map(|member| member.dotc(&pair.state).modulus_squared()).sum();
        if inside < 0.5 {
            let amount = pair.state.dotc(&clean).unscale(pair.energy - energy);
            out.axpy(amount, &pair.state, T::one());
        }
    }
    project(&mut out);
    Ok(out)
}
