//! An exact quantity followed on both sides of the operating point.

use std::cell::RefCell;
use std::rc::Rc;

use super::Request;
use super::exact::{counts, defined};
use super::follow::{Side, Task, walk};
use crate::diagnostic::Result;
use crate::series::AnyLevel;
use crate::with_level;

/// Part of the tolerance to which each level is interpolated.
const ACCURACY: f64 = 1e-7;

/// A side, the places where it stays on its level, and what was found.
type Again = (usize, Vec<f64>, Rc<Side>);

/// One level of a sum, followed.
pub(super) struct Track {
    pub times: f64,
    pub system: String,
    pub level: AnyLevel,
    pub sides: [Rc<Side>; 2],
    reach: [(f64, f64); 2],
    margin: f64,
    share: f64,
    /// Sides walked again, with the places where they stay on their level.
    stayed: RefCell<Vec<Again>>,
}

impl Track {
    /// A side that stays on its level at the given closest approaches.
    pub fn staying(&self, side: usize, stays: &[f64]) -> Result<Rc<Side>> {
        let kept = self.stayed.borrow().iter().find(|one| one.0 == side && one.1 == stays).cloned();
        if let Some((_, _, kept)) = kept {
            return Ok(kept);
        }
        let (wanted, reach) = self.reach.get(side).copied().unwrap_or_default();
        let task =
            Task { reach, wanted, accuracy: ACCURACY * self.margin / self.share, margin: self.margin, stays };
        let found = Rc::new(with_level!(&self.level, level => walk(level, task))?);
        self.stayed.borrow_mut().push((side, stays.to_vec(), found.clone()));
        Ok(found)
    }

    /// True if the Hamiltonian has a value at `x`.
    pub fn defined(&self, x: f64) -> bool {
        with_level!(&self.level, level => defined(level, x))
    }

    /// How many levels at `x` lie below the energy that is changed by `change` from the operating
    /// point's, less `margin`, and how many within `margin` of it.
    pub fn counts(&self, x: f64, change: f64, margin: f64) -> Result<[usize; 2]> {
        let energy = self.level.energies()[0] + change;
        let around = [energy - margin, energy + margin];
        let [below, above] = with_level!(&self.level, level => counts(level, x, around))?;
        Ok([below, above.saturating_sub(below)])
    }

    /// The followed level by a solve of its own.
    pub fn exact(&self, side: &Side, x: f64) -> Result<((usize, usize), f64)> {
        with_level!(&self.level, level => side.exact(level, x))
    }
}

/// An exact quantity followed outwards on both sides of the operating point.
pub struct Followed<'a> {
    pub(super) at: f64,
    pub(super) within: (f64, f64),
    pub(super) tolerance: f64,
    pub(super) base: f64,
    pub(super) known_change: &'a dyn Fn(f64) -> f64,
    pub(super) tracks: Vec<Track>,
}

/// Follows every level of a sum to `at + 2 (end of within - at)` on both sides, or to
/// where it meets several others or the escape edge.
///
/// # Errors
/// Those of the eigenvalue solves.
pub fn follow<'a>(request: &Request<'a>) -> Result<Followed<'a>> {
    let Request { at, within, tolerance, base, .. } = *request;
    let share = request.terms.len().max(1) as f64;
    let tracks = request
        .terms
        .iter()
        .map(|term| {
            let margin = tolerance / term.times.abs();
            let mut track = Track {
                times: term.times,
                system: term.system.to_owned(),
                level: term.level.clone(),
                sides: [Rc::new(Side::empty(at)), Rc::new(Side::empty(at))],
                reach: [within.0, within.1].map(|end| (end, at + 2.0 * (end - at))),
                margin,
                share,
                stayed: RefCell::new(Vec::new()),
            };
            track.sides = [track.staying(0, &[])?, track.staying(1, &[])?];
            Ok(track)
        })
        .collect::<Result<Vec<_>>>()?;
    Ok(Followed { at, within, tolerance, base, known_change: request.known_change, tracks })
}

impl Followed<'_> {
    /// Which side of the operating point a control value is on.
    pub(super) fn side(&self, x: f64) -> usize {
        usize::from(x >= self.at)
    }

    /// The quantity at `control`, interpolated; NaN where it was not followed to. Levels
    /// go over to another one wherever that is the same state within the tolerance.
    #[must_use]
    pub fn value(&self, control: f64) -> f64 {
        let mut sum = self.base + (self.known_change)(control);
        if control != self.at {
            for track in &self.tracks {
                let side = &track.sides[self.side(control)];
                sum += side.change(control).map_or(f64::NAN, |found| track.times * found.0);
            }
        }
        sum
    }

    /// The followed levels at `control` by solves of their own: position of the term,
    /// number of the level in its block, energy in the model's unit. By these a coarser
    /// model is compared at the same level.
    ///
    /// # Errors
    /// Those of the eigenvalue solves.
    pub fn exact_energies(&self, control: f64) -> Result<Vec<(usize, usize, f64)>> {
        self.tracks
            .iter()
            .enumerate()
            .map(|(idx, track)| {
                let ((number, _), change) = track.exact(&track.sides[self.side(control)], control)?;
                Ok((idx, number, track.level.energies()[0] + change))
            })
            .collect()
    }
}
