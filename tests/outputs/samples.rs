//! Measured formulas built by hand, so that the printers are tried on every
//! shape of formula without solving anything.

use shiftwright::form::Form;
use shiftwright::formula::{Formula, NumberFormat};
use shiftwright::outcome::{ControlOutcome, DigestedFile, FormulaOutcome, Note, Outcome, Valid, ValueKind};

/// A polynomial.
pub fn polynomial(coefficients: &[f64]) -> Form {
    Form::Polynomial { coefficients: coefficients.to_vec() }
}

/// A pair.
pub fn paired(mean: &[f64], half_gap_squared: &[f64], sign: f64) -> Form {
    Form::Paired { mean: mean.to_vec(), half_gap_squared: half_gap_squared.to_vec(), sign, partner: 2 }
}

/// A formula that was measured to hold from `from` to `to`.
pub fn formula(name: &str, form: Form, from: f64, to: f64) -> FormulaOutcome {
    let first = match &form {
        Form::Polynomial { coefficients } => coefficients[0],
        Form::Paired { mean, half_gap_squared, sign, .. } => mean[0] + sign * half_gap_squared[0].sqrt(),
    };
    FormulaOutcome {
        name: name.to_owned(),
        unit: "meV".to_owned(),
        value: ValueKind::Absolute,
        form,
        series: [first, 0.0, 0.0, 0.0, 0.0],
        uncertainty: [1e-10, 1e-12, 1e-14, 1e-15, 1e-16],
        zero_by_symmetry: vec![],
        tolerance: 0.05,
        valid: Valid { from, to, limited_by: ["within".to_owned(), "remainder".to_owned()] },
        error: [0.012, 2e-10, 7e-13],
        first_to_fail: [None, None],
        contributions: vec![],
        mixing: vec![],
        levels: vec![],
        sizes: vec![],
        samples: vec![],
        notes: vec![Note { code: "even".to_owned(), text: "a remark".to_owned() }],
        family: None,
    }
}

/// A run around `formulas`.
pub fn outcome(name: &str, symbol: &str, at: f64, formulas: Vec<FormulaOutcome>) -> Outcome {
    Outcome {
        name: name.to_owned(),
        summary: "Onset of the Lowmere shutter */ with an unruly // remark ??/ \u{202e} in it \\".to_owned(),
        spec: DigestedFile { file: format!("{name}.yaml"), sha256: "0123456789abcdef".repeat(4) },
        sources: vec![],
        inputs: vec![],
        control: ControlOutcome {
            symbol: symbol.to_owned(),
            unit: "kV/cm".to_owned(),
            at,
            within: (-1e3, 1e3),
        },
        family: vec![],
        formulas,
        outputs: vec![],
        warnings: vec![],
    }
}

/// All formulas of a run in one number format, the range as measured.
pub fn in_format(outcome: &Outcome, format: &NumberFormat) -> Vec<Formula> {
    outcome
        .formulas
        .iter()
        .map(|f| {
            Formula::new(f, &outcome.control, format, None, &|_| Ok(f.valid.clone()))
                .unwrap_or_else(|e| panic!("{}: {e}", f.name))
        })
        .collect()
}

/// Formulas of every shape about an operating point.
pub fn every_shape(at: f64) -> Vec<FormulaOutcome> {
    let (from, to) = (at - 41.5, at + 60.25);
    vec![
        formula("even", polynomial(&[1458.934408104531, 0.0, -0.0005459111401161]), from, to),
        formula("onset", polynomial(&[34.93408104531, -0.0123456789012, -0.0005459111401161]), from, to),
        formula("tilted", polynomial(&[34.93408104531, 0.0123456789012, 0.0005459111401161]), from, to),
        formula("straight", polynomial(&[-7.25, 0.0123456789012]), from, to),
        formula("flat", polynomial(&[2.5, 0.0]), from, to),
        formula("cubic", polynomial(&[12.5, 0.012, 0.00054, -0.0000123]), from, to),
        formula("quartic", polynomial(&[12.5, 0.0, -0.00054, 0.0, 0.000000123]), from, to),
        formula("upper", paired(&[10.0, 0.001, 0.0], &[0.25, 0.0, 0.0004], 1.0), from, to),
        formula("lower", paired(&[10.0, 0.0, 0.0], &[0.25, 0.001, 0.0004], -1.0), from, to),
    ]
}
