//! Small models for the tests of the series, and the published values they are
//! held against.

use std::rc::Rc;

use nalgebra::DMatrix;

use super::{Level, level};
use crate::diagnostic::Result;
use crate::model::{C64, HIGHEST_POWER, Model};
use crate::pencil::{Hermitian, Scalar, State};

/// `H(x) = sum_k x^k H_k`, given as dense matrices, operating point 0.
pub(super) struct Trial<T: Scalar> {
    powers: Vec<Hermitian<T>>,
    parity: Option<String>,
    scale: f64,
    width: Option<f64>,
}

impl<T: Scalar> Trial<T> {
    pub(super) fn new(matrices: Vec<DMatrix<T>>) -> Self {
        let order = matrices[0].nrows();
        let (low, high) = Hermitian::Dense(matrices[0].clone()).bounds();
        let mut powers: Vec<Hermitian<T>> = matrices.into_iter().map(Hermitian::Dense).collect();
        powers.resize(HIGHEST_POWER + 1, Hermitian::Zero(order));
        Self { powers, parity: None, scale: 1e-12 * (high - low), width: None }
    }

    pub(super) fn even(mut self) -> Self {
        self.parity = Some("for the test".into());
        self
    }

    /// Sine basis of a centred well of this width.
    pub(super) fn wide(mut self, width: f64) -> Self {
        self.width = Some(width);
        self
    }

    pub(super) fn shared(self) -> Rc<dyn Model<T>>
    where
        Self: Model<T> + 'static,
    {
        Rc::new(self)
    }

    fn sum(&self, weights: &[f64]) -> Hermitian<T> {
        let order = self.powers[0].order();
        let mut out = DMatrix::zeros(order, order);
        for (weight, matrix) in weights.iter().zip(&self.powers) {
            out += matrix.to_dense().scale(*weight);
        }
        Hermitian::Dense(out)
    }
}

impl<T: Scalar> Model<T> for Trial<T> {
    fn order(&self) -> usize {
        self.powers[0].order()
    }
    fn at(&self) -> f64 {
        0.0
    }
    fn expansion(&self, power: usize) -> &Hermitian<T> {
        &self.powers[power]
    }
    fn hamiltonian(&self, x: f64) -> Hermitian<T> {
        self.sum(&[1.0, x, x * x, x * x * x, x * x * x * x])
    }
    fn change(&self, x: f64) -> Hermitian<T> {
        self.sum(&[0.0, x, x * x, x * x * x, x * x * x * x])
    }
    fn slope(&self, x: f64) -> Hermitian<T> {
        Hermitian::Dense(
            self.powers[1].to_dense()
                + self.powers[2].to_dense().scale(2.0 * x)
                + self.powers[3].to_dense().scale(3.0 * x * x)
                + self.powers[4].to_dense().scale(4.0 * x * x * x),
        )
    }
    fn rates(&self, _: f64) -> [f64; HIGHEST_POWER] {
        std::array::from_fn(|power| self.powers[power + 1].half_spread())
    }
    fn parity(&self) -> Option<String> {
        self.parity.clone()
    }
    fn phase(&self, state: &State<T>) -> Option<T> {
        let first = state.iter().find(|x| x.modulus() > 1e-6)?;
        Some(first.conjugate().unscale(first.modulus()))
    }
    fn degeneracy_scale(&self) -> f64 {
        self.scale
    }
    fn envelope(&self, state: &State<T>, z: f64) -> Option<T> {
        let width = self.width?;
        let from_wall = z / width + 0.5;
        if !(0.0..=1.0).contains(&from_wall) {
            return Some(T::zero());
        }
        let sine =
            |k: usize| libm::sqrt(2.0 / width) * libm::sin((k + 1) as f64 * std::f64::consts::PI * from_wall);
        Some(state.iter().enumerate().fold(T::zero(), |sum, (k, x)| sum + x.scale(sine(k))))
    }
    fn quadrature(&self) -> Option<Vec<(f64, f64)>> {
        let width = self.width?;
        // Trapezia integrate products of sines exactly.
        let n = 200;
        Some((0..=n).map(|k| (width * (k as f64 / n as f64 - 0.5), width / n as f64)).collect())
    }
}

