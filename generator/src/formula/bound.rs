//! Rounding of a nested polynomial, bounded and not sampled.
//!
//! The range is cut into cells; in each, interval arithmetic bounds every
//! intermediate result, and each operation adds half a unit in the last place
//! of its result. Errors of `d`, of coefficients and of earlier steps are
//! carried along. Second-order products of errors are kept.
//!
//! Source of the method: Higham, *Accuracy and Stability of Numerical
//! Algorithms*, 2nd ed., section 5.1 (running error of Horner's rule), from memory.

/// Cells into which a range is cut.
const CELLS: usize = 256;

/// Bounds are themselves computed in double precision; this covers that.
const SLACK: f64 = 1.0 + 1e-9;

/// A binary floating-point format as far as rounding needs it.
#[derive(Clone, Copy, Debug)]
pub struct Binary {
    /// Bits of the significand, the leading one included.
    pub digits: i32,
    /// Exponent of the smallest normal number.
    pub smallest: i32,
}

/// Double precision.
pub const DOUBLE: Binary = Binary { digits: 53, smallest: -1022 };
/// Single precision.
pub const SINGLE: Binary = Binary { digits: 24, smallest: -126 };

impl Binary {
    /// Largest rounding error of a result of at most this size.
    pub fn half_ulp(self, size: f64) -> f64 {
        if size == 0.0 {
            return 0.0;
        }
        // A result just below the next power of two may round up to it.
        let exponent = (libm::ilogb(size * SLACK)).max(self.smallest);
        libm::scalbn(1.0, exponent - self.digits)
    }
}

/// An interval.
#[derive(Clone, Copy, Debug)]
pub struct Interval {
    /// Lower end.
    pub low: f64,
    /// Upper end.
    pub high: f64,
}

impl Interval {
    fn point(x: f64) -> Self {
        Self { low: x, high: x }
    }

    fn add(self, other: Self) -> Self {
        Self { low: self.low + other.low, high: self.high + other.high }
    }

    fn mul(self, other: Self) -> Self {
        let all =
            [self.low * other.low, self.low * other.high, self.high * other.low, self.high * other.high];
        Self {
            low: all.into_iter().fold(f64::INFINITY, f64::min),
            high: all.into_iter().fold(f64::NEG_INFINITY, f64::max),
        }
    }

    /// Largest absolute value.
    pub fn size(self) -> f64 {
        self.low.abs().max(self.high.abs())
    }
}

/// The range of `d`, in cells of equal width that never straddle 0.
pub fn cells(low: f64, high: f64) -> Vec<Interval> {
    let mut out = Vec::with_capacity(2 * CELLS);
    for (a, b) in [(low, high.min(0.0)), (low.max(0.0), high)] {
        if a < b {
            let at = |i: usize| if i == CELLS { b } else { a + (b - a) * (i as f64 / CELLS as f64) };
            out.extend((0..CELLS).map(|i| Interval { low: at(i), high: at(i + 1) }));
        }
    }
    if out.is_empty() {
        out.push(Interval { low, high });
    }
    out
}

/// Value and error of a nested polynomial in one cell.
///
/// - `exact`: coefficients of the record; `held`: those of the format.
/// - `d`: exact offsets; `d_error`: bound on the error of the computed offset.
///
/// Returns the interval of the exact value and the bound on the error.
pub fn nested(format: Binary, exact: &[f64], held: &[f64], d: Interval, d_error: f64) -> (Interval, f64) {
    let mut sum: Option<(Interval, f64)> = None;
    for (power, (c, h)) in exact.iter().zip(held).enumerate().rev() {
        let c_error = (c - h).abs();
        let left_out = *h == 0.0 && power > 0;
        sum = match sum {
            None if left_out && *c == 0.0 => None,
            None => Some((Interval::point(*c), c_error)),
            Some((inner, error)) => {
                let product = d.mul(inner);
                let mut total = d.size() * error + d_error * (inner.size() + error);
                total += format.half_ulp(product.size() + total);
                let value = product.add(Interval::point(*c));
                total += c_error;
                if !left_out {
                    total += format.half_ulp(value.size() + total);
                }
                Some((value, total))
            }
        };
    }
    let (value, error) = sum.unwrap_or((Interval::point(0.0), 0.0));
    (value, error * SLACK)
}

/// Error of the computed offset: rounding of `at`, and of the subtraction
/// unless `at` is 0.
pub fn offset_error(format: Binary, at: f64, at_held: f64, d: Interval) -> f64 {
    let shift = (at - at_held).abs();
    if at_held == 0.0 { shift } else { shift + format.half_ulp(d.size() + shift) }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Against exact rational arithmetic it would be a different test; here
    /// single precision is measured against double, which is exact enough.
    #[test]
    fn the_bound_holds_and_is_not_loose_in_single_precision() {
        let exact = [34.567_891_234, 0.012_345_678_9, -0.000_545_911_14];
        let held: Vec<f64> = exact.iter().map(|c| f64::from(*c as f32)).collect();
        let single: Vec<f32> = exact.iter().map(|c| *c as f32).collect();
        let at = 12.3;
        let at_held = at as f32;
        let mut bound = 0.0_f64;
        for d in cells(-30.0, 20.0) {
            let d_error = offset_error(SINGLE, at, f64::from(at_held), d);
            bound = bound.max(nested(SINGLE, &exact, &held, d, d_error).1);
        }
        let mut worst = 0.0_f64;
        for step in 0..200_000_u32 {
            let x = (-17.7 + 50.0 * f64::from(step) / 200_000.0) as f32;
            let computed = shiftwright_runtime::single::horner(&single, x - at_held);
            let d = f64::from(x) - at;
            let truth = exact[0] + d * (exact[1] + d * exact[2]);
            worst = worst.max((f64::from(computed) - truth).abs());
        }
        assert!(worst <= bound, "{worst:e} {bound:e}");
        assert!(bound <= 20.0 * worst, "{worst:e} {bound:e}");
    }
}
