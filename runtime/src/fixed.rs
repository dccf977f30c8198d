//! Formulas in integers that count steps.
//!
//! A polynomial is a ladder of rungs: the top one is a constant; each lower one
//! multiplies what stands above by the count, adds, shifts and adds its own
//! constant. Shifts round down; the constant added before one makes that a
//! rounding to nearest and carries the fraction of the rung's constant. The
//! generator scales the rungs so that nothing overflows for any input; here all
//! is held in 64 bits, which gives the same numbers as any narrower width that
//! holds them.

use crate::OutOfRange;
use crate::root;

/// Scale of the slope: it counts value steps per control step in units of 2^-16.
pub const SLOPE_BITS: u32 = 16;

/// One step of a ladder.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Rung {
    /// Added after the shift; the whole of the top rung.
    pub constant: i64,
    /// Added before the shift.
    pub before: i64,
    /// Bits shifted out.
    pub shift: u32,
}

/// What the ladder gives for a count.
///
/// Rungs by rising power; an empty ladder gives 0.
#[must_use]
pub fn climb(rungs: &[Rung], k: i64) -> i64 {
    let mut rungs = rungs.iter().rev();
    let top = rungs.next().map_or(0, |rung| rung.constant);
    rungs.fold(top, |sum, rung| {
        rung.constant.wrapping_add(k.wrapping_mul(sum).wrapping_add(rung.before).wrapping_shr(rung.shift))
    })
}

/// A closed form of the count's distance from the origin.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Form<'a> {
    /// One ladder.
    Polynomial {
        /// The value.
        value: &'a [Rung],
        /// Its slope in units of 2^-16.
        slope: &'a [Rung],
    },
    /// Mean plus or minus the root of the squared half gap.
    Paired {
        /// The mean.
        mean: &'a [Rung],
        /// Its slope in units of 2^-16.
        mean_slope: &'a [Rung],
        /// The squared half gap.
        half_gap_squared: &'a [Rung],
        /// Its slope in units of 2^-16.
        half_gap_squared_slope: &'a [Rung],
        /// True for plus.
        upper: bool,
    },
}

/// A stretch of the range on which the formula is monotonic.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Branch {
    /// Lower end.
    pub low: i64,
    /// Upper end.
    pub high: i64,
    /// True if the value rises with the control.
    pub rising: bool,
}

/// A formula with its range, all in counts.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Formula<'a> {
    /// Lower end of the range; belongs to it.
    pub from: i64,
    /// Upper end of the range; belongs to it.
    pub to: i64,
    /// Count from which the ladders count.
    pub origin: i64,
    /// Bound on the rounding of `value`, whole steps.
    pub rounding: i64,
    /// Bits of the control, at most 32; an inverse takes as many steps.
    pub bits: u32,
    /// The closed form.
    pub form: Form<'a>,
}

/// `numerator / denominator` to nearest, ties upwards; one bit at a time.
#[must_use]
pub fn quotient(numerator: u64, denominator: u64) -> u64 {
    let mut rest: u64 = 0;
    let mut found: u64 = 0;
    let mut bit: u64 = 1 << 63;
    while bit != 0 {
        rest <<= 1;
        if numerator & bit != 0 {
            rest += 1;
        }
        if rest >= denominator {
            rest -= denominator;
            found |= bit;
        }
        bit >>= 1;
    }
    if rest >= denominator - rest { found + 1 } else { found }
}

