//! One level: which states belong together, and the branch that is asked for.
//!
//! In: a model and a number. Out: a [`Level`].
//!
//! Not here: the series of a model space (`effective`), the branches of a
//! degenerate set (`reduce`), the part of each other state (`share`).

use std::rc::Rc;

use super::effective::{COEFFICIENTS, Effective, Space, effective};
use super::product::{bulk, inner};
use super::reduce::{Branch, EQUAL, reduce};
use super::{AnyLevel, Level, share};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::model::{AnyModel, Built, HIGHEST_POWER, Model};
use crate::outcome::Note;
use crate::pencil::{Eigenpair, Hermitian, Resolvent, Scalar, State, alone, lowest, reduced_solve, spectrum};

/// Levels that the record lists.
pub(super) const LISTED: usize = 12;

/// Orders up to this have their whole spectrum computed, once: it serves as resolvent and
/// makes the sum over states complete. Beyond, a few levels and solves cost less (empirical).
const WHOLE: usize = 600;

/// The same for a band, whose lowest levels cost little one by one.
const WHOLE_BAND: usize = 64;

/// A gap above the degeneracy threshold, but below this many times it, decides
/// nothing reliably and is refused.
const UNSURE: f64 = 1000.0;

/// A coefficient this far below its largest term is noted.
const CANCELS: f64 = 1e-4;

/// Factor from an estimated error to a stated uncertainty.
pub(super) const SAFETY: f64 = 4.0;

/// The series of the level with this number, from 1, counted in ascending
/// energy just above the operating point.
///
/// # Errors
/// `no-such-level` (spec) beyond the number of states; `near-degenerate`
/// (accuracy) if a neighbour is too close to decide whether it is degenerate.
pub fn solve(built: &Built, number: usize) -> Result<AnyLevel> {
    any(built, number, Detail::Full)
}

/// [`solve`] without the other states: no contributions, no mixing, no list of levels, and
/// no second way of summing.
///
/// # Errors
/// As [`solve`].
pub fn coefficients(built: &Built, number: usize) -> Result<AnyLevel> {
    any(built, number, Detail::Coefficients)
}

/// How much of a level is asked for.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Detail {
    /// Everything.
    Full,
    /// Its own series.
    Coefficients,
}

fn any(built: &Built, number: usize, detail: Detail) -> Result<AnyLevel> {
    let own = built.number(number)?;
    Ok(match &built.model {
        AnyModel::Real(model) => {
            AnyLevel::Real(Box::new(within(built, detailed(model, own, number, detail)?)))
        }
        AnyModel::Complex(model) => {
            AnyLevel::Complex(Box::new(within(built, detailed(model, own, number, detail)?)))
        }
    })
}

/// A level with the list of its own block, where its model holds more.
fn within<T: Scalar>(built: &Built, mut level: Level<T>) -> Level<T> {
    if !built.levels.is_empty() {
        level.levels.clone_from(&built.levels);
    }
    level
}

/// [`solve`] for a model of known field.
///
/// # Errors
/// As [`solve`].
pub fn level<T: Scalar>(model: &Rc<dyn Model<T>>, number: usize) -> Result<Level<T>> {
    detailed(model, number, number, Detail::Full)
}

