//! Specs written in a check, solved by the program itself.

use std::sync::atomic::{AtomicUsize, Ordering};

use serde_json::Value;
use shiftwright_tests::{Scratch, run, text};

/// The record that the program writes for a spec named `check`.
pub fn record(spec: &str) -> Value {
    static NEXT: AtomicUsize = AtomicUsize::new(0);
    let scratch = Scratch::new(&format!("reference-{}", NEXT.fetch_add(1, Ordering::Relaxed)));
    scratch.write("check.yaml", spec);
    let output = run(scratch.path(), &["generate", "check.yaml", "--out", "out"]);
    assert!(output.status.success(), "{spec}\n{}", text(&output));
    let record = std::fs::read_to_string(scratch.path().join("out/check.record.json")).expect("a record");
    serde_json::from_str(&record).expect("a record in JSON")
}

/// E0 to E4 of a formula.
pub fn series(record: &Value, formula: &str) -> [f64; 5] {
    let list = record["formulas"][formula]["series"].as_array().expect("a series");
    std::array::from_fn(|power| list[power].as_f64().expect("a number"))
}

/// (control, exact, formula) of every sample.
pub fn samples(record: &Value, formula: &str) -> Vec<[f64; 3]> {
    record["formulas"][formula]["samples"]
        .as_array()
        .expect("samples")
        .iter()
        .map(|one| ["control", "exact", "formula"].map(|key| one[key].as_f64().expect("a number")))
        .collect()
}

/// Asserts closeness relative to the larger of the reference and `floor`.
#[track_caller]
pub fn close(found: f64, reference: f64, relative: f64, floor: f64, what: &str) {
    let error = (found - reference).abs() / reference.abs().max(floor);
    println!("{}", shiftwright_tests::row(what, found, reference, error));
    assert!(error <= relative, "{what}: {found:e}, reference {reference:e}, relative {error:.1e}");
}

/// A formula of one level.
pub fn level(name: &str, level: usize, block: &str, unit: &str, order: usize, tolerance: f64) -> String {
    format!(
        "  {name}:\n    unit: {unit}\n    sum: [{{system: s, level: {level}{block}}}]\n    order: {order}\n    tolerance: {tolerance:e}\n"
    )
}

/// A spec of one parts system `s` without outputs but the record.
pub fn parts(
    constants: &str,
    parts: &str,
    hamiltonian: &str,
    conserved: &str,
    control: &str,
    formulas: &str,
) -> String {
    let constants =
        if constants.is_empty() { String::new() } else { format!("constants: {{{constants}}}\n") };
    let conserved =
        if conserved.is_empty() { String::new() } else { format!("    conserved: {{{conserved}}}\n") };
    format!(
        "spec: 1\nname: check\nsummary: A reference\n{constants}systems:\n  s:\n    kind: parts\n    parts: {{{parts}}}\n    hamiltonian: {hamiltonian}\n{conserved}control: {{{control}}}\nformulas:\n{formulas}outputs: [{{language: c, number: f64}}]\n"
    )
}
