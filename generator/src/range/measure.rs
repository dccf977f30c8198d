//! A form held against a followed quantity.
//!
//! An interval is accepted only if a bound of the whole error on it is within
//! the tolerance; else it is halved, the inner half first. So the first
//! violation outwards is found, however narrow, and nothing is judged by samples.

use super::follow::{Side, Stop, chebyshev_points, solve, walk};
use super::{Candidate, Limit, Ranged, Request, Sample};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::form::{Form, horner};
use crate::outcome::Note;
use crate::series::AnyLevel;
use crate::with_level;

/// Degree at which a residual is expanded, above that of every interpolant.
const DEGREE: usize = 32;
/// Part of the tolerance to which each level is interpolated.
const ACCURACY: f64 = 1e-8;
/// Width, in parts of the search, below which an interval is not halved any more.
const NARROWEST: f64 = 1e-13;
/// Intervals of the scans for maxima and for meetings.
const SCAN: usize = 200;

struct Track {
    times: f64,
    system: String,
    level: AnyLevel,
    sides: [Side; 2],
}

/// An exact quantity followed outwards on both sides of the operating point.
pub struct Followed<'a> {
    at: f64,
    within: (f64, f64),
    tolerance: f64,
    base: f64,
    known_change: &'a dyn Fn(f64) -> f64,
    tracks: Vec<Track>,
    cosines: Vec<f64>,
}

/// Follows every level of a sum to `at + 2 (end of within - at)` on both sides, or to
/// where it meets another level or the escape edge.
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
            let side = |end: f64| -> Result<Side> {
                let reach = at + 2.0 * (end - at);
                with_level!(term.level, level => walk(level, reach, ACCURACY * margin / share, margin))
            };
            let sides = [side(within.0)?, side(within.1)?];
            Ok(Track { times: term.times, system: term.system.to_owned(), level: term.level.clone(), sides })
        })
        .collect::<Result<Vec<_>>>()?;
    let turn = core::f64::consts::PI / DEGREE as f64;
    let cosines = (0..2 * DEGREE).map(|k| libm::cos(turn * k as f64)).collect();
    Ok(Followed { at, within, tolerance, base, known_change: request.known_change, tracks, cosines })
}

