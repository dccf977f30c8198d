//! What the circuit languages share: a formula as named constants and steps.
//!
//! A circuit output evaluates the same nested form as the double-precision
//! file, then goes on along the tangent outside the range, so that value and
//! slope are continuous and a simulator's iterations converge. Languages print
//! the steps; they do no arithmetic.

use super::{Source, family, header, spice, verilog_a};
use crate::diagnostic::Result;
use crate::form::Form;
use crate::outcome::{FormulaOutcome, Outcome, OutputFormula, ValueKind};
use crate::spec::{Language, Output};

/// Prints one circuit output with its entries in the record.
///
/// # Errors
/// Only if a template is broken.
pub fn print(outcome: &Outcome, output: &Output) -> Result<(Source, Vec<OutputFormula>)> {
    let entries: Vec<header::Entry<'_>> = outcome
        .formulas
        .iter()
        .map(|measured| header::Entry {
            measured,
            valid: &measured.valid,
            rounding: rounding(measured),
            inverse_rounding: None,
        })
        .collect();
    let evaluation = "Evaluated as c0 + d*(c1 + d*c2) in the simulator's double precision. Outside the range the value goes \
                      on along the tangent at the end and `ok` falls to 0: the numbers there are no prediction.";
    let verilog = output.language == Language::VerilogA;
    let format = if verilog { "Verilog-A module" } else { "SPICE sub-circuit" };
    let lines = header::lines(outcome, &outcome.name, format, evaluation, &entries);
    let (ending, text) = if verilog {
        ("va", verilog_a::print(outcome, &lines)?)
    } else {
        ("cir", spice::print(outcome, &lines)?)
    };
    let formulas = outcome
        .formulas
        .iter()
        .map(|one| OutputFormula {
            name: one.name.clone(),
            rounding: rounding(one),
            coefficients: coefficients(&one.form),
            valid: one.valid.clone(),
        })
        .collect();
    Ok((Source { file: format!("{}.{ending}", outcome.name), text }, formulas))
}

/// What the file evaluates, as the record shows it.
fn coefficients(form: &Form) -> serde_json::Value {
    match form {
        Form::Polynomial { coefficients } => serde_json::json!(coefficients),
        Form::Paired { mean, half_gap_squared, sign, partner } => serde_json::json!({
            "mean": mean, "half_gap_squared": half_gap_squared, "sign": sign, "partner": partner
        }),
    }
}

/// Agreement with the double-precision file that circuit outputs promise:
/// 1e-12 of the largest value inside the range.
fn rounding(formula: &FormulaOutcome) -> f64 {
    let largest = formula.samples.iter().fold(0.0_f64, |most, sample| most.max(sample.formula.abs()));
    1e-12 * largest
}

/// The family's parameters as the templates print them.
pub(super) fn family_context(outcome: &Outcome) -> Vec<minijinja::Value> {
    outcome
        .family
        .iter()
        .map(|one| {
            minijinja::context! {
                name => one.name.clone(),
                unit => super::text::unit_name(&one.unit),
                from => literal(one.from),
                to => literal(one.to),
                centre => literal(family::middle(one.from, one.to)),
            }
        })
        .collect()
}

/// A named constant.
#[derive(Clone, Debug, PartialEq)]
pub struct Constant {
    /// Full name, stem included.
    pub name: String,
    /// Value.
    pub value: f64,
}

/// One polynomial as the names of its coefficients by rising power.
#[derive(Clone, Debug, PartialEq)]
pub struct Polynomial {
    /// Names of the coefficients.
    pub names: Vec<String>,
}

impl Polynomial {
    /// `c0 + d * (c1 + d * c2)` with `d` written as `offset`.
    #[must_use]
    pub fn value(&self, offset: &str) -> String {
        nested(&self.names, offset)
    }

    /// The derivative in the same nesting; a constant gives `0.0`.
    #[must_use]
    pub fn slope(&self, offset: &str) -> String {
        let names: Vec<String> = self
            .names
            .iter()
            .enumerate()
            .skip(1)
            .map(|(power, name)| if power == 1 { name.clone() } else { format!("({power}.0 * {name})") })
            .collect();
        if names.is_empty() { "0.0".to_string() } else { nested(&names, offset) }
    }
}

/// Nests coefficients by rising power.
fn nested(names: &[String], offset: &str) -> String {
    match names {
        [] => "0.0".to_string(),
        [last] => last.clone(),
        [first, rest @ ..] => {
            let inner = nested(rest, offset);
            if rest.len() == 1 {
                format!("{first} + {offset} * {inner}")
            } else {
                format!("{first} + {offset} * ({inner})")
            }
        }
    }
}

