//! One part: its truncated basis and the matrices of its operators.
//!
//! Products of operators are formed in an enlarged basis and then cut, so that
//! truncation never falls between two factors. The enlarged basis exceeds the
//! kept one by as many states as the longest product can reach.
//!
//! An interval is held in the polynomials that vanish at both walls; its
//! enlarged basis is all polynomials (orthonormal Legendre), where the derivative
//! and the coordinate are exact. A product with several momenta is split in its
//! middle and each half acts on its own side, which is the form in which a hard
//! wall makes even powers of the momentum Hermitian.
//!
//! Sources: rotor elements, R. N. Zare, *Angular Momentum*, section 2.3 (cos
//! theta as a rank-one tensor); Legendre and Jacobi recurrences, DLMF 18.9.

use super::gauss::{Gauss, gauss};
use super::sparse::Sparse;
use crate::diagnostic::{Error, Result};
use crate::expr::{PartOperator, Tree};
use crate::model::C64;
use crate::spec::PartKind;

/// How many basis states a part keeps.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Extent {
    /// Kept states (rotor: kept values of J).
    pub kept: usize,
    /// Phase: the lowest kept charge.
    pub lowest: i64,
    /// How far the longest product of operators reaches.
    pub reach: usize,
    /// True if functions of the coordinate are taken.
    pub functions: bool,
}

/// A part with its basis.
#[derive(Clone, Debug)]
pub(super) struct Local {
    kind: PartKind,
    extent: Extent,
    /// States in the enlarged basis (interval: Legendre polynomials).
    enlarged: usize,
    rule: Option<Gauss>,
    /// Interval: the kept functions in Legendre polynomials, by columns.
    walls: Vec<Vec<f64>>,
}

fn real(x: f64) -> C64 {
    C64::new(x, 0.0)
}

impl Local {
    pub fn new(kind: PartKind, extent: Extent) -> Self {
        let spare = extent.reach + if extent.functions { extent.kept / 2 + 20 } else { 0 };
        let enlarged = match kind {
            PartKind::Spin(twice) => twice + 1,
            PartKind::States(count) => count,
            PartKind::Oscillator => extent.kept + spare,
            PartKind::Interval { .. } => extent.kept + 2 + spare,
            PartKind::Phase => extent.kept + 2 * extent.reach,
            PartKind::Rotor => (extent.kept + extent.reach) * (extent.kept + extent.reach),
        };
        let mut out = Self { kind, extent, enlarged, rule: None, walls: Vec::new() };
        if extent.functions {
            out.rule = Some(gauss(&out.couplings()));
        }
        if matches!(kind, PartKind::Interval { .. }) {
            out.walls = wall_functions(extent.kept, enlarged);
        }
        out
    }

    /// Number of kept states.
    pub fn order(&self) -> usize {
        match self.kind {
            PartKind::Spin(_) | PartKind::States(_) => self.enlarged,
            PartKind::Rotor => self.extent.kept * self.extent.kept,
            _ => self.extent.kept,
        }
    }

    /// A kept state in words.
    pub fn describe(&self, state: usize) -> String {
        match self.kind {
            PartKind::Spin(twice) => {
                let m = twice as i64 - 2 * state as i64;
                if twice % 2 == 0 { format!("m = {}", m / 2) } else { format!("m = {m}/2") }
            }
            PartKind::Rotor => {
                let (j, m) = rotor_state(state);
                format!("J = {j}, M = {m}")
            }
            PartKind::Oscillator => format!("n = {state}"),
            PartKind::Phase => format!("n = {}", self.extent.lowest + state as i64),
            PartKind::Interval { .. } => format!("function {}", state + 1),
            PartKind::States(_) => format!("state {}", state + 1),
        }
    }

    /// Elements of the dimensionless coordinate between neighbours.
    fn couplings(&self) -> Vec<f64> {
        (1..self.enlarged)
            .map(|n| {
                let n = n as f64;
                match self.kind {
                    PartKind::Interval { .. } => n / libm::sqrt(4.0 * n * n - 1.0),
                    _ => libm::sqrt(n / 2.0),
                }
            })
            .collect()
    }

