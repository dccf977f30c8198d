//! An exact quantity followed on both sides of the operating point.

use std::cell::RefCell;
use std::rc::Rc;

use super::exact::{counts, defined, solve};
use super::follow::{Side, Task, walk};
use super::overlap::Pair;
use super::view::Sampled;
use super::{OverlapRequest, Request};
use crate::diagnostic::Result;
use crate::series::{AnyLevel, points};
use crate::with_level;

/// Part of the tolerance to which each level is interpolated.
const ACCURACY: f64 = 1e-7;

/// A side, the places where it stays on its level, and what was found.
type Again = (usize, Vec<f64>, Rc<Side>);

/// What a track follows.
pub(super) enum Target {
    /// A level.
    Level(AnyLevel),
    /// A squared overlap.
    Overlap(Box<Pair>),
}

/// One level of a sum, or an overlap, followed.
pub(super) struct Track {
    pub times: f64,
    pub system: String,
    pub target: Target,
    pub sides: [Rc<Side>; 2],
    at: f64,
    reach: [(f64, f64); 2],
    margin: f64,
    share: f64,
    /// Sides walked again, with the places where they stay on their level.
    stayed: RefCell<Vec<Again>>,
}

impl Track {
    fn new(
        times: f64,
        system: &str,
        target: Target,
        at: f64,
        within: (f64, f64),
        margin: f64,
        share: f64,
    ) -> Result<Self> {
        let mut track = Self {
            times,
            system: system.to_owned(),
            target,
            sides: [Rc::new(Side::empty(at)), Rc::new(Side::empty(at))],
            at,
            reach: [within.0, within.1].map(|end| (end, at + 2.0 * (end - at))),
            margin,
            share,
            stayed: RefCell::new(Vec::new()),
        };
        track.sides = [track.staying(0, &[])?, track.staying(1, &[])?];
        Ok(track)
    }

    /// A side that stays on its level at the given closest approaches.
    pub fn staying(&self, side: usize, stays: &[f64]) -> Result<Rc<Side>> {
        let kept = self.stayed.borrow().iter().find(|one| one.0 == side && one.1 == stays).cloned();
        if let Some((_, _, kept)) = kept {
            return Ok(kept);
        }
        if let Some(found) = self.mirrored(side, stays) {
            let found = Rc::new(found);
            self.stayed.borrow_mut().push((side, stays.to_vec(), found.clone()));
            return Ok(found);
        }
        let (wanted, reach) = self.reach.get(side).copied().unwrap_or_default();
        let task =
            Task { reach, wanted, accuracy: ACCURACY * self.margin / self.share, margin: self.margin, stays };
        let found = Rc::new(match &self.target {
            Target::Level(level) => with_level!(level, level => walk(level, task))?,
            Target::Overlap(pair) => pair.walk(self.at, task)?,
        });
        self.stayed.borrow_mut().push((side, stays.to_vec(), found.clone()));
        Ok(found)
    }

    /// A side that is the image of the other by symmetry: the levels of a block with a parity
    /// are even in the offset as a set, so a level that is not degenerate at the operating point
    /// is even all along.
    fn mirrored(&self, side: usize, stays: &[f64]) -> Option<Side> {
        let Target::Level(level) = &self.target else { return None };
        let [low, high] = self.reach;
        let image = |x: f64| self.at - (x - self.at);
        let even = with_level!(level, level => level.set.len() == 1 && level.model.parity().is_some());
        if !even || image(low.0) != high.0 || image(low.1) != high.1 || image(image(low.1)) != low.1 {
            return None;
        }
        let there: Vec<f64> = stays.iter().map(|&x| image(x)).collect();
        let stayed = self.stayed.borrow();
        let other = stayed.iter().find(|one| one.0 == 1 - side && one.1 == there)?;
        Some(other.2.image(&image))
    }

    /// True if an overlap is followed: where one of its levels meets another, its range ends.
    pub fn is_overlap(&self) -> bool {
        matches!(self.target, Target::Overlap(_))
    }

    /// True if the Hamiltonian has a value at `x`.
    pub fn defined(&self, x: f64) -> bool {
        match &self.target {
            Target::Level(level) => with_level!(level, level => defined(level, x)),
            Target::Overlap(pair) => pair.defined(x),
        }
    }

