//! What each other state contributes to a second-order coefficient.
//!
//! In: a level with its set. Out: contributions, first-order mixing, the listed
//! levels, and how far the sum over states disagrees with the reduced resolvent.
//!
//! Where not every state is computed, the part of those left out is enclosed by
//! closure: all terms above the last computed level have one sign, and their
//! weights add up to `<V^2> - sum |<k|V|n>|^2` over the computed ones, so the rest lies between 0 and
//! that weight over the distance to the last computed level.
//!
//! Source: Landau and Lifshitz, *Quantum Mechanics*, 3rd ed., eq. (38.10), for
//! the sum; closure is common practice, no source.

use super::level::{LISTED, Set};
use super::product::inner;
use super::{Contribution, Mixing};
use crate::diagnostic::Result;
use crate::model::Model;
use crate::pencil::{Scalar, State, lowest};

/// States beyond this many are not sought for their shares alone.
const SOUGHT: usize = 400;

/// Contributions end where the rest is below this part of the sum and no single one left out exceeds it.
const CUT: f64 = 0.01;

/// Shares below this are rounding of a coupling that a symmetry forbids.
const NOISE: f64 = 1e-14;

/// What [`share`] finds.
#[derive(Default)]
pub(super) struct Shared {
    pub contributions: Vec<Contribution>,
    pub mixing: Vec<Mixing>,
    pub levels: Vec<f64>,
    /// Distance of the resolvent's value from the sum over states (or from its enclosure).
    pub disagreement: f64,
    pub largest_term: f64,
}

/// `state`: the zeroth-order state; `second`: E2 by the reduced resolvent;
/// `direct`: the expectation of `H_2`.
pub(super) fn share<T: Scalar>(
    model: &dyn Model<T>,
    set: &Set<T>,
    state: &State<T>,
    second: f64,
    direct: f64,
) -> Result<Shared> {
    let order = model.order();
    let mut image = model.expansion(1).apply(state);
    for member in &set.states {
        let amount = inner(member, &image);
        image.axpy(-amount, member, T::one());
    }
    let weight = image.norm_squared();
    let inside = set.first..set.first + set.states.len();
    let mut count = set.lowest.len();
    let mut pairs = None;
    loop {
        let states = pairs.as_ref().unwrap_or(&set.lowest);
        let mut terms: Vec<(usize, f64, f64, T)> = Vec::with_capacity(states.len());
        let mut met = 0.0;
        for (idx, pair) in states.iter().enumerate().filter(|(idx, _)| !inside.contains(idx)) {
            let coupling = inner(&pair.state, &image);
            let size = coupling.modulus_squared();
            met += size;
            terms.push((idx + 1, pair.energy, size / (set.energy - pair.energy), coupling));
        }
        let mut sum = direct;
        // Small terms first, so that none is lost.
        terms.iter().rev().for_each(|term| sum += term.2);
        let whole = states.len() >= order;
        let top = states.last().map_or(set.energy, |pair| pair.energy);
        // The rounding of a difference of squares hides couplings below it.
        let left = (weight - met).max(4.0 * f64::EPSILON * weight);
        let tail = if whole { 0.0 } else { -left / (top - set.energy).max(f64::MIN_POSITIVE) };
        let settled = tail.abs() <= CUT * second.abs() || weight == 0.0;
        if !whole && !settled && count < SOUGHT {
            count = (2 * count).min(order);
            pairs = Some(lowest(model.expansion(0), count)?);
            continue;
        }
        let disagreement = if second > sum { second - sum } else { (sum + tail - second).max(0.0) };
        let largest_term = terms.iter().fold(direct.abs(), |size, term| size.max(term.2.abs()));
        let mut contributions =
            if second == 0.0 { Vec::new() } else { listed(&terms, direct, second, set.energy) };
        let mut mixing = mixing(model, set, &terms, states, &contributions);
        let channels: Vec<Option<usize>> = states.iter().map(|pair| model.channel(&pair.state)).collect();
        let named = |number: usize| {
            let own = channels.get(number.checked_sub(1)?).copied().flatten()?;
            Some((own, channels[..number].iter().filter(|&&other| other == Some(own)).count()))
        };
        contributions.iter_mut().for_each(|one| one.channel = one.level.and_then(named));
        mixing.iter_mut().for_each(|one| one.channel = named(one.level));
        let levels = set
            .lowest
            .iter()
            .take(LISTED)
            .enumerate()
            .map(|(idx, pair)| if inside.contains(&idx) { set.energy } else { pair.energy });
        return Ok(Shared { contributions, mixing, levels: levels.collect(), disagreement, largest_term });
    }
}

/// Terms by falling size, until the cut.
fn listed<T: Scalar>(
    terms: &[(usize, f64, f64, T)],
    direct: f64,
    second: f64,
    own: f64,
) -> Vec<Contribution> {
    let mut all: Vec<Contribution> = terms
        .iter()
        .map(|&(number, energy, term, _)| Contribution {
            level: Some(number),
            energy,
            share: term / second,
            channel: None,
        })
        .collect();
    if direct != 0.0 {
        all.push(Contribution { level: None, energy: own, share: direct / second, channel: None });
    }
    all.retain(|one| one.share != 0.0);
    all.sort_by(|a, b| b.share.abs().total_cmp(&a.share.abs()).then(a.level.cmp(&b.level)));
    let mut rest = 1.0;
    let mut keep = 0;
    while keep < all.len().min(LISTED) {
        let size = all[keep].share.abs();
        if (f64::abs(rest) < CUT && size <= CUT) || size < NOISE {
            break;
        }
        rest -= all[keep].share;
        keep += 1;
    }
    all.truncate(keep);
    all
}

/// First-order amplitudes of the states that contribute, the largest first.
fn mixing<T: Scalar>(
    model: &dyn Model<T>,
    set: &Set<T>,
    terms: &[(usize, f64, f64, T)],
    states: &[crate::pencil::Eigenpair<T>],
    contributions: &[Contribution],
) -> Vec<Mixing> {
    let mut out: Vec<Mixing> = terms
        .iter()
        .filter(|term| contributions.iter().any(|one| one.level == Some(term.0)))
        .filter_map(|&(number, energy, _, coupling)| {
            let amount = coupling.unscale(set.energy - energy);
            let state = &states.get(number - 1)?.state;
            let coefficient = match model.phase(state) {
                // <k|V|n> takes the conjugate of the factor on k.
                Some(phase) => (phase.conjugate() * amount).real(),
                None => amount.modulus(),
            };
            Some(Mixing { level: number, energy, coefficient, channel: None })
        })
        .collect();
    out.sort_by(|a, b| b.coefficient.abs().total_cmp(&a.coefficient.abs()).then(a.level.cmp(&b.level)));
    out
}