/// A formula as a circuit file needs it.
#[derive(Clone, Debug, PartialEq)]
pub struct CircuitFormula {
    /// Name.
    pub name: String,
    /// Unit of the value.
    pub unit: String,
    /// Range and operating point, control unit.
    pub from: f64,
    /// Upper end.
    pub to: f64,
    /// Operating point.
    pub at: f64,
    /// All constants.
    pub constants: Vec<Constant>,
    /// Names and expressions of what a family's parameters give, in order; inputs are `p0`, `p1` ...
    pub prelude: Vec<(String, String)>,
    /// The polynomial, or the mean of a pair.
    pub main: Polynomial,
    /// Squared half gap of a pair and its sign.
    pub gap: Option<(Polynomial, f64)>,
}

impl CircuitFormula {
    /// Takes the numbers from a measured formula.
    ///
    /// # Errors
    /// A family without coefficients, a broken rule of the program itself.
    pub fn new(outcome: &Outcome, formula: &FormulaOutcome) -> Result<Self> {
        let stem = format!("{}_{}", outcome.name, formula.name);
        if !outcome.family.is_empty() {
            return Self::of_family(outcome, formula);
        }
        let mut constants = Vec::new();
        let mut polynomial = |word: &str, values: &[f64]| {
            let mut names = Vec::with_capacity(values.len());
            for (power, &value) in values.iter().enumerate() {
                let name = format!("{stem}_{word}{power}");
                constants.push(Constant { name: name.clone(), value });
                names.push(name);
            }
            Polynomial { names }
        };
        let (main, gap) = match &formula.form {
            Form::Polynomial { coefficients } => {
                let mut values = coefficients.clone();
                if let (ValueKind::Shift, Some(first)) = (formula.value, values.first_mut()) {
                    *first = 0.0;
                }
                (polynomial("c", &values), None)
            }
            Form::Paired { mean, half_gap_squared, sign, .. } => {
                let main = polynomial("mean_", mean);
                (main, Some((polynomial("half_gap_squared_", half_gap_squared), *sign)))
            }
        };
        Ok(Self {
            name: formula.name.clone(),
            unit: formula.unit.clone(),
            from: formula.valid.from,
            to: formula.valid.to,
            at: outcome.control.at,
            constants,
            prelude: Vec::new(),
            main,
            gap,
        })
    }

    /// Coefficients from the parameters, each held to its box.
    fn of_family(outcome: &Outcome, formula: &FormulaOutcome) -> Result<Self> {
        let (tensors, powers) = family::fitted(formula)?;
        let names: Vec<String> = (0..outcome.family.len()).map(|k| format!("t{k}")).collect();
        let mut prelude = Vec::new();
        for (k, one) in outcome.family.iter().enumerate() {
            let middle = literal(family::middle(one.from, one.to));
            let half = literal(family::half(one.from, one.to));
            prelude.push((format!("t{k}"), format!("(p{k} - {middle}) / {half}")));
        }
        for (k, (tensor, powers)) in tensors.iter().zip(&powers).enumerate() {
            let text = family::polynomial(&tensor.degree, powers, &names, &literal);
            prelude.push((format!("c{k}"), text));
        }
        Ok(Self {
            name: formula.name.clone(),
            unit: formula.unit.clone(),
            from: formula.valid.from,
            to: formula.valid.to,
            at: outcome.control.at,
            constants: Vec::new(),
            prelude,
            main: Polynomial { names: (0..tensors.len()).map(|k| format!("c{k}")).collect() },
            gap: None,
        })
    }
}

/// A real literal that both circuit languages read as a real number.
#[must_use]
pub fn literal(value: f64) -> String {
    let size = value.abs();
    let text = if size != 0.0 && !(1e-4..1e15).contains(&size) {
        format!("{value:e}")
    } else {
        format!("{value:?}")
    };
    if value.is_sign_negative() { format!("({text})") } else { text }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn polynomials_nest_from_the_highest_power_inwards() {
        let p = Polynomial { names: vec!["c0".into(), "c1".into(), "c2".into(), "c3".into()] };
        assert_eq!(p.value("d"), "c0 + d * (c1 + d * (c2 + d * c3))");
        assert_eq!(p.slope("d"), "c1 + d * ((2.0 * c2) + d * (3.0 * c3))");
        assert_eq!(Polynomial { names: vec!["c0".into()] }.slope("d"), "0.0");
    }

    #[test]
    fn literals_read_back_to_the_same_double() {
        for value in [34.5, -5.4e-4, 1e-300, -2.0, 0.0, 1e22, 123456789.12345679, -5e-324] {
            let text = literal(value);
            let bare = text.trim_start_matches('(').trim_end_matches(')');
            assert_eq!(bare.parse::<f64>().ok(), Some(value), "{text}");
            assert!(bare.contains(['.', 'e']), "{text} would be an integer");
        }
    }
}
