//! Constants that became arguments: coefficients over a box, and one range for all of it.
//!
//! Each coefficient is interpolated over the box in tensor Chebyshev form from series
//! solved at its nodes; the error is measured at points that the fit did not use, and
//! the degree is raised until it no longer matters. The range is measured with the fitted
//! coefficients at points of the box, its ends are interpolated in between, and
//! the interpolant's own measured error is taken off.

use super::formula::{Exact, Numerical, outcome as at_one_point, valid};
use super::{Run, Sum, outcome, prepared, reach, sums};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::emit::{self, Source};
use crate::form::tensor::{Tensor, grid, nested, nodes};
use crate::form::{self, Form};
use crate::outcome::{FamilyOutcome, FamilySample, FormulaOutcome, Valid, ValueKind};
use crate::range::{Candidate, Followed, Limit, Ranged, Sample};
use crate::spec::{FormChoice, Formula, Language, Number, Spec};

/// Degrees tried first, and the highest by number of parameters.
const LOWEST: usize = 4;
const HIGHEST: [usize; 3] = [20, 12, 8];

/// Part of the tolerance that the coefficients' errors may take anywhere in box and range.
const SHARE: f64 = 1e-3;

/// Between points, errors are taken to be this many times what was measured at them.
const BETWEEN: f64 = 2.0;

/// Positions at which fits are checked, none of them a node of a degree that is tried.
const CHECKED: [f64; 4] = [-0.91, -0.37, 0.29, 0.83];

/// Degree in which the range's ends are interpolated, by number of parameters.
const ENDS: [usize; 3] = [4, 2, 2];

/// Positions per direction at which interpolated ends are compared.
const LATTICE: usize = 21;

/// One formula's coefficients over the box.
struct Fit {
    /// Per power of the offset.
    tensors: Vec<Tensor>,
    /// The same in nested powers, as the code evaluates them.
    powers: Vec<Vec<f64>>,
    /// Per power, the measured error of the fit, with its safety factor.
    error: Vec<f64>,
}

impl Fit {
    fn coefficients(&self, t: &[f64]) -> Vec<f64> {
        self.tensors
            .iter()
            .zip(&self.powers)
            .map(|(tensor, powers)| {
                let t = if tensor.degree.iter().all(|&n| n == 0) { &[][..] } else { t };
                if t.is_empty() { powers[0] } else { nested(&tensor.degree, powers, t) }
            })
            .collect()
    }

    fn form(&self, t: &[f64]) -> Form {
        Form::Polynomial { coefficients: self.coefficients(t) }
    }
}

/// The box.
struct Region<'a> {
    spec: &'a Spec,
}

