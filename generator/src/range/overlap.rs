//! The squared overlap of two envelopes, followed outwards.
//!
//! Both levels keep their numbers inside their isolation discs. With `v` the bound
//! of what the Hamiltonian's change does within distance `c r` and `g` the
//! isolation, a level's projector is bounded by `1 / (1 - 2 v / g)` there (Kato,
//! *Perturbation Theory for Linear Operators*, ch. II §1.4, by a contour of
//! radius `g / 2`; from memory), so the squared overlap, a trace over both
//! projectors, by the product of both bounds.

use super::exact::{defined, solve, solve_near};
use super::follow::{COVER, MOST_PIECES, NARROWEST, Side, Stop, Task, radius};
use super::interpolant::{Interpolant, Kind, Piece, chebyshev_points, degree};
use crate::diagnostic::Result;
use crate::model::C64;
use crate::series::{AnyLevel, squared_overlap, wave};
use crate::with_level;

/// Part of the discs' radius in which the projectors are bounded.
const INSIDE: f64 = 0.9;
/// Highest degree of an interpolant.
const HIGHEST_DEGREE: usize = 32;

/// Two levels and the points on which their envelopes are compared.
#[derive(Clone)]
pub(super) struct Pair {
    pub levels: [AnyLevel; 2],
    pub points: Vec<(f64, f64)>,
    /// The squared overlap at the operating point.
    pub start: f64,
}

/// Envelope of a level at `x`.
fn envelope(level: &AnyLevel, x: f64, points: &[(f64, f64)]) -> Result<Vec<C64>> {
    with_level!(level, level => {
        let number = level.number;
        let solved = solve_near(level, x, (number, number), std::slice::from_ref(&level.state), None)?;
        wave(level.model.as_ref(), &solved.get(number)?.state, points)
    })
}

/// Radius of a level's disc at `x` and the isolation; `None` where the Hamiltonian has no value.
fn disc(level: &AnyLevel, x: f64, cap: f64) -> Result<Option<(f64, f64)>> {
    with_level!(level, level => {
        let rates = level.model.rates(x);
        if rates.iter().any(|rate| !rate.is_finite()) || !defined(level, x) {
            return Ok(None);
        }
        let number = level.number;
        let gap = solve(level, x, number + 1)?.isolation((number, number));
        Ok(Some((radius(&rates, 0.5 * gap, cap), gap)))
    })
}

/// True if the level is bound at `x`.
fn bound(level: &AnyLevel, x: f64) -> Result<bool> {
    with_level!(level, level => {
        let Some(edge) = level.model.escape_edge(x) else {
            return Ok(true);
        };
        let number = level.number;
        let solved = solve_near(level, x, (number, number), std::slice::from_ref(&level.state), None)?;
        Ok(solved.get(number)?.energy < edge)
    })
}

impl Pair {
    /// The squared overlap at `x`.
    pub fn value(&self, x: f64) -> Result<f64> {
        let [a, b] = &self.levels;
        Ok(squared_overlap(&self.points, &envelope(a, x, &self.points)?, &envelope(b, x, &self.points)?))
    }

    /// True if both Hamiltonians have a value at `x`.
    pub fn defined(&self, x: f64) -> bool {
        self.levels.iter().all(|level| with_level!(level, level => defined(level, x)))
    }

    fn bound(&self, x: f64) -> Result<bool> {
        Ok(bound(&self.levels[0], x)? && bound(&self.levels[1], x)?)
    }

    /// Follows the squared overlap outwards.
    pub fn walk(&self, at: f64, task: Task<'_>) -> Result<Side> {
        let span = (task.reach - at).abs();
        let outwards = if task.reach >= at { 1.0 } else { -1.0 };
        let mut side = Side::empty(at);
        while (side.end - at).abs() < span {
            let here = side.end;
            let cap = 4.0 * span;
            let (Some(a), Some(b)) = (disc(&self.levels[0], here, cap)?, disc(&self.levels[1], here, cap)?)
            else {
                side.stop = Stop::Undefined;
                break;
            };
            let r = a.0.min(b.0);
            if r < NARROWEST * span || side.pieces.len() >= MOST_PIECES {
                side.stop = Stop::Meeting(a.1.min(b.1));
                break;
            }
            let mut to = here + outwards * COVER * r;
            for end in [task.reach, task.wanted] {
                // What is wanted may end exactly where a Hamiltonian does.
                let passes = (end - here) * outwards > 0.0 && (to - end) * outwards > 0.0;
                if passes && (end == task.reach || !self.defined(to)) {
                    to = end;
                }
            }
            if !self.defined(to) {
                side.stop = Stop::Undefined;
                break;
            }
            let stopped = !self.bound(to)?;
            if stopped {
                let (mut inside, mut outside) = (here, to);
                for _ in 0..60 {
                    let middle = 0.5 * (inside + outside);
                    if self.bound(middle)? { inside = middle } else { outside = middle }
                }
                to = inside;
                side.stop = Stop::Escape;
                if (to - here).abs() < NARROWEST * span {
                    break;
                }
            }
            let half = 0.5 * (to - here).abs();
            let axis = (INSIDE * r - half) / half;
            let rho = axis + libm::sqrt(axis * axis - 1.0);
            // What moves a level grows at least in proportion, so it is at most this part of the gap.
            let size = 1.0 / ((1.0 - INSIDE) * (1.0 - INSIDE));
            let (degree, bound) = degree(size, rho, task.accuracy, HIGHEST_DEGREE);
            let nodes = chebyshev_points(here, to, degree);
            let values =
                nodes.iter().map(|&x| Ok(self.value(x)? - self.start)).collect::<Result<Vec<f64>>>()?;
            let kind = Kind::Level(Interpolant { nodes, values, bound });
            side.pieces.push(Piece { from: here, to, numbers: side.last, kind });
            side.end = to;
            if stopped {
                break;
            }
        }
        Ok(side)
    }
}
