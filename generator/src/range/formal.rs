//! A range that the series itself suggests, where there is no exact level.
//!
//! With open ends in three dimensions and a field no level is bound, so nothing
//! can be measured. The next two orders stand for the remainder; that is an
//! estimate by the size of first omitted terms, common practice for asymptotic
//! series, and no bound.

use super::{Candidate, Limit, Ranged};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::outcome::Note;

/// Steps of the search outwards before an end is bisected.
const STEPS: usize = 1000;

/// The series beyond a form, by which its range is estimated.
pub struct Formal<'a> {
    /// Operating point.
    pub at: f64,
    /// Wanted interval.
    pub within: (f64, f64),
    /// Powers and coefficients of the next two orders that are not zero, formula's unit per control unit to the power.
    pub next: &'a [(usize, f64)],
    /// Largest error allowed, formula's unit.
    pub tolerance: f64,
}

impl Formal<'_> {
    /// What the next two orders amount to at an offset.
    fn remainder(&self, d: f64) -> f64 {
        let power = |n: usize| (0..n).fold(1.0, |product, _| product * d.abs());
        self.next.iter().map(|&(n, coefficient)| coefficient.abs() * power(n)).sum()
    }

    /// The range on which the next two orders stay within half the tolerance, and
    /// with the other errors within the whole. There are no samples.
    ///
    /// # Errors
    /// `Accuracy` if the tolerance is missed at the operating point.
    pub fn measure(&self, candidate: &Candidate<'_>) -> Result<Ranged> {
        let other = |d: f64| (candidate.numerical)(d) + (candidate.written)(d) + candidate.rounding;
        let formal = |d: f64| self.remainder(d) <= 0.5 * self.tolerance;
        let kept = |d: f64| formal(d) && self.remainder(d) + other(d) <= self.tolerance;
        if !kept(0.0) {
            return Err(Error::accuracy(
                Diagnostic::new("tolerance-missed", "the tolerance is missed at the operating point itself")
                    .found(format!("an error of {:e} at {}", other(0.0), self.at))
                    .expected(format!("at most {:e}", self.tolerance))
                    .action("allow a larger tolerance, or ask for a number format with more digits"),
            ));
        }
        let end = |reach: f64| -> Option<f64> {
            let mut inside = 0.0;
            for k in 1..=STEPS {
                let mut outside = reach * k as f64 / STEPS as f64;
                if !kept(outside) {
                    for _ in 0..100 {
                        let middle = 0.5 * (inside + outside);
                        if kept(middle) { inside = middle } else { outside = middle }
                    }
                    return Some(inside);
                }
                inside = outside;
            }
            None
        };
        let mut valid = [self.within.0, self.within.1];
        let mut limited_by = [Limit::Within; 2];
        let mut first_to_fail = [None; 2];
        for side in 0..2 {
            let wanted = valid[side] - self.at;
            let found = end(2.0 * wanted);
            first_to_fail[side] = found.map(|d| self.at + d);
            if let Some(d) = found.filter(|d| d.abs() < wanted.abs()) {
                valid[side] = self.at + d;
                let next = d + 1e-9 * wanted;
                limited_by[side] =
                    if formal(next) && candidate.rounding > 0.0 { Limit::Rounding } else { Limit::Formal };
            }
        }
        let ends = valid.map(|x| x - self.at);
        let largest = |of: &dyn Fn(f64) -> f64| ends.iter().map(|&d| of(d)).fold(of(0.0), f64::max);
        Ok(Ranged {
            form: candidate.form.clone(),
            valid: (valid[0], valid[1]),
            limited_by,
            first_to_fail,
            remainder: largest(&|d| self.remainder(d)),
            numerical: largest(candidate.numerical),
            written: largest(candidate.written),
            samples: Vec::new(),
            notes: vec![Note {
                code: "formal".to_owned(),
                text: "in a field no level is bound behind open ends: the range is estimated from the \
                       next two orders of the series, not measured"
                    .to_owned(),
            }],
        })
    }
}
