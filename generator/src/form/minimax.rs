//! The polynomial whose largest error on an interval is smallest.
//!
//! In: the exact quantity as a function of the offset `d`, an interval of `d`
//! that holds 0, the highest power, and powers that stay away. Out: the
//! coefficients and the largest error.
//!
//! Method: Remez exchange of all extrema. Where powers are left out, the lowest
//! power kept is a factor of the whole polynomial, and the rest is a
//! Chebyshev system away from 0; with only even or only odd powers, one half of a
//! symmetric interval says everything. The alternation is then that of the error
//! times the sign of that factor.
//!
//! Source: Powell, *Approximation Theory and Methods*, ch. 8 and 9.

use nalgebra::{DMatrix, DVector};

use crate::diagnostic::{Diagnostic, Error, Result};

/// Points at which the error is looked at between exchanges, dense against the
/// at most six extrema; each is then refined by a parabola.
const GRID: usize = 400;

/// Exchanges; convergence is quadratic, five suffice in practice.
const EXCHANGES: usize = 40;

/// Bisection steps of the interval's scale: beyond a double's digits of the range ends.
const BISECTIONS: usize = 45;

/// A best polynomial.
#[derive(Clone, Debug, PartialEq)]
pub struct Best {
    /// Coefficients by rising power of `d`.
    pub coefficients: Vec<f64>,
    /// Largest error on the interval.
    pub error: f64,
    /// The interval of `d`.
    pub interval: (f64, f64),
}

/// Best polynomial with powers up to `order` but without those in `absent`.
///
/// `absent` powers other than 0 are honoured only on an interval symmetric about
/// 0 when they leave powers of one parity; the caller drops them otherwise.
///
/// # Errors
/// If the function is not finite on the interval.
pub fn best(
    exact: &dyn Fn(f64) -> f64,
    interval: (f64, f64),
    order: usize,
    absent: &[usize],
) -> Result<Best> {
    let powers: Vec<usize> = (0..=order).filter(|power| !absent.contains(power)).collect();
    let mut coefficients = vec![0.0; order + 1];
    let size = interval.0.abs().max(interval.1.abs());
    if size == 0.0 || powers.is_empty() {
        let error = (0..=GRID).fold(0.0_f64, |largest, k| {
            let d = interval.0 + (interval.1 - interval.0) * k as f64 / GRID as f64;
            largest.max(exact(d).abs())
        });
        return Ok(Best { coefficients, error, interval });
    }
    let alike = powers.iter().all(|power| power % 2 == powers[0] % 2);
    let half = alike && powers.len() <= order && interval.0 == -interval.1;
    let (from, to) = if half { (0.0, interval.1) } else { interval };
    let problem = Problem { exact, powers: &powers, size };
    let points: Vec<f64> = (0..=GRID)
        .map(|k| {
            let angle = std::f64::consts::PI * k as f64 / GRID as f64;
            0.5 * (from + to) - 0.5 * (to - from) * libm::cos(angle)
        })
        .collect();
    let values: Vec<f64> = points.iter().map(|&d| exact(d)).collect();
    if values.iter().any(|value| !value.is_finite()) {
        return Err(Error::accuracy(
            Diagnostic::new(
                "undefined",
                "the exact level is not defined on the whole interval of a minimax form",
            )
            .action("narrow `within`"),
        ));
    }
    let n_reference = powers.len() + 1;
    let mut reference: Vec<f64> = (0..n_reference)
        .map(|k| {
            // Extrema of the Chebyshev polynomial, kept off 0, where a factor may vanish.
            let angle = std::f64::consts::PI * (k as f64 + 0.01) / (n_reference as f64 - 0.98);
            0.5 * (from + to) - 0.5 * (to - from) * libm::cos(angle)
        })
        .collect();
    let mut scaled = vec![0.0; powers.len()];
    let mut largest = f64::INFINITY;
    for _ in 0..EXCHANGES {
        let Some((fitted, level)) = problem.levelled(&reference) else { break };
        let extrema = problem.extrema(&fitted, &points, &values);
        let found = extrema.iter().fold(0.0_f64, |size, extremum| size.max(extremum.1.abs()));
        if found < largest {
            largest = found;
            scaled = fitted;
        }
        let Some(next) = exchange(extrema, n_reference) else { break };
        if found <= level.abs() * (1.0 + 1e-10) {
            break;
        }
        reference = next;
    }
    if !largest.is_finite() {
        return Err(Error::internal("the exchange of a best polynomial found no first reference"));
    }
    for (&power, &value) in powers.iter().zip(&scaled) {
        coefficients[power] = (0..power).fold(value, |c, _| c / size);
    }
    Ok(Best { coefficients, error: largest, interval })
}

