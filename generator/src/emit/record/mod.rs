//! The record: where every number of the generated files came from.
//!
//! [`write`] turns an [`Outcome`] into the text of `NAME.record.json`; [`read`]
//! turns such a text back into the same outcome, bit for bit, so that a host
//! that loads a record evaluates the numbers that the generated files hold.
//! A reader accepts fields that it does not know and keeps words that it does
//! not know, so that a record of a later program can still be compared.
//!
//! Not here: reading or writing files.

mod entries;
mod layout;

use std::collections::BTreeMap;

use sha2::{Digest, Sha256};

use crate::diagnostic::{Diagnostic, Error, Place, Result};
use crate::outcome::{
    ContributionOutcome, ControlOutcome, DigestedFile, FamilyOutcome, FamilyParameterOutcome, FamilySample,
    FormulaOutcome, Input, MixingOutcome, Note, Outcome, OutputFormula, OutputOutcome, Valid, ValueKind,
};
use crate::range::Sample;
use entries::{
    Coefficients, Contribution, Control, ErrorBudget, Family, FamilyFormula, FirstToFail, Formula, Generator,
    LevelNumber, Mixing, Named, Ordered, Output, OutputEntryFormula, Paired, Parameter, ParameterSample,
    Quantity, Range, RecordFile, Remark, SampleEntry, SpecEntry,
};

/// Version of the record's layout that this program writes.
pub const VERSION: u32 = 1;

/// A record as it was read.
#[derive(Clone, Debug, PartialEq)]
pub struct Record {
    /// Name of the program that wrote it.
    pub generator: String,
    /// Version of that program.
    pub version: String,
    /// What it says.
    pub outcome: Outcome,
}

/// SHA-256 of a text in lower-case hexadecimal.
#[must_use]
pub fn digest(bytes: &[u8]) -> String {
    Sha256::digest(bytes).iter().map(|byte| format!("{byte:02x}")).collect()
}

/// File name of the record of a spec.
#[must_use]
pub fn file_name(name: &str) -> String {
    format!("{name}.record.json")
}

/// The text of the record.
///
/// # Errors
/// Only a broken rule of the program itself: a number that is not finite.
pub fn write(outcome: &Outcome) -> Result<String> {
    let file = from_outcome(outcome);
    let value = serde_json::to_value(&file).map_err(Error::internal)?;
    let mut text = layout::lay_out(&value);
    text.push('\n');
    Ok(text)
}

/// Reads a record; `file` is its name for messages.
///
/// # Errors
/// Text that is no JSON, lacks a field, or was written by a later layout.
pub fn read(text: &str, file: &str) -> Result<Record> {
    let parsed: RecordFile = serde_json::from_str(text).map_err(|e| {
        let start = byte_of(text, e.line(), e.column());
        Error::spec(
            Diagnostic::new("broken-record", format!("the record cannot be read: {}", cause(&e)))
                .at(Some(Place { file: file.to_owned(), start, end: start }))
                .expected("a record that `shiftwright generate` wrote")
                .action("run `shiftwright generate` again; it writes the record anew"),
        )
    })?;
    if parsed.record > VERSION {
        return Err(Error::spec(
            Diagnostic::new("newer-record", "the record was written by a later program")
                .at(Some(Place { file: file.to_owned(), start: 0, end: 0 }))
                .found(format!("record version {}", parsed.record))
                .expected(format!("at most version {VERSION}"))
                .action("use the program that wrote it, or generate again with this one"),
        ));
    }
    Ok(to_record(parsed))
}

/// The message of a JSON error without its place, which is shown apart.
fn cause(error: &serde_json::Error) -> String {
    let text = error.to_string();
    match text.rfind(" at line ") {
        Some(end) => text.get(..end).unwrap_or(&text).to_owned(),
        None => text,
    }
}

/// Byte offset of a line and a column counted in bytes, both from 1.
fn byte_of(text: &str, line: usize, column: usize) -> usize {
    let start: usize = text.split_inclusive('\n').take(line.saturating_sub(1)).map(str::len).sum();
    let mut byte = (start + column.saturating_sub(1)).min(text.len());
    while !text.is_char_boundary(byte) {
        byte -= 1;
    }
    byte
}

