//! A form beside the followed quantity: its error, bounded on whole intervals.
//!
//! An interval is accepted only if a bound of the whole error on it is within
//! the tolerance; else it is halved, the inner half first. So the first
//! violation outwards is found, however narrow, and nothing is judged by samples.

use std::rc::Rc;

use super::Candidate;
use super::follow::Side;
use super::followed::Followed;
use crate::diagnostic::Result;
use crate::form::{Form, horner};

/// Degree at which a residual is expanded, above that of every interpolant.
const DEGREE: usize = 40;
/// Width, in parts of the search, below which an interval is not halved any more.
const NARROWEST: f64 = 1e-11;

/// Above the Lebesgue constant of [`DEGREE`] + 1 Chebyshev points, `1 + (2 / pi) ln 40`
/// (Trefethen, *Approximation Theory and Approximation Practice*, theorem 15.2, from memory).
const LEBESGUE: f64 = 3.4;

/// The followed quantity at the nodes of an interval.
#[derive(Clone, Debug)]
pub(super) struct Sampled {
    ends: (f64, f64),
    nodes: Vec<f64>,
    values: Vec<f64>,
    /// Largest bound of the interpolants' errors.
    doubt: f64,
}

/// [`chebyshev_points`] of the degree that residuals are expanded in.
fn nodes(a: f64, b: f64, cosines: &[f64]) -> Vec<f64> {
    (0..=DEGREE)
        .map(|k| match k {
            0 => a,
            DEGREE => b,
            k => 0.5 * (a + b) + 0.5 * (a - b) * cosines.get(k).copied().unwrap_or(f64::NAN),
        })
        .collect()
}

/// An interval around a crossing, on which one number stands for the remainder.
#[derive(Clone, Copy, Debug)]
pub(super) struct Window {
    near: f64,
    far: f64,
    remainder: f64,
}

impl Window {
    fn holds(&self, x: f64) -> bool {
        x >= self.near.min(self.far) && x <= self.near.max(self.far)
    }
}

/// A candidate with the way that the state takes beside it.
pub(super) struct View<'a> {
    pub followed: &'a Followed<'a>,
    pub candidate: &'a Candidate<'a>,
    /// Per track, both sides.
    pub sides: Vec<[Rc<Side>; 2]>,
    windows: Vec<Window>,
    cosines: Vec<f64>,
}

impl<'a> View<'a> {
    /// Decides at each crossing, outwards, whether the state goes over.
    pub fn new(followed: &'a Followed<'a>, candidate: &'a Candidate<'a>) -> Result<Self> {
        let turn = core::f64::consts::PI / DEGREE as f64;
        let mut view = Self {
            followed,
            candidate,
            sides: followed.tracks.iter().map(|track| track.sides.clone()).collect(),
            windows: Vec::new(),
            cosines: (0..2 * DEGREE).map(|k| libm::cos(turn * k as f64)).collect(),
        };
        for side in 0..2 {
            view.decide(side)?;
        }
        Ok(view)
    }

    fn decide(&mut self, side: usize) -> Result<()> {
        let at = self.followed.at;
        let mut stays: Vec<Vec<f64>> = vec![Vec::new(); self.sides.len()];
        let mut passed = 0.0_f64;
        loop {
            let covered = self.covered(side);
            let mut next: Option<(usize, super::crossing::Crossing)> = None;
            for (idx, sides) in self.sides.iter().enumerate() {
                for &one in &sides[side].crossings {
                    let away = (one.x - at).abs();
                    let first = next.is_none_or(|(_, other)| away < (other.x - at).abs());
                    if away > passed && one.window.0 != one.window.1 && first {
                        next = Some((idx, one));
                    }
                }
            }
            let Some((idx, one)) = next else {
                return Ok(());
            };
            let reached = self.first(0.0, self.followed.tolerance, covered).unwrap_or(covered);
            if (one.window.0 - at).abs() > (reached - at).abs() {
                return Ok(());
            }
            let remainder = self.at_crossing(side, one.x);
            if remainder <= self.followed.tolerance {
                passed = (one.x - at).abs();
                self.windows.push(Window { near: one.window.0, far: one.window.1, remainder });
            } else if let (Some(places), Some(track)) = (stays.get_mut(idx), self.followed.tracks.get(idx)) {
                places.push(one.x);
                let found = track.staying(side, places)?;
                if let Some(sides) = self.sides.get_mut(idx) {
                    sides[side] = found;
                }
            }
        }
    }

