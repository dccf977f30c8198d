//! Storage of Hermitian matrices, behind one set of operations.

use nalgebra::DMatrix;

use super::{Scalar, State};

/// Lower band of a Hermitian matrix: `rows[i][w - j]` is element `(i, i - j)`
/// stored row by row, `width + 1` entries a row, entries left of column 0 zero.
#[derive(Clone, Debug, PartialEq)]
pub struct Banded<T> {
    /// Order of the matrix.
    pub order: usize,
    /// Number of sub-diagonals.
    pub width: usize,
    /// Row-major band, `order * (width + 1)` entries; the diagonal is the last
    /// entry of each row.
    pub entries: Vec<T>,
}

impl<T: Scalar> Banded<T> {
    /// A zero matrix with room for `width` sub-diagonals.
    #[must_use]
    pub fn zeros(order: usize, width: usize) -> Self {
        Self { order, width, entries: vec![T::zero(); order * (width + 1)] }
    }

    /// Element `(row, column)` of the lower triangle; zero outside the band.
    #[must_use]
    pub fn get(&self, row: usize, column: usize) -> T {
        if column > row || row - column > self.width {
            return T::zero();
        }
        self.entries[row * (self.width + 1) + self.width - (row - column)]
    }

    /// Adds to element `(row, column)` of the lower triangle; `row >= column`,
    /// `row - column <= width`.
    pub fn add(&mut self, row: usize, column: usize, value: T) {
        self.entries[row * (self.width + 1) + self.width - (row - column)] += value;
    }
}

/// A Hermitian matrix in the cheapest storage that holds it.
#[derive(Clone, Debug, PartialEq)]
pub enum Hermitian<T: Scalar> {
    /// The zero matrix of this order.
    Zero(usize),
    /// Real diagonal.
    Diagonal(Vec<f64>),
    /// Narrow band.
    Banded(Banded<T>),
    /// Full matrix; both triangles are stored and agree.
    Dense(DMatrix<T>),
}

impl<T: Scalar> Hermitian<T> {
    /// Order of the matrix.
    #[must_use]
    pub fn order(&self) -> usize {
        match self {
            Self::Zero(order) => *order,
            Self::Diagonal(entries) => entries.len(),
            Self::Banded(band) => band.order,
            Self::Dense(matrix) => matrix.nrows(),
        }
    }

    /// True if every element is exactly zero.
    #[must_use]
    pub fn is_zero(&self) -> bool {
        match self {
            Self::Zero(_) => true,
            Self::Diagonal(entries) => entries.iter().all(|&x| x == 0.0),
            Self::Banded(band) => band.entries.iter().all(|x| *x == T::zero()),
            Self::Dense(matrix) => matrix.iter().all(|x| *x == T::zero()),
        }
    }

    /// True if every element is finite.
    #[must_use]
    pub fn is_finite(&self) -> bool {
        match self {
            Self::Zero(_) => true,
            Self::Diagonal(entries) => entries.iter().all(|x| x.is_finite()),
            Self::Banded(band) => band.entries.iter().all(|x| x.is_finite()),
            Self::Dense(matrix) => matrix.iter().all(|x| x.is_finite()),
        }
    }

    /// The product with a state.
    #[must_use]
    pub fn apply(&self, state: &State<T>) -> State<T> {
        match self {
            Self::Zero(order) => State::zeros(*order),
            Self::Diagonal(entries) => State::from_iterator(
                entries.len(),
                entries.iter().zip(state.iter()).map(|(&v, &x)| x.scale(v)),
            ),
            Self::Banded(band) => {
                let mut out = State::zeros(band.order);
                let (source, target) = (state.as_slice(), out.as_mut_slice());
                for (row, line) in band.entries.chunks_exact(band.width + 1).enumerate() {
                    let from = row.saturating_sub(band.width);
                    let (line, here) = (&line[band.width - (row - from)..], source[row]);
                    let mut sum = T::zero();
                    for ((element, there), slot) in
                        line.iter().zip(&source[from..row]).zip(&mut target[from..row])
                    {
                        sum += *element * *there;
                        *slot += element.conjugate() * here;
                    }
                    target[row] += sum + line[row - from] * here;
                }
                out
            }
            Self::Dense(matrix) => {
                let mut out = State::zeros(matrix.nrows());
                for (column, &x) in state.iter().enumerate() {
                    for (row, &element) in matrix.column(column).iter().enumerate() {
                        out[row] += element * x;
                    }
                }
                out
            }
        }
    }

    /// `<left| H |right>`.
    #[must_use]
    pub fn element(&self, left: &State<T>, right: &State<T>) -> T {
        left.dotc(&self.apply(right))
    }

    /// The full matrix.
    #[must_use]
    pub fn to_dense(&self) -> DMatrix<T> {
        match self {
            Self::Zero(order) => DMatrix::zeros(*order, *order),
            Self::Diagonal(entries) => DMatrix::from_fn(entries.len(), entries.len(), |row, column| {
                if row == column { T::from_real(entries[row]) } else { T::zero() }
            }),
            Self::Banded(band) => DMatrix::from_fn(band.order, band.order, |row, column| {
                if column <= row { band.get(row, column) } else { band.get(column, row).conjugate() }
            }),
            Self::Dense(matrix) => matrix.clone(),
        }
    }

    /// An upper bound of half the spread of the spectrum, the norm that is left
    /// when the mean is removed (Gershgorin discs; exact for a diagonal).
    #[must_use]
    pub fn half_spread(&self) -> f64 {
        let (lowest, highest) = self.bounds();
        0.5 * (highest - lowest)
    }

    /// An interval that holds every eigenvalue (Gershgorin discs).
    #[must_use]
    pub fn bounds(&self) -> (f64, f64) {
        let mut lowest = f64::INFINITY;
        let mut highest = f64::NEG_INFINITY;
        let mut take = |centre: f64, radius: f64| {
            lowest = lowest.min(centre - radius);
            highest = highest.max(centre + radius);
        };
        match self {
            Self::Zero(_) => return (0.0, 0.0),
            Self::Diagonal(entries) => entries.iter().for_each(|&x| take(x, 0.0)),
            Self::Banded(band) => {
                let mut radius = vec![0.0; band.order];
                for row in 0..band.order {
                    for column in row.saturating_sub(band.width)..row {
                        let size = band.get(row, column).modulus();
                        radius[row] += size;
                        radius[column] += size;
                    }
                }
                (0..band.order).for_each(|row| take(band.get(row, row).real(), radius[row]));
            }
            Self::Dense(matrix) => {
                for (row, column) in matrix.column_iter().enumerate() {
                    let radius: f64 = column
                        .iter()
                        .enumerate()
                        .filter(|(idx, _)| *idx != row)
                        .map(|(_, x)| x.modulus())
                        .sum();
                    take(matrix[(row, row)].real(), radius);
                }
            }
        }
        (lowest, highest)
    }
}