    /// How many levels at `x` lie below the energy that is changed by `change` from the operating
    /// point's, less `margin`, and how many within `margin` of it; `None` for an overlap.
    pub fn counts(&self, x: f64, change: f64, margin: f64) -> Result<Option<[usize; 2]>> {
        let Target::Level(level) = &self.target else {
            return Ok(None);
        };
        let energy = level.energies()[0] + change;
        let around = [energy - margin, energy + margin];
        let [below, above] = with_level!(level, level => counts(level, x, around))?;
        Ok(Some([below, above.saturating_sub(below)]))
    }

    /// Change of the followed quantity from the operating point by a solve of its own.
    pub fn exact(&self, side: &Side, x: f64) -> Result<f64> {
        match &self.target {
            Target::Level(level) => with_level!(level, level => side.exact(level, x)).map(|found| found.1),
            Target::Overlap(pair) => Ok(pair.value(x)? - pair.start),
        }
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
    pub(super) sampled: RefCell<Vec<Rc<Sampled>>>,
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
            let target = Target::Level(term.level.clone());
            Track::new(term.times, term.system, target, at, within, tolerance / term.times.abs(), share)
        })
        .collect::<Result<Vec<_>>>()?;
    Ok(Followed {
        at,
        within,
        tolerance,
        base,
        known_change: request.known_change,
        tracks,
        sampled: RefCell::default(),
    })
}

/// Follows a squared overlap to `at + 2 (end of within - at)` on both sides, or to where one
/// of its levels meets another or escapes.
///
/// # Errors
/// Those of the eigenvalue solves, and of levels that have no envelope.
pub fn follow_overlap<'a>(request: &OverlapRequest<'a>) -> Result<Followed<'a>> {
    let OverlapRequest { at, within, tolerance, base, levels: [a, b], systems } = *request;
    let points = points(a, b)?;
    let mut pair = Pair { levels: [a.clone(), b.clone()], points, start: 0.0 };
    pair.start = pair.value(at)?;
    let name = systems.join("` and `");
    let track = Track::new(1.0, &name, Target::Overlap(Box::new(pair)), at, within, tolerance, 1.0)?;
    Ok(Followed {
        at,
        within,
        tolerance,
        base,
        known_change: &|_| 0.0,
        tracks: vec![track],
        sampled: RefCell::default(),
    })
}

impl Followed<'_> {
    /// Which side of the operating point a control value is on.
    pub(super) fn side(&self, x: f64) -> usize {
        usize::from(x >= self.at)
    }

    /// The operating point.
    #[must_use]
    pub fn at(&self) -> f64 {
        self.at
    }

    /// The quantity at `control` by solves of its own.
    ///
    /// # Errors
    /// Those of the eigenvalue solves.
    pub fn exact(&self, control: f64) -> Result<f64> {
        let mut sum = self.base + (self.known_change)(control);
        if control != self.at {
            for track in &self.tracks {
                sum += track.times * track.exact(&track.sides[self.side(control)], control)?;
            }
        }
        Ok(sum)
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

    /// The followed levels at `control` by solves of their own: position of the term
    /// (of the level, for an overlap), number of the level in its block, energy in the model's unit. By these a coarser
    /// model is compared at the same level.
    ///
    /// # Errors
    /// Those of the eigenvalue solves.
    pub fn exact_energies(&self, control: f64) -> Result<Vec<(usize, usize, f64)>> {
        let mut out = Vec::new();
        for (idx, track) in self.tracks.iter().enumerate() {
            let side = &track.sides[self.side(control)];
            match &track.target {
                Target::Level(level) => {
                    let ((number, _), change) = with_level!(level, level => side.exact(level, control))?;
                    out.push((idx, number, level.energies()[0] + change));
                }
                Target::Overlap(pair) => {
                    for (which, level) in pair.levels.iter().enumerate() {
                        let number = level.number();
                        let energy = with_level!(level, level => {
                            solve(level, control, number)?.get(number)?.energy
                        });
                        out.push((which, number, energy));
                    }
                }
            }
        }
        Ok(out)
    }
}