    /// `|form - mean| + gap / 2` at a crossing, for all levels that cross there.
    fn at_crossing(&self, side: usize, x: f64) -> f64 {
        let followed = self.followed;
        let mut away =
            self.candidate.form.value(x - followed.at) - followed.base - (followed.known_change)(x);
        let mut gaps = 0.0;
        for (track, sides) in followed.tracks.iter().zip(&self.sides) {
            let near = |other: f64| (other - x).abs() <= 1e-9 * (x - followed.at).abs();
            if let Some(one) = sides[side].crossings.iter().find(|one| near(one.x)) {
                away -= track.times * one.mean;
                gaps += 0.5 * track.times.abs() * one.gap;
            } else {
                away -= sides[side].change(x).map_or(f64::NAN, |found| track.times * found.0);
            }
        }
        away.abs() + gaps
    }

    /// Outermost control value to which every level was followed.
    pub fn covered(&self, side: usize) -> f64 {
        let at = self.followed.at;
        let wanted = if side == 1 { self.followed.within.1 } else { self.followed.within.0 };
        let mut end = at + 2.0 * (wanted - at);
        for sides in &self.sides {
            if (sides[side].end - at).abs() < (end - at).abs() {
                end = sides[side].end;
            }
        }
        end
    }

    fn interpolated(&self, x: f64) -> Option<(f64, f64)> {
        let followed = self.followed;
        let (mut sum, mut doubt) = (followed.base + (followed.known_change)(x), 0.0);
        if x != followed.at {
            for (track, sides) in followed.tracks.iter().zip(&self.sides) {
                let (change, bound) = sides[followed.side(x)].change(x)?;
                sum += track.times * change;
                doubt += track.times.abs() * bound;
            }
        }
        Some((sum, doubt))
    }

    /// The quantity by solves of its own.
    pub fn exact(&self, x: f64) -> Result<f64> {
        let mut sum = self.followed.base + (self.followed.known_change)(x);
        if x != self.followed.at {
            for (track, sides) in self.followed.tracks.iter().zip(&self.sides) {
                sum += track.times * track.exact(&sides[self.followed.side(x)], x)?;
            }
        }
        Ok(sum)
    }

    /// Form minus quantity: infinite where the form has no value.
    pub fn residual(&self, x: f64) -> f64 {
        self.away(x, self.interpolated(x).map_or(f64::NAN, |found| found.0))
    }

    /// Form minus a known value of the quantity.
    fn away(&self, x: f64, value: f64) -> f64 {
        let d = x - self.followed.at;
        let form = self.candidate.form;
        if matches!(form, Form::Paired { half_gap_squared, .. } if horner(half_gap_squared, d) < 0.0) {
            return f64::INFINITY;
        }
        form.value(d) - value
    }

    fn window(&self, x: f64) -> Option<f64> {
        self.windows
            .iter()
            .filter(|one| one.holds(x))
            .map(|one| one.remainder)
            .fold(None, |most, one| Some(most.map_or(one, |most: f64| most.max(one))))
    }

    /// The remainder at `x`, that of a crossing where one is stepped over.
    pub fn remainder(&self, x: f64) -> f64 {
        self.window(x).unwrap_or_else(|| self.residual(x).abs())
    }

    /// Remainders of the crossings stepped over between two control values.
    pub fn crossed(&self, from: f64, to: f64) -> impl Iterator<Item = f64> {
        let inside = move |x: f64| x >= from && x <= to;
        self.windows.iter().filter(move |one| inside(one.near) && inside(one.far)).map(|one| one.remainder)
    }

    /// True at a crossing that is stepped over as a whole.
    pub fn in_window(&self, x: f64) -> bool {
        self.window(x).is_some()
    }

    /// Numerical error and that of the written digits.
    pub fn extra(&self, x: f64) -> f64 {
        let d = x - self.followed.at;
        (self.candidate.numerical)(d) + (self.candidate.written)(d)
    }