/// Real matrix from rows.
pub(super) fn real(order: usize, element: impl Fn(usize, usize) -> f64) -> DMatrix<f64> {
    DMatrix::from_fn(order, order, element)
}

pub(super) fn of<T: Scalar>(matrices: Vec<DMatrix<T>>, number: usize) -> Result<Level<T>> {
    level(&Trial::new(matrices).shared(), number)
}

/// Hard-walled well of width 1, `hbar^2/m = 1`, field energy `x` from the centre, sine basis.
pub(super) fn well(order: usize) -> Vec<DMatrix<f64>> {
    let pi = std::f64::consts::PI;
    let kinetic = real(order, |i, j| if i == j { 0.5 * pi * pi * ((i + 1) * (i + 1)) as f64 } else { 0.0 });
    let position = real(order, |i, j| {
        let (k, n) = ((i + 1) as f64, (j + 1) as f64);
        if (i + j) % 2 == 0 { 0.0 } else { -8.0 / (pi * pi) * k * n / ((k * k - n * n) * (k * k - n * n)) }
    });
    vec![kinetic, position]
}

/// `-d^2/dz^2 + 2 q cos 2z` on a circle of `2 pi`: even charges -2n to 2n, one block.
pub(super) fn mathieu(half: usize, odd: bool) -> Vec<DMatrix<f64>> {
    let order = 2 * half + 1 + usize::from(odd);
    let charge = |i: usize| 2.0 * (i as f64 - half as f64) - if odd { 1.0 } else { 0.0 };
    let kinetic = real(order, |i, j| if i == j { charge(i) * charge(i) } else { 0.0 });
    let cosine = real(order, |i, j| if i.abs_diff(j) == 1 { 1.0 } else { 0.0 });
    vec![kinetic, cosine]
}

fn close(found: f64, expected: f64, relative: f64, what: &str) {
    assert!(
        (found - expected).abs() <= relative * expected.abs().max(1e-300),
        "{what}: found {found:e}, expected {expected:e}"
    );
}

fn certain<T: Scalar>(level: &Level<T>, expected: &[f64]) {
    for (power, &value) in expected.iter().enumerate() {
        let error = (level.energies[power] - value).abs();
        assert!(
            error <= level.uncertainty[power],
            "E{power} = {:e}, expected {value:e}: error {error:e} above the stated {:e}",
            level.energies[power],
            level.uncertainty[power]
        );
        assert!(
            level.uncertainty[power] <= 1e-9 * level.largest_term[power].max(value.abs()).max(1e-3),
            "E{power}: the stated uncertainty {:e} is useless",
            level.uncertainty[power]
        );
    }
}

/// `(-1 - sqrt(1 + 4 x^2)) / 2` and its upper partner, expanded by hand.
#[test]
fn two_levels_follow_their_closed_form() {
    let h =
        || vec![real(2, |i, j| if i == 1 && j == 1 { -1.0 } else { 0.0 }), real(2, |i, j| f64::from(i != j))];
    certain(&of(h(), 1).unwrap(), &[-1.0, 0.0, -1.0, 0.0, 1.0, 0.0]);
    certain(&of(h(), 2).unwrap(), &[0.0, 0.0, 1.0, 0.0, -1.0, 0.0]);
}

