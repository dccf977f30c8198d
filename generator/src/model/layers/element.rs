//! Reference elements: nodes, quadrature weights and derivatives.
//!
//! An element interpolates at the nodes of its own quadrature, so its mass
//! matrix is diagonal. Inside the stack: Gauss-Lobatto points on [-1, 1]. Beyond
//! an open end: Laguerre functions `exp(-x/2) L(x)` at Gauss-Laguerre-Radau
//! points on [0, infinity), which hold every state that decays.
//!
//! Source: Canuto, Hussaini, Quarteroni and Zang, *Spectral Methods:
//! Fundamentals in Single Domains* (2006), chapter 2 (Lobatto); Shen, Tang and
//! Wang, *Spectral Methods* (2011), section 7.1 (Laguerre functions); both from memory.

use std::rc::Rc;

/// Nodes, weights and derivatives of the cardinal functions.
#[derive(Clone, Debug)]
pub struct Element {
    /// Nodes, ascending.
    pub nodes: Vec<f64>,
    /// Weights of the quadrature at the nodes.
    pub weights: Vec<f64>,
    /// `derivative[row * n + column]`: slope of cardinal function `column` at node `row`.
    pub derivative: Vec<f64>,
    /// True for the half-infinite element.
    pub open: bool,
}

impl Element {
    /// Number of nodes.
    #[must_use]
    pub fn len(&self) -> usize {
        self.nodes.len()
    }

    /// Value at `x` of the function with these values at the nodes.
    #[must_use]
    pub fn value(&self, values: &[f64], x: f64) -> f64 {
        // Barycentric form; for the open element of the function without its
        // exponential, which is put back at the end.
        let scale = if self.open { 0.25 * self.nodes.len() as f64 } else { 0.5 };
        let weight = |node: f64| if self.open { libm::exp(0.5 * (node - x)) } else { 1.0 };
        let (mut above, mut below) = (0.0, 0.0);
        for (j, (&here, &value)) in self.nodes.iter().zip(values).enumerate() {
            let gap = x - here;
            if gap == 0.0 {
                return value;
            }
            // The scale keeps the product in range and cancels in the quotient.
            let others = self.nodes.iter().enumerate().filter(|&(i, _)| i != j);
            let barycentric = others.fold(1.0, |product, (_, node)| product * (scale / (here - node)));
            above += barycentric / gap * value * weight(here);
            below += barycentric / gap;
        }
        above / below
    }
}

/// Legendre polynomials of degree `n` and `n - 1` at `x`.
fn legendre(n: usize, x: f64) -> (f64, f64) {
    let (mut last, mut now) = (1.0, x);
    for k in 1..n {
        let k = k as f64;
        (last, now) = (now, ((2.0 * k + 1.0) * x * now - k * last) / (k + 1.0));
    }
    (now, last)
}

/// Gauss-Lobatto element of degree `p >= 2`.
#[must_use]
pub fn lobatto(p: usize) -> Rc<Element> {
    let n = p as f64;
    let mut nodes = vec![0.0; p + 1];
    for (idx, node) in nodes.iter_mut().enumerate() {
        // Newton on (1 - x^2) P_p'(x), whose own derivative is -p(p+1) P_p.
        let mut x = -libm::cos(std::f64::consts::PI * idx as f64 / n);
        if idx > 0 && idx < p {
            for _ in 0..60 {
                let (now, last) = legendre(p, x);
                let step = (x * now - last) / ((n + 1.0) * now);
                x -= step;
                if step.abs() < 1e-16 {
                    break;
                }
            }
        }
        *node = x;
    }
    nodes[0] = -1.0;
    nodes[p] = 1.0;
    // Mirror, so that symmetric stacks stay symmetric to the last bit.
    for idx in 0..=p / 2 {
        let mean = 0.5 * (nodes[p - idx] - nodes[idx]);
        nodes[idx] = -mean;
        nodes[p - idx] = mean;
    }
    let top: Vec<f64> = nodes.iter().map(|&x| legendre(p, x).0).collect();
    let weights = top.iter().map(|&now| 2.0 / (n * (n + 1.0) * now * now)).collect();
    let count = p + 1;
    let mut derivative = vec![0.0; count * count];
    for row in 0..count {
        let mut diagonal = 0.0;
        for column in 0..count {
            if row != column {
                let slope = top[row] / (top[column] * (nodes[row] - nodes[column]));
                derivative[row * count + column] = slope;
                diagonal -= slope;
            }
        }
        derivative[row * count + row] = diagonal;
    }
    Rc::new(Element { nodes, weights, derivative, open: false })
}

