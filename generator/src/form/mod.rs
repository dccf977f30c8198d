//! Candidate closed forms as plain numbers.
//!
//! In: series coefficients (already in the formula's unit per control unit)
//! with their uncertainty. Out: a [`Form`] whose numbers carry only the digits
//! that the uncertainty justifies, and its evaluation.
//!
//! Not here: languages, number formats.

mod digits;
mod minimax;
pub mod tensor;

pub use digits::{written, written_range, written_uncertainty};
pub use minimax::{Best, best, widest};

/// A closed form of the offset `d = control - at`.
#[derive(Clone, Debug, PartialEq)]
pub enum Form {
    /// `c[0] + d (c[1] + d (c[2] + ...))`.
    Polynomial {
        /// Coefficients by rising power.
        coefficients: Vec<f64>,
    },
    /// `mean(d) + sign sqrt(half_gap_squared(d))`.
    Paired {
        /// Coefficients of the mean by rising power.
        mean: Vec<f64>,
        /// Coefficients of the squared half gap by rising power.
        half_gap_squared: Vec<f64>,
        /// +1 or -1.
        sign: f64,
        /// Number of the other level in its block.
        partner: usize,
    },
}

/// `c[0] + d (c[1] + d (c[2] + ...))`, one rounding per operation.
#[must_use]
pub fn horner(coefficients: &[f64], d: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, &c| if sum == 0.0 { c } else { c + d * sum })
}

impl Form {
    /// The value at offset `d`; a negative squared half gap counts as 0.
    #[must_use]
    pub fn value(&self, d: f64) -> f64 {
        match self {
            Self::Polynomial { coefficients } => horner(coefficients, d),
            Self::Paired { mean, half_gap_squared, sign, .. } => {
                horner(mean, d) + sign * libm::sqrt(horner(half_gap_squared, d).max(0.0))
            }
        }
    }

    /// The derivative at offset `d`; 0 for the root of a squared half gap that is not positive.
    #[must_use]
    pub fn slope(&self, d: f64) -> f64 {
        match self {
            Self::Polynomial { coefficients } => horner_slope(coefficients, d),
            Self::Paired { mean, half_gap_squared, sign, .. } => {
                let square = horner(half_gap_squared, d);
                let root = if square > 0.0 {
                    0.5 * horner_slope(half_gap_squared, d) / libm::sqrt(square)
                } else {
                    0.0
                };
                horner_slope(mean, d) + sign * root
            }
        }
    }

    /// The same form with the digits that the uncertainties justify; `uncertainty`
    /// goes with the coefficients (of the mean), `gap_uncertainty` with the squared half gap. Missing entries keep
    /// every digit.
    #[must_use]
    pub fn written(&self, uncertainty: &[f64], gap_uncertainty: &[f64]) -> Self {
        let cut = |values: &[f64], doubts: &[f64]| {
            values
                .iter()
                .enumerate()
                .map(|(k, &c)| written(c, doubts.get(k).copied().unwrap_or(0.0)))
                .collect()
        };
        match self {
            Self::Polynomial { coefficients } => {
                Self::Polynomial { coefficients: cut(coefficients, uncertainty) }
            }
            Self::Paired { mean, half_gap_squared, sign, partner } => Self::Paired {
                mean: cut(mean, uncertainty),
                half_gap_squared: cut(half_gap_squared, gap_uncertainty),
                sign: *sign,
                partner: *partner,
            },
        }
    }

    /// A bound of what the digits of `self` cost against `full` at offset `d`.
    #[must_use]
    pub fn written_error(&self, full: &Self, d: f64) -> f64 {
        match (self, full) {
            (Self::Polynomial { coefficients: a }, Self::Polynomial { coefficients: b }) => apart(a, b, d),
            (
                Self::Paired { mean: a, half_gap_squared: p, .. },
                Self::Paired { mean: b, half_gap_squared: q, .. },
            ) => {
                let off = apart(p, q, d);
                let square = horner(q, d).max(0.0);
                let sum = libm::sqrt(square) + libm::sqrt((square - off).max(0.0));
                // |sqrt x - sqrt y| = |x - y| / (sqrt x + sqrt y) and never above sqrt |x - y|.
                let root = libm::sqrt(off);
                apart(a, b, d) + if sum > root { off / sum } else { root }
            }
            _ => f64::INFINITY,
        }
    }
}

/// Derivative of [`horner`]'s polynomial.
fn horner_slope(coefficients: &[f64], d: f64) -> f64 {
    let mut sum = 0.0;
    for (power, c) in coefficients.iter().enumerate().skip(1).rev() {
        sum = sum * d + power as f64 * c;
    }
    sum
}

/// `sum |a_k - b_k| |d|^k`.
fn apart(a: &[f64], b: &[f64], d: f64) -> f64 {
    let n = a.len().max(b.len());
    let get = |list: &[f64], k: usize| list.get(k).copied().unwrap_or(0.0);
    (0..n).rev().fold(0.0, |sum, k| sum * d.abs() + (get(a, k) - get(b, k)).abs())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// `sqrt(1 + 2d + d^2) = 1 + d`, so the slope is 1, and with mean `d^2` it is `1 + 2d`.
    #[test]
    fn slopes_are_those_of_the_closed_form() {
        let paired = Form::Paired {
            mean: vec![0.0, 0.0, 1.0],
            half_gap_squared: vec![1.0, 2.0, 1.0],
            sign: 1.0,
            partner: 2,
        };
        assert_eq!(paired.slope(0.5), 2.0);
        let cubic = Form::Polynomial { coefficients: vec![7.0, 1.0, 0.0, 2.0] };
        assert_eq!(cubic.slope(2.0), 25.0);
    }

    /// What the digits cost is never understated.
    #[test]
    fn written_error_bounds_the_difference() {
        let full = Form::Paired {
            mean: vec![1.0 / 3.0, 0.0, 1.0 / 7.0],
            half_gap_squared: vec![1.0 / 9.0, -1.0 / 11.0, 1.0 / 13.0],
            sign: -1.0,
            partner: 2,
        };
        let short = full.written(&[1.0; 3], &[1.0; 3]);
        assert_ne!(full, short);
        for step in -20..=20 {
            let d = f64::from(step) * 0.1;
            let bound = short.written_error(&full, d);
            assert!((short.value(d) - full.value(d)).abs() <= bound + 1e-16);
            assert!(bound < 1e-10);
        }
    }
}
