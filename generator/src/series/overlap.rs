//! Squared overlap of two envelopes as a power series of the control.
//!
//! In: two levels of systems with envelopes, on a common position `z - z0`;
//! their meshes may differ. Out: powers 0 to 4 of `|<a|b>|^2 / (<a|a><b|b>)`.
//!
//! Method: the states to fourth order in intermediate normalisation,
//!
//! ```text
//! (H_0 - E_0) a_k = -Q [sum_c H_c a_(k-c) - sum_i E_i a_(k-i)],  c from 1 to k, i from 1 to k - 1
//! ```
//!
//! and the series of the quotient. Products of envelopes of different meshes are
//! integrated between all nodes of both, so no kink falls inside a piece.
//!
//! Not here: the exact overlap away from the operating point; [`squared_overlap`]
//! is its last step.

use super::effective::COEFFICIENTS;
use super::product::inner;
use super::{AnyLevel, Level, SAFETY};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::model::{C64, HIGHEST_POWER, Model};
use crate::pencil::{Scalar, State, reduced_solve};

/// Powers of an overlap series.
const POWERS: usize = HIGHEST_POWER + 1;

/// Nodes and weights of the Gauss-Legendre rule with 8 points on [-1, 1], positive half.
/// Source: Abramowitz and Stegun, *Handbook of Mathematical Functions*, table 25.4.
const GAUSS: [(f64, f64); 4] = [
    (0.183_434_642_495_649_8, 0.362_683_783_378_362),
    (0.525_532_409_916_329, 0.313_706_645_877_887_3),
    (0.796_666_477_413_626_7, 0.222_381_034_453_374_5),
    (0.960_289_856_497_536_2, 0.101_228_536_290_376_3),
];

/// The series of a squared overlap.
#[derive(Clone, Debug, PartialEq)]
pub struct OverlapSeries {
    /// Powers 0 to 4, per control unit to the k.
    pub coefficients: [f64; POWERS],
    /// Estimated error of each, times 4; without the change with refinement.
    pub uncertainty: [f64; POWERS],
    /// Why a coefficient is exactly zero.
    pub zero: [Option<String>; POWERS],
}

/// The squared overlap of two levels as a series.
///
/// # Errors
/// `no-envelope` (spec) for a system without a position; `degenerate-overlap` (spec) for a
/// level that is degenerate at the operating point, whose state is not unique.
pub fn overlap(a: &AnyLevel, b: &AnyLevel) -> Result<OverlapSeries> {
    let (left, right) = (Expanded::new(a)?, Expanded::new(b)?);
    let points = points(a, b)?;
    let (left_waves, right_waves) = (left.waves(&points)?, right.waves(&points)?);
    let mut cross = [C64::new(0.0, 0.0); POWERS];
    for power in 0..POWERS {
        for low in 0..=power {
            for (k, (_, weight)) in points.iter().enumerate() {
                cross[power] += left_waves[low][k].conj() * right_waves[power - low][k] * *weight;
            }
        }
    }
    let square: [f64; POWERS] = std::array::from_fn(|power| {
        (0..=power).fold(0.0, |sum, low| sum + (cross[low] * cross[power - low].conj()).re)
    });
    let norm = multiply(&left.norm, &right.norm);
    let mut coefficients = [0.0; POWERS];
    for power in 0..POWERS {
        let taken = (0..power).fold(0.0, |sum, low| sum + coefficients[low] * norm[power - low]);
        coefficients[power] = square[power] - taken;
    }
    let mut uncertainty = [0.0; POWERS];
    for (power, slot) in uncertainty.iter_mut().enumerate() {
        for low in 0..=power {
            let high = power - low;
            *slot += 2.0 * SAFETY * (left.doubt[low] * right.size[high] + left.size[low] * right.doubt[high]);
        }
    }
    let mut zero: [Option<String>; POWERS] = Default::default();
    if let (Some(one), Some(_)) = (left.parity, right.parity) {
        for power in [1, 3] {
            coefficients[power] = 0.0;
            uncertainty[power] = 0.0;
            zero[power] = Some(one.clone());
        }
    }
    Ok(OverlapSeries { coefficients, uncertainty, zero })
}

/// Points and weights that integrate products of an envelope of each level.
///
/// # Errors
/// `no-envelope` (spec).
pub fn points(a: &AnyLevel, b: &AnyLevel) -> Result<Vec<(f64, f64)>> {
    let (Some(left), Some(right)) = (quadrature(a), quadrature(b)) else {
        return Err(no_envelope());
    };
    if left == right {
        return Ok(left);
    }
    let mut nodes: Vec<f64> = left.iter().chain(&right).map(|point| point.0).collect();
    nodes.sort_by(f64::total_cmp);
    let mut out = Vec::with_capacity(8 * nodes.len());
    for pair in nodes.windows(2) {
        let (middle, half) = (0.5 * (pair[0] + pair[1]), 0.5 * (pair[1] - pair[0]));
        if half <= 0.0 {
            continue;
        }
        for &(node, weight) in GAUSS.iter().rev() {
            out.push((middle - half * node, half * weight));
        }
        for &(node, weight) in &GAUSS {
            out.push((middle + half * node, half * weight));
        }
    }
    Ok(out)
}

