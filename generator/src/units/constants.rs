//! Physical constants, CODATA recommended values of 2022.
//!
//! Source: P. J. Mohr, D. B. Newell, B. N. Taylor, E. Tiesinga, *CODATA
//! Recommended Values of the Fundamental Physical Constants: 2022*, Rev. Mod.
//! Phys. 97, 025002 (2025). `h`, `e`, `c` and `kB` are exact by definition of the
//! SI, and `hbar`, `Phi0` follow from them.

use std::f64::consts::PI;

use super::{Dimension, Value, decimal};

/// Mantissa of the elementary charge, in 1e-19 C.
pub const ELEMENTARY_CHARGE: f64 = 1.602176634;
/// Mantissa of the Planck constant, in 1e-34 J s.
pub const PLANCK: f64 = 6.62607015;
/// Speed of light, in 1e8 m/s.
pub const SPEED_OF_LIGHT: f64 = 2.99792458;
/// Mantissa of the Boltzmann constant, in 1e-23 J/K.
pub const BOLTZMANN: f64 = 1.380649;
/// Mantissa of the electron mass, in 1e-31 kg.
pub const ELECTRON_MASS: f64 = 9.1093837139;
/// Mantissa of the atomic mass unit, in 1e-27 kg.
pub const ATOMIC_MASS: f64 = 1.66053906892;
/// Mantissa of the hartree, in 1e-18 J.
pub const HARTREE: f64 = 4.3597447222060;
/// Mantissa of the bohr, in 1e-11 m.
pub const BOHR: f64 = 5.29177210544;
/// Mantissa of the Bohr magneton, in 1e-24 J/T.
pub const BOHR_MAGNETON: f64 = 9.2740100657;
/// Mantissa of the nuclear magneton, in 1e-27 J/T.
pub const NUCLEAR_MAGNETON: f64 = 5.0507837393;
/// Mantissa of the vacuum permittivity, in 1e-12 F/m.
pub const PERMITTIVITY: f64 = 8.8541878188;

/// The built-in names of the spec language.
pub const NAMES: [&str; 11] = ["pi", "h", "hbar", "c", "e", "me", "kB", "muB", "muN", "eps0", "Phi0"];

/// The built-in constant of this name.
#[must_use]
pub fn constant(name: &str) -> Option<Value> {
    let (mantissa, exponent, dimension) = match name {
        "pi" => (PI, 0, Dimension::NONE),
        "h" => (PLANCK, -34, Dimension::whole([2, 1, -1, 0, 0, 0, 0])),
        "hbar" => (PLANCK / (2.0 * PI), -34, Dimension::whole([2, 1, -1, 0, 0, 0, 0])),
        "c" => (SPEED_OF_LIGHT, 8, Dimension::whole([1, 0, -1, 0, 0, 0, 0])),
        "e" => (ELEMENTARY_CHARGE, -19, Dimension::CHARGE),
        "me" => (ELECTRON_MASS, -31, Dimension::MASS),
        "kB" => (BOLTZMANN, -23, Dimension::whole([2, 1, -2, 0, -1, 0, 0])),
        "muB" => (BOHR_MAGNETON, -24, Dimension::whole([2, 0, 0, 1, 0, 0, 0])),
        "muN" => (NUCLEAR_MAGNETON, -27, Dimension::whole([2, 0, 0, 1, 0, 0, 0])),
        "eps0" => (PERMITTIVITY, -12, Dimension::whole([-3, -1, 4, 2, 0, 0, 0])),
        "Phi0" => (PLANCK / (2.0 * ELEMENTARY_CHARGE), -15, Dimension::whole([2, 1, -2, -1, 0, 0, 0])),
        _ => return None,
    };
    let (mantissa, exponent) = super::coherent(mantissa, exponent, dimension);
    Some(Value { number: decimal::shift(mantissa, exponent), dimension })
}

/// `hbar^2 / (2 me)` in eV nm^2, the kinetic constant of effective-mass problems.
#[must_use]
pub fn kinetic_ev_nm2() -> f64 {
    let hbar = PLANCK / (2.0 * PI);
    decimal::shift(hbar * hbar / (2.0 * ELECTRON_MASS * ELEMENTARY_CHARGE), -68 + 31 + 19 + 18)
}

/// `e^2 / (4 pi eps0)` in eV nm, the Coulomb constant.
#[must_use]
pub fn coulomb_ev_nm() -> f64 {
    decimal::shift(ELEMENTARY_CHARGE / (4.0 * PI * PERMITTIVITY), -19 + 12 + 9)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::units::Unit;

    fn si(name: &str, unit: &str) -> f64 {
        constant(name).unwrap().in_unit(&Unit::parse(unit).unwrap()).unwrap()
    }

    /// CODATA 2022 as printed; relations between constants from the same table.
    #[test]
    fn constants_are_those_of_codata_2022() {
        let close = |a: f64, b: f64| assert!((a / b - 1.0).abs() < 5e-16, "{a:e} {b:e}");
        close(si("h", "J*s"), 6.62607015e-34);
        close(si("hbar", "J*s"), 1.0545718176461565e-34);
        close(si("c", "m/s"), 299792458.0);
        close(si("e", "C"), 1.602176634e-19);
        close(si("me", "kg"), 9.1093837139e-31);
        close(si("kB", "J/K"), 1.380649e-23);
        close(si("muB", "J/T"), 9.2740100657e-24);
        close(si("muN", "J/T"), 5.0507837393e-27);
        close(si("eps0", "F/m"), 8.8541878188e-12);
        close(si("Phi0", "Wb"), 2.067833848461929e-15);
        close(si("Phi0", "Phi0"), 1.0);
        assert_eq!(constant("pi").unwrap().number, PI);
        assert_eq!(constant("Pi"), None);
        // muB/h = 1.39962449171(44)e10 Hz/T in the table.
        let ratio = constant("muB").unwrap().number / constant("h").unwrap().number;
        assert!((ratio / 1.399_624_491_71e10 - 1.0).abs() < 1e-11);
    }

    /// `hbar^2/(2 me) = Eh a0^2 / 2`, and `e^2/(4 pi eps0) = Eh a0`, with Eh in eV
    /// and a0 from the table; they agree within the table's uncertainties (1e-9 at most).
    #[test]
    fn derived_constants_agree_with_hartree_and_bohr() {
        let (hartree_ev, bohr_nm) = (27.211386245981, 0.0529177210544);
        assert!((kinetic_ev_nm2() / (hartree_ev * bohr_nm * bohr_nm / 2.0) - 1.0).abs() < 1e-9);
        assert!((coulomb_ev_nm() / (hartree_ev * bohr_nm) - 1.0).abs() < 1e-9);
    }
}