/// Best polynomial on `[s from, s to]` (offsets) with the largest `s` in (0, 1]
/// for which its error and `other`, the remaining error parts at an offset, meet
/// `tolerance`.
///
/// # Errors
/// `tolerance-missed` if no interval does; those of [`best`].
pub fn widest(
    exact: &dyn Fn(f64) -> f64,
    within: (f64, f64),
    order: usize,
    absent: &[usize],
    other: &dyn Fn(f64) -> f64,
    tolerance: f64,
) -> Result<Best> {
    let fits = |s: f64| -> Result<Option<Best>> {
        let found = best(exact, (s * within.0, s * within.1), order, absent)?;
        let rest = other(found.interval.0).max(other(found.interval.1));
        Ok((found.error + rest <= tolerance).then_some(found))
    };
    if let Some(found) = fits(1.0)? {
        return Ok(found);
    }
    let (mut low, mut high) = (0.0, 1.0);
    let mut kept = None;
    for _ in 0..BISECTIONS {
        let middle = 0.5 * (low + high);
        match fits(middle)? {
            Some(found) => {
                low = middle;
                kept = Some(found);
            }
            None => high = middle,
        }
    }
    kept.ok_or_else(|| {
        Error::accuracy(
            Diagnostic::new("tolerance-missed", "no interval around the operating point meets the tolerance")
                .expected(format!("an error of at most {tolerance:e}"))
                .action("loosen `tolerance`"),
        )
    })
}

struct Problem<'a> {
    exact: &'a dyn Fn(f64) -> f64,
    powers: &'a [usize],
    size: f64,
}

impl Problem<'_> {
    /// `(d / size)^power`.
    fn base(&self, d: f64, power: usize) -> f64 {
        (0..power).fold(1.0, |product, _| product * (d / self.size))
    }

    fn sign(&self, d: f64) -> f64 {
        if self.powers[0] % 2 == 1 && d < 0.0 { -1.0 } else { 1.0 }
    }

    /// Error at `d` times the sign of the common factor.
    fn error(&self, scaled: &[f64], d: f64, value: f64) -> f64 {
        let fitted =
            self.powers.iter().zip(scaled).fold(0.0, |sum, (&power, c)| sum + c * self.base(d, power));
        self.sign(d) * (value - fitted)
    }

    /// Coefficients whose error alternates with equal size on the reference.
    fn levelled(&self, reference: &[f64]) -> Option<(Vec<f64>, f64)> {
        let order = reference.len();
        let matrix = DMatrix::from_fn(order, order, |row, column| {
            let d = reference[row];
            match self.powers.get(column) {
                Some(&power) => self.base(d, power),
                None => self.sign(d) * if row % 2 == 0 { 1.0 } else { -1.0 },
            }
        });
        let right = DVector::from_iterator(order, reference.iter().map(|&d| (self.exact)(d)));
        let found = matrix.full_piv_lu().solve(&right)?;
        found.iter().all(|x| x.is_finite()).then(|| {
            let level = found[order - 1];
            (found.iter().copied().take(order - 1).collect(), level)
        })
    }

    /// The extremum of each stretch of one sign, refined by parabolas.
    fn extrema(&self, scaled: &[f64], points: &[f64], values: &[f64]) -> Vec<(f64, f64)> {
        let errors: Vec<f64> =
            points.iter().zip(values).map(|(&d, &value)| self.error(scaled, d, value)).collect();
        let mut out: Vec<(f64, f64)> = Vec::new();
        let mut best: Option<usize> = None;
        for idx in 0..=errors.len() {
            let flips = match (best, errors.get(idx)) {
                (Some(_), None) => true,
                (Some(held), Some(error)) => (*error < 0.0) != (errors[held] < 0.0),
                (None, _) => false,
            };
            if flips && let Some(held) = best {
                out.push(self.refine(scaled, points, &errors, held));
                best = None;
            }
            if let Some(error) = errors.get(idx)
                && best.is_none_or(|held| error.abs() > errors[held].abs())
            {
                best = Some(idx);
            }
        }
        out
    }

    fn refine(&self, scaled: &[f64], points: &[f64], errors: &[f64], idx: usize) -> (f64, f64) {
        let held = (points[idx], errors[idx]);
        if idx == 0 || idx + 1 >= points.len() {
            return held;
        }
        let (a, b, c) = (points[idx - 1], points[idx], points[idx + 1]);
        let (left, right) = (errors[idx - 1] - errors[idx], errors[idx + 1] - errors[idx]);
        let bottom = left * (c - b) - right * (a - b);
        if bottom == 0.0 {
            return held;
        }
        let d = b + 0.5 * (left * (c - b) * (c - b) - right * (a - b) * (a - b)) / bottom;
        if !(d > a && d < c) {
            return held;
        }
        let error = self.error(scaled, d, (self.exact)(d));
        if error.abs() > held.1.abs() { (d, error) } else { held }
    }
}

