//! Where the slope of a formula vanishes.
//!
//! Roots of a polynomial inside an interval: between two neighbouring roots of
//! its derivative a polynomial is monotonic, so each such piece holds at most
//! one root, found by bisection down to neighbouring doubles. The chain of
//! derivatives starts at a constant. Source of the method: common practice, no
//! source.

/// Highest number of coefficients handled: the square that a pair of degree 4 leads to.
pub(crate) const MOST: usize = 12;

/// Ascending roots with their number.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Roots {
    list: [f64; MOST],
    count: usize,
}

impl Roots {
    const fn new() -> Self {
        Self { list: [0.0; MOST], count: 0 }
    }

    pub(crate) fn iter(&self) -> impl Iterator<Item = f64> + '_ {
        self.list.iter().copied().take(self.count)
    }

    fn push(&mut self, root: f64) {
        let last = self.iter().last();
        if let (true, Some(slot)) = (last != Some(root), self.list.get_mut(self.count)) {
            *slot = root;
            self.count += 1;
        }
    }
}

fn evaluate(coefficients: &[f64], x: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, c| c + x * sum)
}

/// Roots of `c[0] + c[1] x + ...` strictly between `from` and `to`, ascending.
///
/// A root at 0 is found exactly where `c[0]` is exactly 0. Roots of even order
/// elsewhere count only where the arithmetic meets them exactly.
pub(crate) fn roots(coefficients: &[f64], from: f64, to: f64) -> Roots {
    let zeros = coefficients.iter().take_while(|c| **c == 0.0).count();
    let Some(rest) = coefficients.get(zeros..) else { return Roots::new() };
    if rest.is_empty() {
        return Roots::new();
    }
    let plain = chain(rest, from, to);
    let mut out = Roots::new();
    let mut pending = zeros > 0 && from < 0.0 && to > 0.0;
    for root in plain.iter() {
        if pending && root > 0.0 {
            out.push(0.0);
            pending = false;
        }
        out.push(root);
    }
    if pending {
        out.push(0.0);
    }
    out
}

fn chain(coefficients: &[f64], from: f64, to: f64) -> Roots {
    let n = coefficients.len().min(MOST);
    let mut found = Roots::new();
    // The derivative of order n - 1 is a constant, that of order 0 the polynomial itself.
    for order in (0..n.saturating_sub(1)).rev() {
        let mut derivative = [0.0; MOST];
        let mut length = 0;
        for (slot, (power, c)) in derivative.iter_mut().zip(coefficients.iter().enumerate().skip(order)) {
            *slot = (0..order).fold(*c, |c, k| c * (power - k) as f64);
            length += 1;
        }
        let derivative = derivative.get(..length).unwrap_or(&[]);
        let mut next = Roots::new();
        let mut low = from;
        for high in found.iter().chain(core::iter::once(to)) {
            if let Some(root) = bisect(derivative, low, high) {
                if root > from && root < to {
                    next.push(root);
                }
            }
            low = high;
        }
        found = next;
    }
    found
}

fn bisect(coefficients: &[f64], low: f64, high: f64) -> Option<f64> {
    let (at_low, at_high) = (evaluate(coefficients, low), evaluate(coefficients, high));
    if at_low == 0.0 {
        return Some(low);
    }
    if at_high == 0.0 {
        return Some(high);
    }
    if (at_low < 0.0) == (at_high < 0.0) {
        return None;
    }
    let (mut a, mut b) = (low, high);
    loop {
        let middle = 0.5 * (a + b);
        if !(middle > a && middle < b) {
            return Some(middle);
        }
        let at_middle = evaluate(coefficients, middle);
        if at_middle == 0.0 {
            return Some(middle);
        }
        if (at_middle < 0.0) == (at_low < 0.0) {
            a = middle;
        } else {
            b = middle;
        }
    }
}