fn range(valid: &Valid) -> Range {
    Range { from: valid.from, to: valid.to, limited_by: valid.limited_by.clone() }
}

fn valid(range: Range) -> Valid {
    Valid { from: range.from, to: range.to, limited_by: range.limited_by }
}

fn remark(note: &Note) -> Remark {
    Remark { code: note.code.clone(), text: note.text.clone() }
}

fn note(remark: Remark) -> Note {
    Note { code: remark.code, text: remark.text }
}

fn from_outcome(outcome: &Outcome) -> RecordFile {
    RecordFile {
        record: VERSION,
        generator: Generator {
            name: env!("CARGO_PKG_NAME").to_owned(),
            version: env!("CARGO_PKG_VERSION").to_owned(),
        },
        spec: SpecEntry {
            name: outcome.name.clone(),
            file: outcome.spec.file.clone(),
            sha256: outcome.spec.sha256.clone(),
            summary: outcome.summary.clone(),
        },
        sources: outcome
            .sources
            .iter()
            .map(|source| Named { file: source.file.clone(), sha256: source.sha256.clone() })
            .collect(),
        inputs: Ordered(
            outcome
                .inputs
                .iter()
                .map(|i| (i.path.clone(), Quantity { value: i.value, unit: i.unit.clone() }))
                .collect(),
        ),
        control: Control {
            symbol: outcome.control.symbol.clone(),
            unit: outcome.control.unit.clone(),
            at: outcome.control.at,
            within: [outcome.control.within.0, outcome.control.within.1],
        },
        family: (!outcome.family.is_empty()).then(|| Family {
            parameters: outcome
                .family
                .iter()
                .map(|p| Parameter { name: p.name.clone(), unit: p.unit.clone(), from: p.from, to: p.to })
                .collect(),
        }),
        formulas: Ordered(outcome.formulas.iter().map(|f| (f.name.clone(), from_formula(f))).collect()),
        outputs: outcome.outputs.iter().map(from_output).collect(),
        warnings: outcome.warnings.iter().map(remark).collect(),
    }
}

fn from_formula(formula: &FormulaOutcome) -> Formula {
    Formula {
        unit: formula.unit.clone(),
        form: match formula.form {
            crate::form::Form::Polynomial { .. } => "polynomial".to_owned(),
            crate::form::Form::Paired { .. } => "paired".to_owned(),
        },
        value: match formula.value {
            ValueKind::Absolute => "absolute".to_owned(),
            ValueKind::Shift => "shift".to_owned(),
        },
        coefficients: match &formula.form {
            crate::form::Form::Polynomial { coefficients } => Coefficients::Polynomial(coefficients.clone()),
            crate::form::Form::Paired { mean, half_gap_squared, sign, partner } => {
                Coefficients::Paired(Paired {
                    mean: mean.clone(),
                    half_gap_squared: half_gap_squared.clone(),
                    sign: if *sign < 0.0 { -1 } else { 1 },
                    partner: *partner,
                })
            }
        },
        series: formula.series,
        uncertainty: formula.uncertainty,
        zero_by_symmetry: formula.zero_by_symmetry.clone(),
        tolerance: formula.tolerance,
        valid: range(&formula.valid),
        error: ErrorBudget {
            remainder: formula.error[0],
            numerical: formula.error[1],
            written_digits: formula.error[2],
        },
        first_to_fail: FirstToFail { below: formula.first_to_fail[0], above: formula.first_to_fail[1] },
        contributions: formula
            .contributions
            .iter()
            .map(|c| Contribution {
                system: c.system.clone(),
                level: LevelNumber(c.level),
                block: Ordered(c.block.clone()),
                energy: c.energy,
                share: c.share,
            })
            .collect(),
        mixing: formula
            .mixing
            .iter()
            .map(|m| Mixing {
                system: m.system.clone(),
                level: m.level,
                block: Ordered(m.block.clone()),
                coefficient: m.coefficient,
            })
            .collect(),
        levels: Ordered(formula.levels.clone()),
        sizes: Ordered(formula.sizes.clone()),
        samples: formula
            .samples
            .iter()
            .map(|s| SampleEntry { control: s.control, exact: s.exact, formula: s.formula })
            .collect(),
        notes: formula.notes.iter().map(remark).collect(),
        family: formula.family.as_ref().map(|family| FamilyFormula {
            degree: family.degree.clone(),
            coefficients: family.coefficients.clone(),
            samples: family
                .samples
                .iter()
                .map(|s| ParameterSample {
                    parameters: s.parameters.clone(),
                    control: s.control,
                    exact: s.exact,
                    formula: s.formula,
                })
                .collect(),
        }),
    }
}

