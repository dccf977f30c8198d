//! A well's level that meets a pocket state behind a thick barrier.
//!
//! Source: the Airy equation (DLMF 9.2.1) in each layer, solved with mpmath at 40
//! digits by `scripts/crossing.py`, which shares no method with the program.

use shiftwright_tests::{close, number, record};

/// Control value of the smallest gap, kV/cm; the gap and the mean of both levels there, meV.
const CROSSING: [f64; 3] = [94.944_798_231_774_5, 0.035_662_311_577_8, 30.084_225_586_022_9];
/// The well's level, second from below, at 100 kV/cm, meV.
const BEYOND: f64 = 29.561_676_360_281;

fn wanted(name: &str, tolerance: f64) -> serde_json::Value {
    let spec = format!(
        "spec: 1\nname: {name}\nsummary: a shutter between thick barriers\nsystems:\n  electron:\n    kind: layers\n    \
         charge: -1\n    field: F\n    stack:\n      - {{thickness: 25 nm, edge: 232 meV, mass: 0.0919}}\n      \
         - {{thickness: 9 nm, edge: 0 meV, mass: 0.0665}}\n      - {{thickness: 25 nm, edge: 232 meV, mass: 0.0919}}\n\
         control: {{symbol: F, unit: kV/cm, within: [0, 100]}}\n\
         formulas:\n  edge:\n    unit: meV\n    sum: [{{system: electron, level: 1}}]\n    tolerance: {tolerance} meV\n"
    );
    record(name, &spec)
}

/// Formula minus mean, and half the gap: what stepping over costs.
fn cost(record: &serde_json::Value) -> f64 {
    let coefficient = |k: usize| number(record, &format!("formulas/edge/coefficients/{k}"));
    let formula = coefficient(0) + CROSSING[0] * (coefficient(1) + CROSSING[0] * coefficient(2));
    (formula - CROSSING[2]).abs() + 0.5 * CROSSING[1]
}

/// The state goes on in the second level, whose value at the end is that of the reference.
/// The record rounds errors to two digits, so the remainder is held to 2 %.
#[test]
fn a_narrow_crossing_inside_the_tolerance_is_stepped_over() {
    let record = wanted("pocket", 0.3);
    assert_eq!(number(&record, "formulas/edge/valid/to"), 100.0);
    close("remainder", number(&record, "formulas/edge/error/remainder"), cost(&record), 0.02);
    let samples = record.pointer("/formulas/edge/samples").and_then(|list| list.as_array()).expect("samples");
    let last = samples.last().expect("a sample");
    close("level at the end", last["exact"].as_f64().expect("a number"), BEYOND, 1e-11);
    let notes = record.pointer("/formulas/edge/notes").and_then(|list| list.as_array()).expect("notes");
    let crossings: Vec<&str> = notes
        .iter()
        .filter(|note| note["code"] == "crossing")
        .map(|note| note["text"].as_str().expect("text"))
        .collect();
    assert_eq!(crossings.len(), 1, "{crossings:?}");
    let numbers: Vec<f64> = crossings[0]
        .split(|c: char| c.is_whitespace() || c == ',')
        .filter_map(|word| word.parse().ok())
        .collect();
    assert!(numbers.iter().any(|x| (x / CROSSING[0] - 1.0).abs() < 1e-8), "{numbers:?}");
    assert!(numbers.iter().any(|x| (x / CROSSING[1] - 1.0).abs() < 1e-6), "{numbers:?}");
}

/// With a tolerance just below the cost the walk stays on the lowest level, which turns
/// away by 3 meV per kV/cm, so the range ends within 0.1 kV/cm of the crossing.
#[test]
fn the_same_crossing_ends_the_range_of_a_tighter_formula() {
    let record = wanted("pocket_tight", 0.08);
    let end = number(&record, "formulas/edge/valid/to");
    assert!(cost(&record) > 0.08 && (end - CROSSING[0]).abs() < 0.1, "{end}");
    let word = record.pointer("/formulas/edge/valid/limited_by/1").and_then(|word| word.as_str());
    assert_eq!(word, Some("crossing"));
}
