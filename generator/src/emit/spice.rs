//! SPICE: one behavioural sub-circuit with the ports of the Verilog-A module.
//!
//! Only behavioural sources with the ternary operator are used, which the
//! common simulators share; every internal name carries the stem.

use minijinja::context;

use super::c::fill;
use super::circuit::{CircuitFormula, literal};
use crate::diagnostic::Result;
use crate::outcome::Outcome;

const TEMPLATE: &str = include_str!("../../../templates/spice.cir");

/// The sub-circuit of a whole run; `header` holds the comment lines, already
/// safe for a line comment.
///
/// # Errors
/// Only if the template itself is broken.
pub fn print(outcome: &Outcome, header: &[String]) -> Result<String> {
    let stem = &outcome.name;
    let formulas: Vec<minijinja::Value> = outcome
        .formulas
        .iter()
        .map(|formula| {
            let one = CircuitFormula::new(outcome, formula);
            let node = |word: &str| format!("{stem}_{}_{word}", one.name);
            let volt = |name: &str| format!("V({name}, ref)");
            let x = volt(&format!("{stem}_x"));
            let (from, to) = (literal(one.from), literal(one.to));
            let (held, offset) = (node("held"), node("d"));
            let d = volt(&offset);
            let inline = |text: String| {
                one.constants.iter().rev().fold(text, |text, c| text.replace(&c.name, &literal(c.value)))
            };
            let source = |name: &str, expression: &str| format!("B{name} {name} ref V = {expression}");
            let mut sources = vec![
                source(&held, &format!("{x} < {from} ? {from} : ({x} > {to} ? {to} : {x})")),
                source(&offset, &format!("{} - {}", volt(&held), literal(one.at))),
            ];
            let beyond = format!("({x} - {})", volt(&held));
            let (mut value, mut slope) = (inline(one.main.value(&d)), inline(one.main.slope(&d)));
            if let Some((gap, sign)) = &one.gap {
                let sign = if *sign < 0.0 { "-" } else { "+" };
                let squared = node("squared");
                let s = volt(&squared);
                sources.push(source(&squared, &inline(gap.value(&d))));
                // Both branches of the ternary are evaluated by some simulators,
                // so the root never sees a negative number.
                let root = format!("sqrt({s} > 0 ? {s} : 0)");
                value = format!("({value}) {sign} {root}");
                slope = format!(
                    "({slope}) {sign} ({s} > 0 ? 0.5 * ({}) / sqrt({s} > 0 ? {s} : 1) : 0)",
                    inline(gap.slope(&d))
                );
            }
            // The port itself may carry a name that is no valid device suffix
            // on its own, so the device takes the stem.
            sources.push(format!(
                "B{} {} ref V = (({value}) + ({slope}) * {beyond}) / {{value_scale}}",
                node("value"),
                one.name
            ));
            context! {
                name => one.name,
                unit => one.unit,
                from => from,
                to => to,
                sources => sources,
            }
        })
        .collect();
    fill(
        TEMPLATE,
        &context! {
            header => header.to_vec(),
            name => stem,
            control_unit => outcome.control.unit.clone(),
            formulas => formulas,
            family => Vec::<String>::new(),
        },
    )
}
