//! Truncated power series: a value with its derivatives.
//!
//! Every rule is the recurrence that the function's differential equation gives
//! for the coefficients, so the derivatives are exact up to rounding, and a
//! coefficient that vanishes identically is exactly 0.
//!
//! Source: D. E. Knuth, *The Art of Computer Programming*, vol. 2, 3rd ed.,
//! section 4.7.

use super::algebra::{Algebra, repeated};
use super::{Function, Tree};

/// Number of coefficients, powers 0 to 4.
pub const TERMS: usize = 5;

/// Coefficients by rising power.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Jet(pub [f64; TERMS]);

impl Jet {
    fn is_constant(&self) -> bool {
        self.0[1..].iter().all(|&c| c == 0.0)
    }

    /// Coefficients from the zeroth and a rule for the later ones, given those
    /// before.
    fn grown(first: f64, rule: impl Fn(usize, &[f64; TERMS]) -> f64) -> Self {
        let mut out = [0.0; TERMS];
        out[0] = first;
        for k in 1..TERMS {
            out[k] = rule(k, &out);
        }
        Self(out)
    }

    /// The coefficient of `d^k` of `f(u)` when `f' = g`: `(1/k) sum i u_i g_{k-i}`.
    fn chained(&self, k: usize, g: impl Fn(usize) -> f64) -> f64 {
        let mut sum = 0.0;
        for i in 1..=k {
            if self.0[i] != 0.0 {
                sum += i as f64 * self.0[i] * g(k - i);
            }
        }
        sum / k as f64
    }

    /// Sine and cosine, or their hyperbolic sisters (`sign` 1).
    fn waves(&self, sine: f64, cosine: f64, sign: f64) -> (Self, Self) {
        let mut s = [0.0; TERMS];
        let mut c = [0.0; TERMS];
        (s[0], c[0]) = (sine, cosine);
        for k in 1..TERMS {
            s[k] = self.chained(k, |i| c[i]);
            c[k] = sign * self.chained(k, |i| s[i]);
        }
        (Self(s), Self(c))
    }

    /// Solution of `t' = (1 + sign t^2) u'`.
    fn tangent(&self, first: f64, sign: f64) -> Self {
        Self::grown(first, |k, t| {
            self.chained(k, |j| {
                let square: f64 = (0..=j).map(|i| t[i] * t[j - i]).sum();
                f64::from(u8::from(j == 0)) + sign * square
            })
        })
    }

    /// Sign of the value just beside the point on both sides; `None` if they differ.
    fn sign(&self) -> Option<f64> {
        let (power, leading) = self.0.iter().enumerate().find(|(_, c)| **c != 0.0)?;
        (power % 2 == 0 && !leading.is_nan()).then(|| leading.signum())
    }
}

impl Algebra for Jet {
    fn number(value: f64) -> Self {
        let mut out = [0.0; TERMS];
        out[0] = value;
        Self(out)
    }

    fn negated(&self) -> Self {
        Self(self.0.map(|c| -c))
    }

    fn plus(&self, other: &Self) -> Self {
        Self(std::array::from_fn(|k| self.0[k] + other.0[k]))
    }

    fn minus(&self, other: &Self) -> Self {
        Self(std::array::from_fn(|k| self.0[k] - other.0[k]))
    }

    fn times(&self, other: &Self) -> Self {
        Self(std::array::from_fn(|k| {
            let mut sum = 0.0;
            for i in 0..=k {
                // A coefficient that vanishes must not turn an infinity elsewhere into NaN.
                if self.0[i] != 0.0 && other.0[k - i] != 0.0 {
                    sum += self.0[i] * other.0[k - i];
                }
            }
            // The zeroth product keeps NaN and signed zeros of plain arithmetic.
            if k == 0 { self.0[0] * other.0[0] } else { sum }
        }))
    }

    fn over(&self, other: &Self) -> Self {
        let divisor = other.0[0];
        Self::grown(self.0[0] / divisor, |k, q| {
            let mut sum = self.0[k];
            for i in 1..=k {
                if other.0[i] != 0.0 {
                    sum -= other.0[i] * q[k - i];
                }
            }
            if sum == 0.0 { 0.0 } else { sum / divisor }
        })
    }

