//! Concentric shells that cannot be solved as asked: each is told at its place.

use shiftwright_tests::{Scratch, run, text};

const SPEC: &str = "spec: 1
name: bulb
summary: A carrier in shells
systems:
  s:
    kind: radial
    charge: -1
    field: F
    shells:
      - {thickness: 5 nm, edge: 0 eV, mass: 0.1}
control: {symbol: F, unit: kV/cm, at: 0, within: [-10, 10]}
formulas:
  level:
    unit: meV
    sum: [{system: s, level: 2, where: {l: 0, m: 0}}]
    tolerance: 0.01 meV
";

/// The message for the spec with one text exchanged for another.
fn told(name: &str, from: &str, to: &str, status: i32) -> String {
    assert!(SPEC.contains(from), "{from}");
    let scratch = Scratch::new(&format!("shells-{name}"));
    scratch.write("bulb.yaml", SPEC.replace(from, to));
    let output = run(scratch.path(), &["generate", "bulb.yaml", "--out", "out"]);
    assert_eq!(output.status.code(), Some(status), "{name}: {}", text(&output));
    String::from_utf8_lossy(&output.stderr).into_owned()
}

#[test]
fn the_spec_itself_is_right() {
    told("right", "bulb", "bulb", 0);
}

#[test]
fn blocks_that_do_not_exist_are_told_at_the_level() {
    for (name, from, to, word, advice) in [
        ("no-m", "l: 0, m: 0", "l: 0", "(no-block)", "add `m`"),
        ("nothing", ", where: {l: 0, m: 0}", "", "(no-block)", "where: {l: 0, m: 0}"),
        ("m-above-l", "l: 0, m: 0", "l: 1, m: -2", "(no-such-block)", "`m` from -1 to 1"),
        ("far", "l: 0, m: 0", "m: 5000", "(no-such-block)", "at most 1000"),
        ("in-a-field", "at: 0", "at: 5", "(not-conserved)", "count within `where: {m: 0}`"),
        ("half", "l: 0, m: 0", "l: 0, m: 0.5", "(not-whole)", "a whole number"),
    ] {
        let message = told(name, from, to, 2);
        assert!(message.starts_with("bulb.yaml:15:"), "{name}: {message}");
        assert!(message.contains(word) && message.contains(advice), "{name}: {message}");
    }
}

/// 2s and 2p of a point charge are degenerate, so l is not good there.
#[test]
fn accidental_degeneracy_is_told() {
    let field = "field: F\n    ends: decay\n    centre_charge: 1";
    let message = told("accidental", "field: F", field, 2);
    assert!(message.contains("(not-conserved)") && message.contains("l = 1"), "{message}");
    assert!(message.contains("count within `where: {m: 0}`"), "{message}");
}

#[test]
fn a_level_that_is_not_bound_says_how_many_are() {
    let well = "ends: decay\n    shells:\n      - {thickness: 3 nm, edge: -0.5 eV, mass: 0.1}";
    let message = told("unbound", "shells:", well, 2);
    assert!(message.contains("(not-bound)") && message.contains("1 is"), "{message}");
}

/// Behind open ends a field leaves the series alone, so nothing else can be had.
#[test]
fn what_needs_an_exact_level_is_refused_without_one() {
    let open = "field: F\n    ends: decay\n    centre_charge: 1";
    let scratch = Scratch::new("shells-no-exact-level");
    for (key, word) in [("form: paired", "pair form"), ("coefficients: minimax", "best polynomial")] {
        let spec = SPEC.replace("field: F", open).replace("level: 2", "level: 1");
        let spec = spec.replace("tolerance: 0.01 meV", &format!("tolerance: 0.01 meV\n    {key}"));
        scratch.write("bulb.yaml", spec);
        let output = run(scratch.path(), &["generate", "bulb.yaml", "--out", "out"]);
        let message = String::from_utf8_lossy(&output.stderr).into_owned();
        assert_eq!(output.status.code(), Some(2), "{message}");
        assert!(message.contains("(no-exact-level)") && message.contains(word), "{message}");
    }
}
