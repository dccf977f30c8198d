//! Chebyshev interpolants with bounded errors, and what is interpolated.
//!
//! A single level is interpolated itself. Of two levels that come close, the mean
//! and the squared half gap are, which stay analytic where the levels do not.
//!
//! Source: Trefethen, *Approximation Theory and Approximation Practice*, theorem 8.2
//! (error in a Bernstein ellipse) and eq. (5.13) (barycentric formula); from memory.

/// `n + 1` Chebyshev points of the second kind from `from` to `to`.
pub(super) fn chebyshev_points(from: f64, to: f64, n: usize) -> Vec<f64> {
    (0..=n)
        .map(|k| match k {
            0 => from,
            k if k == n => to,
            k => {
                let turn = libm::cos(core::f64::consts::PI * k as f64 / n as f64);
                0.5 * (from + to) + 0.5 * (from - to) * turn
            }
        })
        .collect()
}

/// Values at Chebyshev points of the second kind.
#[derive(Clone, Debug)]
pub(super) struct Interpolant {
    /// The points.
    pub nodes: Vec<f64>,
    /// The values there.
    pub values: Vec<f64>,
    /// Bound (or estimate) of the error in between.
    pub bound: f64,
}

impl Interpolant {
    /// The same function reflected by `image`.
    fn image(&self, image: &dyn Fn(f64) -> f64) -> Self {
        Self { nodes: self.nodes.iter().map(|&x| image(x)).collect(), ..self.clone() }
    }

    /// Barycentric interpolation.
    pub fn value(&self, x: f64) -> f64 {
        let (mut above, mut below) = (0.0, 0.0);
        let last = self.nodes.len().saturating_sub(1);
        for (k, (&node, &value)) in self.nodes.iter().zip(&self.values).enumerate() {
            if x == node {
                return value;
            }
            let half = if k == 0 || k == last { 0.5 } else { 1.0 };
            let weight = if k % 2 == 0 { half } else { -half } / (x - node);
            above += weight * value;
            below += weight;
        }
        above / below
    }

    /// The largest of the last three Chebyshev coefficients: an estimate of the error
    /// of a function whose ellipse is not known.
    pub fn tail(&self) -> f64 {
        let last = self.nodes.len().saturating_sub(1);
        let turn = core::f64::consts::PI / last.max(1) as f64;
        let mut largest = 0.0_f64;
        for order in last.saturating_sub(2)..=last {
            let mut sum = 0.0;
            for (k, value) in self.values.iter().enumerate() {
                let half = if k == 0 || k == last { 0.5 } else { 1.0 };
                sum += half * value * libm::cos(turn * (order * k % (2 * last.max(1))) as f64);
            }
            largest = largest.max((sum * 2.0 / last.max(1) as f64).abs());
        }
        largest
    }
}

/// The smallest degree from 4 to `highest` at which `4 size rho^-degree / (rho - 1)` is at most `goal`, and that bound.
pub(super) fn degree(size: f64, rho: f64, goal: f64, highest: usize) -> (usize, f64) {
    let mut bound = 4.0 * size / (rho - 1.0);
    for _ in 0..4 {
        bound /= rho;
    }
    let mut degree = 4;
    while bound > goal && degree < highest {
        degree += 1;
        bound /= rho;
    }
    (degree, bound)
}

/// Ellipse parameter of the interval from `0` to `length` in the disc of radius `r` about 0.
pub(super) fn ellipse(length: f64, r: f64) -> f64 {
    let half = 0.5 * length;
    let axis = (r - half) / half;
    axis + libm::sqrt((axis * axis - 1.0).max(0.0))
}

/// What is known on a piece.
#[derive(Clone, Debug)]
pub(super) enum Kind {
    /// The level's change.
    Level(Interpolant),
    /// Levels `low` and `low + 1`.
    Pair {
        /// Number of the lower one.
        low: usize,
        /// Change of the mean.
        mean: Interpolant,
        /// Squared half gap, over `(x - pivot)^2` if there is a pivot.
        square: Interpolant,
        /// Where both coincide by construction: a degenerate operating point.
        pivot: Option<f64>,
    },
    /// A branch carried through a set of three or more levels by overlap; its bound is an estimate;
    /// with the numbers of that set.
    Branch(Interpolant, (usize, usize)),
}

/// An interval on which the followed level is known.
#[derive(Clone, Debug)]
pub(super) struct Piece {
    /// End nearer to the operating point.
    pub from: f64,
    /// Outer end.
    pub to: f64,
    /// Numbers of the followed level where the piece begins, several if degenerate for good.
    pub numbers: (usize, usize),
    /// What is interpolated.
    pub kind: Kind,
}

impl Piece {
    /// The same piece reflected by `image`.
    pub fn image(&self, image: &dyn Fn(f64) -> f64) -> Self {
        let kind = match &self.kind {
            Kind::Level(level) => Kind::Level(level.image(image)),
            Kind::Pair { low, mean, square, pivot } => Kind::Pair {
                low: *low,
                mean: mean.image(image),
                square: square.image(image),
                pivot: pivot.map(image),
            },
            Kind::Branch(branch, set) => Kind::Branch(branch.image(image), *set),
        };
        Self { from: image(self.from), to: image(self.to), numbers: self.numbers, kind }
    }

    /// Half the distance of the pair, not negative, and the bound of its error.
    pub fn half_gap(square: &Interpolant, pivot: Option<f64>, x: f64) -> (f64, f64) {
        let scale = pivot.map_or(1.0, |pivot| (x - pivot).abs());
        let s = square.value(x).max(0.0);
        let root = libm::sqrt(s);
        // |sqrt x - sqrt y| is at most |x - y| / sqrt x, and at most sqrt |x - y|.
        let doubt = libm::sqrt(square.bound).min(square.bound / root.max(f64::MIN_POSITIVE));
        (scale * root, scale * doubt)
    }

    /// Change of the level and the bound of its error, if `number` is followed at `x`.
    pub fn value(&self, x: f64, followed: usize) -> (f64, f64) {
        match &self.kind {
            Kind::Level(level) | Kind::Branch(level, _) => (level.value(x), level.bound),
            Kind::Pair { low, mean, square, pivot } => {
                let (half, doubt) = Self::half_gap(square, *pivot, x);
                let sign = if followed > *low { 1.0 } else { -1.0 };
                (mean.value(x) + sign * half, mean.bound + doubt)
            }
        }
    }
}
