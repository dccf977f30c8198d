//! One formula of the spec: candidate forms from its levels, and the choice
//! between them by their measured ranges.

use super::settle::SAFETY;
use super::sum::Sum;
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::form::{self, Form};
use crate::model::{AnyModel, Built};
use crate::outcome::{FormulaOutcome, Note, Valid, ValueKind};
use crate::pencil;
use crate::range::{Candidate, Followed, Formal, Limit, Ranged};
use crate::series;
use crate::spec::{CoefficientChoice, FormChoice, Formula, Spec};

/// What a form is held against.
pub(super) enum Exact<'a> {
    /// The exact quantity, followed.
    Followed(Followed<'a>),
    /// The series itself, where no exact level exists.
    Formal {
        /// Operating point.
        at: f64,
        /// Wanted interval.
        within: (f64, f64),
        /// Powers and coefficients of the next two orders.
        next: Vec<(usize, f64)>,
    },
}

/// A form before and after its digits are cut.
struct Proposed {
    full: Form,
    written: Form,
}

/// Numerical error of the exact quantity: a value at the operating point and
/// one at each end of the wanted interval, linear in between.
#[derive(Clone, Copy, Debug)]
pub(super) struct Numerical {
    centre: f64,
    ends: [f64; 2],
    spans: [f64; 2],
}

impl Numerical {
    /// Compares both refinements of every level at the ends of the wanted interval.
    pub(super) fn new(spec: &Spec, formula: &Formula, sum: &Sum) -> Result<Self> {
        let (at, (from, to)) = (spec.control.at, spec.control.within);
        let shift = formula.value == ValueKind::Shift;
        let mut ends = [0.0; 2];
        if sum.overlap || sum.is_formal() {
            // Envelopes change with the field by the series, and an unbound level is
            // its series, so its uncertainties tell how well they are known further out.
            for (end, control) in ends.iter_mut().zip([from, to]) {
                let d = (control - at).abs();
                *end = sum.uncertainty.iter().rev().fold(0.0, |total, u| total * d + u);
            }
            let centre = if shift { 0.0 } else { sum.uncertainty[0] };
            return Ok(Self { centre, ends, spans: [at - from, to - at] });
        }
        for (end, control) in ends.iter_mut().zip([from, to]) {
            for term in &sum.levels {
                let number = |built: &Built| built.number(term.reference.level);
                let fine = energy(&term.settled.built.model, control, number(&term.settled.built)?)?;
                let rounding = f64::EPSILON * fine.abs();
                let change = match &term.settled.coarse {
                    None => 0.0,
                    Some(coarse) => {
                        // A coarser basis may number its levels otherwise.
                        let there = energy(&coarse.model, control, number(coarse)?)?;
                        let here = if shift {
                            term.settled.level.energies()[0] - energy(&coarse.model, at, number(coarse)?)?
                        } else {
                            0.0
                        };
                        (fine - there - here).abs()
                    }
                };
                *end += term.times().abs() * SAFETY * change.max(rounding);
            }
        }
        let centre = if shift { 0.0 } else { sum.uncertainty[0] };
        Ok(Self { centre, ends: ends.map(|end| end.max(centre)), spans: [at - from, to - at] })
    }

    /// The estimate at an offset; beyond the wanted interval it grows on.
    pub(super) fn at(&self, d: f64) -> f64 {
        let side = usize::from(d > 0.0);
        if self.spans[side] > 0.0 {
            self.centre + (self.ends[side] - self.centre) * (d.abs() / self.spans[side])
        } else {
            self.centre.max(self.ends[side])
        }
    }

    /// Larger of the two ends.
    pub(super) fn largest(&self) -> f64 {
        self.ends[0].max(self.ends[1])
    }
}

/// Energy of a level by number at a control value.
fn energy(model: &AnyModel, control: f64, number: usize) -> Result<f64> {
    Ok(match model {
        AnyModel::Real(model) => pencil::eigenpair(&model.hamiltonian(control), number)?.energy,
        AnyModel::Complex(model) => pencil::eigenpair(&model.hamiltonian(control), number)?.energy,
    })
}

