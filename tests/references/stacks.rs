//! Drawn layer stacks against levels, coefficients and range ends found by
//! carrying the envelope through each layer with power series at 50 digits.
//!
//! Source: the Airy equation (DLMF 9.2.1) in each layer, solved with mpmath by
//! `scripts/stacks.py`, which draws the stacks from a fixed seed and shares no
//! method with the program.

use shiftwright_tests::{close, data, number, record};

/// Levels 1 and 2 of six stacks: E0 to 1e-10, a and b to 1e-9 relative, and
/// both ends of the range to 1e-4 relative, the accuracy that users are
/// promised.
#[test]
fn drawn_stacks_agree_with_airy_solutions() {
    let cases: serde_json::Value = serde_json::from_str(&data("stacks.json")).expect("the data is JSON");
    let cases = cases.as_array().expect("a list of cases");
    assert_eq!(cases.len(), 12);
    for (idx, case) in cases.iter().enumerate() {
        let text =
            |key: &str| case[key].as_str().expect("a number as text").parse::<f64>().expect("a number");
        let layers: Vec<String> = case["layers"]
            .as_array()
            .expect("layers")
            .iter()
            .map(|layer| {
                format!("      - {{thickness: {} nm, edge: {} eV, mass: {}}}", layer[0], layer[1], layer[2])
            })
            .collect();
        let (from, to) = (text("from_kv_cm"), text("to_kv_cm"));
        let spec = format!(
            "spec: 1\nname: stack\nsummary: drawn\nsystems:\n  carrier:\n    kind: layers\n    charge: {}\n    field: F\n    stack:\n{}\n\
             control: {{symbol: F, unit: kV/cm, within: [{}, {}]}}\n\
             formulas:\n  level:\n    unit: eV\n    sum: [{{system: carrier, level: {}}}]\n    tolerance: {} eV\n",
            case["charge"],
            layers.join("\n"),
            1.2 * from,
            1.2 * to,
            case["level"],
            text("tolerance_ev"),
        );
        let record = record(&format!("stack{idx}"), &spec);
        let at = |path: &str| number(&record, &format!("formulas/level/{path}"));
        let what = |word: &str| format!("case {idx}, {word}");
        close(&what("E0"), at("coefficients/0"), text("e0_ev"), 1e-10);
        close(&what("a"), at("coefficients/1"), text("a_ev_per_kv_cm"), 1e-9);
        close(&what("b"), at("coefficients/2"), text("b_ev_per_kv_cm2"), 1e-9);
        close(&what("lower end"), at("valid/from"), from, 1e-4);
        close(&what("upper end"), at("valid/to"), to, 1e-4);
        for side in 0..2 {
            let word = record.pointer(&format!("/formulas/level/valid/limited_by/{side}"));
            assert_eq!(word.and_then(|w| w.as_str()), Some("remainder"), "case {idx}, side {side}");
        }
    }
}