fn from_output(output: &OutputOutcome) -> Output {
    Output {
        file: output.file.clone(),
        language: output.language.clone(),
        number: output.number.clone(),
        sha256: output.sha256.clone(),
        formulas: Ordered(
            output
                .formulas
                .iter()
                .map(|f| {
                    let entry = OutputEntryFormula {
                        rounding: f.rounding,
                        coefficients: f.coefficients.clone(),
                        valid: range(&f.valid),
                    };
                    (f.name.clone(), entry)
                })
                .collect(),
        ),
    }
}

fn to_record(file: RecordFile) -> Record {
    let outcome = Outcome {
        name: file.spec.name,
        summary: file.spec.summary,
        spec: DigestedFile { file: file.spec.file, sha256: file.spec.sha256 },
        sources: file
            .sources
            .into_iter()
            .map(|source| DigestedFile { file: source.file, sha256: source.sha256 })
            .collect(),
        inputs: file
            .inputs
            .0
            .into_iter()
            .map(|(path, q)| Input { path, value: q.value, unit: q.unit })
            .collect(),
        control: ControlOutcome {
            symbol: file.control.symbol,
            unit: file.control.unit,
            at: file.control.at,
            within: (file.control.within[0], file.control.within[1]),
        },
        family: file
            .family
            .map(|family| family.parameters)
            .unwrap_or_default()
            .into_iter()
            .map(|p| FamilyParameterOutcome { name: p.name, unit: p.unit, from: p.from, to: p.to })
            .collect(),
        formulas: file.formulas.0.into_iter().map(|(name, f)| to_formula(name, f)).collect(),
        outputs: file.outputs.into_iter().map(to_output).collect(),
        warnings: file.warnings.into_iter().map(note).collect(),
    };
    Record { generator: file.generator.name, version: file.generator.version, outcome }
}

fn to_formula(name: String, formula: Formula) -> FormulaOutcome {
    FormulaOutcome {
        name,
        unit: formula.unit,
        value: if formula.value == "shift" { ValueKind::Shift } else { ValueKind::Absolute },
        form: match formula.coefficients {
            Coefficients::Polynomial(coefficients) => crate::form::Form::Polynomial { coefficients },
            Coefficients::Paired(pair) => crate::form::Form::Paired {
                mean: pair.mean,
                half_gap_squared: pair.half_gap_squared,
                sign: if pair.sign < 0 { -1.0 } else { 1.0 },
                partner: pair.partner,
            },
        },
        series: formula.series,
        uncertainty: formula.uncertainty,
        zero_by_symmetry: formula.zero_by_symmetry,
        tolerance: formula.tolerance,
        valid: valid(formula.valid),
        error: [formula.error.remainder, formula.error.numerical, formula.error.written_digits],
        first_to_fail: [formula.first_to_fail.below, formula.first_to_fail.above],
        contributions: formula
            .contributions
            .into_iter()
            .map(|c| ContributionOutcome {
                system: c.system,
                level: c.level.0,
                block: c.block.0,
                energy: c.energy,
                share: c.share,
            })
            .collect(),
        mixing: formula
            .mixing
            .into_iter()
            .map(|m| MixingOutcome {
                system: m.system,
                level: m.level,
                block: m.block.0,
                coefficient: m.coefficient,
            })
            .collect(),
        levels: formula.levels.0,
        sizes: formula.sizes.0,
        samples: formula
            .samples
            .into_iter()
            .map(|s| Sample { control: s.control, exact: s.exact, formula: s.formula })
            .collect(),
        notes: formula.notes.into_iter().map(note).collect(),
        family: formula.family.map(|family| FamilyOutcome {
            degree: family.degree,
            coefficients: family.coefficients,
            samples: family
                .samples
                .into_iter()
                .map(|s| FamilySample {
                    parameters: s.parameters,
                    control: s.control,
                    exact: s.exact,
                    formula: s.formula,
                })
                .collect(),
        }),
    }
}

