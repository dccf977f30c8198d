//! The series of a whole formula: its levels and known terms added up.
//!
//! In: the settled levels of a sum. Out: a [`Sum`]: E0 to E4 in the formula's
//! unit, their uncertainty, and which of them a symmetry makes zero.

use std::rc::Rc;

use super::settle::{SAFETY, Settled};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::expr::Tree;
use crate::outcome::{ContributionOutcome, MixingOutcome, Note, block_name};
use crate::series;
use crate::spec::{self, LevelRef};
use crate::units::{Unit, energy_factor};

/// One level of a sum, its weight in the formula's unit.
#[derive(Clone)]
pub struct LevelTerm {
    /// Name of its system.
    pub system: String,
    /// As the spec refers to it.
    pub reference: LevelRef,
    /// Weight as written, without the conversion.
    pub weight: f64,
    /// Conversion from the model's unit to the formula's.
    pub conversion: f64,
    /// The level.
    pub settled: Rc<Settled>,
}

impl LevelTerm {
    /// Weight and conversion in one.
    #[must_use]
    pub fn times(&self) -> f64 {
        self.weight * self.conversion
    }

    /// The block and number of a state of shells, where levels are counted by l. The
    /// block is empty if it is the level's own.
    fn named(&self, channel: Option<(usize, usize)>) -> Option<(Vec<(String, f64)>, usize)> {
        let (l, number) = channel.filter(|_| self.settled.built.labelled)?;
        let mut block = self.reference.block.clone();
        block.iter_mut().filter(|(name, _)| name == "l").for_each(|(_, value)| *value = l as f64);
        if block == self.reference.block {
            block.clear();
        }
        Some((block, number))
    }
}

/// A formula's target, solved at the operating point.
pub struct Sum {
    /// The levels.
    pub levels: Vec<LevelTerm>,
    /// Known terms with their weights.
    pub known: Vec<(f64, Tree)>,
    /// E0 to E4.
    pub series: [f64; 5],
    /// Their uncertainty.
    pub uncertainty: [f64; 5],
    /// Why each is exactly zero, where it is.
    pub zero: [Option<String>; 5],
    /// True for the squared overlap of the two levels instead of their sum.
    pub overlap: bool,
}

/// The conversion from a model's unit to a formula's.
///
/// # Errors
/// If the two are not of one kind: a mistake of the spec.
pub fn conversion(from: &Unit, formula: &spec::Formula) -> Result<f64> {
    energy_factor(from, &formula.unit)
        .map(|factor| factor.value())
        .map_err(|fault| Error::spec(fault.diagnostic(Some(formula.place.clone()))))
}

impl Sum {
    /// Adds up levels and known terms about `at`.
    ///
    /// # Errors
    /// If a known term or one of its derivatives is not finite at the operating point.
    pub fn new(
        levels: Vec<LevelTerm>,
        known: Vec<(f64, Tree)>,
        at: f64,
        formula: &spec::Formula,
    ) -> Result<Self> {
        let mut series = [0.0; 5];
        let mut uncertainty = [0.0; 5];
        let mut size = [0.0_f64; 5];
        let mut zero: [Option<String>; 5] = std::array::from_fn(|power| (power > 0).then(String::new));
        for term in &levels {
            let energies = term.settled.level.energies();
            for power in 0..5 {
                let part = term.times() * energies[power];
                series[power] += part;
                size[power] += part.abs();
                uncertainty[power] += term.times().abs() * term.settled.uncertainty[power];
                match (&mut zero[power], &term.settled.level.zero()[power]) {
                    (Some(reasons), Some(reason)) => {
                        let sentence = format!("{}: {reason}", term.system);
                        if !reasons.contains(&sentence) {
                            if !reasons.is_empty() {
                                reasons.push_str("; ");
                            }
                            reasons.push_str(&sentence);
                        }
                    }
                    (slot, None) => *slot = None,
                    (None, Some(_)) => {}
                }
            }
        }
        for (weight, tree) in &known {
            let taylor = tree.taylor(at, 0.0);
            for (power, coefficient) in taylor.iter().enumerate() {
                if !coefficient.is_finite() {
                    return Err(Error::spec(
                        Diagnostic::new(
                            "undefined",
                            "a known term of the sum is not defined at the operating point",
                        )
                        .at(Some(formula.place.clone()))
                        .action("move `at`, or change the expression"),
                    ));
                }
                let part = weight * coefficient;
                series[power] += part;
                size[power] += part.abs();
                if part != 0.0 {
                    zero[power] = None;
                }
            }
        }
        if levels.is_empty() {
            zero = std::array::from_fn(|_| None);
        }
        for power in 0..5 {
            if zero[power].is_some() {
                series[power] = 0.0;
                uncertainty[power] = 0.0;
            } else {
                // The additions themselves round.
                uncertainty[power] = uncertainty[power].max(f64::EPSILON * size[power]);
            }
        }
        Ok(Self { levels, known, series, uncertainty, zero, overlap: false })
    }

    /// The squared overlap of two levels. The change with refinement is that of
    /// the whole overlap series, solved again in the coarser models.
    ///
    /// # Errors
    /// Those of the overlap series.
    pub fn overlap(levels: [LevelTerm; 2]) -> Result<Self> {
        let [a, b] = &levels;
        let fine = series::overlap(&a.settled.level, &b.settled.level)?;
        let (mut uncertainty, zero) = (fine.uncertainty, fine.zero);
        if a.settled.coarse.is_some() || b.settled.coarse.is_some() {
            let coarse = |term: &LevelTerm| {
                let built = term.settled.coarse.as_ref().unwrap_or(&term.settled.built);
                series::solve(built, term.reference.level)
            };
            let before = series::overlap(&coarse(a)?, &coarse(b)?)?;
            for power in 0..5 {
                if zero[power].is_none() {
                    let change = (fine.coefficients[power] - before.coefficients[power]).abs();
                    uncertainty[power] = uncertainty[power].max(SAFETY * change);
                }
            }
        }
        let series = fine.coefficients;
        Ok(Self { levels: levels.into(), known: Vec::new(), series, uncertainty, zero, overlap: true })
    }

