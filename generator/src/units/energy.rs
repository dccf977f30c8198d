//! Kinds of quantity in which a level may be stated, and the factors between
//! them.

use super::constants::{BOLTZMANN, PLANCK, SPEED_OF_LIGHT};
use super::{Dimension, Factor, Fault, Unit};

/// How an energy is stated.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum EnergyKind {
    /// As an energy.
    Energy,
    /// As a frequency: energy over h.
    Frequency,
    /// As a wavenumber: energy over hc.
    Wavenumber,
    /// As a temperature: energy over kB.
    Temperature,
    /// As a pure number, convertible to no other kind.
    Number,
}

impl EnergyKind {
    /// The kind with this dimension.
    #[must_use]
    pub fn of(dimension: Dimension) -> Option<Self> {
        match dimension {
            Dimension::ENERGY => Some(Self::Energy),
            Dimension::FREQUENCY => Some(Self::Frequency),
            Dimension::WAVENUMBER => Some(Self::Wavenumber),
            Dimension::TEMPERATURE => Some(Self::Temperature),
            Dimension::NONE => Some(Self::Number),
            _ => None,
        }
    }

    /// The kind's dimension.
    #[must_use]
    pub fn dimension(self) -> Dimension {
        match self {
            Self::Energy => Dimension::ENERGY,
            Self::Frequency => Dimension::FREQUENCY,
            Self::Wavenumber => Dimension::WAVENUMBER,
            Self::Temperature => Dimension::TEMPERATURE,
            Self::Number => Dimension::NONE,
        }
    }

    /// The unit in which a [`Value`](super::Value) of this kind is 1: eV, Hz, m^-1, K or 1.
    #[must_use]
    pub fn coherent_unit(self) -> Unit {
        let (symbol, mantissa, exponent) = match self {
            Self::Energy => ("eV", super::constants::ELEMENTARY_CHARGE, -19),
            Self::Frequency => ("Hz", 1.0, 0),
            Self::Wavenumber => ("m^-1", 1.0, 0),
            Self::Temperature => ("K", 1.0, 0),
            Self::Number => ("1", 1.0, 0),
        };
        Unit { symbol: symbol.to_owned(), dimension: self.dimension(), mantissa, exponent }
    }

    /// Mantissa and power of ten of what multiplies this kind into joules.
    fn joules(self) -> (f64, i32) {
        match self {
            Self::Energy | Self::Number => (1.0, 0),
            Self::Frequency => (PLANCK, -34),
            Self::Wavenumber => (PLANCK * SPEED_OF_LIGHT, -26),
            Self::Temperature => (BOLTZMANN, -23),
        }
    }
}

/// The factor that turns a number in `from` into a number in `to`, both of a
/// kind in which energies are stated.
///
/// Its mantissa is exactly 1 if the units differ by a power of ten only.
///
/// # Errors
/// If one unit is of no such kind, or just one of them is a pure number.
pub fn energy_factor(from: &Unit, to: &Unit) -> Result<Factor, Fault> {
    let mismatch = || {
        Fault::new(
            "dimension",
            0..0,
            format!(
                "`{}` ({}) cannot be given in `{}` ({})",
                from.symbol,
                from.dimension.describe(),
                to.symbol,
                to.dimension.describe()
            ),
        )
        .expected("units of energy, frequency (times h), wavenumber (times hc) or temperature (times kB), or two pure numbers")
    };
    let source = EnergyKind::of(from.dimension).ok_or_else(mismatch)?;
    let target = EnergyKind::of(to.dimension).ok_or_else(mismatch)?;
    if source == target {
        return from.factor_to(to);
    }
    if source == EnergyKind::Number || target == EnergyKind::Number {
        return Err(mismatch());
    }
    let (source_mantissa, source_exponent) = source.joules();
    let (target_mantissa, target_exponent) = target.joules();
    Ok(Factor {
        mantissa: (from.mantissa * source_mantissa) / (to.mantissa * target_mantissa),
        exponent: from.exponent + source_exponent - to.exponent - target_exponent,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn factor(from: &str, to: &str) -> f64 {
        energy_factor(&Unit::parse(from).unwrap(), &Unit::parse(to).unwrap()).unwrap().value()
    }

    /// Conversion factors of CODATA 2022 (exact ones to the digits printed there).
    #[test]
    fn kinds_convert_by_h_hc_and_kb() {
        let close = |a: f64, b: f64, tolerance: f64| assert!((a / b - 1.0).abs() < tolerance, "{a:e} {b:e}");
        close(factor("eV", "Hz"), 2.417_989_242_084_918e14, 1e-15);
        close(factor("eV", "cm^-1"), 8_065.543_937_349_211, 1e-15);
        close(factor("eV", "K"), 1.160_451_812_155_008e4, 1e-15);
        close(factor("K", "GHz"), 20.836_619_12, 1e-9);
        close(factor("Eh", "eV"), 27.211386245981, 1e-13);
        assert_eq!(factor("meV", "ueV"), 1e3);
        assert_eq!(factor("GHz", "1/s"), 1e9);
        assert_eq!(factor("cm^-1", "m^-1"), 1e2);
        assert!(energy_factor(&Unit::one(), &Unit::parse("eV").unwrap()).is_err());
        assert!(energy_factor(&Unit::parse("V").unwrap(), &Unit::parse("eV").unwrap()).is_err());
    }
}
