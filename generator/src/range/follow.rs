//! One level followed outwards by isolation discs.
//!
//! At control `x` the level is apart from its neighbours by `g`. With `s(r)`
//! the bound of what the Hamiltonian's change moves any level within distance
//! `r`, no neighbour can be met while `s(r) < g / 2`, for real or complex
//! control (Bauer and Fike, Numer. Math. 2, 137 (1960), for a Hermitian centre).
//! Inside the disc the level keeps its number and is analytic, so the error of a
//! Chebyshev interpolant is bounded by its Bernstein ellipse (Trefethen,
//! Approximation Theory and Approximation Practice, theorem 8.2; from memory).

use crate::diagnostic::Result;
use crate::model::{HIGHEST_POWER, Model};
use crate::pencil::{Scalar, State, spectrum};
use crate::series::Level;

/// Most discs on one side; beyond it the walk ends.
const MOST_DISCS: usize = 300;
/// Highest degree of an interpolant.
const HIGHEST_DEGREE: usize = 26;
/// Part of a disc's radius that a piece covers.
const COVER: f64 = 0.7;

/// An interpolant of the level's change on an interval.
#[derive(Clone, Debug)]
pub(super) struct Piece {
    /// End nearer to the operating point.
    pub from: f64,
    /// Outer end.
    pub to: f64,
    /// Bound of the interpolation error, model units.
    pub bound: f64,
    nodes: Vec<f64>,
    values: Vec<f64>,
}

impl Piece {
    /// Barycentric interpolation at Chebyshev points of the second kind.
    fn value(&self, x: f64) -> f64 {
        let (mut above, mut below) = (0.0, 0.0);
        let last = self.nodes.len().saturating_sub(1);
        for (k, (&node, &value)) in self.nodes.iter().zip(&self.values).enumerate() {
            if x == node {
                return value;
            }
            let half = if k == 0 || k == last { 0.5 } else { 1.0 };
            let weight = if k % 2 == 0 { half } else { -half } / (x - node);
            above += weight * value;
            below += weight;
        }
        above / below
    }
}

/// Why a walk ended.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Stop {
    /// The asked reach was covered.
    Reached,
    /// Levels meet, with this distance of the nearest neighbour.
    Meeting(f64),
    /// The level came within the tolerance of the edge.
    Escape,
}

/// One side of the operating point.
#[derive(Clone, Debug)]
pub(super) struct Side {
    /// Pieces, outwards.
    pub pieces: Vec<Piece>,
    /// Outermost control value covered.
    pub end: f64,
    /// Why no further.
    pub stop: Stop,
}

impl Side {
    /// Change of the level from the operating point and the bound of its error.
    pub fn change(&self, x: f64) -> Option<(f64, f64)> {
        self.pieces
            .iter()
            .find(|piece| x >= piece.from.min(piece.to) && x <= piece.from.max(piece.to))
            .map(|piece| (piece.value(x), piece.bound))
    }
}

/// `n + 1` Chebyshev points of the second kind from `from` to `to`.
pub(super) fn chebyshev_points(from: f64, to: f64, n: usize) -> Vec<f64> {
    (0..=n)
        .map(|k| match k {
            0 => from,
            k if k == n => to,
            k => {
                let turn = libm::cos(core::f64::consts::PI * k as f64 / n as f64);
                0.5 * (from + to) + 0.5 * (from - to) * turn
            }
        })
        .collect()
}

/// Largest `r` with `sum rates[k] r^(k+1) <= goal`, from below.
fn radius(rates: &[f64; HIGHEST_POWER], goal: f64, cap: f64) -> f64 {
    let moved = |r: f64| rates.iter().rev().fold(0.0, |sum, rate| (sum + rate) * r);
    if moved(cap) <= goal {
        return cap;
    }
    let (mut low, mut high) = (0.0, cap);
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if moved(middle) <= goal { low = middle } else { high = middle }
    }
    low
}

