//! All Rust and C files of a run, with their entries in the record.

use super::record::digest;
use super::{Source, Target, files};
use crate::diagnostic::{Error, Result};
use crate::formula::{Formula, NumberFormat};
use crate::outcome::{Outcome, OutputFormula, OutputOutcome, Valid};
use crate::spec::{self, Language, Number, Output, OutputCounts, Spec};

/// Prints an output of a circuit language, with its entries in the record.
pub type Circuit<'a> = &'a dyn Fn(&Outcome, &Output) -> Result<(Source, Vec<OutputFormula>)>;

/// Emits every output of a spec in order and enters it into `outcome.outputs`.
///
/// - `own_range`: position of the formula and a rounding bound in its unit; gives the
///   range on which the formula keeps its tolerance with so much rounding on top.
/// - `circuit`: prints an output of a circuit language, with its entries.
///
/// # Errors
/// A number format that cannot hold a formula, or what the callbacks return.
pub fn outputs(
    spec: &Spec,
    outcome: &mut Outcome,
    own_range: &dyn Fn(usize, f64) -> Result<Valid>,
    circuit: Circuit<'_>,
) -> Result<Vec<Source>> {
    let mut sources = Vec::new();
    let mut entries = Vec::new();
    for output in &spec.outputs {
        let (language, target) = match output.language {
            Language::Rust => ("rust", Some(Target::Rust)),
            Language::C => ("c", Some(Target::C)),
            Language::VerilogA => ("verilog-a", None),
            Language::Spice => ("spice", None),
        };
        let (printed, formulas, number) = match target {
            Some(target) => {
                let number = output.number.unwrap_or(Number::F64);
                let word = number_word(number);
                let formulas = in_format(spec, outcome, number, output.counts.as_ref(), own_range)?;
                let stem = format!("{}_{}", outcome.name, output.suffix.as_deref().unwrap_or(word));
                let printed = files(outcome, target, &stem, &formulas)?;
                (printed, formulas.iter().map(Formula::output).collect(), Some(word.to_owned()))
            }
            None => {
                let (source, formulas) = circuit(outcome, output)?;
                (vec![source], formulas, None)
            }
        };
        for source in printed {
            entries.push(OutputOutcome {
                file: source.file.clone(),
                language: language.to_owned(),
                number: number.clone(),
                sha256: digest(source.text.as_bytes()),
                formulas: Vec::clone(&formulas),
            });
            sources.push(source);
        }
    }
    outcome.outputs = entries;
    Ok(sources)
}

fn number_word(number: Number) -> &'static str {
    match number {
        Number::F64 => "f64",
        Number::F32 => "f32",
        Number::Fixed => "fixed",
    }
}

/// All formulas in one number format.
fn in_format(
    spec: &Spec,
    outcome: &Outcome,
    number: Number,
    counts: Option<&OutputCounts>,
    own_range: &dyn Fn(usize, f64) -> Result<Valid>,
) -> Result<Vec<Formula>> {
    let one = |(position, (wanted, measured)): (usize, (&spec::Formula, _))| {
        let format = match number {
            Number::F64 => NumberFormat::F64,
            Number::F32 => NumberFormat::F32,
            Number::Fixed => {
                let counts = counts.and_then(|c| Some((c.control.clone(), c.values.get(position)?.clone())));
                let (control, value) = counts.ok_or_else(|| {
                    Error::internal("a fixed-point output reached the printer without its counts")
                })?;
                NumberFormat::Fixed { control, value }
            }
        };
        let own = |rounding: f64| own_range(position, rounding);
        Formula::new(measured, &outcome.control, &format, Some(&wanted.tolerance_place), &own)
    };
    spec.formulas.iter().zip(&outcome.formulas).enumerate().map(one).collect()
}