/// The level with this number in the model, which the reader knows by the number `shown`.
fn detailed<T: Scalar>(
    model: &Rc<dyn Model<T>>,
    number: usize,
    shown: usize,
    detail: Detail,
) -> Result<Level<T>> {
    let (found, detail) = match detail {
        Detail::Full => (None, detail),
        Detail::Coefficients => (Set::alone(model.as_ref(), number)?, detail),
    };
    let (found, detail) = match found {
        Some(found) => (found, detail),
        None => (Set::find(model.as_ref(), number)?, Detail::Full),
    };
    let series = found.series(model.as_ref())?;
    let branches = branches(&series)?;
    let idx = number - 1 - found.first;
    let Some(branch) = branches.get(idx) else {
        return Err(Error::internal("a degenerate set lost one of its branches"));
    };
    let mut energies = [found.energy; COEFFICIENTS];
    let mut doubt = [0.0; COEFFICIENTS];
    energies[1..].copy_from_slice(&branch.energies);
    doubt[1..].copy_from_slice(&branch.doubt);
    doubt[0] = found.energy_doubt;
    let mut terms = series.terms;
    terms[0] = terms[0].max(found.energy.abs());

    let combine = |states: &[State<T>], start: &State<T>| {
        let mut out = State::zeros(model.order());
        for (state, &amount) in states.iter().zip(start.iter()) {
            out.axpy(amount, state, T::one());
        }
        out
    };
    let set_states: Vec<State<T>> = branches
        .iter()
        .map(|branch| {
            let mut state = combine(&found.states, &branch.start);
            let phase = model.phase(&state);
            turn(&mut state, phase);
            state
        })
        .collect();
    let mut state = combine(&found.states, &branch.start);
    let mut corrections = [0, 1].map(|which: usize| combine(&series.corrections[which], &branch.start));
    let phase = model.phase(&state);
    turn(&mut state, phase);
    corrections.iter_mut().for_each(|one| turn(one, phase));

    let mut zero: [Option<String>; COEFFICIENTS] = Default::default();
    if let Some(reason) = model.parity()
        && maps_to_itself(&branches, idx, &series.terms)
    {
        for power in [1, 3, 5] {
            zero[power] = Some(reason.clone());
            energies[power] = 0.0;
            doubt[power] = 0.0;
        }
    }
    if (1..=HIGHEST_POWER).all(|power| model.expansion(power).is_zero()) {
        // Orders up to the highest power of the expansion; a fifth power is not known here.
        zero[1..=HIGHEST_POWER].fill(Some("the control does not act on this system".into()));
    }
    let shared = if detail == Detail::Full {
        let direct = inner(&state, &model.expansion(2).apply(&state)).real();
        share::share(model.as_ref(), &found, &state, energies[2], direct)?
    } else {
        share::Shared::default()
    };
    doubt[2] = doubt[2].max(shared.disagreement);
    terms[2] = terms[2].max(shared.largest_term);

    let mut notes = Vec::new();
    if branches.len() > 1 && equals(&branches, idx, &series.terms).len() > 1 {
        notes.push(Note {
            code: "degenerate".into(),
            text: format!(
                "level {shown} stays degenerate with {} other at every order computed; any of them is meant",
                equals(&branches, idx, &series.terms).len() - 1
            ),
        });
    }
    for power in 1..COEFFICIENTS - 1 {
        if zero[power].is_none() && energies[power].abs() < CANCELS * terms[power] && energies[power] != 0.0 {
            notes.push(Note {
                code: "cancellation".into(),
                text: format!(
                    "coefficient {power} of level {shown} is {:.1e} of the largest term that it is summed from",
                    energies[power].abs() / terms[power]
                ),
            });
        }
    }
    Ok(Level {
        model: model.clone(),
        number,
        energies,
        uncertainty: doubt.map(|error| SAFETY * error),
        zero,
        largest_term: terms,
        state,
        corrections,
        set: (0..found.states.len()).map(|k| found.first + k + 1).collect(),
        set_states,
        contributions: shared.contributions,
        mixing: shared.mixing,
        levels: shared.levels,
        notes,
    })
}

/// Common energy of the states of a set and its estimated error.
fn common<T: Scalar>(model: &dyn Model<T>, states: &[State<T>], gap: f64) -> (f64, f64) {
    let found: Vec<f64> = states.iter().map(|state| model.energy(model.at(), state)).collect();
    let energy = found.iter().fold(0.0, |sum, e| sum + e) / found.len() as f64;
    let mut doubt = 2.0 * f64::EPSILON * energy.abs();
    for (state, e) in states.iter().zip(&found) {
        let mut rest = model.expansion(0).apply(state);
        doubt = doubt.max(2.0 * f64::EPSILON * bulk(state, &rest));
        rest.axpy(T::from_real(-energy), state, T::one());
        doubt = doubt.max((e - energy).abs()).max(rest.norm_squared() / gap.max(f64::MIN_POSITIVE));
    }
    (energy, doubt)
}

