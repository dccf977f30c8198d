//! Verilog-A: an analog function per formula and one module.
//!
//! Written for the open language standard (Verilog-AMS language reference, the
//! analog subset): scalars only, no arrays, no system functions but `$strobe`.

use minijinja::context;

use super::c::fill;
use super::circuit::{self, CircuitFormula, literal};
use crate::diagnostic::Result;
use crate::outcome::Outcome;

const TEMPLATE: &str = include_str!("../../../templates/verilog_a.va");

/// The module of a whole run; `header` holds the comment lines, already safe
/// for a line comment.
///
/// # Errors
/// Only if the template itself is broken.
pub fn print(outcome: &Outcome, header: &[String]) -> Result<String> {
    let formulas: Vec<minijinja::Value> = outcome
        .formulas
        .iter()
        .map(|formula| {
            let one = CircuitFormula::new(outcome, formula)?;
            let mut steps: Vec<String> = Vec::new();
            let mut locals: Vec<String> = Vec::new();
            for (k, parameter) in outcome.family.iter().enumerate() {
                let (from, to) = (literal(parameter.from), literal(parameter.to));
                locals.push(format!("q{k}"));
                steps.push(format!("q{k} = (p{k} < {from}) ? {from} : ((p{k} > {to}) ? {to} : p{k});"));
            }
            for (name, text) in &one.prelude {
                locals.push(name.clone());
                steps.push(format!("{name} = {};", text.replace("(p", "(q")));
            }
            steps.push(format!("value = {};", one.main.value("d")));
            steps.push(format!("slope = {};", one.main.slope("d")));
            if let Some((gap, sign)) = &one.gap {
                let sign = if *sign < 0.0 { "-" } else { "+" };
                locals.extend(["squared".to_owned(), "half_gap".to_owned()]);
                steps.push(format!("squared = {};", gap.value("d")));
                steps.push("half_gap = (squared > 0.0) ? sqrt(squared) : 0.0;".into());
                steps.push(format!("value = value {sign} half_gap;"));
                steps.push(format!(
                    "slope = (squared > 0.0) ? (slope {sign} 0.5 * ({}) / half_gap) : slope;",
                    gap.slope("d")
                ));
            }
            Ok(context! {
                name => one.name,
                unit => one.unit,
                from => literal(one.from),
                to => literal(one.to),
                at => literal(one.at),
                constants => one.constants.iter().map(|c| context! { name => c.name.clone(), value => literal(c.value) }).collect::<Vec<_>>(),
                steps => steps,
                locals => locals,
            })
        })
        .collect::<Result<_>>()?;
    fill(
        TEMPLATE,
        &context! {
            header => header.to_vec(),
            name => outcome.name.clone(),
            control_unit => outcome.control.unit.clone(),
            formulas => formulas,
            family => circuit::family_context(outcome),
        },
    )
}
