//! Levels of single channels: one angular momentum each, no field.
//!
//! In: the mesh with its potential. Out: energies and counts by l, from which it is
//! decided how many channels a coupled problem needs and which number a level has
//! among the levels of all of them.

use super::mesh::Mesh;
use crate::diagnostic::{Error, Result};
use crate::pencil::{self, Banded, Hermitian};

/// Channels beyond this l are not looked into.
const HIGHEST_L: usize = 400;

/// The uncoupled radial problems.
#[derive(Clone)]
pub struct Channels {
    base: Banded<f64>,
    turning: Banded<f64>,
}

impl Channels {
    /// From the mesh and the potential at each unknown, eV.
    pub fn new(mesh: &Mesh, potential: &[f64]) -> Self {
        let [mut base, turning] = mesh.kinetic();
        for (row, value) in potential.iter().enumerate() {
            base.add(row, row, *value);
        }
        Self { base, turning }
    }

    /// The radial Hamiltonian for one l.
    pub fn hamiltonian(&self, l: usize) -> Hermitian<f64> {
        let mut band = self.base.clone();
        let factor = (l * (l + 1)) as f64;
        for (entry, extra) in band.entries.iter_mut().zip(&self.turning.entries) {
            *entry += factor * extra;
        }
        Hermitian::Banded(band)
    }

    /// Number of unknowns of one channel.
    pub fn order(&self) -> usize {
        self.base.order
    }

    /// Number of levels of one channel below an energy.
    ///
    /// # Errors
    /// If a matrix element is not finite.
    pub fn below(&self, l: usize, energy: f64) -> Result<usize> {
        Ok(pencil::factor(&self.hamiltonian(l), energy)?.below())
    }

    /// The lowest levels of one channel, eV, ascending.
    ///
    /// # Errors
    /// As [`Channels::below`].
    pub fn lowest(&self, l: usize, count: usize) -> Result<Vec<f64>> {
        let pairs = pencil::lowest(&self.hamiltonian(l), count.min(self.order()))?;
        Ok(pairs.into_iter().map(|pair| pair.energy).collect())
    }

    /// The highest l, from `from` on, with a level below an energy, and the number of
    /// levels of all channels from `from` on below it. The centrifugal energy rises
    /// with l, so the first empty channel is the last.
    ///
    /// # Errors
    /// As [`Channels::below`].
    pub fn filled(&self, from: usize, energy: f64) -> Result<(Option<usize>, usize)> {
        let (mut highest, mut total) = (None, 0);
        for l in from..HIGHEST_L {
            let count = self.below(l, energy)?;
            if count == 0 {
                break;
            }
            highest = Some(l);
            total += count;
        }
        Ok((highest, total))
    }

    /// Energy of the level with this number among all channels from `from` on, to
    /// about a millionth of the distance from the lowest.
    ///
    /// # Errors
    /// As [`Channels::below`].
    pub fn among_all(&self, from: usize, number: usize) -> Result<f64> {
        let own = self.lowest(from, 2)?;
        let (Some(&first), Some(&last)) = (own.first(), own.last()) else {
            return Err(Error::internal("a radial problem has no level"));
        };
        let (mut low, mut high) = (first, last.max(first + f64::EPSILON * first.abs()));
        for _ in 0..60 {
            if self.filled(from, high)?.1 >= number {
                break;
            }
            (low, high) = (high, high + 2.0 * (high - first));
        }
        let spread = high - first;
        for _ in 0..60 {
            if high - low <= 1e-6 * spread {
                break;
            }
            let middle = 0.5 * (low + high);
            if self.filled(from, middle)?.1 >= number { high = middle } else { low = middle }
        }
        Ok(high)
    }
}
