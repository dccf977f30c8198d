//! The range of a form, with its error budget and samples.

use super::follow::Stop;
use super::followed::Followed;
use super::interpolant::chebyshev_points;
use super::view::View;
use super::{Candidate, Limit, Ranged, Sample};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::outcome::Note;

/// Intervals of the scan for maxima.
const SCAN: usize = 200;
/// Solves that look for another level beyond the range's end.
const LOOKS: usize = 48;
/// Relative distance from the tolerance at which an error grazes it.
const GRAZING: f64 = 1e-6;
/// Part of the range by which the ends for two tolerances that far apart differ at most
/// where the error rises through them.
const STEEP: f64 = 1e-2;

/// One end of a range.
struct End {
    x: f64,
    limit: Limit,
    fails: Option<f64>,
}

impl View<'_> {
    fn tolerance(&self) -> f64 {
        self.followed.tolerance
    }

    /// True if from `from` to `to` the form comes within the tolerance of the sum with
    /// one level replaced by another of its block. Energies counted by number are
    /// continuous, so a changed count of levels below the form is proof.
    fn meets_other(&self, from: f64, to: f64) -> Result<bool> {
        let followed = self.followed;
        let at_side = followed.side(to);
        let mut before: Vec<Option<usize>> = vec![None; followed.tracks.len()];
        for k in 1..=LOOKS {
            let x = from + (to - from) * k as f64 / LOOKS as f64;
            let known = (followed.known_change)(x);
            let mut off = self.candidate.form.value(x - followed.at) - followed.base - known;
            let mut changes = Vec::with_capacity(followed.tracks.len());
            for (track, sides) in followed.tracks.iter().zip(&self.sides) {
                let side = &sides[at_side];
                if !known.is_finite() || !track.defined(x) {
                    return Ok(false);
                }
                let change = match side.change(x) {
                    Some((change, _)) => change,
                    None => track.exact(side, x)?,
                };
                off -= track.times * change;
                changes.push(change);
            }
            let walked = followed.tracks.iter().zip(&self.sides).zip(&mut before).zip(changes);
            for (((track, sides), before), own) in walked {
                let wanted = own + off / track.times;
                let margin = self.tolerance() / track.times.abs();
                let Some([mut below, mut within]) = track.counts(x, wanted, margin)? else {
                    continue;
                };
                // The followed level itself is none of the others.
                let (low, high) = sides[at_side].last;
                if own < wanted - margin {
                    below = below.saturating_sub(high + 1 - low);
                } else if own <= wanted + margin {
                    within = within.saturating_sub(high + 1 - low);
                }
                if within > 0 || before.is_some_and(|then| then != below) {
                    return Ok(true);
                }
                *before = Some(below);
            }
        }
        Ok(false)
    }

    /// An end brought from the interpolants' accuracy to that of exact solves.
    fn polished(&self, end: f64, rounding: f64) -> Result<f64> {
        let at = self.followed.at;
        if end == at || self.in_window(end) {
            return Ok(end);
        }
        let step = 1e-5 * (end - at);
        let excess = |residual: f64, x: f64| residual.abs() + self.extra(x) + rounding - self.tolerance();
        let rise = (excess(self.residual(end), end) - excess(self.residual(end - step), end - step)) / step;
        let mut x = end;
        for _ in 0..2 {
            let exact = self.candidate.form.value(x - at) - self.exact(x)?;
            let next = x - excess(exact, x) / rise;
            // Beyond this the interpolant was not what Newton's step takes it for.
            if !next.is_finite() || (next - end).abs() > step.abs() {
                return Ok(end);
            }
            x = next;
        }
        Ok(x)
    }

    /// Where the error first touches the tolerance from inside without clearly passing it.
    fn graze(&self, rounding: f64, found: Option<f64>, covered: f64) -> Option<f64> {
        let at = self.followed.at;
        let below = self.first(rounding, self.tolerance() * (1.0 - GRAZING), covered)?;
        let far = |x: Option<f64>| x.is_none_or(|x| (x - below).abs() > STEEP * (below - at).abs());
        if far(found) {
            return Some(below);
        }
        let above = self.first(rounding, self.tolerance() * (1.0 + GRAZING), covered);
        if far(above) { found } else { None }
    }

    fn end(&self, upper: bool, notes: &mut Vec<Note>) -> Result<End> {
        let followed = self.followed;
        let at = followed.at;
        let side = usize::from(upper);
        let wanted = if upper { followed.within.1 } else { followed.within.0 };
        if wanted == at {
            return Ok(End { x: wanted, limit: Limit::Within, fails: None });
        }
        let covered = self.covered(side);
        let beyond = |x: f64| (x - at).abs() >= (wanted - at).abs();
        let plain = self.first(0.0, self.tolerance(), covered);
        let rounding = self.candidate.rounding;
        let mut found = if rounding > 0.0 { self.first(rounding, self.tolerance(), covered) } else { plain };
        let touched = self.graze(rounding, found, covered);
        if let Some(x) = touched {
            found = Some(x);
            if !beyond(x) {
                let text = format!("the error touches the tolerance at {x} within a millionth of it");
                notes.push(Note { code: "grazing".to_owned(), text });
            }
        }
        if let Some(x) = found.filter(|&x| !beyond(x)) {
            let next = x + (wanted - at) * 1e-9;
            let limit = if !(followed.known_change)(next).is_finite() {
                Limit::Undefined
            } else if self.residual(next) == f64::INFINITY {
                Limit::HalfGap
            } else if rounding > 0.0 && plain.is_none_or(beyond) {
                Limit::Rounding
            } else if self.meets_other(x, wanted)? {
                Limit::Crossing
            } else {
                Limit::Remainder
            };
            let steep = matches!(limit, Limit::Crossing | Limit::Remainder | Limit::Rounding);
            let x = if steep && touched.is_none() { self.polished(x, rounding)? } else { x };
            // Polishing may move an end that is the wanted one across it.
            let x = if beyond(x) { wanted } else { x };
            return Ok(End { x, limit, fails: Some(x) });
        }
        if beyond(covered) {
            let fails = match plain {
                Some(x) => Some(self.polished(x, 0.0)?),
                None => None,
            };
            return Ok(End { x: wanted, limit: Limit::Within, fails });
        }
        self.uncovered(side, covered, wanted, notes)
    }

    /// The end of a range where a walk ended first.
    fn uncovered(&self, side: usize, x: f64, wanted: f64, notes: &mut Vec<Note>) -> Result<End> {
        let at = self.followed.at;
        let stopped = self
            .followed
            .tracks
            .iter()
            .zip(&self.sides)
            .find(|(_, sides)| sides[side].end == x)
            .map(|(track, sides)| (track.system.as_str(), sides[side].stop));
        let limit = match stopped {
            Some((system, Stop::Meeting(gap))) => {
                let overlap = matches!(self.followed.tracks.as_slice(), [one] if one.is_overlap());
                if x == at || !overlap && !self.meets_other(x, wanted)? {
                    return Err(Error::accuracy(
                        Diagnostic::new(
                            "range-not-covered",
                            format!("the level of `{system}` cannot be told from its neighbours beyond {x}"),
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
                Limit::Crossing
            }
            Some((_, Stop::Undefined)) => Limit::Undefined,
            _ => Limit::Escape,
        };
        Ok(End { x, limit, fails: (limit != Limit::Undefined).then_some(x) })
    }

    /// Remarks on the way from one end to the other.
    fn remarks(&self, from: f64, to: f64, notes: &mut Vec<Note>) {
        for (track, sides) in self.followed.tracks.iter().zip(&self.sides) {
            for side in sides {
                for one in side.crossings.iter().filter(|one| one.x >= from && one.x <= to) {
                    let text = format!(
                        "the level of `{}` crosses from number {} of its block to {} at {}, gap {:e} in the formula's unit",
                        track.system,
                        one.numbers.0,
                        one.numbers.1,
                        one.x,
                        track.times.abs() * one.gap
                    );
                    notes.push(Note { code: "crossing".to_owned(), text });
                }
                if side.sampled_from().is_some_and(|start| start >= from && start <= to) {
                    let text = format!(
                        "where several levels of `{}` meet, its level is carried from sample to sample by overlap; \
                         what lies between the samples is estimated there, not bounded",
                        track.system
                    );
                    let note = Note { code: "sampled".to_owned(), text };
                    if !notes.contains(&note) {
                        notes.push(note);
                    }
                }
            }
        }
    }
}

impl Followed<'_> {
    /// The range on which the candidate keeps the tolerance, with its error budget.
    ///
    /// # Errors
    /// `Accuracy` if the tolerance is missed at the operating point, or if the wanted
    /// interval could not be covered by isolation discs.
    pub fn measure(&self, candidate: &Candidate<'_>) -> Result<Ranged> {
        let at = self.at;
        let start = (candidate.form.value(0.0) - self.base - (self.known_change)(at)).abs()
            + (candidate.numerical)(0.0)
            + (candidate.written)(0.0)
            + candidate.rounding;
        if start.is_nan() || start > self.tolerance {
            return Err(Error::accuracy(
                Diagnostic::new("tolerance-missed", "the tolerance is missed at the operating point itself")
                    .found(format!("an error of {start:e} at {at}"))
                    .expected(format!("at most {:e}", self.tolerance))
                    .action("allow a larger tolerance, or ask for a number format with more digits"),
            ));
        }
        let view = View::new(self, candidate)?;
        let mut notes = Vec::new();
        let low = view.end(false, &mut notes)?;
        let high = view.end(true, &mut notes)?;
        let (from, to) = (low.x, high.x);
        view.remarks(from, to, &mut notes);
        let (mut remainder, mut numerical, mut written) = (0.0_f64, 0.0_f64, 0.0_f64);
        for x in chebyshev_points(from, to, SCAN) {
            remainder = remainder.max(view.remainder(x));
            numerical = numerical.max((candidate.numerical)(x - at));
            written = written.max((candidate.written)(x - at));
        }
        remainder = view.crossed(from, to).fold(remainder, f64::max);
        // A number format is asked for its range alone.
        let count = if candidate.rounding > 0.0 { 0 } else { 9 };
        let samples = (0..count)
            .map(|k| {
                let x = if k == 8 { to } else { from + (to - from) * f64::from(k) / 8.0 };
                Ok(Sample { control: x, exact: view.exact(x)?, formula: candidate.form.value(x - at) })
            })
            .collect::<Result<Vec<_>>>()?;
        Ok(Ranged {
            form: candidate.form.clone(),
            valid: (from, to),
            limited_by: [low.limit, high.limit],
            first_to_fail: [low.fails, high.fails],
            remainder,
            numerical,
            written,
            samples,
            notes,
        })
    }
}
