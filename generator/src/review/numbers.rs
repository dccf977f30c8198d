//! Numbers and units as people read them in tables and messages.
//!
//! Not here: the digits of generated files, which their uncertainty decides.

use crate::form::Form;
use crate::outcome::{FormulaOutcome, Outcome};

/// Most characters of a spec's summary that are shown.
const SUMMARY: usize = 240;

/// Name and summary of a spec on one line; the record has the whole summary.
#[must_use]
pub fn headline(outcome: &Outcome) -> String {
    let words: Vec<&str> = outcome.summary.split_whitespace().collect();
    let summary = words.join(" ");
    let shown: String = summary.chars().take(SUMMARY).collect();
    let rest = if shown.len() < summary.len() { "..." } else { "" };
    format!("{}: {shown}{rest}", outcome.name)
}

/// `value` to `digits` significant digits, without trailing zeros; an exponent
/// outside 1e-4 to 1e7.
#[must_use]
pub fn short(value: f64, digits: usize) -> String {
    if value == 0.0 || !value.is_finite() {
        return if value == 0.0 { "0".to_owned() } else { value.to_string() };
    }
    let scientific = format!("{:.*e}", digits.clamp(1, 17) - 1, value);
    let (mantissa, exponent) = scientific.split_once('e').unwrap_or((&scientific, "0"));
    let power: i32 = exponent.parse().unwrap_or(0);
    if (-4..7).contains(&power) {
        let decimals = i64::try_from(digits.clamp(1, 17)).unwrap_or(17) - 1 - i64::from(power);
        // The rounded decimal text is taken again, so that 9.9996 to four digits is 10.
        let rounded: f64 = scientific.parse().unwrap_or(value);
        return trim(&format!("{rounded:.*}", usize::try_from(decimals).unwrap_or(0)));
    }
    format!("{}e{power}", trim(mantissa))
}

/// A decimal text without trailing zeros.
fn trim(text: &str) -> String {
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.').to_owned()
    } else {
        text.to_owned()
    }
}

/// Two values with as many digits as they need to look different, at least
/// `digits`.
#[must_use]
pub fn apart(old: f64, new: f64, digits: usize) -> (String, String) {
    for count in digits..=17 {
        let pair = (short(old, count), short(new, count));
        if pair.0 != pair.1 {
            return pair;
        }
    }
    (format!("{old:?}"), format!("{new:?}"))
}

/// A change in per cent of the old value, ` (+8.4 %)` where the modulus grows;
/// empty if the old value is 0.
#[must_use]
pub fn per_cent(old: f64, new: f64) -> String {
    let change = 100.0 * (new - old) / old;
    if old == 0.0 || !change.is_finite() {
        return String::new();
    }
    let sign = if change < 0.0 { "" } else { "+" };
    format!(" ({sign}{} %)", short(change, 2))
}

/// Unit of the coefficient of the k-th power, for example `meV/(kV/cm)^2`.
#[must_use]
pub fn coefficient_unit(value: &str, control: &str, power: usize) -> String {
    if power == 0 || control == "1" {
        return value.to_owned();
    }
    let composite = control.contains(['/', '*', '^', ' ']);
    let base = if composite { format!("({control})") } else { control.to_owned() };
    if power == 1 { format!("{value}/{base}") } else { format!("{value}/{base}^{power}") }
}

/// Number and unit; the unit of a pure number is left out.
#[must_use]
pub fn with_unit(number: &str, unit: &str) -> String {
    if unit == "1" || unit.is_empty() { number.to_owned() } else { format!("{number} {unit}") }
}

/// One coefficient of a closed form with its name and unit.
#[derive(Clone, Debug, PartialEq)]
pub struct Coefficient {
    /// `E0`, `a`, `b`, `E3`, `E4`, or `mean 1`, `half_gap_squared 2`.
    pub name: String,
    /// Value.
    pub value: f64,
    /// Unit.
    pub unit: String,
    /// Power of the offset.
    pub power: usize,
}

/// Name of the k-th coefficient of a polynomial.
#[must_use]
pub fn polynomial_name(power: usize) -> String {
    match power {
        1 => "a".to_owned(),
        2 => "b".to_owned(),
        _ => format!("E{power}"),
    }
}

/// The coefficients of a formula, E0 from the series where the form has a shift.
#[must_use]
pub fn coefficients(formula: &FormulaOutcome, control_unit: &str) -> Vec<Coefficient> {
    let unit = |power| coefficient_unit(&formula.unit, control_unit, power);
    match &formula.form {
        Form::Polynomial { coefficients } => coefficients
            .iter()
            .enumerate()
            .map(|(power, &value)| Coefficient {
                name: polynomial_name(power),
                value: if power == 0 { formula.series[0] } else { value },
                unit: unit(power),
                power,
            })
            .collect(),
        Form::Paired { mean, half_gap_squared, .. } => {
            let squared = |power| {
                let value = coefficient_unit(&formula.unit, "1", 0);
                let value = if value == "1" { value } else { format!("{value}^2") };
                coefficient_unit(&value, control_unit, power)
            };
            let means = mean.iter().enumerate().map(|(power, &value)| Coefficient {
                name: format!("mean {power}"),
                value,
                unit: unit(power),
                power,
            });
            let gaps = half_gap_squared.iter().enumerate().map(|(power, &value)| Coefficient {
                name: format!("half_gap_squared {power}"),
                value,
                unit: squared(power),
                power,
            });
            means.chain(gaps).collect()
        }
    }
}

/// Why a side of a range ends, for people. Unknown words are shown as they are.
#[must_use]
pub fn reason(word: &str) -> &str {
    match word {
        "within" => "as asked",
        "remainder" => "by remainder",
        "crossing" => "at a crossing",
        "escape" => "by escape",
        "rounding" => "by rounding",
        "half_gap" => "at half gap 0",
        other => other,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn short_numbers_keep_their_digits_and_lose_their_zeros() {
        let cases = [
            (1_458.934_408_104, 8, "1458.9344"),
            (-0.000_545_911, 4, "-0.0005459"),
            (-0.000_045_911, 4, "-4.591e-5"),
            (0.012, 3, "0.012"),
            (9.999_6, 4, "10"),
            (60.0, 7, "60"),
            (-86.580_49, 7, "-86.58049"),
            (1e-10, 3, "1e-10"),
            (9_192_631_770.0, 12, "9.19263177e9"),
            (123_456.0, 3, "123000"),
            (0.0, 3, "0"),
            (-0.0, 3, "0"),
        ];
        for (value, digits, text) in cases {
            assert_eq!(short(value, digits), text);
        }
    }

    #[test]
    fn changes_are_shown_with_the_digits_that_differ() {
        assert_eq!(apart(9.0, 9.2, 3), ("9".to_owned(), "9.2".to_owned()));
        assert_eq!(apart(1.000_001, 1.000_002, 3), ("1.000001".to_owned(), "1.000002".to_owned()));
        assert_eq!(per_cent(-3.21e-3, -3.48e-3), " (+8.4 %)");
        assert_eq!(per_cent(0.0, 1.0), "");
    }

    #[test]
    fn coefficient_units_bracket_composite_controls() {
        assert_eq!(coefficient_unit("meV", "kV/cm", 2), "meV/(kV/cm)^2");
        assert_eq!(coefficient_unit("Hz", "mT", 1), "Hz/mT");
        assert_eq!(coefficient_unit("MHz", "1", 2), "MHz");
        assert_eq!(with_unit("3", "1"), "3");
    }
}