impl Followed<'_> {
    fn interpolated(&self, x: f64) -> Option<(f64, f64)> {
        let side = usize::from(x >= self.at);
        let (mut sum, mut doubt) = (self.base + (self.known_change)(x), 0.0);
        if x != self.at {
            for track in &self.tracks {
                let (change, bound) = track.sides.get(side)?.change(x)?;
                sum += track.times * change;
                doubt += track.times.abs() * bound;
            }
        }
        Some((sum, doubt))
    }

    /// The quantity at `control`, interpolated; NaN where it was not followed to.
    #[must_use]
    pub fn value(&self, control: f64) -> f64 {
        self.interpolated(control).map_or(f64::NAN, |found| found.0)
    }

    /// The quantity at `control` by a solve of its own.
    ///
    /// # Errors
    /// Those of the eigenvalue solve.
    pub fn exact(&self, control: f64) -> Result<f64> {
        let mut sum = self.base + (self.known_change)(control);
        for track in &self.tracks {
            sum += track.times * with_level!(&track.level, level => solve(level, control)?.0);
        }
        Ok(sum)
    }

    /// Form minus quantity: infinite where the form has no value.
    fn residual(&self, form: &Form, x: f64) -> f64 {
        let d = x - self.at;
        if matches!(form, Form::Paired { half_gap_squared, .. } if horner(half_gap_squared, d) < 0.0) {
            return f64::INFINITY;
        }
        form.value(d) - self.value(x)
    }

    fn extra(&self, candidate: &Candidate, x: f64) -> f64 {
        let d = x - self.at;
        (candidate.numerical)(d) + (candidate.written)(d)
    }

    /// True if the whole error is proved to be within the tolerance from `a` to `b`.
    fn holds(&self, candidate: &Candidate, rounding: f64, a: f64, b: f64) -> bool {
        let nodes = chebyshev_points(a, b, DEGREE);
        let values: Vec<f64> = nodes.iter().map(|&x| self.residual(candidate.form, x)).collect();
        let other = nodes.iter().map(|&x| self.extra(candidate, x)).fold(0.0, f64::max);
        let doubt = nodes
            .iter()
            .map(|&x| self.interpolated(x).map_or(f64::INFINITY, |found| found.1))
            .fold(0.0, f64::max);
        let mut sum = 0.0;
        for order in 0..=DEGREE {
            let mut coefficient = 0.0;
            for (k, value) in values.iter().enumerate() {
                let half = if k == 0 || k == DEGREE { 0.5 } else { 1.0 };
                let cosine = self.cosines.get(order * k % (2 * DEGREE)).copied().unwrap_or(f64::NAN);
                coefficient += half * value * cosine;
            }
            let half = if order == 0 || order == DEGREE { 0.5 } else { 1.0 };
            // The tail of a form that is no polynomial is as large as its last terms.
            let tail = if order + 2 > DEGREE { 2.0 } else { 1.0 };
            sum += tail * half * coefficient.abs() * 2.0 / DEGREE as f64;
        }
        sum + other + doubt + rounding <= self.tolerance
    }

    /// First control value from `at` towards `to` beyond which the tolerance is not kept.
    fn first(&self, candidate: &Candidate, rounding: f64, to: f64) -> Option<f64> {
        let side = usize::from(to >= self.at);
        let span = (to - self.at).abs();
        let inside = |x: f64| (x - self.at).abs() < span;
        let mut cuts: Vec<f64> = self
            .tracks
            .iter()
            .filter_map(|track| track.sides.get(side))
            .flat_map(|side| side.pieces.iter().map(|piece| piece.to))
            .filter(|&x| inside(x))
            .collect();
        cuts.push(to);
        cuts.sort_by(|a, b| (b - self.at).abs().total_cmp(&(a - self.at).abs()));
        cuts.dedup();
        let mut from = self.at;
        // The outermost end is at the bottom; each pass takes or halves the next interval.
        while let Some(&end) = cuts.last() {
            if self.holds(candidate, rounding, from, end) {
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

    /// True if from `from` to `to` the form comes within the tolerance of the sum with
    /// one level replaced by another of its block. Energies counted by number are
    /// continuous, so a change of sign between two solves is proof.
    fn meets_other(&self, form: &Form, from: f64, to: f64) -> Result<bool> {
        let numbers: Vec<usize> = self.tracks.iter().map(|track| track.level.number()).collect();
        let mut before: Vec<Vec<f64>> = vec![Vec::new(); self.tracks.len()];
        for k in 1..=SCAN / 2 {
            let x = from + (to - from) * k as f64 / (SCAN / 2) as f64;
            let off = form.value(x - self.at) - self.exact(x)?;
            for ((track, &number), before) in self.tracks.iter().zip(&numbers).zip(&mut before) {
                let energies = with_level!(&track.level, level => solve(level, x)?.2);
                let own = energies.get(number.wrapping_sub(1)).copied().unwrap_or(f64::NAN);
                let away: Vec<f64> = energies.iter().map(|e| off - track.times * (e - own)).collect();
                let met = away.iter().enumerate().any(|(j, &now)| {
                    j + 1 != number
                        && (now.abs() <= self.tolerance
                            || before.get(j).is_some_and(|&then| (then < 0.0) != (now < 0.0)))
                });
                if met {
                    return Ok(true);
                }
                *before = away;
            }
        }
        Ok(false)
    }

    fn end(
        &self,
        candidate: &Candidate,
        upper: bool,
        notes: &mut Vec<Note>,
    ) -> Result<(f64, Limit, Option<f64>)> {
        let side = usize::from(upper);
        let wanted = if upper { self.within.1 } else { self.within.0 };
        if wanted == self.at {
            return Ok((wanted, Limit::Within, None));
        }
        let mut covered = (self.at + 2.0 * (wanted - self.at), Stop::Reached, "");
        for track in &self.tracks {
            if let Some(side) = track.sides.get(side)
                && (side.end - self.at).abs() < (covered.0 - self.at).abs()
            {
                covered = (side.end, side.stop, &track.system);
            }
        }
        let beyond = |x: f64| (x - self.at).abs() >= (wanted - self.at).abs();
        let plain = self.first(candidate, 0.0, covered.0);
        let found = if candidate.rounding > 0.0 {
            self.first(candidate, candidate.rounding, covered.0)
        } else {
            plain
        };
        if let Some(x) = found.filter(|&x| !beyond(x)) {
            let next = x + (wanted - self.at) * 1e-9;
            let limit = if !(self.known_change)(next).is_finite() {
                Limit::Undefined
            } else if self.residual(candidate.form, next) == f64::INFINITY {
                Limit::HalfGap
            } else if plain.is_none_or(beyond) {
                Limit::Rounding
            } else if self.meets_other(candidate.form, x, wanted)? {
                Limit::Crossing
            } else {
                Limit::Remainder
            };
            return Ok((x, limit, Some(x)));
        }
        if beyond(covered.0) {
            return Ok((wanted, Limit::Within, plain));
        }
        match covered {
            (x, Stop::Meeting(gap), system) => {
                if x == self.at || !self.meets_other(candidate.form, x, wanted)? {
                    return Err(Error::accuracy(
                        Diagnostic::new(
                            "range-not-covered",
                            format!("the level of `{system}` cannot be told from its neighbour beyond {x}"),
                        )
                        .found(format!("levels {gap:e} apart there, in the model's unit"))
                        .expected("levels far enough apart to prove which is which")
                        .action(
                            "name what separates them under `conserved`, or end `within` before that point",
                        ),
                    ));
                }
                let text =
                    format!("another level of `{system}` is met at {x}, gap {gap:e} in the model's unit");
                notes.push(Note { code: "crossing".to_owned(), text });
                Ok((x, Limit::Crossing, Some(x)))
            }
            (x, _, _) => Ok((x, Limit::Escape, Some(x))),
        }
    }

    /// The range on which the candidate keeps the tolerance, with its error budget.
    ///
    /// # Errors
    /// `Accuracy` if the tolerance is missed at the operating point, or if the wanted
    /// interval could not be covered by isolation discs.
    pub fn measure(&self, candidate: &Candidate) -> Result<Ranged> {
        let start = self.residual(candidate.form, self.at).abs()
            + self.extra(candidate, self.at)
            + candidate.rounding;
        if start.is_nan() || start > self.tolerance {
            return Err(Error::accuracy(
                Diagnostic::new("tolerance-missed", "the tolerance is missed at the operating point itself")
                    .found(format!("an error of {start:e} at {}", self.at))
                    .expected(format!("at most {:e}", self.tolerance))
                    .action("allow a larger tolerance, or ask for a number format with more digits"),
            ));
        }
        let mut notes = Vec::new();
        let (from, low, fails_below) = self.end(candidate, false, &mut notes)?;
        let (to, high, fails_above) = self.end(candidate, true, &mut notes)?;
        let (mut remainder, mut numerical, mut written) = (0.0_f64, 0.0_f64, 0.0_f64);
        for x in chebyshev_points(from, to, SCAN) {
            remainder = remainder.max(self.residual(candidate.form, x).abs());
            numerical = numerical.max((candidate.numerical)(x - self.at));
            written = written.max((candidate.written)(x - self.at));
        }
        let samples = (0..=8)
            .map(|k| {
                let x = if k == 8 { to } else { from + (to - from) * f64::from(k) / 8.0 };
                Ok(Sample { control: x, exact: self.exact(x)?, formula: candidate.form.value(x - self.at) })
            })
            .collect::<Result<Vec<_>>>()?;
        Ok(Ranged {
            form: candidate.form.clone(),
            valid: (from, to),
            limited_by: [low, high],
            first_to_fail: [fails_below, fails_above],
            remainder,
            numerical,
            written,
            samples,
            notes,
        })
    }
}