    fn raised(&self, exponent: f64) -> Self {
        if self.is_constant() {
            return Self::number(super::algebra::power(self.0[0], exponent));
        }
        if libm::floor(exponent) == exponent && exponent.abs() <= 1024.0 {
            let whole = repeated(self, exponent.abs() as u32);
            return if exponent < 0.0 { Self::number(1.0).over(&whole) } else { whole };
        }
        // p' u = r p u'
        let u0 = self.0[0];
        Self::grown(libm::pow(u0, exponent), |k, p| {
            let mut sum = 0.0;
            for i in 1..=k {
                if self.0[i] != 0.0 {
                    sum += (exponent * i as f64 - (k - i) as f64) * self.0[i] * p[k - i];
                }
            }
            if sum == 0.0 { 0.0 } else { sum / (k as f64 * u0) }
        })
    }

    fn call(&self, function: Function) -> Self {
        let u0 = self.0[0];
        if self.is_constant() {
            return Self::number(u0.call(function));
        }
        match function {
            Function::Sqrt => self.raised(0.5),
            Function::Exp => Self::grown(libm::exp(u0), |k, e| self.chained(k, |i| e[i])),
            Function::Ln => {
                let slope = Self::number(1.0).over(self);
                Self::grown(libm::log(u0), |k, _| self.chained(k, |i| slope.0[i]))
            }
            Function::Sin => self.waves(libm::sin(u0), libm::cos(u0), -1.0).0,
            Function::Cos => self.waves(libm::sin(u0), libm::cos(u0), -1.0).1,
            Function::Sinh => self.waves(libm::sinh(u0), libm::cosh(u0), 1.0).0,
            Function::Cosh => self.waves(libm::sinh(u0), libm::cosh(u0), 1.0).1,
            Function::Tan => self.tangent(libm::tan(u0), 1.0),
            Function::Tanh => self.tangent(libm::tanh(u0), -1.0),
            Function::Abs => match self.sign() {
                Some(sign) => Self(self.0.map(|c| sign * c)),
                None => Self(std::array::from_fn(|k| if k == 0 { u0.abs() } else { f64::NAN })),
            },
            Function::Min | Function::Max => Self::number(f64::NAN),
        }
    }

    fn extreme(&self, other: &Self, greatest: bool) -> Self {
        let difference = self.minus(other);
        if difference.0.iter().all(|&c| c == 0.0) {
            return self.clone();
        }
        match difference.sign() {
            Some(sign) if (sign > 0.0) == greatest => self.clone(),
            Some(_) => other.clone(),
            None => Self(std::array::from_fn(|k| {
                if k == 0 { self.0[0].extreme(&other.0[0], greatest) } else { f64::NAN }
            })),
        }
    }
}

impl Tree {
    /// Taylor coefficients in the control about `control`, powers 0 to 4, at one
    /// position. Not finite where the expression is not analytic.
    #[must_use]
    pub fn taylor(&self, control: f64, position: f64) -> [f64; TERMS] {
        let mut variable = Jet::number(control);
        variable.0[1] = 1.0;
        Jet::evaluate(self, &variable, &Jet::number(position), &Jet::number(f64::NAN)).0
    }

