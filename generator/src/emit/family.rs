//! Files of formulas whose coefficients depend on parameters.
//!
//! Each parameter `p` is normalised to `t = (p - middle) / half`; each coefficient
//! of the offset is a nested polynomial of the `t`; the formula is then evaluated as
//! any other. C and Rust take the same steps, so they give the same bits.

use minijinja::{Value, context};

use super::header::{self, Entry};
use super::record::digest;
use super::text::{real, unit_name};
use super::{Source, arguments, c, circuit, rust};
use crate::diagnostic::{Error, Result};
use crate::form::tensor::Tensor;
use crate::outcome::{FamilyOutcome, FormulaOutcome, Outcome, OutputFormula, OutputOutcome};
use crate::spec::{Language, Output, Spec};

/// Steps in which the nearest zero of the slope is looked for to each side.
const LOOKS: u32 = 64;

/// Middle of a parameter's range, without the digits that only rounding gave it.
#[must_use]
pub fn middle(from: f64, to: f64) -> f64 {
    brief(0.5 * (from + to))
}

/// Half of a parameter's range, likewise.
#[must_use]
pub fn half(from: f64, to: f64) -> f64 {
    brief(0.5 * (to - from))
}

fn brief(x: f64) -> f64 {
    format!("{x:.13e}").parse().unwrap_or(x)
}

/// Bound on the rounding of a family's value in double precision, formula's unit;
/// `reach` is the largest offset.
///
/// A nested evaluation of `n` terms rounds each at most `2 n` times (Higham, *Accuracy and
/// Stability of Numerical Algorithms*, 2nd ed., section 5.1, from memory); the normalised
/// parameters are off by three roundings, and `|t| <= 1`. Powers of `t` are themselves computed
/// from the Chebyshev coefficients of the record, with as many roundings again.
#[must_use]
pub fn rounding(tensors: &[Tensor], powers: &[Vec<f64>], reach: f64) -> f64 {
    let mut bound = 0.0;
    for (tensor, powers) in tensors.iter().zip(powers).rev() {
        let degree: usize = tensor.degree.iter().sum();
        let size: f64 = powers.iter().map(|c| c.abs()).sum();
        let steps = 2 * degree + 2 * tensors.len() + 4 + 4 * degree + 2 * degree * degree;
        bound = bound * reach + steps as f64 * 0.5 * f64::EPSILON * size;
    }
    1.01 * bound
}

/// Emits every output of a family and enters it into `outcome.outputs`.
///
/// # Errors
/// Only if a rule of the program itself is broken.
pub fn outputs(spec: &Spec, outcome: &mut Outcome) -> Result<Vec<Source>> {
    let mut sources = Vec::new();
    let mut entries = Vec::new();
    for output in &spec.outputs {
        let stem = format!("{}_{}", outcome.name, output.suffix.as_deref().unwrap_or("f64"));
        let (language, printed, number) = match output.language {
            Language::Rust => ("rust", vec![in_rust(outcome, &stem)?], Some("f64".to_owned())),
            Language::C => ("c", in_c(outcome, &stem)?, Some("f64".to_owned())),
            Language::VerilogA => ("verilog-a", vec![in_circuit(outcome, output)?], None),
            Language::Spice => ("spice", vec![in_circuit(outcome, output)?], None),
        };
        let formulas = outcome
            .formulas
            .iter()
            .map(|one| {
                Ok(OutputFormula {
                    name: one.name.clone(),
                    rounding: one.error[2],
                    coefficients: serde_json::json!({ "degree": family(one)?.degree, "powers": fitted(one)?.1 }),
                    valid: one.valid.clone(),
                })
            })
            .collect::<Result<Vec<_>>>()?;
        for source in printed {
            entries.push(OutputOutcome {
                file: source.file.clone(),
                language: language.to_owned(),
                number: number.clone(),
                sha256: digest(source.text.as_bytes()),
                formulas: formulas.clone(),
            });
            sources.push(source);
        }
    }
    outcome.outputs = entries;
    Ok(sources)
}

fn in_circuit(outcome: &Outcome, output: &Output) -> Result<Source> {
    Ok(circuit::print(outcome, output)?.0)
}

fn family(formula: &FormulaOutcome) -> Result<&FamilyOutcome> {
    formula
        .family
        .as_ref()
        .ok_or_else(|| Error::internal("a formula of a family has no coefficients over the box"))
}

/// Tensors and nested powers of a formula's coefficients.
pub(super) fn fitted(formula: &FormulaOutcome) -> Result<(Vec<Tensor>, Vec<Vec<f64>>)> {
    let family = family(formula)?;
    let lists = family.coefficients.as_array().map(Vec::as_slice).unwrap_or_default();
    let tensors: Vec<Tensor> = family
        .degree
        .iter()
        .zip(lists)
        .map(|(degree, list)| {
            let mut coefficients = Vec::new();
            flatten(list, &mut coefficients);
            Tensor { degree: degree.clone(), coefficients }
        })
        .collect();
    let powers = tensors.iter().map(Tensor::powers).collect();
    Ok((tensors, powers))
}