    /// True if one of its levels has no exact value away from the operating point.
    #[must_use]
    pub fn is_formal(&self) -> bool {
        self.levels.iter().any(|term| term.settled.built.formal)
    }

    /// The next two orders beyond `order` that are not zero, with their powers, by which a
    /// series without an exact level judges itself.
    ///
    /// # Errors
    /// Those of the solves.
    pub fn next_orders(&self, order: usize, at: f64) -> Result<Vec<(usize, f64)>> {
        let mut series: Vec<f64> = Vec::new();
        for term in &self.levels {
            let own = series::continued(&term.settled.level)?;
            if series.is_empty() {
                series = vec![0.0; own.len()];
            }
            series.truncate(own.len());
            for (sum, energy) in series.iter_mut().zip(own) {
                *sum += term.times() * energy;
            }
        }
        for (weight, tree) in &self.known {
            for (sum, coefficient) in series.iter_mut().zip(tree.taylor(at, 0.0)) {
                *sum += weight * coefficient;
            }
        }
        // What a symmetry makes zero in third order, it makes zero in every odd one.
        let absent = |power: usize| match self.zero.get(power) {
            Some(zero) => zero.is_some(),
            None => power % 2 == 1 && self.zero[3].is_some(),
        };
        Ok(series
            .into_iter()
            .enumerate()
            .skip(order + 1)
            .filter(|&(power, coefficient)| coefficient != 0.0 && !absent(power))
            .take(2)
            .collect())
    }

    /// The known terms' change from the operating point.
    pub fn known_change(&self, at: f64, control: f64) -> f64 {
        self.known.iter().map(|(weight, tree)| weight * tree.change(at, control, 0.0)).sum()
    }

    /// The known terms at the operating point.
    #[must_use]
    pub fn known_value(&self, at: f64) -> f64 {
        self.known.iter().map(|(weight, tree)| weight * tree.value(at, 0.0)).sum()
    }

    /// Contributions of all levels, energies in the formula's unit.
    #[must_use]
    pub fn contributions(&self) -> Vec<ContributionOutcome> {
        self.levels
            .iter()
            .filter(|term| self.zero[2].is_none() && term.settled.level.zero()[2].is_none())
            .flat_map(|term| {
                term.settled.level.contributions().iter().map(|one| ContributionOutcome {
                    system: term.system.clone(),
                    level: term.named(one.channel).map_or(one.level, |named| Some(named.1)),
                    block: term.named(one.channel).map_or_else(Vec::new, |named| named.0),
                    energy: term.conversion * one.energy,
                    share: one.share,
                })
            })
            .collect()
    }

    /// Mixing of all levels.
    #[must_use]
    pub fn mixing(&self) -> Vec<MixingOutcome> {
        self.levels
            .iter()
            .flat_map(|term| {
                term.settled.level.mixing().iter().map(|one| MixingOutcome {
                    system: term.system.clone(),
                    level: term.named(one.channel).map_or(one.level, |named| named.1),
                    block: term.named(one.channel).map_or_else(Vec::new, |named| named.0),
                    coefficient: one.coefficient,
                })
            })
            .collect()
    }

    /// First levels of each block that the sum uses, formula's unit; a system
    /// that occurs with several blocks is named once per block.
    #[must_use]
    pub fn block_levels(&self) -> Vec<(String, Vec<f64>)> {
        let mut out: Vec<(String, Vec<f64>)> = Vec::new();
        for term in &self.levels {
            let levels = term.settled.level.levels().iter().map(|e| term.conversion * e).collect();
            let same_block = |other: &LevelTerm| {
                other.system == term.system && other.reference.block == term.reference.block
            };
            // The first block of a system carries the system's plain name, by
            // which readers look; further blocks say which they are.
            let first = self.levels.iter().find(|other| other.system == term.system).is_some_and(same_block);
            let name =
                if first { term.system.clone() } else { block_name(&term.system, &term.reference.block) };
            if out.iter().all(|(other, _)| *other != name) {
                out.push((name, levels));
            }
        }
        out
    }

    /// Basis sizes by system.
    #[must_use]
    pub fn sizes(&self) -> Vec<(String, usize)> {
        let mut out: Vec<(String, usize)> = Vec::new();
        for term in &self.levels {
            match out.iter_mut().find(|(name, _)| *name == term.system) {
                Some((_, size)) => *size = (*size).max(term.settled.built.size),
                None => out.push((term.system.clone(), term.settled.built.size)),
            }
        }
        out
    }

    /// Remarks of the levels, and the proven zeros.
    #[must_use]
    pub fn notes(&self) -> Vec<Note> {
        let mut out: Vec<Note> = Vec::new();
        let mut push = |note: Note| {
            if !out.contains(&note) {
                out.push(note);
            }
        };
        for (power, reason) in self.zero.iter().enumerate() {
            if let (1, Some(reason)) = (power, reason) {
                push(Note {
                    code: "even".into(),
                    text: format!("the odd coefficients vanish by symmetry ({reason})"),
                });
            }
        }
        for term in &self.levels {
            term.settled
                .level
                .notes()
                .iter()
                .chain(&term.settled.notes)
                .chain(&term.settled.built.notes)
                .for_each(|note| push(note.clone()));
        }
        out
    }
}