    /// Middle and half length of an interval; 0 and 1 for the oscillator.
    fn scale(&self) -> (f64, f64) {
        match self.kind {
            PartKind::Interval { from, to, .. } => (0.5 * (from + to), 0.5 * (to - from)),
            _ => (0.0, 1.0),
        }
    }

    /// Coordinates of the quadrature nodes, empty unless functions are taken.
    pub fn nodes(&self) -> Vec<f64> {
        let (middle, half) = self.scale();
        self.rule.as_ref().map_or(Vec::new(), |rule| rule.nodes.iter().map(|u| middle + half * u).collect())
    }

    /// `sum_i value(i) |i><i|` over the eigenstates of the coordinate, enlarged basis.
    pub fn function(&self, value: impl Fn(usize) -> f64) -> Sparse {
        let Some(rule) = &self.rule else {
            return Sparse::zero(self.enlarged);
        };
        let values: Vec<f64> = (0..rule.nodes.len()).map(value).collect();
        // The mirror image of a node has the same eigenvector up to alternating
        // signs, so half of a symmetric sum would do; the plain sum is quick enough.
        let mut rows = vec![vec![0.0; self.enlarged]; self.enlarged];
        for (value, vector) in values.iter().zip(&rule.vectors) {
            if *value == 0.0 {
                continue;
            }
            for (row, &left) in rows.iter_mut().zip(vector) {
                let weight = value * left;
                row.iter_mut().zip(vector).for_each(|(slot, &right)| *slot += weight * right);
            }
        }
        Sparse::from_fn(self.enlarged, |row, column| real(rows[row][column]))
    }

    /// Matrix of an operator in the enlarged basis. `left`: the adjoint's form for
    /// the left half of a product (it differs for momenta at hard walls only).
    fn operator(&self, operator: PartOperator, left: bool) -> Result<Sparse> {
        let order = self.enlarged;
        let band = |element: &dyn Fn(usize) -> f64, upper: C64, lower: C64| {
            // Element between n - 1 and n for n from 1: `upper` above, `lower` below the diagonal.
            let rows = (0..order)
                .map(|n| {
                    let below = (n > 0).then(|| (n.wrapping_sub(1), lower * element(n)));
                    let above = (n + 1 < order).then(|| (n + 1, upper * element(n + 1)));
                    below.into_iter().chain(above).filter(|(_, x)| x.re != 0.0 || x.im != 0.0).collect()
                })
                .collect();
            Sparse { rows }
        };
        let zero = real(0.0);
        let one = real(1.0);
        let out = match (self.kind, operator) {
            (PartKind::Spin(twice), _) => {
                let j = twice as f64 / 2.0;
                // States by falling m; element between m = j - n + 1 (above) and j - n.
                let step = |n: usize| {
                    let n = n as f64;
                    libm::sqrt(n * (2.0 * j + 1.0 - n))
                };
                match operator {
                    PartOperator::X => band(&step, real(0.5), real(0.5)),
                    PartOperator::Y => band(&step, C64::new(0.0, -0.5), C64::new(0.0, 0.5)),
                    PartOperator::Z => Sparse::diagonal((0..order).map(|n| j - n as f64)),
                    PartOperator::Raise => band(&step, one, zero),
                    PartOperator::Lower => band(&step, zero, one),
                    PartOperator::Sq => Sparse::diagonal((0..order).map(|_| j * (j + 1.0))),
                    _ => return Err(unknown()),
                }
            }
            (PartKind::Oscillator, _) => {
                let root = |n: usize| libm::sqrt(n as f64);
                let half = |n: usize| libm::sqrt(n as f64 / 2.0);
                match operator {
                    PartOperator::Number => Sparse::diagonal((0..order).map(|n| n as f64)),
                    PartOperator::Lower => band(&root, one, zero),
                    PartOperator::Raise => band(&root, zero, one),
                    PartOperator::X => band(&half, one, one),
                    PartOperator::P => band(&half, C64::new(0.0, -1.0), C64::new(0.0, 1.0)),
                    _ => return Err(unknown()),
                }
            }
            (PartKind::Phase, _) => {
                let lowest = self.extent.lowest - self.extent.reach as i64;
                match operator {
                    PartOperator::Number => Sparse::diagonal((0..order).map(|n| (lowest + n as i64) as f64)),
                    PartOperator::Cos => band(&|_| 1.0, real(0.5), real(0.5)),
                    // e^(i phi) raises the charge, so sin has -i/2 below the diagonal.
                    PartOperator::Sin => band(&|_| 1.0, C64::new(0.0, 0.5), C64::new(0.0, -0.5)),
                    _ => return Err(unknown()),
                }
            }
            (PartKind::Rotor, _) => match operator {
                PartOperator::Sq => Sparse::diagonal((0..order).map(|state| {
                    let (j, _) = rotor_state(state);
                    (j * (j + 1)) as f64
                })),
                PartOperator::Z => Sparse::diagonal((0..order).map(|state| rotor_state(state).1 as f64)),
                PartOperator::Cos => rotor_cosine(order),
                PartOperator::Cos2 => {
                    let cosine = rotor_cosine(order);
                    cosine.times(&cosine)
                }
                _ => return Err(unknown()),
            },
            (PartKind::Interval { .. }, PartOperator::X) => {
                let (middle, half) = self.scale();
                let couplings = self.couplings();
                let element = |n: usize| couplings.get(n - 1).map_or(0.0, |b| half * b);
                band(&element, one, one).plus(&Sparse::diagonal((0..order).map(|_| middle)))
            }
            (PartKind::Interval { .. }, PartOperator::P) => {
                let (_, half) = self.scale();
                let derivative = Sparse::from_fn(order, |row, column| {
                    if column > row && (column - row) % 2 == 1 {
                        let product = (2 * row + 1) as f64 * (2 * column + 1) as f64;
                        C64::new(0.0, -libm::sqrt(product) / half)
                    } else {
                        zero
                    }
                });
                if left { derivative.adjoint() } else { derivative }
            }
            (PartKind::States(_), _) => {
                let unit =
                    |pairs: &[(usize, usize)]| {
                        Sparse::from_fn(order, |row, column| {
                            if pairs.contains(&(row + 1, column + 1)) { one } else { zero }
                        })
                    };
                match operator {
                    PartOperator::Projector(state) => unit(&[(state, state)]),
                    PartOperator::Jump(to, from) => unit(&[(to, from)]),
                    PartOperator::Couple(a, b) if a == b => unit(&[(a, a)]).scaled(real(2.0)),
                    PartOperator::Couple(a, b) => unit(&[(a, b), (b, a)]),
                    _ => return Err(unknown()),
                }
            }
            (PartKind::Interval { .. }, _) => return Err(unknown()),
        };
        Ok(out)
    }

