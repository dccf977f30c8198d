//! How many basis states each part keeps.
//!
//! Starting sizes and growth are empirical: large enough that smooth problems
//! settle at the first comparison, small enough that products of two or three
//! infinite parts stay quick.

use super::local::Extent;
use super::words::{self, Expander, Product};
use crate::spec::{Part, PartKind, Parts};

/// Most polynomials between walls: beyond, rounding of the second derivative costs
/// more than they gain.
const MOST_POLYNOMIALS: usize = 400;

/// Most states of a part of which functions are taken; their matrices are full.
const MOST_WITH_FUNCTIONS: usize = 800;

/// What the Hamiltonian asks of each part.
#[derive(Clone, Debug)]
pub(super) struct Demands {
    reach: Vec<usize>,
    functions: Vec<bool>,
}

impl Demands {
    /// Commutators of both kinds of sums are formed too, so their reaches add.
    pub fn of(
        parts: &Parts,
        expander: &Expander<'_>,
        terms: &[Vec<Product>],
        conserved: &[Vec<Product>],
    ) -> Self {
        let mut out = Self { reach: vec![0; parts.parts.len()], functions: vec![false; parts.parts.len()] };
        for sums in [terms, conserved] {
            let mut longest = vec![0; parts.parts.len()];
            for (part, word) in sums.iter().flatten().flat_map(|product| &product.words) {
                let word = expander.word(word);
                if let (Some(reach), Some(functions)) = (longest.get_mut(*part), out.functions.get_mut(*part))
                {
                    *reach = words::reach(&word).max(*reach);
                    *functions |= words::has_function(&word);
                }
            }
            out.reach.iter_mut().zip(longest).for_each(|(sum, own)| *sum += own);
        }
        out
    }
}

fn grows(kind: PartKind) -> bool {
    !matches!(kind, PartKind::Spin(_) | PartKind::States(_))
}

/// True if a basis is cut that the spec does not fix.
pub(super) fn is_infinite(parts: &Parts) -> bool {
    parts.parts.iter().any(|part| grows(part.kind) && part.size.is_none())
}

/// Sizes at a refinement.
pub(super) fn extents(
    parts: &Parts,
    demands: &Demands,
    centres: &[i64],
    level: usize,
    refinement: usize,
) -> Vec<Extent> {
    let growing = parts.parts.iter().filter(|part| grows(part.kind) && part.size.is_none()).count();
    parts
        .parts
        .iter()
        .enumerate()
        .map(|(idx, part)| {
            let level = level.min(100_000);
            // With several growing parts the levels spread over all of them.
            let (start, factor) = match growing {
                0 | 1 => (16 + 2 * level, 1.5),
                2 => (10 + level.min(30), 1.4),
                _ => (6 + level.min(10), 1.3),
            };
            let (start, factor) = match part.kind {
                PartKind::Oscillator if growing < 2 => (start + 16, factor),
                // Polynomials converge faster than any power, and rounding grows with the fourth power of their number.
                PartKind::Interval { .. } => (start, 1.2),
                PartKind::Phase if growing < 2 => (start, factor),
                PartKind::Rotor => (8 + level.min(40), factor),
                _ => (start, factor),
            };
            let mut grown = start as f64;
            for _ in 0..refinement.min(40) {
                grown *= factor;
            }
            let mut kept = part.size.unwrap_or(grown.min(1e7) as usize).max(1);
            let centre = centres.get(idx).copied().unwrap_or(0);
            // A range of charges is symmetric about its centre, half of `centre`.
            if part.kind == PartKind::Phase && part.size.is_none() && (kept % 2 == 0) != (centre % 2 != 0) {
                kept += 1;
            }
            let lowest = (centre - kept as i64 + 1).div_euclid(2);
            Extent {
                kept,
                lowest,
                reach: demands.reach.get(idx).copied().unwrap_or(0),
                functions: demands.functions.get(idx).copied().unwrap_or(false),
            }
        })
        .collect()
}

/// A part's size in words.
pub(super) fn describe(part: &Part, extent: &Extent) -> String {
    match part.kind {
        PartKind::Spin(twice) => format!("{} states of `{}`", twice.saturating_add(1), part.name),
        PartKind::States(count) => format!("{count} states of `{}`", part.name),
        PartKind::Rotor => format!("{} values of J of `{}`", extent.kept, part.name),
        _ => format!("{} states of `{}`", extent.kept, part.name),
    }
}

/// Number of product states, `None` if it overflows or one part alone is too large.
pub(super) fn product_states(parts: &Parts, extents: &[Extent]) -> Option<usize> {
    parts.parts.iter().zip(extents).try_fold(1usize, |total, (part, extent)| {
        let most = match part.kind {
            PartKind::Interval { .. } => MOST_POLYNOMIALS,
            _ if extent.functions => MOST_WITH_FUNCTIONS,
            _ => usize::MAX,
        };
        if extent.kept > most {
            return None;
        }
        let own = match part.kind {
            PartKind::Spin(twice) => twice.checked_add(1)?,
            PartKind::States(count) => count,
            PartKind::Rotor => extent.kept.checked_mul(extent.kept)?,
            _ => extent.kept,
        };
        total.checked_mul(own)
    })
}