impl Region<'_> {
    fn point(&self, t: &[f64]) -> Vec<f64> {
        self.spec
            .family
            .iter()
            .zip(t)
            .map(|(one, &t)| match t {
                -1.0 => one.from,
                1.0 => one.to,
                t => emit::family::middle(one.from, one.to) + t * emit::family::half(one.from, one.to),
            })
            .collect()
    }

    fn at(&self, t: &[f64]) -> Result<Spec> {
        self.spec.at_point(&self.point(t)).map_err(|error| self.place(error, t))
    }

    fn words(&self, t: &[f64]) -> String {
        let parts: Vec<String> = self
            .spec
            .family
            .iter()
            .zip(self.point(t))
            .map(|(one, value)| format!("{} = {value} {}", one.name, one.unit.symbol))
            .collect();
        parts.join(", ")
    }

    /// Says where in the box an error arose.
    fn place(&self, error: Error, t: &[f64]) -> Error {
        let put = |list: Vec<Diagnostic>| -> Vec<Diagnostic> {
            list.into_iter()
                .map(|mut one| {
                    one.message = format!("{}, at {} of the family", one.message, self.words(t));
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
}

/// What a fit needs of one point.
struct Series {
    coefficients: Vec<f64>,
    uncertainty: Vec<f64>,
    zero: Vec<bool>,
}

fn series(formula: &Formula, sum: &Sum) -> Series {
    let mut out = Series {
        coefficients: sum.series[..=formula.order].to_vec(),
        uncertainty: sum.uncertainty[..=formula.order].to_vec(),
        zero: (0..=formula.order).map(|k| sum.zero[k].is_some()).collect(),
    };
    if formula.value == ValueKind::Shift {
        (out.coefficients[0], out.uncertainty[0], out.zero[0]) = (0.0, 0.0, true);
    }
    out
}

/// Solves, fits, measures and emits a family.
///
/// # Errors
/// Those of a single run, with the point of the box; coefficients that no polynomial over
/// the box follows; an output that families do not have.
pub(super) fn run(spec: &Spec, emitting: bool) -> Result<Run> {
    refuse(spec)?;
    let region = Region { spec };
    let fits = fit(&region)?;
    let count = spec.family.len();
    let centre = vec![0.0; count];
    let roundings: Vec<f64> =
        fits.iter().map(|fit| emit::family::rounding(&fit.tensors, &fit.powers, span(spec))).collect();

    // Ranges at the nodes of the ends' interpolant, and where it is checked.
    let lines = vec![ENDS[count - 1]; count];
    let inside = nodes(&lines);
    let checks = grid(&vec![vec![CHECKED[1], CHECKED[3]]; count]);
    let mut measured: Vec<Vec<Point>> = Vec::new();
    let mut centres: Vec<FormulaOutcome> = Vec::new();
    for t in inside.iter().chain(&checks) {
        let here = region.at(t)?;
        let points = prepared(&here, |sums, doubts, followed| {
            if *t == centre {
                for (idx, formula) in here.formulas.iter().enumerate() {
                    let one = at_one_point(&here, formula, &sums[idx], &followed[idx], &doubts[idx])?;
                    centres.push(one.outcome);
                }
            }
            fits.iter()
                .zip(&roundings)
                .enumerate()
                .map(|(idx, (fit, &rounding))| {
                    Point::new(
                        &fit.form(t),
                        rounding,
                        bound(&followed[idx], &here.formulas[idx])?,
                        &doubts[idx],
                    )
                })
                .collect::<Result<Vec<_>>>()
        })
        .map_err(|error| region.place(error, t))?;
        measured.push(points);
    }
    if centres.len() != spec.formulas.len() {
        return Err(Error::internal("the centre of a family's box was not measured"));
    }
    let mut formulas = centres;
    for (idx, formula) in formulas.iter_mut().enumerate() {
        let points: Vec<&Point> = measured.iter().filter_map(|all| all.get(idx)).collect();
        complete(spec, formula, &fits[idx], roundings[idx], &points, inside.len(), &lines)?;
    }
    sample(&region, &fits, &mut formulas, &centre)?;
    let mut outcome = outcome(spec, formulas);
    let mut sources = Vec::new();
    if emitting {
        sources = emit::family::outputs(spec, &mut outcome)?;
        sources.push(Source {
            file: emit::record::file_name(&outcome.name),
            text: emit::record::write(&outcome)?,
        });
    }
    Ok(Run { outcome, sources })
}

/// What families do not have.
fn refuse(spec: &Spec) -> Result<()> {
    for formula in &spec.formulas {
        if formula.form != FormChoice::Polynomial {
            return Err(Error::spec(
                Diagnostic::new("not-built", "a pair form over a family is read but not yet fitted")
                    .at(Some(formula.place.clone()))
                    .action("use `form: polynomial`, or generate one spec per value of the constant"),
            ));
        }
    }
    for output in &spec.outputs {
        let number = output.number.unwrap_or(Number::F64);
        if matches!(output.language, Language::Rust | Language::C) && number != Number::F64 {
            return Err(Error::spec(
                Diagnostic::new("not-built", "this number format is not yet written for families")
                    .at(Some(output.place.clone()))
                    .expected("f64")
                    .action("use `number: f64`, or generate one spec per value of the constant"),
            ));
        }
    }
    Ok(())
}

/// Largest distance from the operating point inside the wanted interval.
fn span(spec: &Spec) -> f64 {
    let (from, to) = spec.control.within;
    (from - spec.control.at).abs().max((to - spec.control.at).abs())
}

/// Coefficients over the box, their degree raised until their errors no longer matter.
fn fit(region: &Region<'_>) -> Result<Vec<Fit>> {
    let spec = region.spec;
    let count = spec.family.len();
    let solved = |t: &[f64]| -> Result<Vec<Series>> {
        let here = region.at(t)?;
        let sums = sums(&here).map_err(|error| region.place(error, t))?;
        Ok(here.formulas.iter().zip(&sums).map(|(formula, sum)| series(formula, sum)).collect())
    };
    let positions = if count == 3 { &CHECKED[..3] } else { &CHECKED[..] };
    let checks = grid(&vec![positions.to_vec(); count]);
    let exact = checks.iter().map(|t| solved(t)).collect::<Result<Vec<_>>>()?;
    let reach = span(spec);
    let mut degree = LOWEST;
    loop {
        let degrees = vec![degree; count];
        let places = nodes(&degrees);
        let values = places.iter().map(|t| solved(t)).collect::<Result<Vec<_>>>()?;
        let mut fits = Vec::with_capacity(spec.formulas.len());
        let mut missed = None;
        for (idx, formula) in spec.formulas.iter().enumerate() {
            let fit = one(idx, formula, &degrees, &values, &checks, &exact, reach);
            let effect = fit.error.iter().rev().fold(0.0, |sum, error| sum * reach + error);
            if effect.is_nan() || effect > SHARE * formula.tolerance {
                missed = missed.or(Some((idx, effect)));
            }
            fits.push(fit);
        }
        let Some((idx, effect)) = missed else { return Ok(fits) };
        if degree >= HIGHEST[count - 1] {
            return Err(rough(region, idx, effect, &places)?);
        }
        degree += 2;
    }
}

fn one(
    idx: usize,
    formula: &Formula,
    degrees: &[usize],
    values: &[Vec<Series>],
    checks: &[Vec<f64>],
    exact: &[Vec<Series>],
    reach: f64,
) -> Fit {
    let mut fit = Fit { tensors: Vec::new(), powers: Vec::new(), error: Vec::new() };
    for power in 0..=formula.order {
        let all = || values.iter().chain(exact).map(|point| &point[idx]);
        if all().all(|one| one.zero[power]) {
            fit.tensors.push(Tensor { degree: vec![0; degrees.len()], coefficients: vec![0.0] });
            fit.powers.push(vec![0.0]);
            fit.error.push(0.0);
            continue;
        }
        let here: Vec<f64> = values.iter().map(|point| point[idx].coefficients[power]).collect();
        let mut tensor = Tensor::fit(degrees, &here);
        let doubt = all().map(|one| one.uncertainty[power]).fold(0.0, f64::max);
        // Digits beyond what the fit, or a thousandth of its allowance, can tell apart.
        let room = 1e-3 * SHARE * formula.tolerance / libm::pow(reach, power as f64);
        let digits = doubt.max(room) / tensor.coefficients.len() as f64;
        tensor.coefficients.iter_mut().for_each(|c| *c = form::written(*c, digits));
        let powers = tensor.powers();
        let missed = checks.iter().zip(exact).fold(0.0_f64, |worst, (t, point)| {
            worst.max((nested(degrees, &powers, t) - point[idx].coefficients[power]).abs())
        });
        fit.error.push(BETWEEN * missed + doubt);
        fit.tensors.push(tensor);
        fit.powers.push(powers);
    }
    fit
}

/// Why coefficients are not smooth over the box: where levels come closest.
fn rough(region: &Region<'_>, idx: usize, effect: f64, places: &[Vec<f64>]) -> Result<Error> {
    let spec = region.spec;
    let formula = &spec.formulas[idx];
    let mut closest: Option<(f64, &Vec<f64>)> = None;
    for t in places {
        let here = region.at(t)?;
        let mut cache = super::Cache::new(&here, true);
        let sum = cache.sum(&here.formulas[idx], 0).map_err(|error| region.place(error, t))?;
        for term in &sum.levels {
            let levels = term.settled.level.levels();
            let own = term.settled.level.energies()[0];
            for other in levels.iter().filter(|other| **other != own) {
                let gap = (term.times() * (other - own)).abs();
                if closest.is_none_or(|(least, _)| gap < least) {
                    closest = Some((gap, t));
                }
            }
        }
    }
    let unit = &formula.unit.symbol;
    let found = closest.map_or_else(String::new, |(gap, t)| {
        format!("; a neighbouring level is nearest at {}, {gap:.3e} {unit} away", region.words(t))
    });
    Ok(Error::accuracy(
        Diagnostic::new(
            "family-crossing",
            format!("the coefficients of `{}` are not smooth over the family's box", formula.name),
        )
        .at(Some(formula.place.clone()))
        .found(format!("an error of {effect:.3e} {unit} from fitted coefficients{found}"))
        .expected(format!("at most {:.3e} {unit}, a thousandth of the tolerance", SHARE * formula.tolerance))
        .action(
            "name what keeps the levels apart under `conserved`, make the box smaller so that no level crosses in it, \
             or allow a larger tolerance",
        ),
    ))
}

/// The range of the fitted formula at one point of the box.
struct Point {
    ranged: Ranged,
    /// Control values over what was asked for, with the remainder there.
    remainders: Vec<(f64, f64)>,
}

impl Point {
    fn new(form: &Form, rounding: f64, followed: &Followed<'_>, doubt: &Numerical) -> Result<Self> {
        let ranged = followed.measure(&Candidate {
            form,
            numerical: &|d| doubt.at(d),
            written: &|_| rounding,
            rounding: 0.0,
        })?;
        let at = followed.at();
        let (from, to) = ranged.valid;
        let remainders = (0..=128)
            .map(|k| from + (to - from) * f64::from(k) / 128.0)
            .map(|x| (x, (form.value(x - at) - followed.value(x)).abs()))
            .filter(|one| one.1.is_finite())
            .collect();
        Ok(Self { ranged, remainders })
    }

    /// How far the formula holds to one side, and why no further.
    fn end(&self, side: usize, spec: &Spec) -> (f64, Limit) {
        let (low, high) = self.ranged.valid;
        let (wide, at) = (reach(spec), spec.control.at);
        let end = if side == 0 { low } else { high };
        let far = if side == 0 { wide.0 } else { wide.1 };
        let limit = self.ranged.limited_by[side];
        let end = match limit {
            Limit::Within => self.ranged.first_to_fail[side].unwrap_or(far),
            _ => end,
        };
        ((end - at).abs(), limit)
    }
}

/// Fills in what holds over the whole box.
fn complete(
    spec: &Spec,
    formula: &mut FormulaOutcome,
    fit: &Fit,
    rounding: f64,
    points: &[&Point],
    inside: usize,
    degree: &[usize],
) -> Result<()> {
    let at = spec.control.at;
    let (wanted, wide) = (spec.control.within, reach(spec));
    let centre = vec![0.0; spec.family.len()];
    let positions = (0..LATTICE).map(|k| 2.0 * k as f64 / (LATTICE - 1) as f64 - 1.0).collect::<Vec<_>>();
    let lattice = grid(&vec![positions; spec.family.len()]);
    let checks = grid(&vec![vec![CHECKED[1], CHECKED[3]]; spec.family.len()]);
    let mut ends = [at; 2];
    let mut limits = [Limit::Within; 2];
    let mut fails = [None; 2];
    for side in 0..2 {
        let span = (if side == 0 { wanted.0 } else { wanted.1 } - at).abs();
        let all: Vec<(f64, Limit)> = points.iter().map(|point| point.end(side, spec)).collect();
        let values: Vec<f64> = all[..inside].iter().map(|one| one.0).collect();
        let tensor = Tensor::fit(degree, &values);
        let powers = tensor.powers();
        let off = checks
            .iter()
            .zip(&all[inside..])
            .fold(0.0_f64, |worst, (t, one)| worst.max((nested(degree, &powers, t) - one.0).abs()));
        let least = lattice.iter().map(|t| nested(degree, &powers, t)).fold(f64::INFINITY, f64::min);
        let (nearest, limit) = all
            .iter()
            .copied()
            .fold((f64::INFINITY, Limit::Within), |best, one| if one.0 < best.0 { one } else { best });
        // Where the ends are all alike nothing lies between the points.
        let away = least.min(nearest) - BETWEEN * off;
        let sign = if side == 0 { -1.0 } else { 1.0 };
        let farthest = (if side == 0 { wide.0 } else { wide.1 } - at).abs();
        if away >= span {
            ends[side] = if side == 0 { wanted.0 } else { wanted.1 };
            fails[side] = (away < farthest).then_some(at + sign * away);
        } else {
            if away.is_nan() || away <= 0.0 {
                return Err(Error::accuracy(
                    Diagnostic::new("tolerance-missed", "no range holds over the whole box of the family")
                        .found(format!("a range of {nearest:e} to one side at its worst point"))
                        .action("make the box smaller, or allow a larger tolerance"),
                ));
            }
            ends[side] = at + sign * away;
            limits[side] = if limit == Limit::Within { Limit::Remainder } else { limit };
            fails[side] = Some(ends[side]);
        }
    }
    let ranged = Ranged { valid: (ends[0], ends[1]), limited_by: limits, ..points[0].ranged.clone() };
    formula.valid = valid(spec, &ranged);
    formula.first_to_fail = fails;
    let (from, to) = (formula.valid.from, formula.valid.to);
    let largest = |pick: &dyn Fn(&Point) -> f64| points.iter().map(|one| pick(one)).fold(0.0, f64::max);
    let remainder = largest(&|point| {
        let inside = point.remainders.iter().filter(|(x, _)| *x >= from && *x <= to);
        inside.map(|one| one.1).fold(0.0, f64::max)
    });
    let numerical = largest(&|point| point.ranged.numerical);
    formula.error = [remainder, numerical, rounding].map(form::written_uncertainty);
    formula.form = fit.form(&centre);
    formula.zero_by_symmetry.retain(|&power| match fit.tensors.get(power) {
        Some(tensor) => tensor.coefficients.iter().all(|c| *c == 0.0),
        None => true,
    });
    formula.family = Some(FamilyOutcome {
        degree: fit.tensors.iter().map(|tensor| tensor.degree.clone()).collect(),
        coefficients: fit.tensors.iter().map(json).collect(),
        samples: Vec::new(),
    });
    Ok(())
}

/// Nested lists in Chebyshev order.
fn json(tensor: &Tensor) -> serde_json::Value {
    fn lists(degree: &[usize], values: &[f64]) -> serde_json::Value {
        match degree.split_first() {
            None => serde_json::json!(values.first().copied().unwrap_or(0.0)),
            Some((&n, rest)) => {
                values.chunks_exact(values.len() / (n + 1)).map(|part| lists(rest, part)).collect()
            }
        }
    }
    lists(&tensor.degree, &tensor.coefficients)
}

/// Exact values beside the formula's at corners, centre and points between, over the final range.
fn sample(region: &Region<'_>, fits: &[Fit], formulas: &mut [FormulaOutcome], centre: &[f64]) -> Result<()> {
    let count = region.spec.family.len();
    let mut places = vec![centre.to_vec()];
    places.extend(grid(&vec![vec![-1.0, 1.0]; count]));
    places.extend(grid(&vec![vec![CHECKED[0], CHECKED[2]]; count]));
    for t in &places {
        let here = region.at(t)?;
        prepared(&here, |_, _, followed| {
            for (idx, ((formula, fit), followed)) in formulas.iter_mut().zip(fits).zip(followed).enumerate() {
                let followed = bound(followed, &here.formulas[idx])?;
                let (form, at) = (fit.form(t), followed.at());
                let Valid { from, to, .. } = formula.valid;
                let parameters = region.point(t);
                let controls: Vec<f64> = if t == centre {
                    (0..9)
                        .map(|k| if k == 8 { to } else { from + (to - from) * f64::from(k) / 8.0 })
                        .collect()
                } else {
                    vec![from, from + 0.3 * (to - from), from + 0.7 * (to - from), to]
                };
                let mut samples = Vec::with_capacity(controls.len());
                for control in controls {
                    let one = Sample {
                        control,
                        exact: followed.exact(control)?,
                        formula: form.value(control - at),
                    };
                    let off = (one.exact - one.formula).abs();
                    if off.is_nan() || off > formula.tolerance {
                        return Err(missed(region, formula, t, &one));
                    }
                    samples.push(one);
                }
                if let Some(family) = &mut formula.family {
                    family.samples.extend(samples.iter().map(|one| FamilySample {
                        parameters: parameters.clone(),
                        control: one.control,
                        exact: one.exact,
                        formula: one.formula,
                    }));
                }
                if t == centre {
                    formula.samples = samples;
                }
            }
            Ok(())
        })
        .map_err(|error| region.place(error, t))?;
    }
    Ok(())
}

/// The followed quantity; a level without an exact one has no range that could be measured.
fn bound<'a, 'b>(exact: &'a Exact<'b>, formula: &Formula) -> Result<&'a Followed<'b>> {
    match exact {
        Exact::Followed(followed) => Ok(followed),
        Exact::Formal { .. } => Err(Error::spec(
            Diagnostic::new("not-built", "a family of levels that no field leaves bound is not built")
                .at(Some(formula.place.clone()))
                .action("use `ends: wall`, or generate one spec per value of the constant"),
        )),
    }
}

fn missed(region: &Region<'_>, formula: &FormulaOutcome, t: &[f64], one: &Sample) -> Error {
    Error::accuracy(
        Diagnostic::new(
            "tolerance-missed",
            format!("`{}` misses its tolerance between the points of the family's box", formula.name),
        )
        .found(format!(
            "an error of {:e} {} at {} and control {}",
            (one.exact - one.formula).abs(),
            formula.unit,
            region.words(t),
            one.control
        ))
        .expected(format!("at most {} {}", formula.tolerance, formula.unit))
        .action("make the box smaller"),
    )
}