    /// Matrix of a control-free expression of this part's operators, enlarged basis.
    pub fn expression(&self, tree: &Tree, left: bool) -> Result<Sparse> {
        if !tree.uses_operator() {
            let value = tree.value(f64::NAN, f64::NAN);
            return Ok(Sparse::diagonal((0..self.enlarged).map(|_| value)));
        }
        let of = |tree: &Tree| self.expression(tree, left);
        Ok(match tree {
            Tree::Operator { operator, .. } => self.operator(*operator, left)?,
            Tree::Dot(..) => self.operator(PartOperator::Sq, left)?,
            Tree::Negative(inner) => of(inner)?.scaled(real(-1.0)),
            Tree::Add(a, b) => of(a)?.plus(&of(b)?),
            Tree::Subtract(a, b) => of(a)?.plus(&of(b)?.scaled(real(-1.0))),
            Tree::Multiply(a, b) => match a.as_number() {
                Some(factor) => of(b)?.scaled(real(factor)),
                None => of(a)?.times(&of(b)?),
            },
            Tree::Divide(a, b) => of(a)?.scaled(real(1.0 / b.value(f64::NAN, f64::NAN))),
            Tree::Power(base, exponent) => {
                let base = of(base)?;
                let exponent = exponent.as_number().unwrap_or(0.0) as usize;
                let mut out = Sparse::identity(self.enlarged);
                for _ in 0..exponent {
                    out = out.times(&base);
                }
                out
            }
            Tree::Call(..) => {
                let function = tree.coordinate_as_position();
                let nodes = self.nodes();
                self.function(|idx| nodes.get(idx).map_or(0.0, |&x| function.value(f64::NAN, x)))
            }
            Tree::Number(_) | Tree::Control | Tree::Position => return Err(unknown()),
        })
    }

