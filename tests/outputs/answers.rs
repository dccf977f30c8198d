//! What the runtime crate answers where the programs of [`crate::programs`] ask.

use std::fmt::Write as _;

use shiftwright_runtime::{OutOfRange, double, fixed, single};

use crate::programs::codes;

macro_rules! answers {
    ($name:ident, $module:ident, $float:ident) => {
        /// One line per point, as the float programs print it.
        ///
        /// `back` sees each value, and the control that an inverse gives for it.
        pub fn $name(
            reference: &$module::Formula<'_>,
            points: &[$float],
            back: &mut dyn FnMut($float, $float),
            out: &mut String,
        ) {
            let branches = reference.branches();
            let show = |out: &mut String, r: Result<$float, OutOfRange>| {
                let _ = match r {
                    Ok(v) => {
                        assert!(v.is_finite());
                        write!(out, " 0:{:x}", v.to_bits())
                    }
                    Err(e) => write!(out, " {}:", e as u8 + 1),
                };
            };
            for &x in points {
                let y = reference.value(x);
                let _ = write!(out, "{:x} {:x}", y.to_bits(), reference.slope(x).to_bits());
                show(out, reference.checked(x));
                for branch in [Some(branches.main), branches.below, branches.above].into_iter().flatten() {
                    show(out, reference.inverse_on(x, &branch));
                    let found = reference.inverse_on(y, &branch);
                    if let Ok(found) = found {
                        back(y, found);
                    }
                    show(out, found);
                }
                out.push('\n');
            }
        }
    };
}

answers!(of_double, double, f64);
answers!(of_single, single, f32);

/// Insists on the same lines and names the first that differs.
pub fn same(found: &str, expected: &str, wide: bool, what: &str) {
    let (found, expected) = (without_nan(found, wide), without_nan(expected, wide));
    let pairs = found.lines().zip(expected.lines()).enumerate();
    for (number, (found, expected)) in pairs {
        assert_eq!(found, expected, "{what}, line {number}");
    }
    assert_eq!(found.lines().count(), expected.lines().count(), "{what}");
}

/// NaN bits carry no meaning and differ between machines.
fn without_nan(text: &str, wide: bool) -> String {
    let word = |w: &str| {
        let (status, bits) = w.split_once(':').map_or(("", w), |(s, b)| (s, b));
        let nan = u64::from_str_radix(bits, 16).is_ok_and(|b| {
            if wide {
                f64::from_bits(b).is_nan()
            } else {
                u32::try_from(b).is_ok_and(|b| f32::from_bits(b).is_nan())
            }
        });
        if nan { format!("{status}:nan") } else { w.to_owned() }
    };
    text.lines()
        .map(|line| line.split(' ').map(word).collect::<Vec<_>>().join(" "))
        .collect::<Vec<_>>()
        .join("\n")
}

/// The checksum that the fixed-point programs print.
///
/// `back` sees each value, and the count that an inverse gives for it.
pub fn of_fixed(
    reference: &fixed::Formula<'_>,
    branches: &[fixed::Branch],
    bits: (u32, u32),
    back: &mut dyn FnMut(i64, i64),
) -> u64 {
    let mix = |sum: u64, word: i64| (sum ^ word.cast_unsigned()).wrapping_mul(0x0000_0100_0000_01b3);
    let put = |sum: u64, r: Result<i64, OutOfRange>| match r {
        Ok(v) => mix(mix(sum, 0), v),
        Err(e) => mix(sum, e as i64 + 1),
    };
    let narrow = |n: i64| match bits.1 {
        8 => i64::from(n as i8),
        16 => i64::from(n as i16),
        _ => i64::from(n as i32),
    };
    let mut sum = 0xcbf2_9ce4_8422_2325_u64;
    for n in codes(bits.0) {
        let y = reference.value(n);
        sum = mix(mix(sum, y), reference.slope(n));
        sum = put(sum, reference.checked(n));
        for branch in branches {
            let found = reference.inverse_on(y, branch);
            sum = put(sum, found);
            sum = put(sum, reference.inverse_on(narrow(n), branch));
            if let Ok(found) = found {
                back(y, found);
            }
        }
    }
    sum
}
