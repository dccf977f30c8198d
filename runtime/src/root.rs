//! Square roots by integer arithmetic, the same in every language.
//!
//! One bit of the root per step, as with pencil and paper; the remainder then
//! decides the rounding, so the results are correctly rounded (to nearest, ties
//! cannot occur). Source of the method: common practice, no source.

/// Correctly rounded square root; 0 for anything that is not above 0.
#[must_use]
pub fn double(x: f64) -> f64 {
    const FRACTION: u32 = 52;
    const TOP: u64 = 1 << FRACTION;
    // Written so that a NaN takes this way too.
    if !(x > 0.0 && x < f64::INFINITY) {
        return if x > 0.0 { x } else { 0.0 };
    }
    let bits = x.to_bits();
    let mut exponent = (bits >> FRACTION) as i32;
    let mut rest = bits & (TOP - 1);
    if exponent == 0 {
        // Subnormal: move the leading bit to where it belongs.
        exponent = 1;
        while rest < TOP {
            rest <<= 1;
            exponent -= 1;
        }
    } else {
        rest |= TOP;
    }
    exponent -= 1023;
    if exponent & 1 != 0 {
        rest <<= 1;
    }
    rest <<= 1;
    let mut found: u64 = 0;
    let mut twice: u64 = 0;
    let mut bit = TOP << 1;
    while bit != 0 {
        let trial = twice + bit;
        if trial <= rest {
            twice = trial + bit;
            rest -= trial;
            found += bit;
        }
        rest <<= 1;
        bit >>= 1;
    }
    // `found` has one bit more than a double: the remainder rounds it.
    found += found & 1;
    // The leading bit of `found` carries into the exponent field.
    f64::from_bits((found >> 1) + (((exponent >> 1) + 1022) as u64 * TOP))
}

/// Correctly rounded square root; 0 for anything that is not above 0.
#[must_use]
pub fn single(x: f32) -> f32 {
    const FRACTION: u32 = 23;
    const TOP: u32 = 1 << FRACTION;
    if !(x > 0.0 && x < f32::INFINITY) {
        return if x > 0.0 { x } else { 0.0 };
    }
    let bits = x.to_bits();
    let mut exponent = (bits >> FRACTION) as i32;
    let mut rest = bits & (TOP - 1);
    if exponent == 0 {
        exponent = 1;
        while rest < TOP {
            rest <<= 1;
            exponent -= 1;
        }
    } else {
        rest |= TOP;
    }
    exponent -= 127;
    if exponent & 1 != 0 {
        rest <<= 1;
    }
    rest <<= 1;
    let mut found: u32 = 0;
    let mut twice: u32 = 0;
    let mut bit = TOP << 1;
    while bit != 0 {
        let trial = twice + bit;
        if trial <= rest {
            twice = trial + bit;
            rest -= trial;
            found += bit;
        }
        rest <<= 1;
        bit >>= 1;
    }
    found += found & 1;
    f32::from_bits((found >> 1) + (((exponent >> 1) + 126) as u32 * TOP))
}

/// Square root of a count, rounded to nearest.
#[must_use]
pub fn whole(x: u64) -> u64 {
    let mut rest = x;
    let mut found: u64 = 0;
    let mut bit: u64 = 1 << 62;
    while bit != 0 {
        if rest >= found + bit {
            rest -= found + bit;
            found = (found >> 1) + bit;
        } else {
            found >>= 1;
        }
        bit >>= 2;
    }
    // (found + 1/2)^2 = found^2 + found + 1/4.
    if rest > found { found + 1 } else { found }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A small generator of test bits (xorshift; any would do).
    fn next(state: &mut u64) -> u64 {
        *state ^= *state << 13;
        *state ^= *state >> 7;
        *state ^= *state << 17;
        *state
    }

    /// IEEE 754 asks the hardware root to be correctly rounded, so the bits must agree.
    #[test]
    fn roots_of_doubles_are_those_of_the_hardware() {
        extern crate std;
        let mut state = 0x1234_5678_9abc_def1;
        for _ in 0..200_000 {
            let x = f64::from_bits(next(&mut state) >> 1);
            if x.is_finite() {
                assert_eq!(double(x).to_bits(), x.sqrt().to_bits(), "{x:e}");
            }
        }
        for x in [0.0, 5e-324, f64::MIN_POSITIVE, 1.0, 2.0, 4.0, f64::MAX, 0.25, 1e-310] {
            assert_eq!(double(x).to_bits(), x.sqrt().to_bits(), "{x:e}");
        }
        assert_eq!(double(-1.0), 0.0);
        assert_eq!(double(f64::NAN), 0.0);
    }

    /// As above, over a dense part of all single-precision numbers.
    #[test]
    fn roots_of_singles_are_those_of_the_hardware() {
        extern crate std;
        for bits in (1_u32..0x7f80_0000).step_by(997) {
            let x = f32::from_bits(bits);
            assert_eq!(single(x).to_bits(), x.sqrt().to_bits(), "{x:e}");
        }
    }

    #[test]
    fn roots_of_counts_are_the_nearest_counts() {
        let check = |x: u64| {
            let root = u128::from(whole(x));
            let four = 4 * u128::from(x);
            // (2 root - 1)^2 <= 4 x <= (2 root + 1)^2
            assert!(four <= (2 * root + 1) * (2 * root + 1), "{x}");
            assert!(root == 0 || four >= (2 * root - 1) * (2 * root - 1), "{x}");
        };
        (0..70_000).for_each(check);
        let mut state = 77;
        for _ in 0..100_000 {
            let x = next(&mut state);
            check(x >> (x & 31));
        }
        check(u64::MAX);
    }
}
