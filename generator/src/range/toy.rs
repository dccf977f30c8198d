//! Closed-form systems against which ranges are held.

use std::rc::Rc;

use nalgebra::DMatrix;

use super::{Candidate, Formal, Limit, OverlapRequest, Ranged, Request, Term, follow, follow_overlap};
use crate::diagnostic::Result;
use crate::form::Form;
use crate::model::{HIGHEST_POWER, Model};
use crate::pencil::{Hermitian, State};
use crate::series::{AnyLevel, level};

/// `h0 + x h1`, operating point 0, with an edge that may fall with `x`.
struct Linear {
    powers: Vec<Hermitian<f64>>,
    edge: Option<(f64, f64)>,
}

impl Linear {
    fn at(&self, weights: [f64; 2]) -> Hermitian<f64> {
        let sum = self.powers[0].to_dense() * weights[0] + self.powers[1].to_dense() * weights[1];
        Hermitian::Dense(sum)
    }
}

impl Model<f64> for Linear {
    fn order(&self) -> usize {
        self.powers[0].order()
    }
    fn at(&self) -> f64 {
        0.0
    }
    fn expansion(&self, power: usize) -> &Hermitian<f64> {
        &self.powers[power]
    }
    fn hamiltonian(&self, x: f64) -> Hermitian<f64> {
        self.at([1.0, x])
    }
    fn change(&self, x: f64) -> Hermitian<f64> {
        self.at([0.0, x])
    }
    fn slope(&self, _: f64) -> Hermitian<f64> {
        self.at([0.0, 1.0])
    }
    fn rates(&self, _: f64) -> [f64; HIGHEST_POWER] {
        [self.powers[1].half_spread(), 0.0, 0.0, 0.0]
    }
    fn escape_edge(&self, x: f64) -> Option<f64> {
        self.edge.map(|(height, slope)| height - slope * x.abs())
    }
    // Basis states stand at whole-numbered positions.
    fn envelope(&self, state: &State<f64>, position: f64) -> Option<f64> {
        state.get(position as usize).copied()
    }
    fn quadrature(&self) -> Option<Vec<(f64, f64)>> {
        Some((0..self.order()).map(|k| (k as f64, 1.0)).collect())
    }
    fn degeneracy_scale(&self) -> f64 {
        1e-12
    }
    fn energy(&self, x: f64, state: &State<f64>) -> f64 {
        self.hamiltonian(x).element(state, state) / state.norm_squared()
    }
}

fn solved(h0: &[f64], h1: &[f64], number: usize, edge: Option<(f64, f64)>) -> AnyLevel {
    let n = h0.len().isqrt();
    let dense = |entries: &[f64]| Hermitian::Dense(DMatrix::from_row_slice(n, n, entries));
    let mut powers = vec![dense(h0), dense(h1)];
    powers.resize(HIGHEST_POWER + 1, Hermitian::Zero(n));
    let model: Rc<dyn Model<f64>> = Rc::new(Linear { powers, edge });
    AnyLevel::Real(Box::new(level(&model, number).unwrap()))
}

fn measured(
    level: &AnyLevel,
    coefficients: &[f64],
    tolerance: f64,
    within: (f64, f64),
    known: &dyn Fn(f64) -> f64,
    rounding: f64,
) -> Result<Ranged> {
    let base = level.energies()[0];
    let terms = vec![Term { times: 1.0, system: "toy", level }];
    let request = Request { at: 0.0, within, terms, known_change: known, base, tolerance };
    let form = Form::Polynomial { coefficients: coefficients.to_vec() };
    let zero = |_: f64| 0.0;
    follow(&request)?.measure(&Candidate { form: &form, numerical: &zero, written: &zero, rounding })
}

fn none(_: f64) -> f64 {
    0.0
}

/// `E = -sqrt(1 + x^2)` against `-1 - x^2/2`: the remainder is
/// `u^2 / 2` with `u = sqrt(1 + x^2) - 1`, exactly.
#[test]
fn a_two_level_system_ends_where_its_closed_form_says() {
    let level = solved(&[-1.0, 0.0, 0.0, 1.0], &[0.0, 1.0, 1.0, 0.0], 1, None);
    let tolerance = 1e-3;
    let end = |error: f64| {
        let u = libm::sqrt(2.0 * error);
        libm::sqrt((1.0 + u) * (1.0 + u) - 1.0)
    };
    let ranged = measured(&level, &[-1.0, 0.0, -0.5], tolerance, (-1.0, 1.0), &none, 0.0).unwrap();
    assert!((ranged.valid.1 / end(1e-3) - 1.0).abs() < 1e-9, "{:?}", ranged.valid);
    assert!((ranged.valid.0 / end(1e-3) + 1.0).abs() < 1e-9, "{:?}", ranged.valid);
    assert_eq!(ranged.limited_by, [Limit::Remainder; 2]);
    let wide = measured(&level, &[-1.0, 0.0, -0.5], tolerance, (-0.2, 0.2), &none, 0.0).unwrap();
    assert_eq!((wide.valid, wide.limited_by), ((-0.2, 0.2), [Limit::Within; 2]));
    assert!((wide.first_to_fail[1].unwrap() / end(1e-3) - 1.0).abs() < 1e-9);
    for sample in &wide.samples {
        let exact = -libm::sqrt(1.0 + sample.control * sample.control);
        assert!((sample.exact - exact).abs() < 1e-14);
    }
    let rounded = measured(&level, &[-1.0, 0.0, -0.5], tolerance, (-0.28, 0.28), &none, 5e-4).unwrap();
    assert!((rounded.valid.1 / end(5e-4) - 1.0).abs() < 1e-6);
    assert_eq!(rounded.limited_by, [Limit::Rounding; 2]);
    assert!(measured(&level, &[-1.1], tolerance, (-1.0, 1.0), &none, 0.0).is_err());
}