    /// The quantity at the nodes of an interval; kept, since every form and limit is tried
    /// on the same intervals.
    fn sampled(&self, a: f64, b: f64) -> Rc<Sampled> {
        let followed = self.followed;
        let side = followed.side(if a == followed.at { b } else { a });
        let usual = self
            .sides
            .iter()
            .zip(&followed.tracks)
            .all(|(own, track)| Rc::ptr_eq(&own[side], &track.sides[side]));
        if usual {
            let kept = followed.sampled.borrow();
            if let Some(found) = kept.iter().rev().find(|one| one.ends == (a, b)) {
                return found.clone();
            }
        }
        let nodes = nodes(a, b, &self.cosines);
        let mut doubt = 0.0_f64;
        let values = nodes
            .iter()
            .map(|&x| match self.interpolated(x) {
                Some((value, bound)) => {
                    doubt = doubt.max(bound);
                    value
                }
                None => {
                    doubt = f64::INFINITY;
                    f64::NAN
                }
            })
            .collect();
        let found = Rc::new(Sampled { ends: (a, b), nodes, values, doubt });
        if usual {
            followed.sampled.borrow_mut().push(found.clone());
        }
        found
    }

    /// True if the whole error is proved to be at most `limit` from `a` to `b`.
    fn holds(&self, rounding: f64, limit: f64, a: f64, b: f64) -> bool {
        let sampled = self.sampled(a, b);
        let other = sampled.nodes.iter().map(|&x| self.extra(x)).fold(0.0, f64::max) + rounding;
        if let Some(remainder) = self.window(0.5 * (a + b)) {
            return remainder + other <= limit;
        }
        let residuals: Vec<f64> =
            sampled.nodes.iter().zip(&sampled.values).map(|(&x, &value)| self.away(x, value)).collect();
        let largest = residuals.iter().fold(0.0, |most: f64, one| most.max(one.abs()));
        let room = limit - other - sampled.doubt;
        // A sample outside decides; so do samples far inside, by the Lebesgue constant.
        if largest > room || residuals.iter().any(|one| one.is_nan()) || room.is_nan() {
            return false;
        }
        if LEBESGUE * largest <= room {
            return true;
        }
        let mut sum = 0.0;
        for order in 0..=DEGREE {
            let mut coefficient = 0.0;
            let mut turn = 0;
            for (k, value) in residuals.iter().enumerate() {
                let half = if k == 0 || k == DEGREE { 0.5 } else { 1.0 };
                coefficient += half * value * self.cosines[turn];
                turn += order;
                if turn >= 2 * DEGREE {
                    turn -= 2 * DEGREE;
                }
            }
            let half = if order == 0 || order == DEGREE { 0.5 } else { 1.0 };
            // The tail of a form that is no polynomial is as large as its last terms.
            let tail = if order + 2 > DEGREE { 2.0 } else { 1.0 };
            sum += tail * half * coefficient.abs() * 2.0 / DEGREE as f64;
        }
        sum <= room
    }

    /// First control value from the operating point towards `to` beyond which `limit` is not kept.
    pub fn first(&self, rounding: f64, limit: f64, to: f64) -> Option<f64> {
        let at = self.followed.at;
        let side = self.followed.side(to);
        let span = (to - at).abs();
        let inside = |x: f64| (x - at).abs() < span && (x - at) * (to - at) > 0.0;
        let mut cuts: Vec<f64> = Vec::new();
        for sides in &self.sides {
            cuts.extend(sides[side].pieces.iter().map(|piece| piece.to));
            cuts.extend(sides[side].crossings.iter().flat_map(|one| [one.window.0, one.x, one.window.1]));
        }
        cuts.retain(|&x| inside(x));
        cuts.push(to);
        cuts.sort_by(|a, b| (b - at).abs().total_cmp(&(a - at).abs()));
        cuts.dedup();
        let mut from = at;
        // The outermost end is at the bottom; each pass takes or halves the next interval.
        while let Some(&end) = cuts.last() {
            if self.holds(rounding, limit, from, end) {
                from = end;
                cuts.pop();
            } else if (end - from).abs() <= NARROWEST * span {
                return Some(from);
            } else {
                cuts.push(0.5 * (from + end));
            }
        }
        None
    }
}
