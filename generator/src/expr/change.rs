//! Differences of an expression between two control values, formed so that a
//! small difference keeps its digits.

use super::algebra::{Algebra, power};
use super::{Function, Tree};

/// Values at two control values and their difference.
#[derive(Clone, Debug)]
struct Change {
    from: f64,
    to: f64,
    by: f64,
}

impl Change {
    fn plain(from: f64, to: f64) -> Self {
        Self { from, to, by: to - from }
    }

    fn middle(&self) -> f64 {
        self.from + 0.5 * self.by
    }
}

impl Algebra for Change {
    fn number(value: f64) -> Self {
        Self { from: value, to: value, by: 0.0 }
    }

    fn negated(&self) -> Self {
        Self { from: -self.from, to: -self.to, by: -self.by }
    }

    fn plus(&self, other: &Self) -> Self {
        Self { from: self.from + other.from, to: self.to + other.to, by: self.by + other.by }
    }

    fn minus(&self, other: &Self) -> Self {
        Self { from: self.from - other.from, to: self.to - other.to, by: self.by - other.by }
    }

    fn times(&self, other: &Self) -> Self {
        Self {
            from: self.from * other.from,
            to: self.to * other.to,
            by: self.by * other.to + self.from * other.by,
        }
    }

    fn over(&self, other: &Self) -> Self {
        let from = self.from / other.from;
        Self { from, to: self.to / other.to, by: (self.by - from * other.by) / other.to }
    }

    fn raised(&self, exponent: f64) -> Self {
        let (from, to) = (power(self.from, exponent), power(self.to, exponent));
        let whole = libm::floor(exponent) == exponent;
        let by = if whole && (0.0..=64.0).contains(&exponent) {
            // a^n - b^n = (a - b)(a^(n-1) + a^(n-2) b + ... + b^(n-1))
            let n = exponent as i32;
            let sum: f64 =
                (0..n).map(|i| power(self.to, f64::from(i)) * power(self.from, f64::from(n - 1 - i))).sum();
            self.by * sum
        } else if whole && (-64.0..0.0).contains(&exponent) {
            return Self::number(1.0).over(&self.raised(-exponent));
        } else if exponent == 0.5 {
            self.by / (from + to)
        } else if self.from > 0.0 && self.to > 0.0 {
            from * libm::expm1(exponent * libm::log1p(self.by / self.from))
        } else {
            to - from
        };
        Self { from, to, by: if self.by == 0.0 { 0.0 } else { by } }
    }

    fn call(&self, function: Function) -> Self {
        let mut out = Self::plain(self.from.call(function), self.to.call(function));
        if self.by == 0.0 {
            out.by = 0.0;
            return out;
        }
        let half = 0.5 * self.by;
        match function {
            Function::Sqrt => out.by = self.by / (out.from + out.to),
            Function::Exp => out.by = out.from * libm::expm1(self.by),
            Function::Ln => out.by = libm::log1p(self.by / self.from),
            Function::Sin => out.by = 2.0 * libm::cos(self.middle()) * libm::sin(half),
            Function::Cos => out.by = -2.0 * libm::sin(self.middle()) * libm::sin(half),
            Function::Sinh => out.by = 2.0 * libm::cosh(self.middle()) * libm::sinh(half),
            Function::Cosh => out.by = 2.0 * libm::sinh(self.middle()) * libm::sinh(half),
            // tan a - tan b = tan(a - b) (1 + tan a tan b); a pole between makes no difference to it.
            Function::Tan => out.by = libm::tan(self.by) * (1.0 + out.from * out.to),
            Function::Tanh => out.by = libm::tanh(self.by) * (1.0 - out.from * out.to),
            Function::Abs if (self.from < 0.0) == (self.to < 0.0) => {
                out.by = if self.from < 0.0 { -self.by } else { self.by };
            }
            Function::Abs | Function::Min | Function::Max => {}
        }
        out
    }

    fn extreme(&self, other: &Self, greatest: bool) -> Self {
        let first = |a: f64, b: f64| (a > b) == greatest;
        match (first(self.from, other.from), first(self.to, other.to)) {
            (true, true) => self.clone(),
            (false, false) => other.clone(),
            _ => Self::plain(self.from.extreme(&other.from, greatest), self.to.extreme(&other.to, greatest)),
        }
    }
}

impl Tree {
    /// `value(control, position) - value(at, position)`, without the loss of
    /// digits that the subtraction of two near values costs.
    #[must_use]
    pub fn change(&self, at: f64, control: f64, position: f64) -> f64 {
        let variable = Change::plain(at, control);
        Change::evaluate(self, &variable, &Change::number(position), &Change::number(f64::NAN)).by
    }
}