/// `|<a|b>|^2` of two normalised envelopes sampled on the same points.
#[must_use]
pub fn squared_overlap(points: &[(f64, f64)], a: &[C64], b: &[C64]) -> f64 {
    let mut sum = C64::new(0.0, 0.0);
    for ((point, x), y) in points.iter().zip(a).zip(b) {
        sum += x.conj() * y * point.1;
    }
    sum.norm_sqr()
}

/// A state's envelope on given points.
///
/// # Errors
/// `no-envelope` (spec).
pub fn wave<T: Scalar>(model: &dyn Model<T>, state: &State<T>, points: &[(f64, f64)]) -> Result<Vec<C64>> {
    points
        .iter()
        .map(|&(z, _)| {
            model.envelope(state, z).map(|x| C64::new(x.real(), x.imaginary())).ok_or_else(no_envelope)
        })
        .collect()
}

fn no_envelope() -> Error {
    Error::spec(
        Diagnostic::new("no-envelope", "an overlap needs two systems with a position")
            .expected("two systems of `kind: layers`")
            .action("ask for the levels themselves with `sum`"),
    )
}

fn quadrature(level: &AnyLevel) -> Option<Vec<(f64, f64)>> {
    crate::with_level!(level, level => level.model.quadrature())
}

fn multiply(a: &[f64; POWERS], b: &[f64; POWERS]) -> [f64; POWERS] {
    std::array::from_fn(|power| (0..=power).fold(0.0, |sum, low| sum + a[low] * b[power - low]))
}

/// States of one level to fourth order, in either field.
enum States<'a> {
    Real(&'a Level<f64>, Vec<State<f64>>),
    Complex(&'a Level<C64>, Vec<State<C64>>),
}

struct Expanded<'a> {
    states: States<'a>,
    norm: [f64; POWERS],
    size: [f64; POWERS],
    doubt: [f64; POWERS],
    parity: Option<String>,
}

impl<'a> Expanded<'a> {
    fn new(level: &'a AnyLevel) -> Result<Self> {
        match level {
            AnyLevel::Real(level) => {
                let (states, norm, size, doubt) = expand(level)?;
                let parity = level.model.parity();
                Ok(Self { states: States::Real(level, states), norm, size, doubt, parity })
            }
            AnyLevel::Complex(level) => {
                let (states, norm, size, doubt) = expand(level)?;
                let parity = level.model.parity();
                Ok(Self { states: States::Complex(level, states), norm, size, doubt, parity })
            }
        }
    }

    fn waves(&self, points: &[(f64, f64)]) -> Result<Vec<Vec<C64>>> {
        match &self.states {
            States::Real(level, states) => {
                states.iter().map(|state| wave(level.model.as_ref(), state, points)).collect()
            }
            States::Complex(level, states) => {
                states.iter().map(|state| wave(level.model.as_ref(), state, points)).collect()
            }
        }
    }
}

type Parts<T> = (Vec<State<T>>, [f64; POWERS], [f64; POWERS], [f64; POWERS]);

/// States 0 to 4, the series of their squared norm, their norms and estimated errors.
fn expand<T: Scalar>(level: &Level<T>) -> Result<Parts<T>> {
    if level.set.len() != 1 {
        return Err(Error::spec(
            Diagnostic::new("degenerate-overlap", "the state of a degenerate level is not unique")
                .found(format!("level {} with {} others at its energy", level.number, level.set.len() - 1))
                .action("select one by `where`, or move the operating point"),
        ));
    }
    let model = level.model.as_ref();
    let matrix = model.expansion(0);
    let energy = level.energies[0];
    let space = [level.state.clone()];
    let mut states = vec![level.state.clone(), level.corrections[0].clone(), level.corrections[1].clone()];
    for power in 3..POWERS.min(COEFFICIENTS) {
        let mut right = State::zeros(model.order());
        for c in 1..=power {
            right -= model.expansion(c).apply(&states[power - c]);
        }
        for i in 1..power {
            right.axpy(T::from_real(level.energies[i]), &states[power - i], T::one());
        }
        states.push(reduced_solve(matrix, energy, &space, &right)?);
    }
    let norm = std::array::from_fn(|power| {
        (0..=power).fold(0.0, |sum, low| sum + inner(&states[low], &states[power - low]).real())
    });
    let size = std::array::from_fn(|power| states[power].norm());
    // The zeroth-order residual over the gap is the error of the state; each
    // further solve multiplies it as it multiplies the norm.
    let mut rest = matrix.apply(&level.state);
    rest.axpy(T::from_real(-energy), &level.state, T::one());
    let gap = level
        .levels
        .iter()
        .map(|other| (other - energy).abs())
        .filter(|gap| *gap > 0.0)
        .fold(f64::INFINITY, f64::min);
    let relative = (rest.norm() / gap).max(4.0 * f64::EPSILON);
    let doubt = std::array::from_fn(|power| relative * (power + 1) as f64 * size[power]);
    Ok((states, norm, size, doubt))
}

