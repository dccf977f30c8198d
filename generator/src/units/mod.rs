//! Dimensions, unit symbols, quantities and CODATA 2022 constants.
//!
//! In: the text of a unit or a quantity. Out: a [`Unit`], a [`Quantity`] that
//! keeps its decimal text, and conversions in which powers of ten are moved in
//! the decimal text, so that prefixes cost no rounding.
//!
//! Numbers with a dimension ([`Value`]) are held in *coherent* units: m, s, K,
//! mol, cd, with the electronvolt and the elementary charge in place of joule and
//! coulomb. So 1.424 eV is 1.424, 60 kV/cm is 6e6 and 1 T is 1, all without a
//! factor that rounds.
//!
//! Not here: names of the spec, expressions.

pub mod constants;
pub mod decimal;
mod dimension;
mod energy;
mod fault;
mod quantity;
mod suggest;
mod symbol;

pub use dimension::{Dimension, PARTS};
pub use energy::{EnergyKind, energy_factor};
pub use fault::Fault;
pub(crate) use quantity::read_number;
pub use quantity::{Quantity, is_quantity};
pub use suggest::nearest;

use constants::ELEMENTARY_CHARGE;

/// A unit: `mantissa * 10^exponent` SI units.
///
/// The power of ten is kept apart so that conversions between prefixes are
/// exact.
#[derive(Clone, Debug, PartialEq)]
pub struct Unit {
    /// As the user wrote it.
    pub symbol: String,
    /// Dimension.
    pub dimension: Dimension,
    /// Factor without its power of ten.
    pub mantissa: f64,
    /// Power of ten.
    pub exponent: i32,
}

/// A conversion factor `mantissa * 10^exponent`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Factor {
    /// Factor without its power of ten; exactly 1 between units that differ in prefixes only.
    pub mantissa: f64,
    /// Power of ten.
    pub exponent: i32,
}

impl Factor {
    /// `x` times the factor, the power of ten moved in the decimal text of `x`.
    #[must_use]
    pub fn apply(self, x: f64) -> f64 {
        let shifted = decimal::shift(x, self.exponent);
        if self.mantissa == 1.0 { shifted } else { shifted * self.mantissa }
    }

    /// The factor as one number.
    #[must_use]
    pub fn value(self) -> f64 {
        decimal::shift(self.mantissa, self.exponent)
    }
}

/// A number with its dimension, in coherent units (see the module).
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Value {
    /// The number.
    pub number: f64,
    /// Its dimension.
    pub dimension: Dimension,
}

/// Mantissa and power of ten in coherent units of what has them in SI units.
fn coherent(mantissa: f64, exponent: i32, dimension: Dimension) -> (f64, i32) {
    // One joule is 1/e electronvolts and one coulomb 1/e elementary charges, so
    // each power of kg and of A takes one factor e out.
    let [_, mass, _, current, ..] = dimension.0;
    let parts = mass + current;
    if parts == 0 {
        (mantissa, exponent)
    } else if parts == PARTS {
        (mantissa / ELEMENTARY_CHARGE, exponent.saturating_add(19))
    } else if parts % PARTS == 0 {
        let whole = parts / PARTS;
        let mut scaled = mantissa;
        for _ in 0..whole.unsigned_abs().min(64) {
            if whole > 0 {
                scaled /= ELEMENTARY_CHARGE;
            } else {
                scaled *= ELEMENTARY_CHARGE;
            }
        }
        (scaled, exponent.saturating_add(whole.saturating_mul(19)))
    } else {
        let power = f64::from(parts) / f64::from(PARTS);
        (mantissa * libm::pow(decimal::shift(ELEMENTARY_CHARGE, -19), -power), exponent)
    }
}

impl Unit {
    /// The unit of a pure number.
    #[must_use]
    pub fn one() -> Self {
        Self { symbol: "1".to_owned(), dimension: Dimension::NONE, mantissa: 1.0, exponent: 0 }
    }

    /// Reads a unit such as `kV/cm`, `Hz/T^2`, `cm^-1` or `1`.
    ///
    /// # Errors
    /// If a symbol is unknown (the nearest known one is suggested), the text is no
    /// product of powers of symbols, or a power grows beyond all use.
    pub fn parse(text: &str) -> Result<Self, Fault> {
        symbol::parse(text)
    }

    /// The factor that turns a number in this unit into a number in `to`.
    ///
    /// # Errors
    /// If the dimensions differ.
    pub fn factor_to(&self, to: &Self) -> Result<Factor, Fault> {
        if self.dimension != to.dimension {
            return Err(Fault::new(
                "dimension",
                0..0,
                format!("`{}` cannot be given in `{}`", self.symbol, to.symbol),
            )
            .found(self.dimension.describe())
            .expected(to.dimension.describe()));
        }
        let mantissa = if self.mantissa == to.mantissa { 1.0 } else { self.mantissa / to.mantissa };
        Ok(Factor { mantissa, exponent: self.exponent - to.exponent })
    }

    /// The factor that turns a number in this unit into coherent units.
    #[must_use]
    pub fn coherent(&self) -> Factor {
        let (mantissa, exponent) = coherent(self.mantissa, self.exponent, self.dimension);
        Factor { mantissa, exponent }
    }

    /// A number in this unit as a [`Value`].
    #[must_use]
    pub fn value(&self, number: f64) -> Value {
        Value { number: self.coherent().apply(number), dimension: self.dimension }
    }
}

impl Value {
    /// A pure number.
    #[must_use]
    pub fn pure(number: f64) -> Self {
        Self { number, dimension: Dimension::NONE }
    }

    /// The number in `unit`, of the same dimension.
    ///
    /// # Errors
    /// If the dimensions differ or the number overflows.
    pub fn in_unit(self, unit: &Unit) -> Result<f64, Fault> {
        if self.dimension != unit.dimension {
            return Err(Fault::new(
                "dimension",
                0..0,
                format!("{} cannot be given in `{}`", self.dimension.describe(), unit.symbol),
            )
            .found(self.dimension.describe())
            .expected(unit.dimension.describe()));
        }
        let factor = unit.coherent();
        let scaled = if factor.mantissa == 1.0 { self.number } else { self.number / factor.mantissa };
        finite(decimal::shift(scaled, -factor.exponent))
    }

    /// The number in `unit`, where both may be of different kinds in which an
    /// energy is stated (energy, frequency, wavenumber, temperature).
    ///
    /// # Errors
    /// If one is of no such kind, just one is a pure number, or the number overflows.
    pub fn in_energy_unit(self, unit: &Unit) -> Result<f64, Fault> {
        if self.dimension == unit.dimension {
            return self.in_unit(unit);
        }
        let kind = EnergyKind::of(self.dimension).ok_or_else(|| {
            Fault::new(
                "dimension",
                0..0,
                format!("{} cannot be given in `{}`", self.dimension.describe(), unit.symbol),
            )
            .found(self.dimension.describe())
            .expected(unit.dimension.describe())
        })?;
        finite(energy_factor(&kind.coherent_unit(), unit)?.apply(self.number))
    }
}

fn finite(number: f64) -> Result<f64, Fault> {
    if number.is_finite() {
        Ok(number)
    } else {
        Err(Fault::new("overflow", 0..0, "the number is too large for double precision"))
    }
}
