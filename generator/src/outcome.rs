//! A whole run as plain data: what the record holds, and what review reads.
//!
//! Field meanings are those of the record; energies are in the formula's unit.

use crate::form::Form;
use crate::range::Sample;

/// A remark with a word code.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Note {
    /// Word code, for example `even`, `crossing`, `cancellation`.
    pub code: String,
    /// A sentence for the reader.
    pub text: String,
}

/// A file with its SHA-256 in lower-case hexadecimal.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct DigestedFile {
    /// File name, no folder.
    pub file: String,
    /// Digest.
    pub sha256: String,
}

/// One resolved scalar of the spec.
#[derive(Clone, Debug, PartialEq)]
pub struct Input {
    /// Path of the key, for example `systems.electron.stack[0].thickness`.
    pub path: String,
    /// Number as written, in `unit`.
    pub value: f64,
    /// Unit as written; `1` for a pure number.
    pub unit: String,
}

/// The control.
#[derive(Clone, Debug, PartialEq)]
pub struct ControlOutcome {
    /// Symbol as in the spec.
    pub symbol: String,
    /// Unit as in the spec.
    pub unit: String,
    /// Operating point.
    pub at: f64,
    /// Wanted interval.
    pub within: (f64, f64),
}

/// A range with its reasons.
#[derive(Clone, Debug, PartialEq)]
pub struct Valid {
    /// Lower end, 7 digits, rounded inwards.
    pub from: f64,
    /// Upper end, 7 digits, rounded inwards.
    pub to: f64,
    /// Why each side ends, the record's words.
    pub limited_by: [String; 2],
}

/// One state's part in E2.
#[derive(Clone, Debug, PartialEq)]
pub struct ContributionOutcome {
    /// System's name.
    pub system: String,
    /// Level number; `None` is written `"direct"`.
    pub level: Option<usize>,
    /// Values that select the level's block, where it is another than the formula's.
    pub block: Vec<(String, f64)>,
    /// Energy at the operating point.
    pub energy: f64,
    /// Term over sum.
    pub share: f64,
}

/// First-order amplitude of a state.
#[derive(Clone, Debug, PartialEq)]
pub struct MixingOutcome {
    /// System's name.
    pub system: String,
    /// Level number.
    pub level: usize,
    /// Values that select the level's block, where it is another than the formula's.
    pub block: Vec<(String, f64)>,
    /// Per control unit.
    pub coefficient: f64,
}

/// A system's name with the values that select a block, `atom (m = 1)`.
#[must_use]
pub fn block_name(system: &str, block: &[(String, f64)]) -> String {
    if block.is_empty() {
        return system.to_owned();
    }
    let values: Vec<String> = block.iter().map(|(name, value)| format!("{name} = {value}")).collect();
    format!("{system} ({})", values.join(", "))
}

/// Whether the formula gives the level or its change.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ValueKind {
    /// The level itself.
    Absolute,
    /// Its change from the operating point.
    Shift,
}

/// One formula.
#[derive(Clone, Debug, PartialEq)]
pub struct FormulaOutcome {
    /// Name.
    pub name: String,
    /// Unit of the value, as in the spec.
    pub unit: String,
    /// What the value is.
    pub value: ValueKind,
    /// The closed form with written digits.
    pub form: Form,
    /// E0 to E4, written digits (all zero-padded; `series[0]` is E0 for shifts too).
    pub series: [f64; 5],
    /// Uncertainty of each.
    pub uncertainty: [f64; 5],
    /// Powers that a symmetry makes zero.
    pub zero_by_symmetry: Vec<usize>,
    /// Largest error allowed.
    pub tolerance: f64,
    /// The range.
    pub valid: Valid,
    /// Largest remainder, numerical error, error of written digits inside the range.
    pub error: [f64; 3],
    /// Per side, where the tolerance is first exceeded.
    pub first_to_fail: [Option<f64>; 2],
    /// Contributions to E2.
    pub contributions: Vec<ContributionOutcome>,
    /// First-order mixing.
    pub mixing: Vec<MixingOutcome>,
    /// System's name and the first twelve levels of its block.
    pub levels: Vec<(String, Vec<f64>)>,
    /// System's name and basis size.
    pub sizes: Vec<(String, usize)>,
    /// Samples over the range.
    pub samples: Vec<Sample>,
    /// Remarks.
    pub notes: Vec<Note>,
    /// Coefficients over the family's box, if constants became arguments.
    pub family: Option<FamilyOutcome>,
}

