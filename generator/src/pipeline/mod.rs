//! A whole run: a checked spec in, an outcome and finished sources out.
//!
//! This is the only place that knows the order of the stages. Levels are
//! refined until their series and the exact levels at the ends of the range
//! have settled; a level that several formulas use is solved once.
//!
//! Not here: files on disk, arguments, the terminal.

mod family;
mod formula;
mod settle;
mod sum;

use std::cell::RefCell;
use std::rc::Rc;

pub use settle::{Purpose, Settled};
pub use sum::{LevelTerm, Sum};

use crate::diagnostic::{Error, Result};
use crate::emit::{self, Source};
use crate::outcome::{ControlOutcome, FamilyParameterOutcome, FormulaOutcome, Outcome, Valid, ValueKind};
use crate::range;
use crate::spec::{Formula, LevelRef, Spec, Target, TermKind};

/// A finished run.
#[derive(Clone, Debug, PartialEq)]
pub struct Run {
    /// Everything that the record says.
    pub outcome: Outcome,
    /// The files, sources first and the record last.
    pub sources: Vec<Source>,
}

/// Times that a run starts again with larger bases because the exact levels at
/// the ends of a range had not settled.
const ROUNDS: usize = 4;

/// Part of the tolerance to which exact levels at the ends must have settled.
const SETTLED_AT_ENDS: f64 = 1e-3;

/// Solves every formula of a spec and emits every output.
///
/// # Errors
/// A mistake of the spec that only solving shows, an accuracy that was not
/// reached, or a tolerance that fails already at the operating point.
pub fn run(spec: &Spec) -> Result<Run> {
    with_formulas(spec, true)
}

/// Solves every formula of a spec; no output is emitted.
///
/// # Errors
/// As [`run`].
pub fn solve(spec: &Spec) -> Result<Outcome> {
    with_formulas(spec, false).map(|run| run.outcome)
}

/// The series of every formula, without ranges: E0 to E4 in the formula's unit.
///
/// # Errors
/// As [`run`], but for what only ranges show.
pub fn series(spec: &Spec) -> Result<Vec<[f64; 5]>> {
    Ok(sums(spec)?.iter().map(|sum| sum.series).collect())
}

/// The sums of all formulas at the operating point, without their neighbours.
fn sums(spec: &Spec) -> Result<Vec<Sum>> {
    let mut cache = Cache::new(spec, false);
    spec.formulas.iter().map(|formula| cache.sum(formula, 0)).collect()
}

fn with_formulas(spec: &Spec, emitting: bool) -> Result<Run> {
    if !spec.family.is_empty() {
        return family::run(spec, emitting);
    }
    prepared(spec, |sums, doubts, followed| {
        let mut measured = Vec::with_capacity(sums.len());
        for (idx, formula) in spec.formulas.iter().enumerate() {
            measured.push(formula::outcome(spec, formula, &sums[idx], &followed[idx], &doubts[idx])?);
        }
        let mut outcome = outcome(spec, measured.iter().map(|one| one.outcome.clone()).collect());
        let mut sources = Vec::new();
        if emitting {
            // Rust and C in one number format ask for the same range.
            let known: RefCell<Vec<(usize, f64, Valid)>> = RefCell::default();
            sources = emit::outputs(
                spec,
                &mut outcome,
                &|idx, rounding| {
                    let found = known.borrow().iter().find(|one| (one.0, one.1) == (idx, rounding)).cloned();
                    if let Some((_, _, valid)) = found {
                        return Ok(valid);
                    }
                    let (one, formula) = (&measured[idx], &spec.formulas[idx]);
                    let valid = one.own_range(spec, formula, &followed[idx], &doubts[idx], rounding)?;
                    known.borrow_mut().push((idx, rounding, valid.clone()));
                    Ok(valid)
                },
                &emit::circuit::print,
            )?;
            sources.push(Source {
                file: emit::record::file_name(&outcome.name),
                text: emit::record::write(&outcome)?,
            });
        }
        Ok(Run { outcome, sources })
    })
}

