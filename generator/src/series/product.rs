//! Inner products that keep their digits where terms cancel.
//!
//! Each product is split into its rounded value and its exact error, each
//! partial sum likewise, and the errors are added at the end, as if the sum
//! had been formed with twice the digits. No fused multiply-add: the errors come from
//! splitting factors into halves.
//!
//! Source: Ogita, Rump and Oishi, "Accurate sum and dot product", SIAM J. Sci.
//! Comput. 26, 1955 (2005), algorithm Dot2.

use crate::pencil::{Scalar, State};

/// A running sum of products with its accumulated error.
#[derive(Clone, Copy, Default)]
struct Sum {
    high: f64,
    low: f64,
}

impl Sum {
    fn add_product(&mut self, a: f64, b: f64) {
        let product = a * b;
        let (a_high, a_low) = halves(a);
        let (b_high, b_low) = halves(b);
        let error = ((a_high * b_high - product) + a_high * b_low + a_low * b_high) + a_low * b_low;
        let sum = self.high + product;
        let part = sum - self.high;
        let lost = (self.high - (sum - part)) + (product - part);
        self.high = sum;
        self.low += lost + error;
    }

    fn value(self) -> f64 {
        self.high + self.low
    }
}

/// Two numbers of at most 26 bits each that add up to `x` (Dekker).
fn halves(x: f64) -> (f64, f64) {
    let scaled = 134_217_729.0 * x;
    let high = scaled - (scaled - x);
    (high, x - high)
}

/// `<left|right>`, rounded about once.
///
/// Components above 1e290 would overflow on the way; levels are far below.
pub(super) fn inner<T: Scalar>(left: &State<T>, right: &State<T>) -> T {
    let mut real = Sum::default();
    if size_of::<T>() == size_of::<f64>() {
        for (a, b) in left.iter().zip(right.iter()) {
            real.add_product(a.real(), b.real());
        }
        return T::from_real(real.value());
    }
    let mut imaginary = Sum::default();
    for (a, b) in left.iter().zip(right.iter()) {
        real.add_product(a.real(), b.real());
        real.add_product(a.imaginary(), b.imaginary());
        imaginary.add_product(a.real(), b.imaginary());
        imaginary.add_product(-a.imaginary(), b.real());
    }
    // A complex number is built from two reals without knowing its type:
    // sqrt(-1) is exact in every implementation of the field.
    let unit = T::from_real(-1.0).try_sqrt().unwrap_or_else(T::zero);
    T::from_real(real.value()) + unit * T::from_real(imaginary.value())
}

/// Sum of the moduli of the products: the size that the rounding of
/// `<left|right>` is measured against.
pub(super) fn bulk<T: Scalar>(left: &State<T>, right: &State<T>) -> f64 {
    left.iter().zip(right.iter()).fold(0.0, |sum, (a, b)| sum + a.modulus() * b.modulus())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::C64;

    /// Terms of 1e16 that cancel leave the exact remainder; a plain sum loses it.
    #[test]
    fn cancelling_terms_keep_their_remainder() {
        let left = State::from_vec(vec![1e16, 1.0, -1e16, 3.0]);
        let right = State::from_vec(vec![1.0, 0.5, 1.0, 1.0 / 1024.0]);
        assert_eq!(inner(&left, &right), 0.5 + 3.0 / 1024.0);
        assert_ne!(left.dot(&right), 0.5 + 3.0 / 1024.0);
    }

    #[test]
    fn the_left_side_is_conjugated() {
        let left = State::from_vec(vec![C64::new(1.0, 2.0)]);
        let right = State::from_vec(vec![C64::new(3.0, 5.0)]);
        assert_eq!(inner(&left, &right), C64::new(13.0, -1.0));
    }
}
