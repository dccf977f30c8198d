//! Intervals that certainly hold the value of an expression.

use super::algebra::Algebra;
use super::{Function, Tree};

/// A closed interval; ends may be infinite. NaN ends mean that nothing is known.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Interval {
    pub low: f64,
    pub high: f64,
}

/// All reals: nothing is known.
const ANY: Interval = Interval { low: f64::NEG_INFINITY, high: f64::INFINITY };

impl Interval {
    pub fn new(low: f64, high: f64) -> Self {
        Self { low, high }
    }

    /// Ends widened by more than the rounding of any one operation or libm call.
    fn wide(low: f64, high: f64) -> Self {
        if low.is_nan() || high.is_nan() {
            return ANY;
        }
        let widen =
            |x: f64| if x.is_finite() { 4.0 * f64::EPSILON * x.abs() + f64::MIN_POSITIVE } else { 0.0 };
        Self { low: low - widen(low), high: high + widen(high) }
    }

    /// True if no value changes sign inside.
    pub fn one_sign(self) -> bool {
        self.low >= 0.0 || self.high <= 0.0
    }

    fn hull(values: &[f64]) -> Self {
        if values.iter().any(|x| x.is_nan()) {
            return ANY;
        }
        let low = values.iter().copied().fold(f64::INFINITY, f64::min);
        let high = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        Self::wide(low, high)
    }

    fn rising(self, function: Function) -> Self {
        Self::wide(self.low.call(function), self.high.call(function))
    }

    /// Range of the cosine of an argument shifted by `shift`.
    fn wave(self, shift: f64) -> Self {
        let (low, high) = (self.low + shift, self.high + shift);
        let turn = 2.0 * std::f64::consts::PI;
        // Phases of large arguments are not known well enough to be worth the trouble.
        if (high - low).is_nan() || high - low >= turn || low.abs() > 1e6 || high.abs() > 1e6 {
            return Self::new(-1.0, 1.0);
        }
        let holds = |phase: f64| {
            let first = libm::ceil((low - phase) / turn - 1e-9);
            first * turn + phase <= high + 1e-8
        };
        let ends = [libm::cos(low), libm::cos(high)];
        let slack = 1e-9;
        let least = if holds(std::f64::consts::PI) { -1.0 } else { ends[0].min(ends[1]) - slack };
        let most = if holds(0.0) { 1.0 } else { ends[0].max(ends[1]) + slack };
        Self::new(least, most)
    }
}

impl Algebra for Interval {
    fn number(value: f64) -> Self {
        if value.is_nan() { ANY } else { Self::new(value, value) }
    }

    fn negated(&self) -> Self {
        Self::new(-self.high, -self.low)
    }

    fn plus(&self, other: &Self) -> Self {
        Self::wide(self.low + other.low, self.high + other.high)
    }

    fn minus(&self, other: &Self) -> Self {
        self.plus(&other.negated())
    }

    fn times(&self, other: &Self) -> Self {
        // 0 times an infinite end is 0: the ends stand for arbitrarily large numbers.
        let product = |a: f64, b: f64| if a == 0.0 || b == 0.0 { 0.0 } else { a * b };
        Self::hull(&[
            product(self.low, other.low),
            product(self.low, other.high),
            product(self.high, other.low),
            product(self.high, other.high),
        ])
    }

    fn over(&self, other: &Self) -> Self {
        if other.low <= 0.0 && other.high >= 0.0 {
            return ANY;
        }
        self.times(&Self::wide(1.0 / other.high, 1.0 / other.low))
    }

    fn raised(&self, exponent: f64) -> Self {
        let ends = [self.low.raised(exponent), self.high.raised(exponent)];
        if libm::floor(exponent) == exponent {
            if exponent < 0.0 {
                return Self::number(1.0).over(&self.raised(-exponent));
            }
            let even = libm::fmod(exponent, 2.0) == 0.0;
            let crosses = self.low < 0.0 && self.high > 0.0;
            if even && exponent > 0.0 && crosses {
                return Self::new(0.0, Self::hull(&ends).high);
            }
            if even {
                let hull = Self::hull(&ends);
                return Self::new(hull.low.max(0.0), hull.high);
            }
            return Self::hull(&ends);
        }
        if self.low < 0.0 {
            return ANY;
        }
        let hull = Self::hull(&ends);
        Self::new(hull.low.max(0.0), hull.high)
    }

    fn call(&self, function: Function) -> Self {
        match function {
            Function::Sqrt | Function::Ln if self.low < 0.0 => ANY,
            Function::Exp => {
                let out = self.rising(function);
                Self::new(out.low.max(0.0), out.high)
            }
            Function::Sqrt | Function::Ln | Function::Sinh | Function::Tanh => self.rising(function),
            Function::Sin => self.wave(-std::f64::consts::FRAC_PI_2),
            Function::Cos => self.wave(0.0),
            Function::Tan => self.call(Function::Sin).over(&self.call(Function::Cos)),
            Function::Cosh => {
                let hull = Self::hull(&[libm::cosh(self.low), libm::cosh(self.high)]);
                let least = if self.low <= 0.0 && self.high >= 0.0 { 1.0 } else { hull.low.max(1.0) };
                Self::new(least, hull.high)
            }
            Function::Abs => {
                if self.low >= 0.0 {
                    *self
                } else if self.high <= 0.0 {
                    self.negated()
                } else {
                    Self::new(0.0, self.high.max(-self.low))
                }
            }
            Function::Min | Function::Max => ANY,
        }
    }

    fn extreme(&self, other: &Self, greatest: bool) -> Self {
        if greatest {
            Self::new(self.low.max(other.low), self.high.max(other.high))
        } else {
            Self::new(self.low.min(other.low), self.high.min(other.high))
        }
    }
}

impl Tree {
    /// Bounds of the value over an interval of the control and one of the position
    /// (of any `.x` too); infinite where nothing is known.
    #[must_use]
    pub fn bounds(&self, control: (f64, f64), position: (f64, f64)) -> (f64, f64) {
        let place = Interval::new(position.0, position.1);
        let out = Interval::evaluate(self, &Interval::new(control.0, control.1), &place, &place);
        (out.low, out.high)
    }
}