/// Levels `x` and `1 - x` with half gap `w` at `x = 1/2`; the lower one turns away
/// from the formula `x` by 1.2 to 4 tolerances there. Beyond, the formula is the other level.
#[test]
fn no_narrow_crossing_is_missed_wherever_it_hides() {
    for case in 0..60 {
        let place = 0.2 + 0.6 * f64::from(case * 37 % 60) / 60.0;
        let half = 1e-3 * (1.2 + 2.8 * f64::from(case) / 60.0);
        let level = solved(&[0.0, half, half, 2.0 * place], &[1.0, 0.0, 0.0, -1.0], 1, None);
        let coefficients = [level.energies()[0], level.energies()[1]];
        let ranged = measured(&level, &coefficients, 1e-3, (0.0, 1.0), &none, 0.0).unwrap();
        let exact = |x: f64| place - libm::sqrt((x - place) * (x - place) + half * half);
        let error = |x: f64| (coefficients[0] + coefficients[1] * x - exact(x)).abs();
        assert!(ranged.valid.1 < place, "{place} {half}");
        assert!((error(ranged.valid.1) / 1e-3 - 1.0).abs() < 1e-4, "{place} {half}");
        assert_eq!(ranged.limited_by, [Limit::Within, Limit::Crossing], "{place} {half}");
    }
}

/// Level 0 flat, other level at 10; the edge is `1 - x`, tolerance 0.01: escape at 0.99.
/// A sum with `sqrt(1 - x)`-like knowledge is undefined from there on.
#[test]
fn ranges_end_at_the_escape_edge_and_where_nothing_is_defined() {
    let flat = |edge| solved(&[0.0, 0.0, 0.0, 10.0], &[0.0, 1e-3, 1e-3, 0.0], 1, edge);
    let ranged = measured(&flat(Some((1.0, 1.0))), &[0.0], 0.01, (-0.5, 2.0), &none, 0.0).unwrap();
    assert!((ranged.valid.1 - 0.99).abs() < 1e-6, "{:?}", ranged.valid);
    assert_eq!(ranged.limited_by, [Limit::Within, Limit::Escape]);
    let known = |x: f64| if x > 0.75 { f64::NAN } else { 0.0 };
    let ranged = measured(&flat(None), &[0.0], 0.01, (-0.5, 2.0), &known, 0.0).unwrap();
    assert!((ranged.valid.1 - 0.75).abs() < 1e-9, "{:?}", ranged.valid);
    assert_eq!(ranged.limited_by[1], Limit::Undefined);
}

/// Uncoupled levels `x` and `1 - x` cross at 1/2: the state goes on as `x`, and as
/// `x` again beyond a second crossing with `0.8 + 0 x` at 0.8.
#[test]
fn exact_crossings_are_stepped_over() {
    let h0 = [0.0, 0.0, 0.0, 0.0, 1.0, 0.0, 0.0, 0.0, 0.8];
    let h1 = [1.0, 0.0, 0.0, 0.0, -1.0, 0.0, 0.0, 0.0, 0.0];
    let level = solved(&h0, &h1, 1, None);
    let ranged = measured(&level, &[0.0, 1.0], 1e-6, (-0.5, 1.0), &none, 0.0).unwrap();
    assert_eq!((ranged.valid, ranged.limited_by), ((-0.5, 1.0), [Limit::Within; 2]));
    assert!(ranged.remainder < 1e-9, "{}", ranged.remainder);
    assert_eq!(ranged.notes.iter().filter(|note| note.code == "crossing").count(), 2, "{:?}", ranged.notes);
    for sample in &ranged.samples {
        assert!((sample.exact - sample.control).abs() < 1e-13, "{sample:?}");
    }
}