fn turn<T: Scalar>(state: &mut State<T>, phase: Option<T>) {
    if let Some(phase) = phase {
        state.iter_mut().for_each(|x| *x *= phase);
    }
}

/// A level with all that are degenerate with it.
pub(super) struct Set<T: Scalar> {
    /// Number of levels below the set.
    pub first: usize,
    /// Common energy.
    pub energy: f64,
    /// Its estimated error.
    pub energy_doubt: f64,
    /// Distance to the nearest level outside.
    pub gap: f64,
    /// Orthonormal states.
    pub states: Vec<State<T>>,
    /// The lowest levels, ascending: the set, at least one above it (if there is any), and
    /// at least [`LISTED`].
    pub lowest: Vec<Eigenpair<T>>,
}

impl<T: Scalar> Set<T> {
    /// Finds the set that holds the level with this number at the operating point.
    pub(super) fn find(model: &dyn Model<T>, number: usize) -> Result<Self> {
        let found = Self::find_any(model, number)?;
        if found.gap <= UNSURE * model.degeneracy_scale() {
            return Err(near_degenerate(number, found.gap, model.degeneracy_scale()));
        }
        Ok(found)
    }

    /// A level of a band that is clearly alone, without its neighbours; `None` if it has to be
    /// looked at more closely.
    fn alone(model: &dyn Model<T>, number: usize) -> Result<Option<Self>> {
        let matrix = model.expansion(0);
        if number == 0 || number > matrix.order() {
            return Ok(None);
        }
        let Some((pair, gap)) = alone(matrix, number)? else { return Ok(None) };
        if gap <= 2.0 * UNSURE * model.degeneracy_scale() {
            return Ok(None);
        }
        let states = vec![pair.state.clone()];
        let (energy, energy_doubt) = common(model, &states, gap);
        Ok(Some(Self { first: number - 1, energy, energy_doubt, gap, states, lowest: vec![pair] }))
    }

    /// [`Set::find`] that accepts a doubtful gap to the next set: a pair is smooth
    /// there.
    pub(super) fn find_any(model: &dyn Model<T>, number: usize) -> Result<Self> {
        let order = model.order();
        if number == 0 || number > order {
            return Err(Error::spec(
                Diagnostic::new("no-such-level", format!("there is no level {number}"))
                    .found(format!("level {number}"))
                    .expected(format!("a level from 1 to {order}, the number of states"))
                    .action("ask for a lower level"),
            ));
        }
        let matrix = model.expansion(0);
        let same = model.degeneracy_scale();
        let limit = if matches!(matrix, Hermitian::Banded(_)) { WHOLE_BAND } else { WHOLE };
        let whole = order <= limit;
        let mut count = if whole { order } else { LISTED.max(number.saturating_add(2)).min(order) };
        loop {
            let pairs = if whole { spectrum(matrix)? } else { lowest(matrix, count)? };
            if pairs.len() < count {
                return Err(Error::internal("fewer levels were found than the matrix has"));
            }
            let idx = number - 1;
            let mut from = idx;
            while from > 0 && pairs[from].energy - pairs[from - 1].energy <= same {
                from -= 1;
            }
            let mut to = idx + 1;
            while to < count && pairs[to].energy - pairs[to - 1].energy <= same {
                to += 1;
            }
            if to == count && count < order {
                count = (2 * count).min(order);
                continue;
            }
            let below = (from > 0).then(|| pairs[from].energy - pairs[from - 1].energy);
            let above = (to < count).then(|| pairs[to].energy - pairs[to - 1].energy);
            let states: Vec<State<T>> = pairs[from..to].iter().map(|pair| pair.state.clone()).collect();
            let gap = below.into_iter().chain(above).fold(f64::INFINITY, f64::min);
            let (energy, energy_doubt) = common(model, &states, gap);
            return Ok(Self { first: from, energy, energy_doubt, gap, states, lowest: pairs });
        }
    }

