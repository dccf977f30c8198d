//! Physical dimension as exponents of the seven base quantities.

use std::fmt;

/// Exponents count in this fraction of one, so that roots up to the tenth of a
/// unit stay exact.
pub const PARTS: i32 = 2520;

/// Largest exponent of a base quantity.
const LARGEST: i32 = 10_000 * PARTS;

/// Exponents of m, kg, s, A, K, mol, cd, in 1/2520.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Default)]
pub struct Dimension(pub [i32; 7]);

const SYMBOLS: [&str; 7] = ["m", "kg", "s", "A", "K", "mol", "cd"];

impl Dimension {
    /// Of a pure number.
    pub const NONE: Self = Self([0; 7]);

    /// From whole exponents of m, kg, s, A, K, mol, cd.
    #[must_use]
    pub const fn whole(exponents: [i32; 7]) -> Self {
        let mut parts = [0; 7];
        let mut idx = 0;
        while idx < 7 {
            parts[idx] = exponents[idx] * PARTS;
            idx += 1;
        }
        Self(parts)
    }

    /// Of a length.
    pub const LENGTH: Self = Self::whole([1, 0, 0, 0, 0, 0, 0]);
    /// Of an energy.
    pub const ENERGY: Self = Self::whole([2, 1, -2, 0, 0, 0, 0]);
    /// Of a frequency.
    pub const FREQUENCY: Self = Self::whole([0, 0, -1, 0, 0, 0, 0]);
    /// Of a wavenumber.
    pub const WAVENUMBER: Self = Self::whole([-1, 0, 0, 0, 0, 0, 0]);
    /// Of a temperature.
    pub const TEMPERATURE: Self = Self::whole([0, 0, 0, 0, 1, 0, 0]);
    /// Of a mass.
    pub const MASS: Self = Self::whole([0, 1, 0, 0, 0, 0, 0]);
    /// Of a charge.
    pub const CHARGE: Self = Self::whole([0, 0, 1, 1, 0, 0, 0]);
    /// Of an electric field.
    pub const FIELD: Self = Self::whole([1, 1, -3, -1, 0, 0, 0]);
    /// Of a momentum.
    pub const MOMENTUM: Self = Self::whole([1, 1, -1, 0, 0, 0, 0]);

    /// True for a pure number.
    #[must_use]
    pub fn is_none(self) -> bool {
        self == Self::NONE
    }

    fn combined(self, other: Self, sign: i32) -> Option<Self> {
        let mut out = [0; 7];
        for ((slot, a), b) in out.iter_mut().zip(self.0).zip(other.0) {
            *slot = a.checked_add(b.checked_mul(sign)?).filter(|sum| sum.abs() <= LARGEST)?;
        }
        Some(Self(out))
    }

    /// Dimension of a product; `None` if an exponent grows beyond all use.
    #[must_use]
    pub fn times(self, other: Self) -> Option<Self> {
        self.combined(other, 1)
    }

    /// Dimension of a quotient; `None` as for [`Self::times`].
    #[must_use]
    pub fn over(self, other: Self) -> Option<Self> {
        self.combined(other, -1)
    }

    /// Dimension of the power `numerator / denominator`; `None` as for
    /// [`Self::times`], or if an exponent is no multiple of 1/2520.
    #[must_use]
    pub fn power(self, numerator: i64, denominator: i64) -> Option<Self> {
        let mut out = [0; 7];
        for (slot, exponent) in out.iter_mut().zip(self.0) {
            let product = i64::from(exponent).checked_mul(numerator)?;
            if product.checked_rem(denominator)? != 0 {
                return None;
            }
            *slot = i32::try_from(product / denominator).ok().filter(|x| x.abs() <= LARGEST)?;
        }
        Some(Self(out))
    }

    /// A few words for the reader: a kind of quantity if it has a common name,
    /// else SI base units.
    #[must_use]
    pub fn describe(self) -> String {
        let named = [
            (Self::NONE, "a pure number"),
            (Self::LENGTH, "a length"),
            (Self::ENERGY, "an energy"),
            (Self::FREQUENCY, "a frequency"),
            (Self::WAVENUMBER, "a wavenumber"),
            (Self::TEMPERATURE, "a temperature"),
            (Self::MASS, "a mass"),
            (Self::CHARGE, "a charge"),
            (Self::FIELD, "an electric field"),
            (Self::MOMENTUM, "a momentum"),
            (Self::whole([0, 0, 1, 0, 0, 0, 0]), "a time"),
            (Self::whole([0, 0, 0, 1, 0, 0, 0]), "an electric current"),
            (Self::whole([2, 0, 0, 0, 0, 0, 0]), "an area"),
            (Self::whole([3, 0, 0, 0, 0, 0, 0]), "a volume"),
            (Self::whole([2, 1, -3, -1, 0, 0, 0]), "a voltage"),
            (Self::whole([0, 1, -2, -1, 0, 0, 0]), "a magnetic flux density"),
            (Self::whole([2, 1, -2, -1, 0, 0, 0]), "a magnetic flux"),
            (Self::whole([2, 1, -1, 0, 0, 0, 0]), "an action"),
            (Self::whole([1, 0, 1, 1, 0, 0, 0]), "an electric dipole moment"),
            (Self::whole([2, 0, 0, 1, 0, 0, 0]), "a magnetic moment"),
            (Self::whole([1, 1, -2, 0, 0, 0, 0]), "a force"),
            (Self::whole([-2, -1, 4, 2, 0, 0, 0]), "a capacitance"),
        ];
        named
            .iter()
            .find(|(dimension, _)| *dimension == self)
            .map_or_else(|| format!("a quantity in {self}"), |(_, name)| (*name).to_owned())
    }
}

impl fmt::Display for Dimension {
    /// In SI base units, `1` for a pure number.
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.is_none() {
            return out.write_str("1");
        }
        let mut first = true;
        for (symbol, exponent) in SYMBOLS.iter().zip(self.0) {
            if exponent == 0 {
                continue;
            }
            if !first {
                out.write_str("*")?;
            }
            first = false;
            out.write_str(symbol)?;
            if exponent % PARTS != 0 {
                let divisor = gcd(exponent, PARTS);
                write!(out, "^({}/{})", exponent / divisor, PARTS / divisor)?;
            } else if exponent != PARTS {
                write!(out, "^{}", exponent / PARTS)?;
            }
        }
        Ok(())
    }
}

fn gcd(a: i32, b: i32) -> i32 {
    let (mut a, mut b) = (a.abs(), b.abs());
    while b != 0 {
        (a, b) = (b, a % b);
    }
    a.max(1)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn roots_stay_exact() {
        let root = Dimension::ENERGY.power(1, 2).unwrap();
        assert_eq!(root.times(root), Some(Dimension::ENERGY));
        assert_eq!(root.to_string(), "m*kg^(1/2)*s^-1");
        assert_eq!(Dimension::LENGTH.power(1, 11), None);
        assert_eq!(Dimension::LENGTH.power(1, 0), None);
        assert_eq!(Dimension::LENGTH.power(i64::MAX, 1), None);
    }
}