impl Formula<'_> {
    fn offset(&self, control: i64) -> i64 {
        let held = if control < self.from {
            self.from
        } else if control > self.to {
            self.to
        } else {
            control
        };
        held.wrapping_sub(self.origin)
    }

    /// The formula; counts outside the range are held at its ends.
    #[must_use]
    pub fn value(&self, control: i64) -> i64 {
        let k = self.offset(control);
        match self.form {
            Form::Polynomial { value, .. } => climb(value, k),
            Form::Paired { mean, half_gap_squared, upper, .. } => {
                let half_gap = root::whole(climb(half_gap_squared, k).max(0).unsigned_abs()).cast_signed();
                let mean = climb(mean, k);
                if upper { mean.wrapping_add(half_gap) } else { mean.wrapping_sub(half_gap) }
            }
        }
    }

    /// Its derivative: value steps per control step, times 2^16, to nearest, ties upwards.
    #[must_use]
    pub fn slope(&self, control: i64) -> i64 {
        let k = self.offset(control);
        match self.form {
            Form::Polynomial { slope, .. } => climb(slope, k),
            Form::Paired { mean_slope, half_gap_squared, half_gap_squared_slope, upper, .. } => {
                let slope = climb(mean_slope, k);
                let half_gap = root::whole(climb(half_gap_squared, k).max(0).unsigned_abs());
                if half_gap == 0 {
                    return slope;
                }
                let squared_slope = climb(half_gap_squared_slope, k);
                let part = quotient(squared_slope.unsigned_abs(), 2 * half_gap).cast_signed();
                if (squared_slope < 0) == upper { slope.wrapping_sub(part) } else { slope.wrapping_add(part) }
            }
        }
    }

    /// The formula inside its range.
    ///
    /// # Errors
    /// [`OutOfRange::Below`] or [`OutOfRange::Above`].
    pub fn checked(&self, control: i64) -> Result<i64, OutOfRange> {
        if control < self.from {
            Err(OutOfRange::Below)
        } else if control > self.to {
            Err(OutOfRange::Above)
        } else {
            Ok(self.value(control))
        }
    }

    /// The count at which the formula comes nearest to `value` on a branch.
    ///
    /// # Errors
    /// [`OutOfRange::NoSolution`].
    pub fn inverse_on(&self, value: i64, branch: &Branch) -> Result<i64, OutOfRange> {
        let (first, last) = if branch.rising { (branch.low, branch.high) } else { (branch.high, branch.low) };
        let (least, most) = (self.value(first), self.value(last));
        if value < least.saturating_sub(self.rounding) || value > most.saturating_add(self.rounding) {
            Err(OutOfRange::NoSolution)
        } else if value <= least {
            Ok(first)
        } else if value >= most {
            Ok(last)
        } else {
            Ok(self.search(value, branch))
        }
    }

    /// The last count that is still under the value, bit by bit from the top,
    /// then the nearer of it and the next.
    fn search(&self, value: i64, branch: &Branch) -> i64 {
        let mut low = branch.low;
        for bit in (0..self.bits.min(32)).rev() {
            let next = low.saturating_add(1 << bit);
            if next < branch.high {
                let there = self.value(next);
                if if branch.rising { there < value } else { there >= value } {
                    low = next;
                }
            }
        }
        let high = if low < branch.high { low + 1 } else { low };
        let (under, over) = (self.value(low).abs_diff(value), self.value(high).abs_diff(value));
        if under <= over { low } else { high }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quotients_are_rounded_to_nearest() {
        for numerator in 0..400_u64 {
            for denominator in 1..40_u64 {
                assert_eq!(
                    quotient(numerator, denominator),
                    (2 * numerator + denominator) / (2 * denominator)
                );
            }
        }
        assert_eq!(quotient(u64::MAX >> 1, 1), u64::MAX >> 1);
    }

    /// 5 + 3 k exactly, and 5 + k/2 rounded to nearest, ties upwards.
    #[test]
    fn ladders_round_to_nearest() {
        let rung = |constant, before, shift| Rung { constant, before, shift };
        assert_eq!(climb(&[rung(5, 0, 0), rung(3, 0, 0)], -7), -16);
        let half = [rung(5, 4, 3), rung(4, 0, 0)];
        assert_eq!([-3, -2, -1, 0, 1, 2].map(|k| climb(&half, k)), [4, 4, 5, 5, 6, 6]);
    }

    #[test]
    fn searches_end_at_the_nearest_count() {
        let rung = |constant, before, shift| Rung { constant, before, shift };
        let value = [rung(100, 0, 0), rung(7, 0, 0)];
        let slope = [rung(7 << 16, 0, 0)];
        let form = Form::Polynomial { value: &value, slope: &slope };
        let formula = Formula { from: -1000, to: 900, origin: 3, rounding: 1, bits: 16, form };
        let branch = Branch { low: -1000, high: 900, rising: true };
        for v in formula.value(-1000)..=formula.value(900) {
            let n = formula.inverse_on(v, &branch).expect("reached");
            assert!(formula.value(n).abs_diff(v) <= 3, "{v} {n}");
        }
        assert_eq!(formula.inverse_on(formula.value(900) + 1, &branch), Ok(900));
        assert_eq!(formula.inverse_on(formula.value(900) + 2, &branch), Err(OutOfRange::NoSolution));
        assert_eq!(formula.checked(901), Err(OutOfRange::Above));
        assert_eq!(formula.value(901), formula.value(900));
    }
}