/// Laguerre polynomials of degree `n` and `n - 1` at `x`, both times `exp(-x/2)`.
fn laguerre(n: usize, x: f64) -> (f64, f64) {
    let decay = libm::exp(-0.5 * x);
    if n == 0 {
        return (decay, 0.0);
    }
    let (mut last, mut now) = (decay, (1.0 - x) * decay);
    for k in 1..n {
        let k = k as f64;
        (last, now) = (now, ((2.0 * k + 1.0 - x) * now - k * last) / (k + 1.0));
    }
    (now, last)
}

/// Half-infinite element with `n + 1` nodes, the first at 0.
#[must_use]
pub fn open_end(n: usize) -> Rc<Element> {
    // The other nodes are the zeros of L_{n+1}'(x) = (n+1)(L_{n+1} - L_n)/x,
    // found one by one between sign changes.
    let top = n + 1;
    let slope = |x: f64| {
        let (now, last) = laguerre(top, x);
        now - last
    };
    let mut nodes = vec![0.0];
    // The smallest zero lies near 3.7/(n + 1.5) and gaps grow from there.
    let step = 0.4 / (top as f64 + 1.0);
    let mut left = 0.05 / (top as f64 + 1.0);
    let mut value = slope(left);
    while nodes.len() < top && left < 8.0 * top as f64 + 20.0 {
        let right = left + step * (1.0 + left);
        let next = slope(right);
        if (value < 0.0) != (next < 0.0) {
            let (mut low, mut high) = (left, right);
            for _ in 0..200 {
                let middle = 0.5 * (low + high);
                if middle <= low || middle >= high {
                    break;
                }
                if (slope(middle) < 0.0) == (value < 0.0) { low = middle } else { high = middle }
            }
            nodes.push(0.5 * (low + high));
        }
        (left, value) = (right, next);
    }
    let count = nodes.len();
    // Weights of the quadrature of exp(-x) f(x), with the exponential taken out.
    let at_n: Vec<f64> = nodes.iter().map(|&x| laguerre(n, x).0).collect();
    let weights = at_n.iter().map(|&l| 1.0 / (top as f64 * l * l)).collect();
    let mut derivative = vec![0.0; count * count];
    for row in 0..count {
        for column in 0..count {
            if row != column {
                // At these nodes L_{n+1} and L_n agree, so either serves.
                derivative[row * count + column] = at_n[row] / (at_n[column] * (nodes[row] - nodes[column]));
            }
        }
    }
    derivative[0] = -0.5 * top as f64;
    Rc::new(Element { nodes, weights, derivative, open: true })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Nodes and weights for five points: Abramowitz and Stegun, table 25.6.
    #[test]
    fn lobatto_points_are_the_tabulated_ones() {
        let e = lobatto(4);
        assert!((e.nodes[3] - 0.654_653_67).abs() < 1e-8);
        assert!((e.weights[3] - 0.544_444_444).abs() < 1e-8);
        assert!((e.weights[2] - 0.711_111_111).abs() < 1e-8);
    }

    #[test]
    fn lobatto_derivatives_are_exact_for_polynomials() {
        let e = lobatto(12);
        let values: Vec<f64> = e.nodes.iter().map(|x| x.powi(7)).collect();
        for row in 0..e.len() {
            let slope: f64 = (0..e.len()).map(|c| e.derivative[row * e.len() + c] * values[c]).sum();
            assert!((slope - 7.0 * e.nodes[row].powi(6)).abs() < 1e-12);
        }
        assert!((e.value(&values, 0.3) - 0.3_f64.powi(7)).abs() < 1e-14);
    }

    /// Integrals of x^k exp(-x) are k!, and the slope of x exp(-x/2) is known.
    #[test]
    fn open_elements_integrate_and_differentiate_decaying_functions() {
        let e = open_end(16);
        assert_eq!(e.len(), 17);
        let f = |x: f64| x * (-0.5 * x).exp();
        let norm: f64 = (0..e.len()).map(|i| e.weights[i] * f(e.nodes[i]).powi(2)).sum();
        assert!((norm - 2.0).abs() < 1e-11, "{norm}");
        let values: Vec<f64> = e.nodes.iter().map(|&x| f(x)).collect();
        for row in 0..e.len() {
            let slope: f64 = (0..e.len()).map(|c| e.derivative[row * e.len() + c] * values[c]).sum();
            let x = e.nodes[row];
            assert!((slope - (1.0 - 0.5 * x) * (-0.5 * x).exp()).abs() < 1e-11, "{row}: {slope}");
        }
        assert!((e.value(&values, 2.5) - f(2.5)).abs() < 1e-12);
    }
}
