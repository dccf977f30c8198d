//! A number with its unit, as one scalar of the spec.

use super::{Fault, Unit, Value, energy_factor};

/// Longest text of a quantity, in bytes.
const LONGEST: usize = 1000;

/// A number and, where one was written, its unit. The decimal text is kept, so
/// that a change of prefix costs no rounding.
#[derive(Clone, Debug, PartialEq)]
pub struct Quantity {
    /// Decimal text without its power of ten: sign, digits, point.
    mantissa: String,
    /// Power of ten.
    exponent: i32,
    /// The unit; `None` for a bare number.
    pub unit: Option<Unit>,
}

impl Quantity {
    /// Reads `9 nm`, `9nm`, `-1.5e-3 kV/cm` or a bare number.
    ///
    /// # Errors
    /// If there is no number at the start, the number overflows or is lost to zero
    /// in double precision, or the unit is wrong; the stretch is that of the text.
    pub fn parse(text: &str) -> Result<Self, Fault> {
        let start = text.len() - text.trim_start().len();
        let trimmed = text.trim();
        if trimmed.len() > LONGEST {
            return Err(Fault::new("quantity-syntax", 0..text.len(), "the quantity is too long")
                .found(format!("{} bytes", trimmed.len()))
                .expected(format!("at most {LONGEST}")));
        }
        let Some(number) = Number::scan(trimmed) else {
            let length = trimmed.find(char::is_whitespace).unwrap_or(trimmed.len());
            return Err(Fault::new("quantity-syntax", start..start + length, "a number is expected here")
                .found(if trimmed.is_empty() {
                    "nothing".to_owned()
                } else {
                    format!("`{}`", &trimmed[..length])
                })
                .expected("a number with its unit, such as `9 nm`"));
        };
        let whole = start..start + number.length;
        let exponent = number.exponent.ok_or_else(|| out_of_range(whole.clone()))?;
        let rest = &trimmed[number.length..];
        let unit = if rest.trim().is_empty() {
            None
        } else {
            Some(Unit::parse(rest).map_err(|fault| fault.moved(start + number.length))?)
        };
        let quantity = Self { mantissa: trimmed[..number.mantissa].to_owned(), exponent, unit };
        let value = quantity.number();
        let coherent = quantity.value().number;
        let zero = quantity.mantissa.bytes().all(|b| !(b'1'..=b'9').contains(&b));
        if !value.is_finite() || !coherent.is_finite() || (!zero && (value == 0.0 || coherent == 0.0)) {
            return Err(out_of_range(whole));
        }
        Ok(quantity)
    }

    fn shifted(&self, exponent: i32) -> f64 {
        let exponent = i64::from(self.exponent) + i64::from(exponent);
        format!("{}e{exponent}", self.mantissa).parse().unwrap_or(f64::NAN)
    }

    /// The number as written, in the unit as written.
    #[must_use]
    pub fn number(&self) -> f64 {
        self.shifted(0)
    }

    /// True if no unit was written.
    #[must_use]
    pub fn is_bare(&self) -> bool {
        self.unit.is_none()
    }

    /// The quantity in coherent units; a bare number is a pure number.
    #[must_use]
    pub fn value(&self) -> Value {
        match &self.unit {
            None => Value::pure(self.number()),
            Some(unit) => {
                let factor = unit.coherent();
                let shifted = self.shifted(factor.exponent);
                let number = if factor.mantissa == 1.0 { shifted } else { shifted * factor.mantissa };
                Value { number, dimension: unit.dimension }
            }
        }
    }

    /// The number in `unit`; a bare number is taken to be in it already.
    ///
    /// # Errors
    /// If the dimensions differ or the number overflows; the stretch is empty.
    pub fn in_unit(&self, unit: &Unit) -> Result<f64, Fault> {
        match &self.unit {
            None => Ok(self.number()),
            Some(own) => self.converted(own.factor_to(unit)?),
        }
    }

    /// As [`Self::in_unit`], where the two units may be of different kinds in
    /// which an energy is stated.
    ///
    /// # Errors
    /// If one is of no such kind, just one is a pure number, or the number overflows.
    pub fn in_energy_unit(&self, unit: &Unit) -> Result<f64, Fault> {
        match &self.unit {
            None => Ok(self.number()),
            Some(own) => self.converted(energy_factor(own, unit)?),
        }
    }

    fn converted(&self, factor: super::Factor) -> Result<f64, Fault> {
        let shifted = self.shifted(factor.exponent);
        let number = if factor.mantissa == 1.0 { shifted } else { shifted * factor.mantissa };
        if number.is_finite() { Ok(number) } else { Err(out_of_range(0..0)) }
    }
}

fn out_of_range(span: std::ops::Range<usize>) -> Fault {
    Fault::new("overflow", span, "the number is outside the range of double precision")
        .expected("0, or a size between 1e-307 and 1e308, in the unit given and in SI units")
}

/// True if the text is meant as a number with or without a unit rather than as
/// an expression: a number that ends the text or that a unit follows.
#[must_use]
pub fn is_quantity(text: &str) -> bool {
    let trimmed = text.trim();
    Number::scan(trimmed).is_some_and(|number| {
        trimmed[number.length..].trim_start().chars().next().is_none_or(char::is_alphanumeric)
            && !trimmed[number.length..].contains(['+', '(', ')', ','])
    })
}

/// A decimal number at the start of a text.
struct Number {
    /// Bytes up to the exponent.
    mantissa: usize,
    /// Bytes in all.
    length: usize,
    /// Power of ten; `None` if it is beyond all use.
    exponent: Option<i32>,
}