/// A formula with its outcome and the form that number formats start from.
pub(super) struct Measured {
    pub(super) outcome: FormulaOutcome,
    full: Form,
}

impl Measured {
    /// The range of a number format with so much rounding on top.
    pub(super) fn own_range(
        &self,
        spec: &Spec,
        formula: &Formula,
        exact: &Exact<'_>,
        numerical: &Numerical,
        rounding: f64,
    ) -> Result<Valid> {
        let proposed = Proposed { full: self.full.clone(), written: self.outcome.form.clone() };
        Ok(valid(spec, &measure(formula, exact, numerical, &proposed, rounding)?))
    }
}

pub(super) fn valid(spec: &Spec, ranged: &Ranged) -> Valid {
    let (from, to) = form::written_range(ranged.valid, spec.control.at);
    // An end that is the wanted one keeps the number as it was asked for.
    let exact = |end: f64, limit: Limit, wanted: f64| if limit == Limit::Within { wanted } else { end };
    Valid {
        from: exact(from, ranged.limited_by[0], spec.control.within.0),
        to: exact(to, ranged.limited_by[1], spec.control.within.1),
        limited_by: ranged.limited_by.map(|limit| limit.word().to_owned()),
    }
}

fn measure(
    formula: &Formula,
    exact: &Exact<'_>,
    numerical: &Numerical,
    proposed: &Proposed,
    rounding: f64,
) -> Result<Ranged> {
    let candidate = Candidate {
        form: &proposed.written,
        numerical: &|d| numerical.at(d),
        written: &|d| proposed.written.written_error(&proposed.full, d),
        rounding,
    };
    match exact {
        Exact::Followed(followed) => followed.measure(&candidate),
        Exact::Formal { at, within, next } => {
            Formal { at: *at, within: *within, next, tolerance: formula.tolerance }.measure(&candidate)
        }
    }
    .map_err(|error| place(error, formula))
}

/// Points an error that has no place at the formula's tolerance.
fn place(error: Error, formula: &Formula) -> Error {
    let put = |list: Vec<Diagnostic>| {
        list.into_iter()
            .map(|mut one| {
                one.place = one.place.or_else(|| Some(formula.tolerance_place.clone()));
                one
            })
            .collect()
    };
    match error {
        Error::Spec(list) => Error::Spec(put(list)),
        Error::Accuracy(list) => Error::Accuracy(put(list)),
        Error::System(list) => Error::System(list),
    }
}

