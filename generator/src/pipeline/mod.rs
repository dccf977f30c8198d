//! A whole run: a checked spec in, an outcome and finished sources out.
//!
//! This is the only place that knows the order of the stages. Levels are
//! refined until their series and the exact levels at the ends of the range
//! have settled; a level that several formulas use is solved once.
//!
//! Not here: files on disk, arguments, the terminal.

mod formula;
mod settle;
mod sum;

use std::rc::Rc;

pub use settle::{Purpose, Settled};
pub use sum::{LevelTerm, Sum};

use crate::diagnostic::Result;
use crate::emit::{self, Source};
use crate::outcome::{ControlOutcome, FamilyParameterOutcome, Outcome};
use crate::spec::{Formula, LevelRef, Spec, Target, TermKind};

/// A finished run.
#[derive(Clone, Debug, PartialEq)]
pub struct Run {
    /// Everything that the record says.
    pub outcome: Outcome,
    /// The files, sources first and the record last.
    pub sources: Vec<Source>,
}

/// Solves every formula of a spec and emits every output.
///
/// # Errors
/// A mistake of the spec that only solving shows, an accuracy that was not
/// reached, or a tolerance that fails already at the operating point.
pub fn run(spec: &Spec) -> Result<Run> {
    let mut outcome = solve(spec)?;
    let sources = emit::all(spec, &mut outcome)?;
    Ok(Run { outcome, sources })
}

/// Solves every formula of a spec; no output is emitted.
///
/// # Errors
/// As [`run`].
pub fn solve(spec: &Spec) -> Result<Outcome> {
    let mut cache = Cache::new(spec);
    let mut formulas = Vec::with_capacity(spec.formulas.len());
    for formula in &spec.formulas {
        formulas.push(formula::outcome(spec, formula, &mut cache)?);
    }
    Ok(Outcome {
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
            .map(|parameter| FamilyParameterOutcome {
                name: parameter.name.clone(),
                unit: parameter.unit.symbol.clone(),
                from: parameter.from,
                to: parameter.to,
            })
            .collect(),
        formulas,
        outputs: Vec::new(),
        warnings: spec.warnings.clone(),
    })
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
}

impl<'a> Cache<'a> {
    fn new(spec: &'a Spec) -> Self {
        Self { spec, entries: Vec::new() }
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
