//! Verilog-A: an analog function per formula and one module.
//!
//! Written for the open language standard (Verilog-AMS language reference, the
//! analog subset): scalars only, no arrays, no system functions but `$strobe`.

use minijinja::{Environment, context};

use super::circuit::{CircuitFormula, literal};
use crate::diagnostic::{Error, Result};
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
                constants => one.constants.iter().map(|c| context! { name => c.name, value => literal(c.value) }).collect::<Vec<_>>(),
                steps => steps,
                locals => locals,
            }
        })
        .collect();
    fill("verilog_a.va", TEMPLATE, context! {
        header => header,
        name => outcome.name,
        control_unit => outcome.control.unit,
        formulas => formulas,
        family => Vec::<String>::new(),
    })
}

/// Fills a template with strict names.
pub(super) fn fill(name: &str, template: &str, values: minijinja::Value) -> Result<String> {
    let mut environment = Environment::new();
    environment.set_trim_blocks(true);
    environment.set_lstrip_blocks(true);
    environment.set_keep_trailing_newline(true);
    environment.set_undefined_behavior(minijinja::UndefinedBehavior::Strict);
    environment.set_auto_escape_callback(|_| minijinja::AutoEscape::None);
    environment
        .render_named_str(name, template, values)
        .map_err(|e| Error::internal(format!("template {name}: {e:#}")))
}