/// `E2 = (pi^2 n^2 - 15)/(24 pi^4 n^4)`; the mixing of level 2 into level 1 is
/// `32/(27 pi^4)` and its share of E2 is 0.99867535. Sum over states in the sine basis.
/// Source: Fluegge, *Practical Quantum Mechanics*; matrix elements by direct integration.
/// Tolerance: terms fall as k^-8, so 160 states leave 1e-15.
#[test]
fn hard_walled_well_has_its_textbook_shift() {
    let pi = std::f64::consts::PI;
    for n in 1..=4 {
        let level = level(&Trial::new(well(160)).even().shared(), n).unwrap();
        let size = (n * n) as f64;
        let expected = (pi * pi * size - 15.0) / (24.0 * pi * pi * pi * pi * size * size);
        close(level.energies[2], expected, 1e-12, "E2");
        assert_eq!(level.energies[1], 0.0);
        assert_eq!(level.energies[3], 0.0);
        assert!(level.zero[1].is_some() && level.zero[2].is_none());
        if n == 1 {
            assert_eq!(level.contributions[0].level, Some(2));
            close(level.contributions[0].share, 0.998_675_35, 1e-8, "share of level 2");
            assert_eq!(level.contributions.len(), 1);
            // The attractive side has the sign of -x: level 2 mixes in with -<2|x|1>/(E2 - E1) > 0.
            close(level.mixing[0].coefficient, 32.0 / (27.0 * pi * pi * pi * pi), 1e-12, "mixing");
            assert_eq!(level.levels.len(), 12);
        }
    }
}

/// `p^2/2 + x^2/2 + g x^4`: E = 1/2 + 3/4 g - 21/8 g^2 + 333/16 g^3 - 30885/128 g^4 + 916731/256 g^5.
/// Source: Bender and Wu, Phys. Rev. 184, 1231 (1969). The matrix of 40 number states holds
/// every term up to the fifth order exactly.
#[test]
fn quartic_oscillator_has_the_published_rationals() {
    let n = 44;
    let x = real(n, |i, j| if i.abs_diff(j) == 1 { libm::sqrt(i.max(j) as f64 / 2.0) } else { 0.0 });
    let quartic = &x * &x * &x * &x;
    let cut = quartic.view((0, 0), (40, 40)).into_owned();
    let free = real(40, |i, j| if i == j { i as f64 + 0.5 } else { 0.0 });
    let level = of(vec![free, cut], 1).unwrap();
    let expected = [0.5, 0.75, -21.0 / 8.0, 333.0 / 16.0, -30885.0 / 128.0, 916_731.0 / 256.0];
    for (power, value) in expected.into_iter().enumerate() {
        close(level.energies[power], value, 1e-12, "coefficient");
    }
    certain(&level, &expected);
}

/// Transverse field on a spin 1: levels 0 (D - sqrt(D^2 + 4b^2))/2, D, (D + sqrt(D^2 + 4b^2))/2;
/// the upper two are degenerate and split at second order. Closed form.
#[test]
fn spin_one_splits_at_second_order() {
    let half = libm::sqrt(0.5);
    let h = || {
        vec![
            real(3, |i, j| if i == j && i != 1 { 2.0 } else { 0.0 }),
            real(3, |i, j| if i.abs_diff(j) == 1 { half } else { 0.0 }),
        ]
    };
    certain(&of(h(), 1).unwrap(), &[0.0, 0.0, -0.5, 0.0, 0.125, 0.0]);
    certain(&of(h(), 2).unwrap(), &[2.0, 0.0, 0.0, 0.0, 0.0, 0.0]);
    let top = level(&Trial::new(h()).even().shared(), 3).unwrap();
    certain(&top, &[2.0, 0.0, 0.5, 0.0, -0.125, 0.0]);
    assert_eq!(top.energies[1], 0.0);
    assert_eq!(top.set, vec![2, 3]);
    assert!(top.zero[3].is_some());
}