/// Levels `x` and `1 - x` with half gap `w` well below the tolerance: the state goes
/// over, and `|formula - mean| + w` counts as remainder. The formula `c0 + c1 x` is the
/// series of the lower level; the mean at the crossing is 1/2.
#[test]
fn narrow_crossings_within_the_tolerance_are_stepped_over() {
    for half in [1e-7, 1e-5, 2e-4, 7e-4] {
        let level = solved(&[0.0, half, half, 1.0], &[1.0, 0.0, 0.0, -1.0], 1, None);
        let form = [level.energies()[0], level.energies()[1]];
        let ranged = measured(&level, &form, 1e-3, (0.0, 1.0), &none, 0.0).unwrap();
        assert_eq!((ranged.valid, ranged.limited_by), ((0.0, 1.0), [Limit::Within; 2]), "{half}");
        let sum = (form[0] + 0.5 * form[1] - 0.5).abs() + half;
        assert!((ranged.remainder - sum).abs() < 1e-4 * sum, "{half}: {} {sum}", ranged.remainder);
        assert!(ranged.notes.iter().any(|note| note.code == "crossing"));
        let last = ranged.samples.last().unwrap();
        assert!((last.exact - 0.5 - libm::sqrt(0.25 + half * half)).abs() < 1e-12);
    }
}

/// `h1` mixes two levels that are degenerate at 0 and far from others: `E = -+ s x`
/// with `s = sqrt(1 + 0.25)`, followed through 0 with its slope.
#[test]
fn a_degenerate_pair_is_followed_through_the_operating_point() {
    let slope = libm::sqrt(1.25);
    for (number, sign) in [(1, -1.0), (2, 1.0)] {
        let level = solved(&[0.0; 4], &[1.0, 0.5, 0.5, -1.0], number, None);
        let ranged = measured(&level, &[0.0, sign * slope], 1e-6, (-1.0, 1.0), &none, 0.0).unwrap();
        assert_eq!((ranged.valid, ranged.limited_by), ((-1.0, 1.0), [Limit::Within; 2]));
        for sample in &ranged.samples {
            assert!((sample.exact - sign * slope * sample.control).abs() < 1e-13, "{sample:?}");
        }
    }
}

/// Three levels that leave 0 with slopes -1, 0, 1, the outer two bent by a fourth level at
/// 10: the middle one stays 0, the lower one is the lowest eigenvalue of
/// `[[-x, c x], [c x, 10]]` with `c = 1`: `(10 - x - sqrt((10 + x)^2 + 4 x^2)) / 2` for either sign of x.
#[test]
fn a_degenerate_triple_is_followed_by_overlap() {
    let mut h0 = [0.0; 16];
    h0[15] = 10.0;
    let mut h1 = [0.0; 16];
    (h1[0], h1[10], h1[3], h1[12]) = (-1.0, 1.0, 1.0, 1.0);
    let exact = |x: f64| 0.5 * (10.0 - x - libm::sqrt((10.0 + x) * (10.0 + x) + 4.0 * x * x));
    let level = solved(&h0, &h1, 1, None);
    let ranged = measured(&level, &[0.0, -1.0, -0.1], 0.01, (-2.0, 2.0), &none, 0.0).unwrap();
    for sample in &ranged.samples {
        assert!((sample.exact - exact(sample.control)).abs() < 1e-12, "{sample:?}");
    }
    for end in [ranged.valid.0, ranged.valid.1] {
        let error = (-end - 0.1 * end * end - exact(end)).abs();
        assert!((error / 0.01 - 1.0).abs() < 1e-7, "{end} {error}");
    }
    assert!(ranged.notes.iter().any(|note| note.code == "sampled"));
}

/// Two equal copies of a two-level system: degenerate for good, followed as one.
#[test]
fn levels_degenerate_for_good_are_followed_as_one() {
    let h0 = [-1.0, 0.0, 0.0, 0.0, 0.0, 1.0, 0.0, 0.0, 0.0, 0.0, -1.0, 0.0, 0.0, 0.0, 0.0, 1.0];
    let h1 = [0.0, 1.0, 0.0, 0.0, 1.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 1.0, 0.0, 0.0, 1.0, 0.0];
    let level = solved(&h0, &h1, 1, None);
    let ranged = measured(&level, &[-1.0, 0.0, -0.5], 1e-3, (-1.0, 1.0), &none, 0.0).unwrap();
    let u = libm::sqrt(2e-3);
    let end = libm::sqrt((1.0 + u) * (1.0 + u) - 1.0);
    assert!((ranged.valid.1 / end - 1.0).abs() < 1e-8, "{:?}", ranged.valid);
}

