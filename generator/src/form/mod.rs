//! Candidate closed forms as plain numbers.
//!
//! In: series coefficients (already in the formula's unit per control unit)
//! with their uncertainty. Out: a [`Form`] whose numbers carry only the digits
//! that the uncertainty justifies, and its evaluation.
//!
//! Not here: languages, number formats.

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
}