/// Measures the forms that the spec asks for and keeps the one that it wants.
pub(super) fn outcome(
    spec: &Spec,
    formula: &Formula,
    sum: &Sum,
    exact: &Exact<'_>,
    numerical: &Numerical,
) -> Result<Measured> {
    let mut notes = sum.notes();
    let polynomial = || -> Result<(Proposed, Ranged)> {
        let proposed = match formula.coefficients {
            CoefficientChoice::Series => series_form(formula, sum),
            CoefficientChoice::Minimax => minimax(spec, formula, sum, exact, numerical)?,
        };
        let ranged = measure(formula, exact, numerical, &proposed, 0.0)?;
        Ok((proposed, ranged))
    };
    let paired = || -> Result<(Proposed, Ranged)> {
        if matches!(exact, Exact::Formal { .. }) {
            return Err(no_exact_level(formula, "a pair form", "`form: polynomial`"));
        }
        let proposed = pair_form(formula, sum)?;
        let ranged = measure(formula, exact, numerical, &proposed, 0.0)?;
        Ok((proposed, ranged))
    };
    let length = |ranged: &Ranged| ranged.valid.1 - ranged.valid.0;
    let (proposed, ranged) = match formula.form {
        FormChoice::Paired => paired()?,
        FormChoice::Polynomial => {
            let (proposed, ranged) = polynomial()?;
            if ranged.limited_by.iter().any(|&limit| matches!(limit, Limit::Remainder | Limit::Crossing)) {
                // Advice only after measuring: a near pair is no promise.
                if let Ok((_, other)) = paired()
                    && length(&other) > 1.02 * length(&ranged)
                {
                    notes.push(Note {
                        code: "pair-holds-further".into(),
                        text: format!(
                            "a neighbouring level limits this polynomial; `form: paired` of the same order holds from {} to {} {}",
                            brief(other.valid.0), brief(other.valid.1), spec.control.unit.symbol
                        ),
                    });
                }
            }
            if formula.coefficients == CoefficientChoice::Minimax {
                let series = measure(formula, exact, numerical, &series_form(formula, sum), 0.0);
                notes.push(Note {
                    code: "minimax".into(),
                    text: match series {
                        Ok(series) => format!(
                            "the series of the same order holds from {} to {} {}, this polynomial from {} to {}",
                            brief(series.valid.0),
                            brief(series.valid.1),
                            spec.control.unit.symbol,
                            brief(ranged.valid.0),
                            brief(ranged.valid.1)
                        ),
                        Err(_) => "the series of the same order misses the tolerance".into(),
                    },
                });
            }
            (proposed, ranged)
        }
        FormChoice::Auto => match (polynomial(), paired()) {
            (Ok(one), Ok(other)) => {
                let (a, b) = (length(&one.1), length(&other.1));
                let further = b > a * (1.0 + 1e-6);
                notes.push(Note {
                    code: "auto".into(),
                    text: format!(
                        "the polynomial holds over {} {unit}, the pair form over {} {unit}; the {} is written",
                        brief(a),
                        brief(b),
                        if further { "pair form" } else { "polynomial" },
                        unit = spec.control.unit.symbol
                    ),
                });
                if further { other } else { one }
            }
            (Ok(one), Err(_)) => one,
            (Err(_), Ok(other)) => other,
            (Err(error), Err(_)) => return Err(error),
        },
    };
    notes.extend(ranged.notes.iter().cloned());
    if let (Form::Paired { partner, .. }, Some(first)) = (&proposed.written, sum.levels.first())
        && first.settled.built.labelled
    {
        notes.push(Note {
            code: "partner".into(),
            text: format!("the partner is level {partner} among those of every l with the same m"),
        });
    }
    Ok(Measured {
        outcome: FormulaOutcome {
            name: formula.name.clone(),
            unit: formula.unit.symbol.clone(),
            value: formula.value,
            form: proposed.written,
            series: std::array::from_fn(|k| form::written(sum.series[k], sum.uncertainty[k])),
            uncertainty: sum.uncertainty.map(form::written_uncertainty),
            zero_by_symmetry: (1..5).filter(|&k| sum.zero[k].is_some()).collect(),
            tolerance: formula.tolerance,
            valid: valid(spec, &ranged),
            error: [ranged.remainder, ranged.numerical, ranged.written].map(form::written_uncertainty),
            first_to_fail: ranged.first_to_fail,
            contributions: sum.contributions(),
            mixing: sum.mixing(),
            levels: sum.block_levels(),
            sizes: sum.sizes(),
            samples: ranged.samples.clone(),
            notes,
            family: None,
        },
        full: proposed.full,
    })
}

/// What cannot be had where the field leaves no level bound.
fn no_exact_level(formula: &Formula, what: &str, instead: &str) -> Error {
    Error::spec(
        Diagnostic::new("no-exact-level", format!("{what} of `{}` needs an exact level", formula.name))
            .at(Some(formula.place.clone()))
            .found("open ends in a field, behind which no level is bound")
            .action(format!("use {instead}, or `ends: wall`")),
    )
}

/// A number for a sentence.
fn brief(x: f64) -> String {
    let text = format!("{x:.4e}");
    let value: f64 = text.parse().unwrap_or(x);
    format!("{value}")
}

fn series_form(formula: &Formula, sum: &Sum) -> Proposed {
    let mut coefficients = sum.series[..=formula.order].to_vec();
    if let (ValueKind::Shift, Some(first)) = (formula.value, coefficients.first_mut()) {
        *first = 0.0;
    }
    let full = Form::Polynomial { coefficients };
    Proposed { written: full.written(&sum.uncertainty, &[]), full }
}