/// Coefficients of one formula over the family's box.
#[derive(Clone, Debug, PartialEq)]
pub struct FamilyOutcome {
    /// Per power of d, the degree in each parameter.
    pub degree: Vec<Vec<usize>>,
    /// Nested per power of d, Chebyshev order, first parameter outermost.
    pub coefficients: serde_json::Value,
    /// Samples over box and range.
    pub samples: Vec<FamilySample>,
}

/// One exact value inside the family's box beside the formula's.
#[derive(Clone, Debug, PartialEq)]
pub struct FamilySample {
    /// Parameters in the order of the spec, in their units.
    pub parameters: Vec<f64>,
    /// Control value.
    pub control: f64,
    /// Exact quantity (its change, with `shift`).
    pub exact: f64,
    /// The formula's value.
    pub formula: f64,
}

/// A constant that became an argument.
#[derive(Clone, Debug, PartialEq)]
pub struct FamilyParameterOutcome {
    /// Constant's name.
    pub name: String,
    /// Unit of the argument.
    pub unit: String,
    /// Lower end, in `unit`.
    pub from: f64,
    /// Upper end, in `unit`.
    pub to: f64,
}

/// A formula inside one output file.
#[derive(Clone, Debug, PartialEq)]
pub struct OutputFormula {
    /// Name.
    pub name: String,
    /// Rounding bound of the number format, formula's unit.
    pub rounding: f64,
    /// What the file evaluates.
    pub coefficients: serde_json::Value,
    /// The file's own range, control's unit.
    pub valid: Valid,
}

/// One written file.
#[derive(Clone, Debug, PartialEq)]
pub struct OutputOutcome {
    /// File name.
    pub file: String,
    /// Language word.
    pub language: String,
    /// Number word; `None` for circuit languages.
    pub number: Option<String>,
    /// Digest of the whole file.
    pub sha256: String,
    /// Its formulas.
    pub formulas: Vec<OutputFormula>,
}

/// One envelope of a picture.
#[derive(Clone, Debug, PartialEq)]
pub struct Envelope {
    /// Level number in its block.
    pub level: usize,
    /// Energy at the operating point, picture's unit.
    pub energy: f64,
    /// Amplitude at each position; any scale.
    pub amplitude: Vec<f64>,
}

/// What is drawn of one system along its coordinate. Not part of the record.
#[derive(Clone, Debug, PartialEq)]
pub struct Picture {
    /// System's name.
    pub system: String,
    /// Name and unit of the coordinate, for example `z (nm)`.
    pub coordinate: String,
    /// Unit of the energies.
    pub unit: String,
    /// Positions, rising; a face stands twice.
    pub position: Vec<f64>,
    /// Control values at which the edge is given: lower end of the range, operating point, upper end.
    pub controls: [f64; 3],
    /// Potential energy at each position, field included, per control value.
    pub edges: [Vec<f64>; 3],
    /// Envelopes of the levels that formulas use.
    pub envelopes: Vec<Envelope>,
}

/// A whole run.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome {
    /// Spec's `name`.
    pub name: String,
    /// Spec's `summary`.
    pub summary: String,
    /// Spec's file name and digest.
    pub spec: DigestedFile,
    /// Other input files.
    pub sources: Vec<DigestedFile>,
    /// Every resolved scalar, sorted by path.
    pub inputs: Vec<Input>,
    /// The control.
    pub control: ControlOutcome,
    /// Constants that became arguments, in the order of the spec.
    pub family: Vec<FamilyParameterOutcome>,
    /// The formulas in the order of the spec.
    pub formulas: Vec<FormulaOutcome>,
    /// The written files, empty until they were emitted.
    pub outputs: Vec<OutputOutcome>,
    /// Warnings for the user.
    pub warnings: Vec<Note>,
}