fn to_output(output: Output) -> OutputOutcome {
    OutputOutcome {
        file: output.file,
        language: output.language,
        number: output.number,
        sha256: output.sha256,
        formulas: output
            .formulas
            .0
            .into_iter()
            .map(|(name, f)| OutputFormula {
                name,
                rounding: f.rounding,
                coefficients: f.coefficients,
                valid: valid(f.valid),
            })
            .collect(),
    }
}

/// Inputs by path, for comparisons.
#[must_use]
pub fn inputs_by_path(outcome: &Outcome) -> BTreeMap<&str, &Input> {
    outcome.inputs.iter().map(|input| (input.path.as_str(), input)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::review::example;

    /// Source: the layout is the record's own definition; a general-purpose JSON
    /// reader is the judge.
    #[test]
    fn a_written_record_has_the_fields_and_their_order() {
        let text = write(&example::outcome()).expect("writes");
        let value: serde_json::Value = serde_json::from_str(&text).expect("is JSON");
        let keys: Vec<&str> = value.as_object().expect("object").keys().map(String::as_str).collect();
        assert_eq!(
            keys,
            ["record", "generator", "spec", "sources", "inputs", "control", "family", "formulas", "outputs"]
        );
        assert!(value["family"].is_null());
        let formula = &value["formulas"]["onset"];
        assert_eq!(formula["first_to_fail"]["below"], -86.580_49);
        assert_eq!(formula["contributions"][1]["level"], "direct");
        assert_eq!(formula["error"]["written_digits"], 7e-13);
        assert_eq!(value["formulas"]["line"]["coefficients"]["sign"], -1);
        assert_eq!(value["outputs"][0]["formulas"]["onset"]["rounding"], 4e-13);
        assert!(
            text.contains(
                r#""control": {"symbol": "F", "unit": "kV/cm", "at": 0.0, "within": [-60.0, 60.0]}"#
            ),
            "{text}"
        );
    }

    #[test]
    fn a_record_reads_back_to_the_same_outcome_bit_for_bit() {
        let outcome = example::outcome();
        let record = read(&write(&outcome).expect("writes"), "x.record.json").expect("reads");
        assert_eq!(record.outcome, outcome);
        assert_eq!(record.generator, "shiftwright");
    }

    #[test]
    fn unknown_fields_and_words_are_kept_or_passed_over() {
        let mut text = write(&example::outcome()).expect("writes");
        text = text.replacen(r#"["remainder""#, r#"["some_later_word""#, 1);
        text = text.replacen(r#"{"symbol""#, r#"{"later": [1, {"a": null}], "symbol""#, 1);
        let record = read(&text, "x.record.json").expect("reads");
        assert_eq!(record.outcome.formulas[1].valid.limited_by[0], "some_later_word");
    }

    #[test]
    fn broken_records_are_located() {
        let text = write(&example::outcome()).expect("writes");
        let line_of = |text: &str| {
            let error = read(text, "x.record.json").expect_err("refused");
            let diagnostic = &error.diagnostics()[0];
            let place = diagnostic.place.clone().expect("has a place");
            (diagnostic.code, text[..place.start].matches('\n').count() + 1)
        };
        let torn = &text[..text.len() / 2];
        let (code, line) = line_of(torn);
        assert_eq!(code, "broken-record");
        assert!(line > 10, "{line}");
        let wrong = text.replacen(r#""at": 0.0"#, r#""at": "zero""#, 1);
        let wanted = wrong[..wrong.find(r#""zero""#).expect("there")].matches('\n').count() + 1;
        assert_eq!(line_of(&wrong), ("broken-record", wanted));
        assert_eq!(line_of(&text.replacen(r#""record": 1"#, r#""record": 9"#, 1)).0, "newer-record");
        assert_eq!(line_of("").0, "broken-record");
        assert_eq!(line_of("é").0, "broken-record");
    }

    /// Source: FIPS 180-4's example message "abc".
    #[test]
    fn the_digest_is_sha_256() {
        assert_eq!(digest(b"abc"), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
    }
}