    /// Matrix of a whole product in the kept basis, from its two halves.
    pub fn kept(&self, left: &Sparse, right: &Sparse) -> Sparse {
        match self.kind {
            PartKind::Interval { .. } => {
                let half = |matrix: &Sparse| -> Vec<Vec<C64>> {
                    // Columns of `matrix E`.
                    self.walls
                        .iter()
                        .map(|column| {
                            matrix
                                .rows
                                .iter()
                                .map(|row| {
                                    let mut sum = real(0.0);
                                    for &(idx, x) in row {
                                        sum += x * column.get(idx).copied().unwrap_or(0.0);
                                    }
                                    sum
                                })
                                .collect()
                        })
                        .collect()
                };
                let lefts = half(&left.adjoint());
                let rights = half(right);
                Sparse::from_fn(self.extent.kept, |row, column| {
                    let mut sum = real(0.0);
                    for (a, b) in lefts[row].iter().zip(&rights[column]) {
                        sum += a.conj() * b;
                    }
                    sum
                })
            }
            PartKind::Phase => left.times(right).cut(self.extent.reach, self.extent.kept),
            _ => left.times(right).cut(0, self.order()),
        }
    }

    /// Unit matrix of the enlarged basis.
    pub fn unit(&self) -> Sparse {
        Sparse::identity(self.enlarged)
    }

    /// True if momenta are split between the halves of a product.
    pub fn splits_momenta(&self) -> bool {
        matches!(self.kind, PartKind::Interval { .. })
    }
}

fn unknown() -> Error {
    Error::internal("a part without this operator came through the spec")
}

/// J and M of a rotor state: J rising, M from -J to J.
fn rotor_state(state: usize) -> (i64, i64) {
    let mut j = libm::sqrt(state as f64) as usize;
    // The root of a large square may round the wrong way.
    while j * j > state {
        j -= 1;
    }
    while (j + 1) * (j + 1) <= state {
        j += 1;
    }
    (j as i64, (state - j * j) as i64 - j as i64)
}

/// cos theta between J and J + 1 of equal M.
fn rotor_cosine(order: usize) -> Sparse {
    let mut rows = vec![Vec::new(); order];
    let element = |j: i64, m: i64| {
        let (next, m) = ((j + 1) as f64, m as f64);
        libm::sqrt((next * next - m * m) / ((2.0 * next - 1.0) * (2.0 * next + 1.0)))
    };
    for (state, row) in rows.iter_mut().enumerate() {
        let (j, m) = rotor_state(state);
        if m.abs() < j {
            row.push((((j - 1) * (j - 1) + j - 1 + m) as usize, real(element(j - 1, m))));
        }
        let above = ((j + 1) * (j + 1) + j + 1 + m) as usize;
        if above < order {
            row.push((above, real(element(j, m))));
        }
    }
    Sparse { rows }
}