fn flatten(list: &serde_json::Value, out: &mut Vec<f64>) {
    match list {
        serde_json::Value::Array(parts) => parts.iter().for_each(|part| flatten(part, out)),
        other => out.extend(other.as_f64()),
    }
}

/// A parameter as the files name it.
pub(super) struct Parameter {
    /// Argument's name.
    pub name: String,
    /// Name in the spec.
    pub spec: String,
    /// Unit in words.
    pub unit: String,
    /// Lower end.
    pub from: f64,
    /// Upper end.
    pub to: f64,
}

/// The parameters with argument names that clash with nothing.
pub(super) fn parameters(outcome: &Outcome) -> Vec<Parameter> {
    let control = arguments(&outcome.control.symbol);
    let mut out: Vec<Parameter> = Vec::new();
    for (idx, one) in outcome.family.iter().enumerate() {
        let mut name = arguments(&one.name);
        let local = name.len() == 2 && name.starts_with('t') && name.ends_with(|c: char| c.is_ascii_digit());
        let taken = ["control", "low", "high", "rising", "from", "to", "found", "status", "there", "t"];
        if local || name == control || taken.contains(&name.as_str()) || out.iter().any(|p| p.name == name) {
            name = format!("parameter_{}", idx + 1);
        }
        out.push(Parameter {
            name,
            spec: one.name.to_lowercase(),
            unit: unit_name(&one.unit),
            from: one.from,
            to: one.to,
        });
    }
    out
}

/// `c0 + t * (c1 + t * ...)`, the first parameter outermost; `None` for zero.
pub(super) fn polynomial(
    degree: &[usize],
    powers: &[f64],
    names: &[String],
    literal: &dyn Fn(f64) -> String,
) -> String {
    match degree.split_first() {
        None => literal(powers.first().copied().unwrap_or(0.0)),
        Some((&n, rest)) => {
            let stride = powers.len() / (n + 1);
            let mut text = String::new();
            let parts: Vec<&[f64]> = powers.chunks_exact(stride.max(1)).collect();
            let last = parts.iter().rposition(|part| part.iter().any(|c| *c != 0.0)).unwrap_or(0);
            for (k, part) in parts.iter().enumerate().take(last + 1).rev() {
                let term = polynomial(rest, part, names.get(1..).unwrap_or_default(), literal);
                let term = if rest.is_empty() || !term.contains(" + ") { term } else { format!("({term})") };
                text = if k == last {
                    term
                } else {
                    let inner = if text.contains(" + ") { format!("({text})") } else { text };
                    format!("{term} + ({} * {inner})", names[0])
                };
            }
            text
        }
    }
}

/// Powers of the derivative with respect to one normalised parameter, in the same shape.
fn derivative(degree: &[usize], powers: &[f64], axis: usize) -> Vec<f64> {
    let lengths: Vec<usize> = degree.iter().map(|n| n + 1).collect();
    let stride: usize = lengths[axis + 1..].iter().product();
    let mut out = vec![0.0; powers.len()];
    for (place, power) in powers.iter().enumerate() {
        let k = place / stride % lengths[axis];
        if k > 0 {
            out[place - stride] = k as f64 * power;
        }
    }
    out
}

/// `c0 + (d * (c1 + ...))` from the power `first` on; coefficients that are zero are left
/// out, which changes no bit.
pub(super) fn in_offset(zero: &[bool], first: usize, term: &dyn Fn(usize) -> String) -> String {
    let bracketed =
        |text: String| if text.contains(" + ") || text.contains(" * ") { format!("({text})") } else { text };
    let mut text = String::new();
    for (k, &zero) in zero.iter().enumerate().skip(first).rev() {
        text = match (text.is_empty(), zero) {
            (true, true) => text,
            (true, false) => term(k),
            (false, true) => format!("d * {}", bracketed(text)),
            (false, false) => format!("{} + (d * {})", term(k), bracketed(text)),
        };
    }
    if text.is_empty() { "0.0".to_owned() } else { text }
}

/// Signed literals stand in brackets, so that no two signs meet.
fn signed(value: f64) -> String {
    let text = real(value);
    if text.starts_with('-') { format!("({text})") } else { text }
}

