//! Mean and squared half gap of two levels.
//!
//! Both are symmetric functions of the pair, so they stay smooth where the
//! levels come close or meet. With the effective matrix `W(d)` of the pair,
//!
//! ```text
//! mean = (W_11 + W_22)/2,  half_gap_squared = ((W_11 - W_22)/2)^2 + |W_12|^2
//! ```
//!
//! a sum of squares, without cancellation.
//!
//! Not here: when a paired form is better than a polynomial.

use std::rc::Rc;

use super::PairSeries;
use super::effective::{Effective, Space, effective};
use super::level::{SAFETY, Set, branches, level};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::model::{AnyModel, Built, HIGHEST_POWER, Model};
use crate::pencil::{Hermitian, Scalar, State};

/// A coupling below this part of the largest term is rounding.
const COUPLED: f64 = 1e-10;

/// Powers of a pair series.
const POWERS: usize = 5;

/// The pair series of level `number` with `partner`, or with the level nearest
/// in energy that `H_1` or the second-order effective operator couples to it.
///
/// # Errors
/// `no-such-level` and `no-partner` (spec); those of the solves.
pub fn pair(built: &Built, number: usize, partner: Option<usize>) -> Result<PairSeries> {
    let (number, partner) =
        (built.number(number)?, partner.map(|partner| built.number(partner)).transpose()?);
    match &built.model {
        AnyModel::Real(model) => pair_of(model, number, partner),
        AnyModel::Complex(model) => pair_of(model, number, partner),
    }
}

/// [`pair`] for a model of known field.
///
/// # Errors
/// As [`pair`].
pub fn pair_of<T: Scalar>(
    model: &Rc<dyn Model<T>>,
    number: usize,
    partner: Option<usize>,
) -> Result<PairSeries> {
    if partner == Some(number) {
        return Err(Error::spec(
            Diagnostic::new("no-partner", format!("level {number} cannot be its own partner"))
                .action("name another level as `partner`, or leave it out"),
        ));
    }
    let set = Set::find_any(model.as_ref(), number)?;
    let size = set.states.len();
    match partner {
        Some(other) => {
            let second = Set::find_any(model.as_ref(), other)?;
            together(model, number, &set, other, &second)
        }
        None if size == 2 => {
            let other = 2 * set.first + 3 - number;
            together(model, number, &set, other, &set)
        }
        None if size > 2 => {
            // Inside a larger set, the neighbour in the order just above the operating point.
            let idx = number - 1 - set.first;
            let list = branches(&set.series(model.as_ref())?)?;
            let apart = |other: usize| -> Vec<f64> {
                (0..4).map(|k| (list[idx].energies[k] - list[other].energies[k]).abs()).collect()
            };
            let other = match (idx.checked_sub(1), (idx + 1 < size).then_some(idx + 1)) {
                (Some(below), Some(above)) => {
                    if apart(below) < apart(above) {
                        below
                    } else {
                        above
                    }
                }
                (Some(below), None) => below,
                (None, above) => above.unwrap_or(idx),
            };
            together(model, number, &set, set.first + other + 1, &set)
        }
        None => nearest(model, number, &set),
    }
}

/// Tries the neighbours of a lone level by rising distance.
fn nearest<T: Scalar>(model: &Rc<dyn Model<T>>, number: usize, set: &Set<T>) -> Result<PairSeries> {
    let mut ranks: Vec<usize> = (0..set.lowest.len()).filter(|idx| *idx != number - 1).collect();
    let distance = |idx: usize| (set.lowest[idx].energy - set.energy).abs();
    ranks.sort_by(|&a, &b| distance(a).total_cmp(&distance(b)).then(a.cmp(&b)));
    let edge = model.escape_edge(model.at()).unwrap_or(f64::INFINITY);
    for idx in ranks {
        // Behind open ends, what lies above the outer edge belongs to the basis.
        if set.lowest[idx].energy >= edge {
            continue;
        }
        let states = [set.states[0].clone(), set.lowest[idx].state.clone()];
        let series = two(model.as_ref(), set, &states, [set.energy, set.lowest[idx].energy])?;
        let coupled = (1..=2).any(|power| {
            let terms = series.terms[power].max(series.series[power].camax());
            series.series[power][(0, 1)].modulus() > COUPLED * terms
        });
        if coupled {
            let other = Set::find_any(model.as_ref(), idx + 1)?;
            return together(model, number, set, idx + 1, &other);
        }
    }
    Err(Error::spec(
        Diagnostic::new("no-partner", format!("nothing in its block couples to level {number}"))
            .expected("a level that the control mixes with it")
            .action("use `form: polynomial`, or name a `partner`"),
    ))
}