/// Change of `number` at `x` from the operating point, its distance from the
/// neighbours, and all energies.
pub(super) fn solve<T: Scalar>(level: &Level<T>, x: f64) -> Result<(f64, f64, Vec<f64>)> {
    let model = level.model.as_ref();
    let pairs = spectrum(&model.hamiltonian(x))?;
    let energies: Vec<f64> = pairs.iter().map(|pair| pair.energy).collect();
    let Some(pair) = pairs.get(level.number.wrapping_sub(1)) else {
        return Err(crate::diagnostic::Error::internal("a followed level is beyond the order of its matrix"));
    };
    let gap = pairs
        .iter()
        .filter(|other| other.number != pair.number)
        .map(|other| (other.energy - pair.energy).abs())
        .fold(f64::INFINITY, f64::min);
    Ok((change(model, level, x, &pair.state), gap, energies))
}

/// `E(x) - E(at)`: from `<0|H(x) - H(at)|x> / <0|x>`, which keeps the digits of
/// a small shift, while the states overlap well; else from both quotients.
fn change<T: Scalar>(model: &dyn Model<T>, level: &Level<T>, x: f64, state: &State<T>) -> f64 {
    let overlap = level.state.dotc(state);
    if overlap.modulus_squared() > 0.5 * level.state.norm_squared() {
        (model.change(x).element(&level.state, state) / overlap).real()
    } else {
        model.energy(x, state) - model.energy(model.at(), &level.state)
    }
}

/// Follows `level` from its operating point to `reach`, each interpolant to
/// `accuracy`; it ends where the level comes within `margin` of the escape edge.
pub(super) fn walk<T: Scalar>(level: &Level<T>, reach: f64, accuracy: f64, margin: f64) -> Result<Side> {
    let model = level.model.as_ref();
    let at = model.at();
    let span = (reach - at).abs();
    let outwards = if reach >= at { 1.0 } else { -1.0 };
    let start = model.energy(at, &level.state);
    let room =
        |x: f64, shift: f64| model.escape_edge(x).map_or(f64::INFINITY, |edge| edge - start - shift - margin);
    let mut side = Side { pieces: Vec::new(), end: at, stop: Stop::Reached };
    while (side.end - at).abs() < span {
        let here = side.end;
        let (_, gap, _) = solve(level, here)?;
        // Far beyond the reach nothing is gained, and an infinite radius has no ellipse.
        let r = radius(&model.rates(here), 0.5 * gap, 4.0 * span);
        if side.pieces.len() >= MOST_DISCS || r < 1e-9 * span {
            side.stop = Stop::Meeting(gap);
            return Ok(side);
        }
        let step = COVER * r;
        let to = if step >= (reach - here).abs() { reach } else { here + outwards * step };
        let half = 0.5 * (to - here).abs();
        let axis = (r - half) / half;
        let rho = axis + libm::sqrt(axis * axis - 1.0);
        let size = if gap.is_finite() { 0.5 * gap } else { 0.0 };
        let (mut degree, mut bound) = (4, 4.0 * size / (rho - 1.0));
        for _ in 0..4 {
            bound /= rho;
        }
        while bound > accuracy && degree < HIGHEST_DEGREE {
            degree += 1;
            bound /= rho;
        }
        let nodes = chebyshev_points(here, to, degree);
        let values =
            nodes.iter().map(|&x| solve(level, x).map(|found| found.0)).collect::<Result<Vec<f64>>>()?;
        let escaped = nodes.iter().zip(&values).find(|&(&x, &shift)| room(x, shift) <= 0.0).map(|(&x, _)| x);
        let mut piece = Piece { from: here, to, bound, nodes, values };
        side.end = to;
        if let Some(beyond) = escaped {
            let (mut inside, mut outside) = (here, beyond);
            for _ in 0..100 {
                let middle = 0.5 * (inside + outside);
                if room(middle, piece.value(middle)) > 0.0 { inside = middle } else { outside = middle }
            }
            piece.to = inside;
            side.end = inside;
            side.stop = Stop::Escape;
        }
        side.pieces.push(piece);
        if side.stop == Stop::Escape {
            break;
        }
    }
    Ok(side)
}
