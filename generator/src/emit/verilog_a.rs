//! Verilog-A: an analog function per formula and one module.
//!
//! Written for the open language standard (Verilog-AMS language reference, the
//! analog subset): scalars only, no arrays, no system functions but `$strobe`.

use minijinja::context;

use super::c::fill;
use super::circuit::{CircuitFormula, literal};
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
            let one = CircuitFormula::new(outcome, formula);
            let mut steps = vec![format!("value = {};", one.main.value("d")), format!("slope = {};", one.main.slope("d"))];
            let mut locals: Vec<&str> = Vec::new();
            if let Some((gap, sign)) = &one.gap {
                let sign = if *sign < 0.0 { "-" } else { "+" };
                locals.extend(["squared", "root"]);
                steps.push(format!("squared = {};", gap.value("d")));
                steps.push("root = (squared > 0.0) ? sqrt(squared) : 0.0;".into());
                steps.push(format!("value = value {sign} root;"));
                steps.push(format!(
                    "slope = (squared > 0.0) ? (slope {sign} 0.5 * ({}) / root) : slope;",
                    gap.slope("d")
                ));
            }
            context! {
                name => one.name,
                unit => one.unit,
                from => literal(one.from),
                to => literal(one.to),
                at => literal(one.at),
                constants => one.constants.iter().map(|c| context! { name => c.name.clone(), value => literal(c.value) }).collect::<Vec<_>>(),
                steps => steps,
                locals => locals,
            }
        })
        .collect();
    fill(
        TEMPLATE,
        &context! {
            header => header.to_vec(),
            name => outcome.name.clone(),
            control_unit => outcome.control.unit.clone(),
            formulas => formulas,
            family => Vec::<String>::new(),
        },
    )
}