/// Effective series of two eigenstates, reference in the middle.
fn two<T: Scalar>(
    model: &dyn Model<T>,
    set: &Set<T>,
    states: &[State<T>],
    energies: [f64; 2],
) -> Result<Effective<T>> {
    let matrix = model.expansion(0);
    let powers: Vec<&Hermitian<T>> = (1..=HIGHEST_POWER).map(|power| model.expansion(power)).collect();
    let space = Space {
        unperturbed: matrix,
        powers: &powers,
        energies: &energies,
        reference: 0.5 * (energies[0] + energies[1]),
        states,
    };
    effective(&space, &mut |j, right| set.resolve(matrix, energies[j], states, right))
}

fn together<T: Scalar>(
    model: &Rc<dyn Model<T>>,
    number: usize,
    set: &Set<T>,
    partner: usize,
    other: &Set<T>,
) -> Result<PairSeries> {
    let numbers = [number, partner];
    let sign = if number > partner { 1.0 } else { -1.0 };
    let same = set.first == other.first;
    let whole = if same && set.states.len() == 2 {
        Some(set.series(model.as_ref())?)
    } else if !same && set.states.len() == 1 && other.states.len() == 1 {
        let states = [set.states[0].clone(), other.states[0].clone()];
        Some(two(model.as_ref(), set, &states, [set.energy, other.energy])?)
    } else {
        None
    };
    let mut out = PairSeries {
        numbers,
        mean: [0.0; POWERS],
        half_gap_squared: [0.0; POWERS],
        sign,
        mean_uncertainty: [0.0; POWERS],
        half_gap_squared_uncertainty: [0.0; POWERS],
    };
    let mut half = [0.0; POWERS];
    let mut cross = [T::zero(); POWERS];
    let mut doubt = [0.0; POWERS];
    if let Some(series) = &whole {
        for power in 0..POWERS {
            let matrix = &series.series[power];
            let (a, b) = (matrix[(0, 0)].real(), matrix[(1, 1)].real());
            out.mean[power] = 0.5 * (a + b);
            half[power] = 0.5 * (a - b);
            cross[power] = matrix[(0, 1)];
            doubt[power] = series.doubt[power];
        }
        out.mean[0] = 0.5 * (set.energy + other.energy);
        doubt[0] = set.energy_doubt.max(other.energy_doubt);
    } else {
        // A member of a larger set: the two branches one by one.
        let (a, b) = (level(model, number)?, level(model, partner)?);
        for power in 0..POWERS {
            out.mean[power] = 0.5 * (a.energies[power] + b.energies[power]);
            half[power] = 0.5 * (a.energies[power] - b.energies[power]);
            doubt[power] = (a.uncertainty[power] + b.uncertainty[power]) / (2.0 * SAFETY);
        }
    }
    if same && whole.is_some() {
        half[0] = 0.0;
        cross[0] = T::zero();
    }
    // The energies of a degenerate pair are equal by decision, so only their mean is in doubt.
    let gap_doubt: Vec<f64> =
        (0..POWERS).map(|power| if power == 0 && same { 0.0 } else { doubt[power] }).collect();
    for (power, own) in doubt.iter().enumerate() {
        let mut error = 0.0;
        for low in 0..=power {
            let high = power - low;
            out.half_gap_squared[power] +=
                half[low] * half[high] + (cross[low] * cross[high].conjugate()).real();
            error += 2.0 * (half[low].abs() + cross[low].modulus()) * gap_doubt[high];
            error += 2.0 * gap_doubt[low] * gap_doubt[high];
        }
        out.half_gap_squared_uncertainty[power] = SAFETY * error;
        out.mean_uncertainty[power] = SAFETY * own;
    }
    // A parity takes a pair that is a whole set, or two lone levels, to itself.
    if whole.is_some() && model.parity().is_some() {
        for power in [1, 3] {
            out.mean[power] = 0.0;
            out.mean_uncertainty[power] = 0.0;
            out.half_gap_squared[power] = 0.0;
            out.half_gap_squared_uncertainty[power] = 0.0;
        }
    }
    Ok(out)
}

#[cfg(test)]
mod tests {
    use super::super::trial::{Trial, mathieu, real};
    use super::*;