fn minimax(
    spec: &Spec,
    formula: &Formula,
    sum: &Sum,
    exact: &Exact<'_>,
    numerical: &Numerical,
) -> Result<Proposed> {
    let Exact::Followed(followed) = exact else {
        return Err(no_exact_level(formula, "a best polynomial", "`coefficients: series`"));
    };
    let at = spec.control.at;
    let within = (spec.control.within.0 - at, spec.control.within.1 - at);
    let mut absent: Vec<usize> = Vec::new();
    if formula.value == ValueKind::Shift {
        absent.push(0);
    }
    if within.0 == -within.1 {
        absent.extend((1..=formula.order).filter(|&k| sum.zero[k].is_some()));
    }
    let best = form::widest(
        &|d| followed.value(at + d),
        within,
        formula.order,
        &absent,
        &|d| numerical.at(d),
        formula.tolerance,
    )
    .map_err(|error| place(error, formula))?;
    // Digits worth a hundred-thousandth of the tolerance at the far end.
    let span = best.interval.0.abs().max(best.interval.1.abs());
    let mut doubt = 1e-5 * formula.tolerance;
    let doubts: Vec<f64> = (0..=formula.order)
        .map(|k| {
            if k > 0 {
                doubt /= span;
            }
            doubt
        })
        .collect();
    let full = Form::Polynomial { coefficients: best.coefficients };
    Ok(Proposed { written: full.written(&doubts, &[]), full })
}

/// The pair form of the first level of the sum; everything else goes into its
/// mean, and its own partner, where that stands in the sum too, into both.
fn pair_form(formula: &Formula, sum: &Sum) -> Result<Proposed> {
    let Some(first) = sum.levels.first().filter(|_| !sum.overlap) else {
        return Err(Error::spec(
            Diagnostic::new("no-pair", "a pair form needs a level").at(Some(formula.place.clone())),
        ));
    };
    let pair = series::pair(&first.settled.built, first.reference.level, formula.partner)
        .map_err(|error| place(error, formula))?;
    let partner = pair.numbers[1];
    let mut weight = [first.times(), 0.0];
    let mut mean: Vec<f64> = sum.series[..=formula.order].to_vec();
    let mut doubt: Vec<f64> = sum.uncertainty[..=formula.order].to_vec();
    // Takes a level's own polynomial out of the sum again.
    let mut remove = |term: &super::LevelTerm| {
        for k in 0..=formula.order {
            mean[k] -= term.times() * term.settled.level.energies()[k];
            doubt[k] -= term.times().abs() * term.settled.uncertainty[k];
        }
    };
    remove(first);
    for term in sum.levels.iter().skip(1) {
        let same = term.system == first.system && term.reference.block == first.reference.block;
        if same && term.settled.built.number(term.reference.level)? == partner {
            weight[1] += term.times();
            remove(term);
        } else if same && term.reference.level == first.reference.level {
            weight[0] += term.times();
            remove(term);
        }
    }
    let (both, apart) = (weight[0] + weight[1], weight[0] - weight[1]);
    for k in 0..=formula.order {
        mean[k] += both * pair.mean[k];
        doubt[k] = doubt[k].max(0.0) + both.abs() * pair.mean_uncertainty[k];
    }
    if sum.levels.len() == 1 && sum.known.is_empty() {
        // Nothing was left to subtract, so no digit was lost either.
        mean = pair.mean[..=formula.order].iter().map(|m| both * m).collect();
    }
    if formula.value == ValueKind::Shift {
        // The shift counts from the level itself, so the mean starts below it
        // by the half gap at the operating point.
        let half = libm::sqrt(pair.half_gap_squared[0].max(0.0));
        mean[0] = -(pair.sign * apart) * half;
    }
    let full = Form::Paired {
        mean,
        half_gap_squared: pair.half_gap_squared[..=formula.order].iter().map(|h| apart * apart * h).collect(),
        sign: if apart < 0.0 { -pair.sign } else { pair.sign },
        partner,
    };
    let gap_doubt: Vec<f64> =
        pair.half_gap_squared_uncertainty[..=formula.order].iter().map(|u| apart * apart * u).collect();
    Ok(Proposed { written: full.written(&doubt, &gap_doubt), full })
}