/// What both languages print of one formula.
fn one(outcome: &Outcome, formula: &FormulaOutcome, stem: &str) -> Result<Value> {
    let (tensors, powers) = fitted(formula)?;
    let parameters = parameters(outcome);
    let names: Vec<String> = (0..parameters.len()).map(|k| format!("t{k}")).collect();
    let control_unit = unit_name(&outcome.control.unit);
    let order = tensors.len() - 1;
    let coefficients: Vec<Value> = tensors
        .iter()
        .zip(&powers)
        .enumerate()
        .map(|(k, (tensor, powers))| {
            let constant = tensor.degree.iter().all(|&n| n == 0);
            let text = |powers: &[f64]| polynomial(&tensor.degree, powers, &names, &signed);
            let slopes: Vec<String> = (0..parameters.len())
                .map(|axis| {
                    if constant { "0.0".to_owned() } else { text(&derivative(&tensor.degree, powers, axis)) }
                })
                .collect();
            let zero = k > 0 && powers.iter().all(|c| *c == 0.0);
            context! { power => k, value => text(powers), slopes, zero }
        })
        .collect();
    let zero: Vec<bool> =
        powers.iter().enumerate().map(|(k, powers)| k > 0 && powers.iter().all(|c| *c == 0.0)).collect();
    let value = in_offset(&zero, 0, &|k| format!("c{k}"));
    let slope = in_offset(&zero, 1, &|k| if k == 1 { "c1".to_owned() } else { format!("({k}.0 * c{k})") });
    let even = order >= 2 && powers.iter().skip(1).step_by(2).all(|odd| odd.iter().all(|c| *c == 0.0));
    let at = outcome.control.at;
    let both = even && formula.valid.from < at && at < formula.valid.to;
    Ok(context! {
        name => formula.name.clone(),
        stem => format!("{stem}_{}", formula.name),
        upper => format!("{stem}_{}", formula.name).to_uppercase(),
        unit => unit_name(&formula.unit),
        control_unit => control_unit,
        from => signed(formula.valid.from),
        to => signed(formula.valid.to),
        at => signed(at),
        e0 => signed(formula.series[0]),
        rounding => signed(formula.error[2]),
        order => order,
        count => order + 1,
        coefficients => coefficients,
        value => value,
        slope => slope,
        both => both,
    })
}

fn shared(outcome: &Outcome, stem: &str) -> Result<(Value, Vec<String>)> {
    let entries: Vec<Entry<'_>> = outcome
        .formulas
        .iter()
        .map(|measured| Entry { measured, valid: &measured.valid, rounding: 0.0, inverse_rounding: None })
        .collect();
    let evaluation = "Each coefficient is a nested polynomial of the family's normalised parameters, t = (parameter - middle) \
                      / half; then c0 + d*(c1 + d*c2), with one rounding per operation and no fused multiply-add. The table \
                      above holds at the centre of the box; the range holds over all of it. Outside range and box value and \
                      slope evaluate the same expression and promise nothing: use the checked value in control loops.";
    let lines = header::lines(outcome, stem, "double precision, a family", evaluation, &entries);
    let formulas = outcome.formulas.iter().map(|f| one(outcome, f, stem)).collect::<Result<Vec<_>>>()?;
    let family: Vec<Value> = parameters(outcome)
        .iter()
        .enumerate()
        .map(|(k, p)| {
            context! {
                name => p.name.clone(),
                spec => p.spec.clone(),
                upper => p.spec.to_uppercase(),
                unit => p.unit.clone(),
                from => signed(p.from),
                to => signed(p.to),
                middle => signed(middle(p.from, p.to)),
                half => signed(half(p.from, p.to)),
                t => format!("t{k}"),
                axis => k,
            }
        })
        .collect();
    let context = context! {
        header => lines.clone(),
        stem => stem,
        upper => stem.to_uppercase(),
        sha256 => outcome.spec.sha256.clone(),
        argument => arguments(&outcome.control.symbol),
        control_unit => unit_name(&outcome.control.unit),
        family => family,
        formulas => formulas,
        looks => LOOKS,
        halvings => shiftwright_runtime::double::BISECTIONS,
        newton => shiftwright_runtime::double::NEWTON_STEPS,
    };
    Ok((context, lines))
}

fn in_c(outcome: &Outcome, stem: &str) -> Result<Vec<Source>> {
    let (context, _) = shared(outcome, stem)?;
    let text = |template: &str| c::fill(template, &context);
    Ok(vec![
        Source { file: format!("{stem}.h"), text: text(include_str!("../../../templates/family.h"))? },
        Source { file: format!("{stem}.c"), text: text(include_str!("../../../templates/family.c"))? },
    ])
}

fn in_rust(outcome: &Outcome, stem: &str) -> Result<Source> {
    let (context, lines) = shared(outcome, stem)?;
    let body = c::fill(include_str!("../../../templates/family.rs"), &context)?;
    Ok(Source { file: format!("{stem}.rs"), text: rust::commented(&lines, &body)? })
}
