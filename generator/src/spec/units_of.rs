//! Units in which the stages after this one take their numbers.

use crate::units::constants::{ELECTRON_MASS, ELEMENTARY_CHARGE};
use crate::units::{Dimension, Unit};

/// A unit of the table; `None` never happens for the symbols used here.
pub fn unit(symbol: &str) -> Option<Unit> {
    Unit::parse(symbol).ok()
}

/// V/nm.
pub fn field_unit() -> Option<Unit> {
    unit("V/nm")
}

/// Free-electron masses.
pub fn mass_unit() -> Unit {
    Unit { symbol: "me".to_owned(), dimension: Dimension::MASS, mantissa: ELECTRON_MASS, exponent: -31 }
}

/// Elementary charges.
pub fn charge_unit() -> Unit {
    Unit { symbol: "e".to_owned(), dimension: Dimension::CHARGE, mantissa: ELEMENTARY_CHARGE, exponent: -19 }
}