    fn certain(found: &[f64; POWERS], doubt: &[f64; POWERS], expected: &[f64], what: &str) {
        for (power, &value) in expected.iter().enumerate() {
            let error = (found[power] - value).abs();
            assert!(
                error <= doubt[power],
                "{what}[{power}] = {:e}, not {value:e}; stated {:e}",
                found[power],
                doubt[power]
            );
            assert!(
                doubt[power] < 1e-9 * value.abs().max(1.0),
                "{what}[{power}] is known to {:e} only",
                doubt[power]
            );
        }
    }

    /// Two levels alone: half gap squared `(g/2 + s x)^2 + v^2 x^2` ends at second order. Closed form.
    #[test]
    fn two_lone_levels_are_exact() {
        let h = vec![
            real(2, |i, j| if i == j { i as f64 } else { 0.0 }),
            real(2, |i, j| {
                if i != j {
                    0.3
                } else if i == 0 {
                    0.1
                } else {
                    0.7
                }
            }),
        ];
        let found = pair_of(&Trial::new(h).shared(), 1, None).unwrap();
        assert_eq!((found.numbers, found.sign), ([1, 2], -1.0));
        certain(&found.mean, &found.mean_uncertainty, &[0.5, 0.4, 0.0, 0.0, 0.0], "mean");
        certain(
            &found.half_gap_squared,
            &found.half_gap_squared_uncertainty,
            &[0.25, 0.3, 0.18, 0.0, 0.0],
            "half_gap_squared",
        );
    }

    /// a1 and b1 of Mathieu's equation (NIST DLMF 28.6.2, 28.6.3): mean
    /// `1 - q^2/8 - q^4/1536`, half gap `q - q^3/64`, so its square is `q^2 - q^4/32`.
    #[test]
    fn a_degenerate_pair_has_a_smooth_square() {
        let found = pair_of(&Trial::new(mathieu(8, true)).shared(), 2, None).unwrap();
        assert_eq!((found.numbers, found.sign), ([2, 1], 1.0));
        certain(&found.mean, &found.mean_uncertainty, &[1.0, 0.0, -0.125, 0.0, -1.0 / 1536.0], "mean");
        certain(
            &found.half_gap_squared,
            &found.half_gap_squared_uncertainty,
            &[0.0, 0.0, 1.0, 0.0, -1.0 / 32.0],
            "half_gap_squared",
        );
    }

    /// Two charges of a small island at the crossing point, EJ/EC = 0.1: the lowest two
    /// levels of `4 EC (n - ng)^2 - EJ cos phi` at ng = 1/2 are a1 and b1 of Mathieu's equation with
    /// q = EJ/(2 EC) (Koch et al., Phys. Rev. A 76, 042319 (2007), eq. (2.2); series NIST
    /// DLMF 28.6.2). Curvature of the lower level there: sum over states of the same matrix by mpmath
    /// at 40 digits. Pair numbers give it as `2 (mean_2 - gap_2 / (2 gap_0^(1/2)))`.
    #[test]
    fn a_charge_island_at_its_crossing() {
        let order = 20;
        let charge = |i: usize| i as f64 - 9.0 - 0.5;
        let h = vec![
            real(order, |i, j| match i.abs_diff(j) {
                0 => 4.0 * charge(i) * charge(i),
                1 => -0.05,
                _ => 0.0,
            }),
            real(order, |i, j| if i == j { -8.0 * charge(i) } else { 0.0 }),
            real(order, |i, j| if i == j { 4.0 } else { 0.0 }),
        ];
        let found = pair_of(&Trial::new(h).shared(), 1, None).unwrap();
        let q: f64 = 0.05;
        let mean = 1.0 - q * q / 8.0 - q * q * q * q / 1536.0 + 49.0 / 589_824.0 * q * q * q * q * q * q;
        assert!((found.mean[0] - mean).abs() < 1e-13);
        let half = q - q * q * q / 64.0 + 11.0 / 36_864.0 * q * q * q * q * q;
        assert!((found.half_gap_squared[0] - half * half).abs() < 1e-12);
        let curvature = 2.0 * (found.mean[2] - found.half_gap_squared[2] / (2.0 * half));
        assert!((curvature + 312.063105305341).abs() < 1e-7, "{curvature}");
    }

    #[test]
    fn a_level_without_coupling_has_no_partner() {
        let h = vec![real(2, |i, j| if i == j { i as f64 } else { 0.0 }), real(2, |i, j| f64::from(i == j))];
        let model = Trial::new(h).shared();
        assert_eq!(pair_of(&model, 1, None).unwrap_err().diagnostics()[0].code, "no-partner");
        assert_eq!(pair_of(&model, 1, Some(1)).unwrap_err().diagnostics()[0].code, "no-partner");
    }
}