    /// The reduced resolvent at `energy` outside `states`: over the spectrum where all of
    /// it is at hand, else by a solve.
    pub(super) fn resolve(
        &self,
        matrix: &Hermitian<T>,
        energy: f64,
        states: &[State<T>],
        right: &State<T>,
    ) -> Result<State<T>> {
        if self.lowest.len() < matrix.order() {
            return reduced_solve(matrix, energy, states, right);
        }
        let mut out = State::zeros(right.len());
        for pair in &self.lowest {
            let inside =
                states.iter().fold(0.0, |sum, member| sum + member.dotc(&pair.state).modulus_squared());
            if inside < 0.5 {
                let amount = pair.state.dotc(right).unscale(pair.energy - energy);
                out.axpy(amount, &pair.state, T::one());
            }
        }
        for member in states {
            let amount = member.dotc(&out);
            out.axpy(-amount, member, T::one());
        }
        Ok(out)
    }

    /// The effective series of the whole set.
    pub(super) fn series(&self, model: &dyn Model<T>) -> Result<Effective<T>> {
        let matrix = model.expansion(0);
        let powers: Vec<&Hermitian<T>> = (1..=HIGHEST_POWER).map(|power| model.expansion(power)).collect();
        let space = Space {
            unperturbed: matrix,
            powers: &powers,
            energies: &vec![self.energy; self.states.len()],
            reference: self.energy,
            states: &self.states,
        };
        let resolvent =
            if self.lowest.len() < matrix.order() { Resolvent::new(matrix, self.energy)? } else { None };
        effective(&space, &mut |_, right| match &resolvent {
            Some(resolvent) => Ok(resolvent.solve(&self.states, right)),
            None => self.resolve(matrix, self.energy, &self.states, right),
        })
    }
}

/// The analytic branches E1 to E5 of a set, ascending just above the operating point.
pub(super) fn branches<T: Scalar>(series: &Effective<T>) -> Result<Vec<Branch<T>>> {
    reduce(&series.series[1..], &series.terms[1..], &series.doubt[1..])
}

fn near_degenerate(number: usize, gap: f64, same: f64) -> Error {
    Error::accuracy(
        Diagnostic::new(
            "near-degenerate",
            format!("level {number} has a neighbour too close to tell apart from it"),
        )
        .found(format!("a gap of {gap:.2e} in the unit of the Hamiltonian"))
        .expected(format!("at most {same:.2e} (degenerate) or at least {:.2e} (apart)", UNSURE * same))
        .action(
            "name what is `conserved` so that the two fall in different blocks, or ask for `form: paired`",
        ),
    )
}

/// True if coefficient `power` (from 1) of two branches is the same within the rule.
fn same<T: Scalar>(
    branches: &[Branch<T>],
    terms: &[f64; COEFFICIENTS],
    power: usize,
    a: f64,
    b: f64,
) -> bool {
    let largest =
        branches.iter().fold(terms[power], |size, branch| size.max(branch.energies[power - 1].abs()));
    (a - b).abs() <= EQUAL * largest
}

/// Branches that equal this one in E1 to E4, itself included.
fn equals<T: Scalar>(branches: &[Branch<T>], idx: usize, terms: &[f64; COEFFICIENTS]) -> Vec<usize> {
    (0..branches.len())
        .filter(|&other| {
            (1..COEFFICIENTS - 1).all(|power| {
                let (a, b) = (branches[idx].energies[power - 1], branches[other].energies[power - 1]);
                same(branches, terms, power, a, b)
            })
        })
        .collect()
}

/// A parity takes every branch E(d) of a set to a branch E(-d) of the same set. If no
/// other branch can be the image of this one, it is its own image and its odd
/// coefficients vanish. A set of one always passes.
fn maps_to_itself<T: Scalar>(branches: &[Branch<T>], idx: usize, terms: &[f64; COEFFICIENTS]) -> bool {
    let own = equals(branches, idx, terms);
    (0..branches.len()).filter(|other| !own.contains(other)).all(|other| {
        (1..COEFFICIENTS - 1).any(|power| {
            let sign = if power % 2 == 1 { -1.0 } else { 1.0 };
            let image = sign * branches[idx].energies[power - 1];
            !same(branches, terms, power, image, branches[other].energies[power - 1])
        })
    })
}