/// Solves and follows every formula of a spec without a family, and hands that on: the sums,
/// the numerical errors of the exact quantities, and those quantities, in the order of the spec.
fn prepared<R>(
    spec: &Spec,
    then: impl FnOnce(&[Sum], &[formula::Numerical], &[formula::Exact<'_>]) -> Result<R>,
) -> Result<R> {
    let at = spec.control.at;
    let mut cache = Cache::new(spec, true);
    let mut first = vec![0; spec.formulas.len()];
    for round in 0..ROUNDS {
        let mut sums = Vec::with_capacity(spec.formulas.len());
        let mut doubts = Vec::with_capacity(spec.formulas.len());
        for (formula, &first) in spec.formulas.iter().zip(&first) {
            let sum = cache.sum(formula, first)?;
            doubts.push(formula::Numerical::new(spec, formula, &sum)?);
            sums.push(sum);
        }
        let unsettled: Vec<usize> = (0..sums.len())
            .filter(|&idx| {
                let refinable = sums[idx].levels.iter().any(|term| term.settled.built.refinable);
                refinable && doubts[idx].largest() > SETTLED_AT_ENDS * spec.formulas[idx].tolerance
            })
            .collect();
        if !unsettled.is_empty() && round + 1 < ROUNDS {
            for idx in unsettled {
                first[idx] = sums[idx].levels.iter().map(|term| term.settled.refinement).max().unwrap_or(0);
            }
            continue;
        }
        let known: Vec<_> =
            sums.iter().map(|sum| move |control: f64| sum.known_change(at, control)).collect();
        let mut followed = Vec::with_capacity(sums.len());
        for ((formula, sum), known_change) in spec.formulas.iter().zip(&sums).zip(&known) {
            let base = if formula.value == ValueKind::Shift { 0.0 } else { sum.series[0] };
            let (within, tolerance) = (spec.control.within, formula.tolerance);
            followed.push(match sum.levels.as_slice() {
                _ if sum.is_formal() => {
                    formula::Exact::Formal { at, within, next: sum.next_orders(formula.order, at)? }
                }
                [one, other] if sum.overlap => {
                    formula::Exact::Followed(range::follow_overlap(&range::OverlapRequest {
                        at,
                        within,
                        systems: [&one.system, &other.system],
                        levels: [&one.settled.level, &other.settled.level],
                        base,
                        tolerance,
                    })?)
                }
                levels => {
                    let terms = levels
                        .iter()
                        .map(|term| range::Term {
                            times: term.times(),
                            system: &term.system,
                            level: &term.settled.level,
                        })
                        .collect();
                    formula::Exact::Followed(range::follow(&range::Request {
                        at,
                        within,
                        terms,
                        known_change,
                        base,
                        tolerance,
                    })?)
                }
            });
        }
        return then(&sums, &doubts, &followed);
    }
    Err(Error::internal("a run ended in no round"))
}

fn outcome(spec: &Spec, formulas: Vec<FormulaOutcome>) -> Outcome {
    Outcome {
        name: spec.name.clone(),
        summary: spec.summary.clone(),
        spec: spec.file.clone(),
        sources: spec.sources.clone(),
        inputs: spec.inputs.clone(),
        control: ControlOutcome {
            symbol: spec.control.symbol.clone(),
            unit: spec.control.unit.symbol.clone(),
            at: spec.control.at,
            within: spec.control.within,
        },
        family: spec
            .family
            .iter()
            .map(|one| FamilyParameterOutcome {
                name: one.name.clone(),
                unit: one.unit.symbol.clone(),
                from: one.from,
                to: one.to,
            })
            .collect(),
        formulas,
        outputs: Vec::new(),
        warnings: spec.warnings.clone(),
    }
}

/// Where exact levels may be asked for: twice as far from the operating point
/// as the wanted interval goes, on each side.
#[must_use]
pub fn reach(spec: &Spec) -> (f64, f64) {
    let (from, to) = spec.control.within;
    let at = spec.control.at;
    (at + 2.0 * (from - at), at + 2.0 * (to - at))
}

/// One solved level, by which later formulas find it.
struct Entry {
    system: usize,
    block: Vec<(String, f64)>,
    level: usize,
    order: usize,
    settled: Rc<Settled>,
}

/// Levels solved so far in one run.
pub(crate) struct Cache<'a> {
    spec: &'a Spec,
    entries: Vec<Entry>,
    listed: bool,
}

impl<'a> Cache<'a> {
    fn new(spec: &'a Spec, listed: bool) -> Self {
        Self { spec, entries: Vec::new(), listed }
    }

    /// The levels and known terms of a formula, added up.
    fn sum(&mut self, formula: &Formula, first: usize) -> Result<Sum> {
        let terms = match &formula.target {
            Target::Sum(terms) => terms,
            Target::Overlap(one, other) => {
                let mut term = |reference: &LevelRef| -> Result<LevelTerm> {
                    Ok(LevelTerm {
                        system: self.spec.systems[reference.system].name.clone(),
                        reference: reference.clone(),
                        weight: 1.0,
                        conversion: 1.0,
                        settled: self.level(reference, formula.order, first)?,
                    })
                };
                return Sum::overlap([term(one)?, term(other)?]);
            }
        };
        let mut levels = Vec::new();
        let mut known = Vec::new();
        for term in terms {
            match &term.kind {
                TermKind::Known(tree) => known.push((term.times, tree.clone())),
                TermKind::Level(reference) => {
                    let settled = self.level(reference, formula.order, first)?;
                    levels.push(LevelTerm {
                        system: self.spec.systems[reference.system].name.clone(),
                        reference: reference.clone(),
                        weight: term.times,
                        conversion: sum::conversion(&settled.built.unit, formula)?,
                        settled,
                    });
                }
            }
        }
        Sum::new(levels, known, self.spec.control.at, formula)
    }

    /// A level, refined at least to `first`, right for coefficients up to `order`.
    fn level(&mut self, reference: &LevelRef, order: usize, first: usize) -> Result<Rc<Settled>> {
        let found = self.entries.iter().find(|entry| {
            entry.system == reference.system
                && entry.level == reference.level
                && entry.block == reference.block
                && entry.order >= order
                && (entry.settled.coarse.is_none() || entry.settled.refinement > first)
        });
        if let Some(entry) = found {
            return Ok(entry.settled.clone());
        }
        let system = &self.spec.systems[reference.system];
        let purpose = Purpose {
            at: self.spec.control.at,
            reach: reach(self.spec),
            highest_level: self.highest_level(reference),
            order,
            listed: self.listed,
        };
        let settled = Rc::new(settle::settle(system, reference, purpose, first)?);
        self.entries.push(Entry {
            system: reference.system,
            block: reference.block.clone(),
            level: reference.level,
            order,
            settled: settled.clone(),
        });
        Ok(settled)
    }

    /// Highest level that any formula takes from this block, so that one basis serves all.
    fn highest_level(&self, reference: &LevelRef) -> usize {
        let same = |other: &&LevelRef| other.system == reference.system && other.block == reference.block;
        self.spec
            .formulas
            .iter()
            .flat_map(|formula| references(formula))
            .filter(same)
            .map(|other| other.level)
            .max()
            .unwrap_or(reference.level)
    }
}

/// The level references of a formula, in order.
fn references(formula: &Formula) -> Vec<&LevelRef> {
    match &formula.target {
        Target::Sum(terms) => terms
            .iter()
            .filter_map(|term| match &term.kind {
                TermKind::Level(reference) => Some(reference),
                TermKind::Known(_) => None,
            })
            .collect(),
        Target::Overlap(a, b) => vec![a, b],
    }
}
