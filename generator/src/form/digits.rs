//! How many digits of a number are written.
//!
//! In: a number and its uncertainty. Out: the double nearest to the number cut
//! to the digits that the uncertainty justifies; its shortest print has these
//! digits. Decimal text does the rounding: it is exact, so the same on every
//! machine.

/// Fewest significant digits, so that rounding stays below 1e-11 of the number.
const FEWEST: i32 = 12;

/// Most significant digits: more do not change a double.
const MOST: i32 = 17;

/// Significant digits of a range end.
const RANGE_DIGITS: usize = 7;

/// Decimal exponent of the leading digit; `None` for 0 and what is not finite.
fn leading_place(x: f64) -> Option<i32> {
    if x == 0.0 || !x.is_finite() {
        return None;
    }
    format!("{x:e}").split_once('e').and_then(|(_, exponent)| exponent.parse().ok())
}

/// `value` to `digits` significant digits.
fn cut(value: f64, digits: i32) -> f64 {
    let places = usize::try_from(digits - 1).unwrap_or(0);
    format!("{value:.places$e}").parse().unwrap_or(value)
}

/// The number written for a coefficient: rounded to the decimal place two
/// below the leading digit of its uncertainty, but to no fewer than 12
/// significant digits and no more than 17.
///
/// An uncertainty of 0 keeps every digit; so does one that is not a number.
#[must_use]
pub fn written(value: f64, uncertainty: f64) -> f64 {
    let (Some(top), Some(doubtful)) = (leading_place(value), leading_place(uncertainty)) else {
        return value;
    };
    cut(value, (top - (doubtful - 2) + 1).clamp(FEWEST, MOST))
}

/// An uncertainty as it is written: two digits, rounded up, so that noise in
/// its further digits never shows.
#[must_use]
pub fn written_uncertainty(value: f64) -> f64 {
    if value <= 0.0 || !value.is_finite() {
        return value;
    }
    let text = format!("{value:.1e}");
    let near: f64 = text.parse().unwrap_or(value);
    if near >= value {
        return near;
    }
    let Some((digits, exponent)) = text.split_once('e') else { return value };
    let tenths: u32 = digits.replace('.', "").parse().unwrap_or(10);
    format!("{}e{exponent}", f64::from(tenths + 1) / 10.0).parse().unwrap_or(value)
}

/// Both ends of a range to 7 significant digits, rounded inwards, towards
/// `at`; an end that would pass `at` stays on it.
#[must_use]
pub fn written_range(valid: (f64, f64), at: f64) -> (f64, f64) {
    (inwards(valid.0, true).min(at), inwards(valid.1, false).max(at))
}

/// `value` to 7 digits, not below it if `up`, else not above it.
fn inwards(value: f64, up: bool) -> f64 {
    // The shortest print has all digits that tell this double from others, so
    // cutting it off never passes the value.
    let text = format!("{:e}", value.abs());
    let Some((digits, exponent)) = text.split_once('e') else { return value };
    let digits = digits.replace('.', "");
    if digits.len() <= RANGE_DIGITS {
        return value;
    }
    let (Ok(whole), Ok(exponent)) = (digits[..RANGE_DIGITS].parse::<i64>(), exponent.parse::<i64>()) else {
        return value;
    };
    let outwards = (value > 0.0) == up;
    let whole = if outwards { whole + 1 } else { whole };
    let size: f64 = format!("{whole}e{}", exponent - RANGE_DIGITS as i64 + 1).parse().unwrap_or(value.abs());
    if value < 0.0 { -size } else { size }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The places are counted by hand from the rule.
    #[test]
    fn digits_end_two_places_below_the_uncertainty() {
        assert_eq!(format!("{}", written(1_458.934_408_104_531_2, 1e-10)), "1458.934408104531");
        assert_eq!(written(-0.000_545_911_140_116_123_4, 1e-14), -0.000_545_911_140_116_1);
        // 3e-5 would leave 8 digits; 12 are kept.
        assert_eq!(written(1.234_567_890_123_456, 3e-5), 1.234_567_890_12);
        assert_eq!(written(1.0 / 3.0, 0.0), 1.0 / 3.0);
        assert_eq!(written(0.0, 1e-3), 0.0);
        assert_eq!(written(9.999_999_999_999_9, 1e-3), 10.0);
    }

    #[test]
    fn rounding_costs_less_than_the_promised_part() {
        let mut x = 0.123_456_789;
        for step in 0..2000 {
            x = (x * 7919.0 + 0.377) % 1.0;
            let value = x * libm::pow(10.0, f64::from(step % 60 - 30));
            let error = (written(value, value.abs()) - value).abs();
            assert!(error <= 1e-11 * value.abs());
        }
    }

    #[test]
    fn range_ends_are_rounded_inwards() {
        assert_eq!(written_range((-60.0, 86.580_496), 0.0), (-60.0, 86.580_49));
        assert_eq!(written_range((-86.580_496, 1.0 / 3.0), 0.0), (-86.580_49, 0.333_333_3));
        assert_eq!(written_range((0.123_456_781, 9.999_999_99), 1.0), (0.123_456_8, 9.999_999));
        assert_eq!(written_range((-1.0, 0.0), 0.0), (-1.0, 0.0));
        // The operating point itself has more than 7 digits.
        assert_eq!(written_range((1.234_567_89, 1.234_567_89), 1.234_567_89), (1.234_567_89, 1.234_567_89));
    }
}
