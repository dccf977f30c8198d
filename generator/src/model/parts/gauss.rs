//! Gauss quadrature as the eigenproblem of a coordinate.
//!
//! In: the off-diagonal elements of a Jacobi matrix with zero diagonal (the matrix
//! of a coordinate among orthonormal polynomials or functions). Out: its
//! eigenvalues, exactly mirrored about 0, and eigenvectors whose every element is
//! accurate relative to itself, so that functions which grow fast are safe.
//!
//! Source: G. H. Golub and J. H. Welsch, *Calculation of Gauss quadrature rules*,
//! Math. Comp. 23, 221 (1969); here nodes come by bisection and eigenvectors by
//! the three-term recurrence, which grows and is therefore stable.

/// Nodes and eigenvectors.
#[derive(Clone, Debug)]
pub(super) struct Gauss {
    /// Eigenvalues, ascending.
    pub nodes: Vec<f64>,
    /// Eigenvector of each node.
    pub vectors: Vec<Vec<f64>>,
}

/// Solves the Jacobi matrix of order `couplings.len() + 1`.
pub(super) fn gauss(couplings: &[f64]) -> Gauss {
    let order = couplings.len() + 1;
    let bound = couplings.iter().fold(0.0f64, |most, b| most.max(b.abs())) * 2.0 + 1.0;
    let mut nodes = vec![0.0; order];
    for idx in 0..order / 2 {
        // Counted from the top; the mirror gives the other half.
        let (mut low, mut high) = (0.0, bound);
        loop {
            let middle = 0.5 * (low + high);
            if middle <= low || middle >= high {
                break;
            }
            if above(couplings, middle) > idx {
                low = middle;
            } else {
                high = middle;
            }
        }
        nodes[order - 1 - idx] = low;
        nodes[idx] = -low;
    }
    let vectors = nodes.iter().map(|&node| vector(couplings, node)).collect();
    Gauss { nodes, vectors }
}

/// Number of eigenvalues above `x`, by the signs of the pivots.
fn above(couplings: &[f64], x: f64) -> usize {
    let mut pivot = -x;
    let mut count = usize::from(pivot > 0.0);
    for &b in couplings {
        let safe = if pivot == 0.0 { -f64::MIN_POSITIVE } else { pivot };
        pivot = -x - b * b / safe;
        count += usize::from(pivot > 0.0);
    }
    count
}

/// The normalised eigenvector at an eigenvalue.
fn vector(couplings: &[f64], x: f64) -> Vec<f64> {
    let mut out: Vec<f64> = Vec::with_capacity(couplings.len() + 1);
    out.push(1.0);
    let (mut before, mut last) = (0.0, 1.0);
    let mut before_coupling = 0.0;
    for &b in couplings {
        let next = (x * last - before_coupling * before) / b;
        out.push(next);
        (before, last, before_coupling) = (last, next, b);
        if next.abs() > 1e120 {
            // The elements so far are too small to matter; only their size is kept in range.
            out.iter_mut().for_each(|element| *element *= 1e-120);
            before *= 1e-120;
            last *= 1e-120;
        }
    }
    let norm = libm::sqrt(out.iter().map(|element| element * element).sum());
    out.iter().map(|element| element / norm).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Nodes and weights of five-point Gauss-Legendre quadrature.
    /// Source: DLMF, table 3.5.1.
    #[test]
    fn legendre_nodes_are_those_of_the_tables() {
        let couplings: Vec<f64> =
            (1..5).map(|n| f64::from(n) / libm::sqrt(f64::from(4 * n * n - 1))).collect();
        let rule = gauss(&couplings);
        let nodes = [
            -0.906_179_845_938_664,
            -0.538_469_310_105_683,
            0.0,
            0.538_469_310_105_683,
            0.906_179_845_938_664,
        ];
        let weights = [0.236_926_885_056_189, 0.478_628_670_499_366, 0.568_888_888_888_889];
        for (a, b) in rule.nodes.iter().zip(nodes) {
            assert!((a - b).abs() < 1e-15, "{a} {b}");
        }
        for (vector, weight) in rule.vectors.iter().zip(weights) {
            assert!((2.0 * vector[0] * vector[0] - weight).abs() < 1e-14);
        }
    }

    /// The integral of cosh(6 x) over the oscillator's ground state is exp(9), though
    /// the function reaches 1e58 at the outermost node.
    #[test]
    fn fast_growing_functions_are_safe() {
        let couplings: Vec<f64> = (1..250).map(|n| libm::sqrt(f64::from(n) / 2.0)).collect();
        let rule = gauss(&couplings);
        let sum: f64 =
            rule.nodes.iter().zip(&rule.vectors).map(|(&x, v)| v[0] * v[0] * libm::cosh(6.0 * x)).sum();
        assert!((sum / libm::exp(9.0) - 1.0).abs() < 1e-12, "{sum}");
    }
}