/// `a_m`, `b_m` of Mathieu's equation. Source: NIST DLMF 28.6.1 to 28.6.6. The
/// pairs are degenerate at q = 0 and split at order m.
#[test]
fn mathieu_pairs_split_at_their_order() {
    let even: [[f64; 6]; 5] = [
        [0.0, 0.0, -0.5, 0.0, 7.0 / 128.0, 0.0],
        [4.0, 0.0, -1.0 / 12.0, 0.0, 5.0 / 13824.0, 0.0],
        [4.0, 0.0, 5.0 / 12.0, 0.0, -763.0 / 13824.0, 0.0],
        [16.0, 0.0, 1.0 / 30.0, 0.0, -317.0 / 864_000.0, 0.0],
        [16.0, 0.0, 1.0 / 30.0, 0.0, 433.0 / 864_000.0, 0.0],
    ];
    for (idx, expected) in even.iter().enumerate() {
        certain(&of(mathieu(8, false), idx + 1).unwrap(), expected);
    }
    let odd: [[f64; 6]; 4] = [
        [1.0, -1.0, -0.125, 1.0 / 64.0, -1.0 / 1536.0, -11.0 / 36864.0],
        [1.0, 1.0, -0.125, -1.0 / 64.0, -1.0 / 1536.0, 11.0 / 36864.0],
        [9.0, 0.0, 1.0 / 16.0, -1.0 / 64.0, 13.0 / 20480.0, 5.0 / 16384.0],
        [9.0, 0.0, 1.0 / 16.0, 1.0 / 64.0, 13.0 / 20480.0, -5.0 / 16384.0],
    ];
    for (idx, expected) in odd.iter().enumerate() {
        certain(&of(mathieu(8, true), idx + 1).unwrap(), expected);
    }
    // b6 and a6 part at the sixth power only: degenerate as far as the series is known.
    let sixth = of(mathieu(8, false), 6).unwrap();
    close(sixth.energies[2], 1.0 / 70.0, 1e-12, "m = 6");
    assert!(sixth.notes.iter().any(|note| note.code == "degenerate"));
}

/// A complex matrix gives what the real one of the same problem gives: phases
/// on the basis change nothing.
#[test]
fn phases_of_the_basis_change_nothing() {
    let turn = |matrix: DMatrix<f64>| {
        let phase = |i: usize| C64::new(libm::cos(0.7 * i as f64), libm::sin(0.7 * i as f64));
        DMatrix::from_fn(matrix.nrows(), matrix.ncols(), |i, j| phase(i) * phase(j).conj() * matrix[(i, j)])
    };
    let level = of(mathieu(6, true).into_iter().map(turn).collect(), 1).unwrap();
    certain(&level, &[1.0, -1.0, -0.125, 1.0 / 64.0, -1.0 / 1536.0, -11.0 / 36864.0]);
}

/// Two states 1e-10 of the spread apart are neither degenerate nor safely apart.
#[test]
fn a_doubtful_gap_is_refused() {
    let h = vec![
        DMatrix::from_diagonal(&nalgebra::DVector::from_vec(vec![0.0, 1e-10, 1.0])),
        real(3, |i, j| f64::from(i != j)),
    ];
    let error = of(h, 1).err().unwrap();
    assert_eq!(error.diagnostics()[0].code, "near-degenerate");
    assert_eq!(of(well(5), 6).err().unwrap().diagnostics()[0].code, "no-such-level");
}

/// A flat charge level, EJ/EC = 30 at charge offset 1/8: E2 cancels to a millionth of its terms and
/// is still right to what is stated. Reference: sum over all states of the same 41-state matrix
/// with mpmath at 40 digits.
#[test]
fn a_flat_level_is_right_to_its_stated_uncertainty() {
    let (order, offset, ej) = (41, 0.125, 30.0);
    let charge = |i: usize| i as f64 - 20.0 - offset;
    let h = vec![
        real(order, |i, j| match i.abs_diff(j) {
            0 => 4.0 * charge(i) * charge(i),
            1 => -0.5 * ej,
            _ => 0.0,
        }),
        real(order, |i, j| if i == j { -8.0 * charge(i) } else { 0.0 }),
        real(order, |i, j| if i == j { 4.0 } else { 0.0 }),
    ];
    let level = of(h, 1).unwrap();
    let (first, second) = FLAT;
    let errors = [(level.energies[1] - first).abs(), (level.energies[2] - second).abs()];
    assert!(errors[0] <= level.uncertainty[1], "E1: {:e} above {:e}", errors[0], level.uncertainty[1]);
    assert!(errors[1] <= level.uncertainty[2], "E2: {:e} above {:e}", errors[1], level.uncertainty[2]);
    assert!(level.uncertainty[2] < 1e-6 * second.abs(), "{:e}", level.uncertainty[2]);
    assert!(level.notes.iter().any(|note| note.code == "cancellation"));
}

