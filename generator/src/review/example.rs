//! An outcome for the tests of this folder and of the record; its numbers are
//! made up, only their places matter.

use crate::form::Form;
use crate::outcome::{
    ContributionOutcome, ControlOutcome, DigestedFile, FormulaOutcome, Input, MixingOutcome, Note, Outcome,
    OutputFormula, OutputOutcome, Valid, ValueKind,
};
use crate::range::Sample;

fn valid(from: f64, to: f64, word: &str) -> Valid {
    Valid { from, to, limited_by: [word.to_owned(), word.to_owned()] }
}

/// Two formulas, a polynomial and a pair, and one output.
pub(crate) fn outcome() -> Outcome {
    let onset = FormulaOutcome {
        name: "onset".to_owned(),
        unit: "meV".to_owned(),
        value: ValueKind::Absolute,
        form: Form::Polynomial { coefficients: vec![1_458.934_408_104_531, 0.0, -0.000_545_911_140_116_1] },
        series: [1_458.934_408_104_531, 0.0, -0.000_545_911_140_116_1, 0.0, 9.580_690_3e-10],
        uncertainty: [1e-10, 0.0, 1e-14, 0.0, 1e-15],
        zero_by_symmetry: vec![1, 3],
        tolerance: 0.05,
        valid: valid(-60.0, 60.0, "within"),
        error: [0.012, 2e-10, 7e-13],
        first_to_fail: [Some(-86.580_49), Some(86.580_49)],
        contributions: vec![
            ContributionOutcome {
                system: "electron".to_owned(),
                level: Some(2),
                block: Vec::new(),
                energy: 135.91,
                share: 0.9993,
            },
            ContributionOutcome {
                system: "electron".to_owned(),
                level: None,
                block: Vec::new(),
                energy: 34.934,
                share: 0.0007,
            },
        ],
        mixing: vec![MixingOutcome {
            system: "electron".to_owned(),
            level: 2,
            block: Vec::new(),
            coefficient: 0.002_32,
        }],
        levels: vec![("electron".to_owned(), vec![34.934, 135.91])],
        sizes: vec![("electron".to_owned(), 47)],
        samples: (-4..=4)
            .map(|k| {
                let control = 15.0 * f64::from(k);
                let formula = 1_458.934_408_104_531 - 0.000_545_911_140_116_1 * control * control;
                let exact = formula + 9.580_690_3e-10 * control.powi(4);
                Sample { control, exact, formula }
            })
            .collect(),
        notes: vec![Note { code: "even".to_owned(), text: "the stack is its own mirror image".to_owned() }],
        family: None,
    };
    let line = FormulaOutcome {
        name: "line".to_owned(),
        unit: "GHz".to_owned(),
        value: ValueKind::Shift,
        form: Form::Paired {
            mean: vec![0.0, 0.25],
            half_gap_squared: vec![2.25, 0.0, 1.5],
            sign: -1.0,
            partner: 2,
        },
        zero_by_symmetry: Vec::new(),
        valid: valid(-1.0 / 3.0, 40.0, "remainder"),
        first_to_fail: [Some(-1.0 / 3.0), None],
        notes: Vec::new(),
        ..onset.clone()
    };
    let input =
        |path: &str, value: f64, unit: &str| Input { path: path.to_owned(), value, unit: unit.to_owned() };
    Outcome {
        name: "shutter".to_owned(),
        summary: "Absorption onset of the shutter well against its drive field".to_owned(),
        spec: DigestedFile { file: "shutter.yaml".to_owned(), sha256: "00aa".repeat(16) },
        sources: vec![DigestedFile { file: "dots.mtx".to_owned(), sha256: "11bb".repeat(16) }],
        inputs: vec![
            input("constants.well", 9.0, "nm"),
            input("systems.electron.stack[0].thickness", 12.0, "nm"),
        ],
        control: ControlOutcome {
            symbol: "F".to_owned(),
            unit: "kV/cm".to_owned(),
            at: 0.0,
            within: (-60.0, 60.0),
        },
        family: Vec::new(),
        formulas: vec![onset, line],
        outputs: vec![OutputOutcome {
            file: "shutter_f64.rs".to_owned(),
            language: "rust".to_owned(),
            number: Some("f64".to_owned()),
            sha256: "22cc".repeat(16),
            formulas: vec![OutputFormula {
                name: "onset".to_owned(),
                rounding: 4e-13,
                coefficients: serde_json::json!([1_458.934_408_104_531, 0.0, -0.000_545_911_140_116_1]),
                valid: valid(-60.0, 60.0, "within"),
            }],
        }],
        warnings: Vec::new(),
    }
}