/// `k c[k]` by rising power, the derivative's coefficients.
pub(crate) fn derivative(coefficients: &[f64]) -> [f64; MOST] {
    let mut out = [0.0; MOST];
    for (slot, (power, c)) in out.iter_mut().zip(coefficients.iter().enumerate().skip(1)) {
        *slot = power as f64 * c;
    }
    out
}

fn product(a: &[f64; MOST], b: &[f64; MOST]) -> [f64; MOST] {
    let mut out = [0.0; MOST];
    for (i, x) in a.iter().enumerate() {
        for (slot, y) in out.iter_mut().skip(i).zip(b) {
            *slot += x * y;
        }
    }
    out
}

/// Zeros of the slope `mean' + sign h' / (2 sqrt h)` strictly between `from` and `to`.
///
/// They are roots of `4 h mean'^2 - h'^2` at which `sign h'` and `mean'` have
/// opposite signs.
pub(crate) fn paired(mean: &[f64], half_gap_squared: &[f64], upper: bool, from: f64, to: f64) -> Roots {
    let mut h = [0.0; MOST];
    for (slot, c) in h.iter_mut().zip(half_gap_squared) {
        *slot = *c;
    }
    let (mean_slope, h_slope) = (derivative(mean), derivative(half_gap_squared));
    let first = product(&h, &product(&mean_slope, &mean_slope));
    let second = product(&h_slope, &h_slope);
    let mut square = [0.0; MOST];
    for (slot, (a, b)) in square.iter_mut().zip(first.iter().zip(&second)) {
        *slot = 4.0 * a - b;
    }
    // Trailing zeros would only lengthen the chain of derivatives.
    let length = square.iter().rposition(|c| *c != 0.0).map_or(0, |last| last + 1);
    let mut out = Roots::new();
    for root in roots(square.get(..length).unwrap_or(&[]), from, to).iter() {
        let (a, b) = (evaluate(&mean_slope, root), evaluate(&h_slope, root));
        let opposite = if upper { a * b <= 0.0 } else { a * b >= 0.0 };
        if opposite {
            out.push(root);
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    fn close(roots: &Roots, expected: &[f64]) {
        assert_eq!(roots.iter().count(), expected.len(), "{roots:?}");
        for (root, e) in roots.iter().zip(expected) {
            assert!((root - e).abs() < 1e-12, "{root} {e}");
        }
    }

    /// Closed forms: products of linear factors.
    #[test]
    fn roots_of_products_of_linear_factors() {
        // (x - 1)(x - 2)(x + 3) = x^3 - 7 x + 6
        close(&roots(&[6.0, -7.0, 0.0, 1.0], -10.0, 10.0), &[-3.0, 1.0, 2.0]);
        close(&roots(&[6.0, -7.0, 0.0, 1.0], 0.0, 1.5), &[1.0]);
        // x^2 (x - 2)
        close(&roots(&[0.0, 0.0, -2.0, 1.0], -1.0, 3.0), &[0.0, 2.0]);
        close(&roots(&[0.0, 2.0], -1.0, 3.0), &[0.0]);
        close(&roots(&[1.0, 0.0, 1.0], -1.0, 3.0), &[]);
        close(&roots(&[0.0, 0.0], -1.0, 3.0), &[]);
    }

    /// mean = x, half gap = sqrt(1 + 4 x^2), upper: slope 1 + 4 x / sqrt(1 + 4 x^2)
    /// vanishes at 16 x^2 = 1 + 4 x^2, x < 0, that is -1/sqrt(12).
    #[test]
    fn a_tilted_pair_turns_where_its_slope_vanishes() {
        close(&paired(&[0.0, 1.0], &[1.0, 0.0, 4.0], true, -5.0, 5.0), &[-1.0 / 12.0_f64.sqrt()]);
        close(&paired(&[0.0, 1.0], &[1.0, 0.0, 4.0], false, -5.0, 5.0), &[1.0 / 12.0_f64.sqrt()]);
        close(&paired(&[3.0], &[1.0, 0.0, 4.0], true, -5.0, 5.0), &[0.0]);
    }

    extern crate std;
}