/// Orthonormal polynomials that vanish at -1 and 1, in orthonormal Legendre
/// polynomials: `(1 - u^2)` times the Gegenbauer polynomials of index 5/2.
fn wall_functions(count: usize, order: usize) -> Vec<Vec<f64>> {
    let coupling = |n: usize| {
        let n = n as f64;
        n / libm::sqrt(4.0 * n * n - 1.0)
    };
    let times_u = |column: &[f64]| -> Vec<f64> {
        (0..order)
            .map(|k| {
                let below = if k > 0 { coupling(k) * column[k - 1] } else { 0.0 };
                let above = if k + 1 < order { coupling(k + 1) * column[k + 1] } else { 0.0 };
                below + above
            })
            .collect()
    };
    let mut first = vec![0.0; order];
    // 1 - u^2 = (2/3)(P_0 - P_2), normalised.
    for (k, weight) in [(0usize, 1.0), (2, -1.0)] {
        if let Some(slot) = first.get_mut(k) {
            *slot = weight * libm::sqrt(2.0 / (2 * k + 1) as f64) * libm::sqrt(15.0) / 6.0;
        }
    }
    let mut out = vec![first];
    let mut before = vec![0.0; order];
    for m in 0..count.saturating_sub(1) {
        let beta = |m: usize| {
            let m = m as f64;
            libm::sqrt(m * (m + 4.0) / ((2.0 * m + 5.0) * (2.0 * m + 3.0)))
        };
        let last = out[m].clone();
        let next: Vec<f64> = times_u(&last)
            .iter()
            .zip(&before)
            .map(|(product, older)| (product - beta(m) * older) / beta(m + 1))
            .collect();
        before = last;
        out.push(next);
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    fn local(kind: PartKind, kept: usize) -> Local {
        Local::new(kind, Extent { kept, lowest: -(kept as i64) / 2, reach: 2, functions: false })
    }

    fn matrix(local: &Local, operator: PartOperator) -> Sparse {
        local.operator(operator, false).unwrap()
    }

    /// `[x, y] = i z` for several spins.
    #[test]
    fn spins_commute_as_angular_momenta() {
        for twice in [1, 2, 7, 20] {
            let spin = local(PartKind::Spin(twice), 0);
            let (x, y, z) = (
                matrix(&spin, PartOperator::X),
                matrix(&spin, PartOperator::Y),
                matrix(&spin, PartOperator::Z),
            );
            let commutator = x.times(&y).plus(&y.times(&x).scaled(real(-1.0)));
            let difference = commutator.plus(&z.scaled(C64::new(0.0, -1.0)));
            assert!(difference.largest() < 1e-13, "{twice}");
            let raise = x.plus(&y.scaled(C64::new(0.0, 1.0)));
            assert_eq!(raise, matrix(&spin, PartOperator::Raise));
        }
    }

    /// The wall functions are orthonormal, vanish at the walls, and p^2 has the
    /// levels (n pi / 2)^2 of a box of length 2.
    #[test]
    fn an_interval_has_the_levels_of_a_box() {
        let kind = PartKind::Interval { from: -1.0, to: 1.0, length: false };
        let part = local(kind, 24);
        for (m, a) in part.walls.iter().enumerate() {
            let end: f64 = a.iter().enumerate().map(|(k, x)| x * libm::sqrt((2 * k + 1) as f64 / 2.0)).sum();
            assert!(end.abs() < 1e-12, "{m} {end}");
            for (n, b) in part.walls.iter().enumerate() {
                let product: f64 = a.iter().zip(b).map(|(x, y)| x * y).sum();
                assert!((product - f64::from(u8::from(m == n))).abs() < 1e-13, "{m} {n} {product}");
            }
        }
        let left = part.operator(PartOperator::P, true).unwrap();
        let right = part.operator(PartOperator::P, false).unwrap();
        let kinetic = part.kept(&left, &right);
        let dense = nalgebra::DMatrix::from_fn(24, 24, |r, c| kinetic.get(r, c).re);
        let mut levels: Vec<f64> = nalgebra::SymmetricEigen::new(dense).eigenvalues.iter().copied().collect();
        levels.sort_by(f64::total_cmp);
        for (idx, level) in levels.iter().take(6).enumerate() {
            let exact = std::f64::consts::FRAC_PI_2 * (idx + 1) as f64;
            assert!((level / (exact * exact) - 1.0).abs() < 1e-11, "{idx} {level}");
        }
    }

    /// `cos^2` of a rotor has the mean 1/3 in J = 0 and 3/5 in J = 1, M = 0.
    #[test]
    fn rotor_cosines_have_their_means() {
        let rotor = local(PartKind::Rotor, 4);
        let square = matrix(&rotor, PartOperator::Cos2);
        assert!((square.get(0, 0).re - 1.0 / 3.0).abs() < 1e-15);
        assert!((square.get(2, 2).re - 3.0 / 5.0).abs() < 1e-15);
        assert_eq!(rotor_state(2), (1, 0));
        assert_eq!(rotor_state(8), (2, 2));
    }

    /// `[x, p] = i` below the last state of the enlarged basis.
    #[test]
    fn an_oscillator_commutes_canonically() {
        let part = local(PartKind::Oscillator, 6);
        let (x, p) = (matrix(&part, PartOperator::X), matrix(&part, PartOperator::P));
        let commutator = part.kept(&x, &p).plus(&part.kept(&p, &x).scaled(real(-1.0)));
        let difference = commutator.plus(&Sparse::identity(6).scaled(C64::new(0.0, -1.0)));
        assert!(difference.largest() < 1e-14);
    }
}