#[cfg(test)]
mod tests {
    use super::super::level;
    use super::super::trial::{Trial, well};
    use super::*;

    /// Integrates every polynomial up to degree 15.
    #[test]
    fn the_gauss_rule_is_exact_to_degree_fifteen() {
        for power in (0..16).step_by(2) {
            let sum: f64 = GAUSS.iter().map(|(x, w)| 2.0 * w * (0..power).fold(1.0, |p, _| p * x)).sum();
            assert!((sum - 2.0 / (power as f64 + 1.0)).abs() < 1e-15, "{power}");
        }
    }

    /// Two opposite charges in one hard-walled well, the second with half the response: O = 1 - d^2
    /// sum (c_k + c_k/2)^2 + ..., the amplitudes c_k from the matrix elements of the textbook (Fluegge,
    /// *Practical Quantum Mechanics*).
    #[test]
    fn opposite_charges_in_one_well_lose_overlap() {
        let mut holes = well(60);
        holes[1] *= -0.5;
        let electron =
            AnyLevel::Real(Box::new(level(&Trial::new(well(60)).even().wide(1.0).shared(), 1).unwrap()));
        let hole = AnyLevel::Real(Box::new(level(&Trial::new(holes).even().wide(1.0).shared(), 1).unwrap()));
        let found = overlap(&electron, &hole).unwrap();
        let pi = std::f64::consts::PI;
        let mut sum = 0.0;
        for k in (2..=60).step_by(2) {
            let k = k as f64;
            let amplitude =
                8.0 / (pi * pi) * k / ((k * k - 1.0) * (k * k - 1.0)) / (0.5 * pi * pi * (k * k - 1.0));
            sum += 2.25 * amplitude * amplitude;
        }
        assert!((found.coefficients[0] - 1.0).abs() < 1e-12);
        assert_eq!(found.coefficients[1], 0.0);
        assert!(
            (found.coefficients[2] + sum).abs() < 1e-12 * sum.max(1e-3),
            "{:e} {sum:e}",
            found.coefficients[2]
        );
    }

    /// Ground states of hard-walled wells of widths 1 and 3/2, centred: closed form of the overlap,
    /// and the fourth-order series against overlaps of re-solved states at a small field.
    #[test]
    fn wells_of_different_width_overlap_as_integrated_by_hand() {
        let narrow = Trial::new(well(60)).even().wide(1.0).shared();
        let wide = Trial::new(well(60)).even().wide(1.5).shared();
        let a = AnyLevel::Real(Box::new(level(&narrow, 1).unwrap()));
        let b = AnyLevel::Real(Box::new(level(&wide, 1).unwrap()));
        let found = overlap(&a, &b).unwrap();
        let pi = std::f64::consts::PI;
        // integral of 2/sqrt(3/2) cos(pi z) cos(2 pi z/3) over [-1/2, 1/2]
        let (p, q) = (pi / 3.0, 5.0 * pi / 3.0);
        let expected = libm::sqrt(8.0 / 3.0) * (libm::sin(p / 2.0) / p + libm::sin(q / 2.0) / q);
        assert!((found.coefficients[0] - expected * expected).abs() < 1e-12);
        let grid = points(&a, &b).unwrap();
        for d in [2.0, -2.0] {
            let at = |model: &std::rc::Rc<dyn Model<f64>>| {
                let state = crate::pencil::eigenpair(&model.hamiltonian(d), 1).unwrap().state;
                wave(model.as_ref(), &state, &grid).unwrap()
            };
            let exact = squared_overlap(&grid, &at(&narrow), &at(&wide));
            let series = crate::form::horner(&found.coefficients, d);
            let dropped = (exact - found.coefficients[0]).abs();
            assert!(dropped > 1e-4, "{dropped:e}");
            assert!((exact - series).abs() < 1e-2 * dropped, "{exact} {series} {:?}", found.coefficients);
        }
    }
}
