//! Powers of ten applied to the decimal text of a number.
//!
//! A multiplication by 1e-9 rounds; moving the decimal point of the shortest
//! text that reads back as the number does not. So a prefix costs no digits, and
//! `9 nm` read as metres and shown in nanometres is 9 again.

/// `x * 10^exponent`, by moving the decimal point of the shortest text of `x`.
///
/// Infinite if the result overflows, 0 if it underflows.
#[must_use]
pub fn shift(x: f64, exponent: i32) -> f64 {
    if exponent == 0 || x == 0.0 || !x.is_finite() {
        return x;
    }
    let text = format!("{x:e}");
    let (mantissa, power) = text.split_once('e').unwrap_or((&text, "0"));
    let power: i64 = power.parse().unwrap_or(0);
    format!("{mantissa}e{}", power + i64::from(exponent)).parse().unwrap_or(f64::NAN)
}

/// The exponent, if `x` is the double nearest to a power of ten.
#[must_use]
pub fn power_of_ten(x: f64) -> Option<i32> {
    if x <= 0.0 || !x.is_finite() {
        return None;
    }
    // The logarithm only guesses; the comparison decides.
    let logarithm = libm::log10(x);
    let guess = libm::round(logarithm);
    if (logarithm - guess).abs() > 1e-9 {
        return None;
    }
    let exponent = guess as i32;
    (shift(1.0, exponent) == x).then_some(exponent)
}

/// The product; powers of ten move the decimal point instead.
#[must_use]
pub fn product(a: f64, b: f64) -> f64 {
    if let Some(exponent) = power_of_ten(b) {
        shift(a, exponent)
    } else if let Some(exponent) = power_of_ten(a) {
        shift(b, exponent)
    } else {
        a * b
    }
}

/// The quotient; a power of ten below moves the decimal point instead.
#[must_use]
pub fn quotient(a: f64, b: f64) -> f64 {
    if let Some(exponent) = power_of_ten(b.abs()) { shift(a, -exponent) * b.signum() } else { a / b }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn a_shift_gives_the_double_nearest_to_the_decimal() {
        assert_eq!(shift(5.0, -6), 5e-6);
        assert_eq!(shift(9e-9, 9), 9.0);
        assert_eq!(shift(-1.5e-3, 5), -150.0);
        assert_eq!(shift(1.0, 400), f64::INFINITY);
        assert_eq!(shift(1.0, -400), 0.0);
        assert_eq!(product(1e5, 1e-9), 1e-4);
        assert_eq!(quotient(1e-9, -1e-7), -1e-2);
    }

    proptest! {
        #[test]
        fn a_shift_there_and_back_keeps_short_decimals(n in 1i64..1_000_000_000_000, e in -12i32..13, s in -30i32..31) {
            let x: f64 = format!("{n}e{e}").parse().unwrap();
            prop_assert_eq!(shift(shift(x, s), -s), x);
        }

        #[test]
        fn powers_of_ten_are_recognised(e in -300i32..301) {
            prop_assert_eq!(power_of_ten(shift(1.0, e)), Some(e));
            prop_assert_eq!(power_of_ten(3.0 * shift(1.0, e)), None);
        }
    }
}