/// The ground state of `[[-1, x], [x, 1]]` turns by half the angle whose tangent is `x`, so its
/// squared overlap with the state at 0 is `(1 + 1 / sqrt(1 + x^2)) / 2 = 1 - x^2 / 4 + ...`.
#[test]
fn a_squared_overlap_ends_where_its_closed_form_says() {
    let a = solved(&[-1.0, 0.0, 0.0, 1.0], &[0.0, 1.0, 1.0, 0.0], 1, None);
    let b = solved(&[-1.0, 0.0, 0.0, 1.0], &[0.0; 4], 1, None);
    let request = OverlapRequest {
        at: 0.0,
        within: (-1.0, 1.0),
        systems: ["a", "b"],
        levels: [&a, &b],
        base: 1.0,
        tolerance: 1e-3,
    };
    let form = Form::Polynomial { coefficients: vec![1.0, 0.0, -0.25] };
    let zero = |_: f64| 0.0;
    let candidate = Candidate { form: &form, numerical: &zero, written: &zero, rounding: 0.0 };
    let followed = follow_overlap(&request).unwrap();
    let ranged = followed.measure(&candidate).unwrap();
    let exact = |x: f64| 0.5 + 0.5 / libm::sqrt(1.0 + x * x);
    for end in [ranged.valid.0, ranged.valid.1] {
        let error = (exact(end) - 1.0 + 0.25 * end * end).abs();
        assert!((error / 1e-3 - 1.0).abs() < 1e-8, "{end} {error}");
    }
    assert_eq!(ranged.limited_by, [Limit::Remainder; 2]);
    for sample in &ranged.samples {
        assert!((sample.exact - exact(sample.control)).abs() < 1e-14);
    }
    let energies = followed.exact_energies(0.75).unwrap();
    assert_eq!(energies.len(), 2);
    assert!((energies[0].2 + 1.25).abs() < 1e-14 && (energies[1].2 + 1.0).abs() < 1e-14);
}

/// `d^4` alone reaches half of 2e-4 at 0.1; with `3 d^6 / 0.01` on top both reach 4 d^4 there.
#[test]
fn formal_ranges_end_at_half_the_tolerance() {
    let form = Form::Polynomial { coefficients: vec![0.0] };
    let zero = |_: f64| 0.0;
    let candidate = Candidate { form: &form, numerical: &zero, written: &zero, rounding: 0.0 };
    for (next, tolerance) in [(vec![(4, -1.0)], 2e-4), (vec![(4, 1.0), (6, -300.0)], 8e-4)] {
        let formal = Formal { at: 2.0, within: (1.0, 2.05), next: &next, tolerance };
        let ranged = formal.measure(&candidate).unwrap();
        assert!((ranged.valid.0 - 1.9).abs() < 1e-12 && ranged.valid.1 == 2.05, "{:?}", ranged.valid);
        assert_eq!(ranged.limited_by, [Limit::Formal, Limit::Within]);
        assert!((ranged.remainder - 0.5 * tolerance).abs() < 1e-12);
        assert_eq!(ranged.first_to_fail[0], Some(ranged.valid.0));
    }
}

/// A formula between the two levels of a gap of 0.9 tolerances, its distance from the mean
/// 0.7 tolerances there: the state does not go over, and the range ends where the level
/// by number turns away.
#[test]
fn crossings_that_the_form_misses_are_not_stepped_over() {
    let (tolerance, half) = (1e-3, 0.45e-3);
    let level = solved(&[0.0, half, half, 1.0], &[1.0, 0.0, 0.0, -1.0], 1, None);
    let lower = |x: f64| 0.5 - libm::sqrt((x - 0.5) * (x - 0.5) + half * half);
    let form = [level.energies()[0], level.energies()[1] - 1.4e-3];
    let ranged = measured(&level, &form, tolerance, (0.0, 1.0), &none, 0.0).unwrap();
    let error = (form[0] + form[1] * ranged.valid.1 - lower(ranged.valid.1)).abs();
    assert!((error / tolerance - 1.0).abs() < 1e-6, "{:?} {error}", ranged.valid);
    assert!(ranged.valid.1 > 0.5 && ranged.valid.1 < 0.503, "{:?}", ranged.valid);
    assert_eq!(ranged.limited_by[1], Limit::Crossing);
}

/// The error `d^2 (1 - d^2)` has its peak of 1/4 at `1 / sqrt 2`: a tolerance a ten-millionth
/// above it is grazed there, one a thousandth above is not.
#[test]
fn a_grazed_tolerance_ends_the_range() {
    let level = solved(&[0.0], &[0.0], 1, None);
    let form = [0.0, 0.0, 1.0, 0.0, -1.0];
    for (above, grazed) in [(1e-7, true), (1e-3, false)] {
        let ranged = measured(&level, &form, 0.25 * (1.0 + above), (0.0, 1.1), &none, 0.0).unwrap();
        assert_eq!(ranged.notes.iter().any(|note| note.code == "grazing"), grazed);
        assert_eq!(ranged.valid.1 < 0.8, grazed, "{:?}", ranged.valid);
    }
}
