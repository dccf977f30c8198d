//! Polynomials of up to three normalised parameters.
//!
//! A parameter `p` between `from` and `to` enters as `t = (p - middle) / half`, from -1
//! to 1. Coefficients are fitted in Chebyshev polynomials, which tell how fast they fall, and
//! evaluated as nested powers of `t`, which takes one product and one sum each.
//!
//! Source: Trefethen, *Approximation Theory and Approximation Practice*, chapters 2
//! and 3 (from memory).

/// A polynomial of several parameters; coefficients in Chebyshev order, first parameter outermost.
#[derive(Clone, Debug, PartialEq)]
pub struct Tensor {
    /// Degree in each parameter.
    pub degree: Vec<usize>,
    /// Chebyshev coefficients, `degree + 1` in each direction.
    pub coefficients: Vec<f64>,
}

/// Positions of the `degree + 1` Chebyshev points of the second kind, from -1 to 1.
fn line(degree: usize) -> Vec<f64> {
    if degree == 0 {
        return vec![0.0];
    }
    (0..=degree)
        .map(|k| match 2 * k {
            0 => -1.0,
            double if double == degree => 0.0,
            double if double == 2 * degree => 1.0,
            _ => -libm::cos(core::f64::consts::PI * k as f64 / degree as f64),
        })
        .collect()
}

/// All combinations of one position per direction, the first direction outermost.
#[must_use]
pub fn grid(lines: &[Vec<f64>]) -> Vec<Vec<f64>> {
    lines.iter().fold(vec![Vec::new()], |points, line| {
        points
            .iter()
            .flat_map(|point| line.iter().map(move |&t| point.iter().copied().chain([t]).collect()))
            .collect()
    })
}

/// The points at which [`Tensor::fit`] takes its values.
#[must_use]
pub fn nodes(degree: &[usize]) -> Vec<Vec<f64>> {
    grid(&degree.iter().map(|&n| line(n)).collect::<Vec<_>>())
}

impl Tensor {
    /// The interpolant of values at [`nodes`].
    #[must_use]
    pub fn fit(degree: &[usize], values: &[f64]) -> Self {
        let mut out = Self { degree: degree.to_vec(), coefficients: values.to_vec() };
        out.along_each(&|values| {
            let last = values.len() - 1;
            if last == 0 {
                return values.to_vec();
            }
            let turn = core::f64::consts::PI / last as f64;
            (0..=last)
                .map(|order| {
                    let mut sum = 0.0;
                    for (k, value) in values.iter().enumerate() {
                        let half = if k == 0 || k == last { 0.5 } else { 1.0 };
                        // Points rise, so the angle falls.
                        let angle = (order * (last - k)) % (2 * last);
                        sum += half * value * libm::cos(turn * angle as f64);
                    }
                    let half = if order == 0 || order == last { 0.5 } else { 1.0 };
                    half * sum * 2.0 / last as f64
                })
                .collect()
        });
        out
    }

    /// Powers of the normalised parameters in the same nesting.
    #[must_use]
    pub fn powers(&self) -> Vec<f64> {
        let mut out = self.clone();
        out.along_each(&|chebyshev| {
            let count = chebyshev.len();
            let mut powers = vec![0.0; count];
            let (mut before, mut here) = (vec![0.0; count], vec![0.0; count]);
            here[0] = 1.0;
            for (order, &c) in chebyshev.iter().enumerate() {
                powers.iter_mut().zip(&here).for_each(|(power, t)| *power += c * t);
                // T(n+1) = 2 t T(n) - T(n-1), and T(1) = t.
                let factor = if order == 0 { 1.0 } else { 2.0 };
                let mut next = vec![0.0; count];
                for k in 1..count {
                    next[k] = factor * here[k - 1];
                }
                next.iter_mut().zip(&before).for_each(|(next, before)| *next -= before);
                before = std::mem::replace(&mut here, next);
            }
            powers
        });
        out.coefficients
    }

    /// Applies a linear map of equal length along every direction in turn.
    fn along_each(&mut self, map: &dyn Fn(&[f64]) -> Vec<f64>) {
        let lengths: Vec<usize> = self.degree.iter().map(|n| n + 1).collect();
        for (axis, &length) in lengths.iter().enumerate() {
            let stride: usize = lengths[axis + 1..].iter().product();
            let blocks = self.coefficients.len() / (stride * length);
            for block in 0..blocks {
                for inner in 0..stride {
                    let place = |k: usize| (block * length + k) * stride + inner;
                    let values: Vec<f64> = (0..length).map(|k| self.coefficients[place(k)]).collect();
                    for (k, value) in map(&values).into_iter().enumerate() {
                        self.coefficients[place(k)] = value;
                    }
                }
            }
        }
    }
}

/// Nested evaluation of powers, the first parameter outermost; one rounding per operation.
#[must_use]
pub fn nested(degree: &[usize], powers: &[f64], t: &[f64]) -> f64 {
    let (Some((&n, inner)), Some((&t, rest))) = (degree.split_first(), t.split_first()) else {
        return powers.first().copied().unwrap_or(0.0);
    };
    let stride = powers.len() / (n + 1);
    if stride == 0 {
        return 0.0;
    }
    let mut sum = 0.0;
    for (k, part) in powers.chunks_exact(stride).enumerate().rev() {
        let value = nested(inner, part, rest);
        sum = if k == n { value } else { value + t * sum };
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A product of polynomials in three parameters is reproduced everywhere.
    #[test]
    fn polynomials_are_fitted_exactly() {
        let f = |t: &[f64]| (1.0 + t[0] - 2.0 * t[0] * t[0] * t[0]) * (0.5 - t[1] * t[1]) * (2.0 + t[2]);
        let degree = [3, 2, 1];
        let values: Vec<f64> = nodes(&degree).iter().map(|t| f(t)).collect();
        let tensor = Tensor::fit(&degree, &values);
        let powers = tensor.powers();
        for t in [[0.3, -0.7, 0.9], [-1.0, 1.0, -1.0], [0.0, 0.1, -0.2]] {
            assert!((nested(&degree, &powers, &t) - f(&t)).abs() < 1e-14);
        }
    }

    /// T4(t) = 8 t^4 - 8 t^2 + 1 (DLMF 18.5.14 with 18.5.1).
    #[test]
    fn a_single_chebyshev_polynomial_has_its_known_powers() {
        let tensor = Tensor { degree: vec![4], coefficients: vec![0.0, 0.0, 0.0, 0.0, 1.0] };
        assert_eq!(tensor.powers(), [1.0, 0.0, -8.0, 0.0, 8.0]);
    }
}