impl Number {
    /// Finds the longest decimal number, sign allowed, at the start.
    fn scan(text: &str) -> Option<Self> {
        let bytes = text.as_bytes();
        let digits = |from: usize| bytes.iter().skip(from).take_while(|b| b.is_ascii_digit()).count();
        let sign = usize::from(matches!(bytes.first(), Some(b'+' | b'-')));
        let whole = digits(sign);
        let mut end = sign + whole;
        let mut fraction = 0;
        if bytes.get(end) == Some(&b'.') {
            fraction = digits(end + 1);
            end += 1 + fraction;
        }
        if whole + fraction == 0 {
            return None;
        }
        let mantissa = end;
        let mut exponent = Some(0);
        if matches!(bytes.get(end), Some(b'e' | b'E')) {
            let signed = usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
            let count = digits(end + 1 + signed);
            if count > 0 {
                exponent = text.get(end + 1..end + 1 + signed + count).and_then(|power| {
                    // Ten thousand is beyond double precision however long the mantissa may be.
                    power.parse::<i32>().ok().filter(|power| power.abs() <= 10_000)
                });
                end += 1 + signed + count;
            }
        }
        Some(Self { mantissa, length: end, exponent })
    }
}

/// The decimal number at the start of a text, with its length in bytes; not
/// finite if it is out of range.
pub(crate) fn read_number(text: &str) -> Option<(f64, usize)> {
    let number = Number::scan(text)?;
    let value = match (text.get(..number.mantissa), number.exponent) {
        (Some(mantissa), Some(exponent)) => format!("{mantissa}e{exponent}").parse().unwrap_or(f64::NAN),
        _ => f64::NAN,
    };
    Some((value, number.length))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn unit(text: &str) -> Unit {
        Unit::parse(text).unwrap()
    }

    fn read_in(text: &str, target: &str) -> f64 {
        Quantity::parse(text).unwrap().in_unit(&unit(target)).unwrap()
    }

    #[test]
    fn decimal_text_is_converted_without_rounding_twice() {
        assert_eq!(read_in("5 um", "m"), 5e-6);
        assert_eq!(read_in("9nm", "nm"), 9.0);
        assert_eq!(read_in("9 nm", "m"), 9e-9);
        assert_eq!(read_in("232 meV", "eV"), 0.232);
        assert_eq!(read_in("-1.5e-3 kV/cm", "V/m"), -150.0);
        assert_eq!(read_in("5 eV", "meV"), 5e3);
        assert_eq!(read_in("5eV", "eV"), 5.0);
        assert_eq!(read_in("1 Eh", "Eh"), 1.0);
        assert_eq!(read_in("1e3 nm", "um"), 1.0);
        assert_eq!(read_in(".5 um", "nm"), 500.0);
        assert_eq!(read_in("3 1/s", "Hz"), 3.0);
        assert_eq!(read_in("0.05", "meV"), 0.05);
        assert_eq!(read_in("1 T", "G"), 1e4);
        assert_eq!(Quantity::parse("1.424 eV").unwrap().value().number, 1.424);
        assert_eq!(Quantity::parse("60 kV/cm").unwrap().value().number, 6e6);
        assert_eq!(
            Quantity::parse("9.192631770 GHz").unwrap().in_energy_unit(&unit("Hz")).unwrap(),
            9_192_631_770.0
        );
    }

    #[test]
    fn what_is_no_finite_quantity_is_refused() {
        for text in [
            "",
            "nm",
            "nan",
            ".nan",
            "inf",
            "-.inf",
            ".",
            "-",
            "e5",
            "1e400",
            "1e-400 m",
            "1e308 Qm",
            "9 nm nm",
            "9 parsec",
            "1e99999999999 m",
            "5 m^1.5",
        ] {
            assert!(Quantity::parse(text).is_err(), "{text}");
        }
        assert!(Quantity::parse("0 nm").is_ok());
        assert!(Quantity::parse("-0.0e0 nm").is_ok());
        let fault = Quantity::parse(" 9 nmm").unwrap_err();
        assert_eq!(fault.span, 3..6);
        assert!(Quantity::parse("9 nm").unwrap().in_unit(&unit("eV")).is_err());
    }

    #[test]
    fn quantities_are_told_from_expressions() {
        for text in ["9 nm", "9nm", "-1.5e-3 kV/cm", "3", "3 1/s", " 5 ", "2 furlong"] {
            assert!(is_quantity(text), "{text}");
        }
        for text in ["well", "2*well", "(3)", "-well", "1/well", "2^3", "3 + 4", "sqrt(2)"] {
            assert!(!is_quantity(text), "{text}");
        }
    }

    proptest! {
        #[test]
        fn any_text_is_read_or_refused_with_a_span_inside(text in "\\PC{0,30}") {
            if let Err(fault) = Quantity::parse(&text) {
                prop_assert!(text.get(fault.span.clone()).is_some(), "{:?}", fault.span);
            }
        }

        /// The oracle is the standard library's decimal reader on the shifted text.
        #[test]
        fn prefixes_shift_the_decimal_text(n in 1u64..10_000_000_000_000_000, e in -20i32..20) {
            let text = format!("{n}e{e} um");
            let expected: f64 = format!("{n}e{}", e + 3).parse().unwrap();
            prop_assert_eq!(read_in(&text, "nm"), expected);
        }
    }
}