    /// Taylor coefficients in the position about `position`, powers 0 to 4, at one
    /// control value.
    #[must_use]
    pub fn taylor_position(&self, control: f64, position: f64) -> [f64; TERMS] {
        let mut variable = Jet::number(position);
        variable.0[1] = 1.0;
        Jet::evaluate(self, &Jet::number(control), &variable, &Jet::number(f64::NAN)).0
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::{Complex, ComplexField};
    use proptest::prelude::*;

    impl Algebra for Complex<f64> {
        fn number(value: f64) -> Self {
            Self::new(value, 0.0)
        }
        fn negated(&self) -> Self {
            -self
        }
        fn plus(&self, other: &Self) -> Self {
            self + other
        }
        fn minus(&self, other: &Self) -> Self {
            self - other
        }
        fn times(&self, other: &Self) -> Self {
            self * other
        }
        fn over(&self, other: &Self) -> Self {
            self / other
        }
        fn raised(&self, exponent: f64) -> Self {
            ComplexField::powf(*self, exponent)
        }
        fn call(&self, function: Function) -> Self {
            match function {
                Function::Sqrt => ComplexField::sqrt(*self),
                Function::Exp => ComplexField::exp(*self),
                Function::Ln => ComplexField::ln(*self),
                Function::Sin => ComplexField::sin(*self),
                Function::Cos => ComplexField::cos(*self),
                Function::Tan => ComplexField::tan(*self),
                Function::Sinh => ComplexField::sinh(*self),
                Function::Cosh => ComplexField::cosh(*self),
                Function::Tanh => ComplexField::tanh(*self),
                Function::Abs => {
                    if self.re < 0.0 {
                        -self
                    } else {
                        *self
                    }
                }
                Function::Min | Function::Max => Self::new(f64::NAN, 0.0),
            }
        }
        fn extreme(&self, other: &Self, greatest: bool) -> Self {
            if (self.re > other.re) == greatest { *self } else { *other }
        }
    }

    /// Coefficients by Cauchy's integral over a circle, trapezoidal rule: an
    /// independent way to all derivatives of an analytic function.
    fn cauchy(tree: &Tree, at: f64, radius: f64) -> [f64; TERMS] {
        let points = 64;
        let mut out = [0.0; TERMS];
        for point in 0..points {
            let angle = 2.0 * std::f64::consts::PI * (f64::from(point) + 0.5) / f64::from(points);
            let turn = Complex::new(libm::cos(angle), libm::sin(angle));
            let any = Complex::new(0.7, 0.0);
            let value = Complex::evaluate(tree, &(turn * radius + at), &any, &any);
            for (k, slot) in out.iter_mut().enumerate() {
                let power = i32::try_from(k).unwrap();
                *slot +=
                    (value * ComplexField::powi(turn, -power)).re / (f64::from(points) * radius.powi(power));
            }
        }
        out
    }

    /// Size of the first terms with negative powers on a circle, which vanish
    /// unless a pole lies inside.
    fn principal_part(tree: &Tree, at: f64, radius: f64) -> f64 {
        let points = 64;
        let mut out = [Complex::new(0.0, 0.0); 4];
        for point in 0..points {
            let angle = 2.0 * std::f64::consts::PI * (f64::from(point) + 0.5) / f64::from(points);
            let turn = Complex::new(libm::cos(angle), libm::sin(angle));
            let any = Complex::new(0.7, 0.0);
            let value = Complex::evaluate(tree, &(turn * radius + at), &any, &any);
            for (k, slot) in out.iter_mut().enumerate() {
                let power = i32::try_from(k).unwrap() + 1;
                *slot += value * ComplexField::powi(turn, power) / f64::from(points);
            }
        }
        out.iter().fold(0.0f64, |most, c| most.max(ComplexField::modulus(*c)))
    }

    fn trees() -> impl Strategy<Value = Tree> {
        let leaf = prop_oneof![
            3 => Just(Tree::Control),
            1 => Just(Tree::Position),
            2 => (0.2f64..3.0).prop_map(Tree::Number),
        ];
        leaf.prop_recursive(5, 24, 2, |inner| {
            let one = prop::sample::select(Function::ALL[..10].to_vec());
            prop_oneof![
                (inner.clone(), inner.clone()).prop_map(|(a, b)| a.plus(b)),
                (inner.clone(), inner.clone()).prop_map(|(a, b)| a.minus(b)),
                (inner.clone(), inner.clone()).prop_map(|(a, b)| a.times(b)),
                (inner.clone(), inner.clone()).prop_map(|(a, b)| a.over(b)),
                (inner.clone(), prop::sample::select(vec![2.0, 3.0, -1.0, 0.5, 1.5, -2.0]))
                    .prop_map(|(a, n)| a.raised(Tree::Number(n))),
                (inner.clone(), inner.clone()).prop_map(|(a, b)| a.raised(b)),
                (one, inner.clone()).prop_map(|(f, a)| Tree::Call(f, vec![a])),
                (inner.clone(), inner).prop_map(|(a, b)| Tree::Call(Function::Max, vec![a, b])),
            ]
        })
    }

    proptest! {
        #![proptest_config(ProptestConfig { max_global_rejects: 100_000, ..ProptestConfig::default() })]

        #[test]
        fn coefficients_agree_with_the_cauchy_integral(tree in trees(), at in 0.3f64..2.0) {
            let (near, far) = (cauchy(&tree, at, 0.04), cauchy(&tree, at, 0.08));
            let size = near.iter().fold(0.0f64, |most, c| most.max(c.abs()));
            // Where the two circles disagree, a singularity or branch cut is too near for the check.
            prop_assume!(size.is_finite() && size < 1e6);
            prop_assume!(near.iter().zip(far).all(|(a, b)| (a - b).abs() <= 1e-8 * size.max(1.0)));
            prop_assume!(principal_part(&tree, at, 0.04) <= 1e-9 * size.max(1.0));
            let series = tree.taylor(at, 0.7);
            // A real logarithm or root may have no value where the complex one has.
            prop_assume!(tree.value(at, 0.7).is_finite());
            for (k, (a, b)) in series.iter().zip(far).enumerate() {
                prop_assert!((a - b).abs() <= 1e-7 * size.max(1.0), "{k}: {a} {b} {tree:?}");
            }
        }

        #[test]
        fn changes_agree_with_differences_and_keep_their_digits(tree in trees(), at in 0.3f64..2.0, by in -0.2f64..0.2) {
            let (from, to) = (tree.value(at, 0.7), tree.value(at + by, 0.7));
            let change = tree.change(at, at + by, 0.7);
            // A logarithm of zero inside has no change; that shows as NaN, never as a wrong number.
            prop_assume!(!change.is_nan());
            prop_assume!(from.is_finite() && to.is_finite() && from.abs() < 1e6 && to.abs() < 1e6);
            prop_assume!(tree.bounds((at.min(at + by), at.max(at + by)), (0.7, 0.7)).1 < 1e6);
            prop_assume!(tree.bounds((at.min(at + by), at.max(at + by)), (0.7, 0.7)).0 > -1e6);
            prop_assert!((change - (to - from)).abs() <= 1e-8 * (1.0 + from.abs() + to.abs()), "{change} {from} {to} {tree:?}");
            // A step of 1e-9 leaves few digits in a difference; the change keeps them.
            let series = tree.taylor(at, 0.7);
            prop_assume!(series.iter().all(|c| c.is_finite() && c.abs() < 1e4));
            let step = (at + 1e-9) - at;
            let small = tree.change(at, at + 1e-9, 0.7);
    let expected = series[1] * step + series[2] * step * step;
            let size = series.iter().fold(1.0f64, |most, c| most.max(c.abs()));
            prop_assert!((small - expected).abs() <= 1e-11 * step * size, "{small} {expected} {tree:?}");
        }

        #[test]
        fn bounds_hold_the_value(tree in trees(), at in 0.3f64..2.0, by in 0.0f64..0.5, share in 0.0f64..1.0) {
            let (low, high) = tree.bounds((at, at + by), (0.5, 0.9));
            let value = tree.value(at + share * by, 0.5 + 0.4 * share);
            prop_assume!(value.is_finite());
            prop_assert!(low <= value && value <= high, "{low} {value} {high} {tree:?}");
        }
        }

    #[test]
    fn coefficients_that_vanish_are_exactly_zero() {
        let even = Tree::Call(Function::Cos, vec![Tree::Number(3.3).times(Tree::Control)]);
        let series = even.taylor(0.0, 0.0);
        assert_eq!((series[1], series[3]), (0.0, 0.0));
        assert!((series[2] + 3.3 * 3.3 / 2.0).abs() < 1e-15);
        let square = Tree::Control.raised(Tree::Number(2.0)).taylor(0.0, 0.0);
        assert_eq!(square, [0.0, 0.0, 1.0, 0.0, 0.0]);
        let abs = Tree::Call(Function::Abs, vec![Tree::Control.raised(Tree::Number(2.0)).negated()]);
        assert_eq!(abs.taylor(0.0, 0.0), [0.0, 0.0, 1.0, 0.0, 0.0]);
        assert!(Tree::Call(Function::Abs, vec![Tree::Control]).taylor(0.0, 0.0)[1].is_nan());
        let root = Tree::Number(1.0).plus(Tree::Control.times(Tree::Control)).raised(Tree::Number(0.5));
        assert_eq!(root.taylor(0.0, 0.0), [1.0, 0.0, 0.5, 0.0, -0.125]);
    }

    /// `(1 + x)^(-3/2)` by the binomial series.
    #[test]
    fn broken_powers_follow_the_binomial_series() {
        let tree = Tree::Number(1.0).plus(Tree::Control).raised(Tree::Number(-1.5));
        let expected = [1.0, -1.5, 1.875, -2.1875, 2.4609375];
        for (a, b) in tree.taylor(0.0, 0.0).iter().zip(expected) {
            assert!((a - b).abs() < 1e-15);
        }
    }
}