/// `count` alternating extrema, the smaller end dropped while there are too many;
/// `None` where there are too few: the error is then rounding.
fn exchange(mut extrema: Vec<(f64, f64)>, count: usize) -> Option<Vec<f64>> {
    while extrema.len() > count {
        let last = extrema.len() - 1;
        if extrema[0].1.abs() < extrema[last].1.abs() {
            extrema.remove(0);
        } else {
            extrema.pop();
        }
    }
    (extrema.len() == count).then(|| extrema.into_iter().map(|extremum| extremum.0).collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// `|x^3 - p(x)|` is smallest for `p = 3x/4`, error 1/4 (Chebyshev polynomial).
    #[test]
    fn a_monomial_leaves_a_chebyshev_polynomial() {
        let found = best(&|d| d * d * d, (-1.0, 1.0), 2, &[]).unwrap();
        assert!((found.error - 0.25).abs() < 1e-9);
        assert!((found.coefficients[1] - 0.75).abs() < 1e-9);
        assert!(found.coefficients[0].abs() < 1e-9 && found.coefficients[2].abs() < 1e-9);
        let even = best(&|d| d * d * d * d, (-2.0, 2.0), 3, &[1, 3]).unwrap();
        // x^4 on [-2, 2]: T4 scaled, 16 (x^4 - T4/8): error 2, p = 4 x^2 - 2.
        assert!((even.error - 2.0).abs() < 1e-8);
        assert!((even.coefficients[2] - 4.0).abs() < 1e-7);
        assert_eq!((even.coefficients[1], even.coefficients[3]), (0.0, 0.0));
    }

    /// exp on [-1, 1] by a line: slope sinh 1, error by the closed form. Source: Powell,
    /// *Approximation Theory and Methods*, ch. 7 (a convex function and a straight line).
    #[test]
    fn a_line_through_the_exponential_has_its_closed_form() {
        let found = best(&libm::exp, (-1.0, 1.0), 1, &[]).unwrap();
        let slope = libm::sinh(1.0);
        let touch = libm::log(slope);
        let error = 0.5 * (libm::cosh(1.0) - slope + slope * touch);
        assert!((found.coefficients[1] - slope).abs() < 1e-8);
        assert!((found.error - error).abs() < 1e-9, "{} {}", found.error, error);
    }

    /// Without a constant term the error still alternates: `x + x^3` by a multiple of `x`
    /// on [0, 1]: the error `x^3 - c x` has `|1 - c| = 2 (c/3)^(3/2)` at its two extrema; c = 3/4.
    #[test]
    fn a_shift_has_no_constant() {
        let found = best(&|d| d + d * d * d, (-1.0, 1.0), 2, &[0]).unwrap();
        assert_eq!(found.coefficients[0], 0.0);
        assert!((found.coefficients[1] - 1.75).abs() < 1e-7, "{found:?}");
        assert!((found.error - 0.25).abs() < 1e-7);
    }

    /// `s^3/4 = tolerance` gives the scale in closed form.
    #[test]
    fn the_interval_is_as_wide_as_the_tolerance_allows() {
        let found = widest(&|d| d * d * d, (-10.0, 10.0), 2, &[], &|_| 0.0, 2.0).unwrap();
        assert!((found.interval.1 - 2.0).abs() < 1e-7, "{found:?}");
    }
}
