//! SPICE: one behavioural sub-circuit with the ports of the Verilog-A module.
//!
//! Only behavioural sources with the ternary operator are used, which the
//! common simulators share; every internal name carries the stem.

use minijinja::context;

use super::c::fill;
use super::circuit::{self, CircuitFormula, Polynomial, literal};
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
            let one = CircuitFormula::new(outcome, formula)?;
            let node = |word: &str| format!("{stem}_{}_{word}", one.name);
            let volt = |name: &str| format!("V({name}, ref)");
            let x = volt(&format!("{stem}_x"));
            let (from, to) = (literal(one.from), literal(one.to));
            let (held, offset) = (node("held"), node("d"));
            let d = volt(&offset);
            let inline = |text: String| {
                one.constants.iter().rev().fold(text, |text, c| text.replace(&c.name, &literal(c.value)))
            };
            // A family's coefficients are parameters of the sub-circuit, computed once.
            let own = |name: &str| format!("{stem}_{}_{name}", one.name);
            let main = if one.prelude.is_empty() {
                one.main.clone()
            } else {
                Polynomial { names: one.main.names.iter().map(|name| format!("{{{}}}", own(name))).collect() }
            };
            let mut held_to_box: Vec<String> = outcome
                .family
                .iter()
                .enumerate()
                .map(|(k, p)| {
                    let (from, to) = (literal(p.from), literal(p.to));
                    format!(".param {}={{max({from}, min({to}, {}))}}", own(&format!("p{k}")), p.name)
                })
                .collect();
            for (name, text) in &one.prelude {
                let mut text = text.clone();
                for k in (0..outcome.family.len()).rev() {
                    text = text.replace(&format!("(p{k}"), &format!("({}", own(&format!("p{k}"))));
                    text = text.replace(&format!("(t{k} "), &format!("({} ", own(&format!("t{k}"))));
                }
                held_to_box.push(format!(".param {}={{{text}}}", own(name)));
            }
            let source = |name: &str, expression: &str| format!("B{name} {name} ref V = {expression}");
            let mut sources = held_to_box;
            sources.extend([
                source(&held, &format!("{x} < {from} ? {from} : ({x} > {to} ? {to} : {x})")),
                source(&offset, &format!("{} - {}", volt(&held), literal(one.at))),
            ]);
            let beyond = format!("({x} - {})", volt(&held));
            let (mut value, mut slope) = (inline(main.value(&d)), inline(main.slope(&d)));
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
            Ok(context! {
                name => one.name,
                unit => one.unit,
                from => from,
                to => to,
                sources => sources,
            })
        })
        .collect::<Result<_>>()?;
    fill(
        TEMPLATE,
        &context! {
            header => header.to_vec(),
            name => stem,
            control_unit => outcome.control.unit.clone(),
            formulas => formulas,
            family => circuit::family_context(outcome),
        },
    )
}
