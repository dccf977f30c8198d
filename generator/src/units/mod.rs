//! Dimensions, unit symbols and CODATA 2022 constants.

/// Exponents of m, kg, s, A, K, in twelfths so that roots stay exact.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Default)]
pub struct Dimension(pub [i16; 5]);

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