/// E1 and E2 of the level above.
const FLAT: (f64, f64) = (7.611365891768468e-05, 0.00023911989842472002);

/// Three-fold sets that split at first order, at second order, and at both. Reference: eigenvalues
/// of the same matrices at 16 small controls with mpmath at 90 digits, interpolated.
#[test]
fn threefold_sets_split_as_interpolated_at_ninety_digits() {
    for (case, expected) in SPLIT.iter().enumerate() {
        let entry = |i: usize, j: usize, seed: usize| {
            let (a, b) = (i.min(j), i.max(j));
            (((7 * a * a + 5 * b + 3 * a * b + seed) % 11) as f64 - 5.0) / 10.0
        };
        let free = real(6, |i, j| if i == j && i > 2 { (i - 2) as f64 } else { 0.0 });
        let first = real(6, |i, j| match (case, i < 3 && j < 3) {
            (1, true) => 0.0,
            (2, true) if i == j => [0.5, 0.5, -1.0][i],
            (2, true) => 0.0,
            _ => entry(i, j, 1),
        });
        let second = real(6, |i, j| entry(i, j, 4));
        for (idx, series) in expected.iter().enumerate() {
            certain(&of(vec![free.clone(), first.clone(), second.clone()], idx + 1).unwrap(), series);
        }
    }
}

/// E0 to E4 per case and level.
#[rustfmt::skip]
#[allow(clippy::excessive_precision)]
const SPLIT: [[[f64; 5]; 3]; 3] = [
    [
        [0.0, -0.6891828212585462, -0.21897782321426143, -0.23064262806768704, 0.14774861872676587],
        [0.0, -0.14616242657189582, -0.1591006503055479, 0.4113971057044356, -0.517951294074389],
        [0.0, 0.6353452478304421, 0.6030784735198094, 0.05835663347436257, -0.28417926909682134],
    ],
    [
        [0.0, 0.0, -0.491619434066486, 0.34590100598318857, -0.22649889716552973],
        [0.0, 0.0, 0.11244699238735849, -0.24206364960353982, -0.3370448958462576],
        [0.0, 0.0, 0.6041724416791275, 0.03849597695368457, -0.11793537365487936],
    ],
    [
        [0.0, -1.0, 0.4266666666666667, -0.3487037037037037, -0.29809798353909467],
        [0.0, 0.5, -0.4702031043999134, 0.3312034583991354, -0.0022454919115433712],
        [0.0, 0.5, 0.26853643773324676, 0.05191691197123495, 0.009940697672860243],
    ],
];

/// Beyond the order that is solved whole, closure encloses the part of the states that are not
/// computed: the same well in 640 sine states. Source and tolerance as for the smaller one.
#[test]
fn a_large_basis_is_checked_by_closure() {
    let level = level(&Trial::new(well(640)).even().shared(), 2).unwrap();
    let pi = std::f64::consts::PI;
    let expected = (4.0 * pi * pi - 15.0) / (24.0 * pi * pi * pi * pi * 16.0);
    close(level.energies[2], expected, 1e-11, "E2");
    assert!(level.uncertainty[2] < 1e-9 * expected, "{:e}", level.uncertainty[2]);
    assert_eq!(level.levels.len(), 12);
}
