//! Calls, help and results that need no solved spec.

use shiftwright_tests::{Scratch, run, text};

/// A record of the first layout, written by hand after its definition.
const RECORD: &str = r#"{
  "record": 1,
  "generator": {"name": "shiftwright", "version": "0.1.0"},
  "spec": {"name": "gate", "file": "gate.yaml", "sha256": "00"},
  "sources": [],
  "inputs": {"constants.well": {"value": 9.0, "unit": "nm"}},
  "control": {"symbol": "F", "unit": "kV/cm", "at": 0.0, "within": [-60.0, 60.0]},
  "family": null,
  "formulas": {
    "edge": {
      "unit": "meV", "form": "polynomial", "value": "absolute",
      "coefficients": [35.5, 0.0, -0.00321],
      "series": [35.5, 0.0, -0.00321, 0.0, 1e-8],
      "uncertainty": [1e-10, 0.0, 1e-13, 0.0, 1e-15],
      "zero_by_symmetry": [1, 3], "tolerance": 0.05,
      "valid": {"from": -61.0, "to": 61.0, "limited_by": ["remainder", "remainder"]},
      "error": {"remainder": 0.05, "numerical": 1e-10, "written_digits": 1e-12},
      "first_to_fail": {"below": -61.0, "above": 61.0},
      "contributions": [], "mixing": [], "levels": {}, "sizes": {}, "samples": [], "notes": []
    }
  },
  "outputs": []
}
"#;

#[test]
fn a_wrong_call_exits_2_and_help_exits_0() {
    let folder = Scratch::new("calls");
    for call in [&["frobnicate"][..], &["generate"], &["new", "cube"], &["sweep", "a.yaml"], &[]] {
        let output = run(folder.path(), call);
        assert_eq!(output.status.code(), Some(2), "{call:?}: {}", text(&output));
        assert!(output.stdout.is_empty());
    }
    for call in [&["--help"][..], &["--version"], &["check", "--help"], &["help", "sweep"]] {
        let output = run(folder.path(), call);
        assert_eq!(output.status.code(), Some(0), "{call:?}: {}", text(&output));
        let shown = String::from_utf8_lossy(&output.stdout);
        assert!(shown.lines().all(|line| line.chars().count() <= 80), "{shown}");
    }
}

#[test]
fn a_file_that_is_not_there_exits_4() {
    let folder = Scratch::new("absent");
    for call in [&["generate", "no.yaml"][..], &["check", "no.yaml"], &["compare", "a.json", "b.json"]] {
        let output = run(folder.path(), call);
        assert_eq!(output.status.code(), Some(4), "{call:?}: {}", text(&output));
        assert!(output.stdout.is_empty());
    }
}

#[test]
fn records_are_compared_in_physical_terms() {
    let folder = Scratch::new("compare");
    folder.write("old.record.json", RECORD);
    let new = RECORD
        .replace("-0.00321", "-0.00348")
        .replace("61.0", "57.0")
        .replace("\"value\": 9.0", "\"value\": 9.2");
    folder.write("new.record.json", new);
    let output = run(folder.path(), &["compare", "old.record.json", "new.record.json"]);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output));
    assert_eq!(
        String::from_utf8_lossy(&output.stdout),
        "edge: b -0.00321 to -0.00348 meV/(kV/cm)^2 (+8.4 %), range 61 to 57 kV/cm, because \
         constants.well 9 nm to 9.2 nm\n"
    );
    let output = run(folder.path(), &["compare", "old.record.json", "new.record.json", "--json"]);
    let value: serde_json::Value = serde_json::from_slice(&output.stdout).expect("JSON");
    assert_eq!(value["formulas"][0]["numbers"][0]["new"], -0.00348);
    let output = run(folder.path(), &["compare", "old.record.json", "old.record.json"]);
    assert_eq!(String::from_utf8_lossy(&output.stdout), "nothing moved\n");
}

#[test]
fn a_torn_record_is_located_and_exits_2() {
    let folder = Scratch::new("torn");
    folder.write("old.record.json", RECORD);
    folder.write("torn.record.json", &RECORD[..400]);
    let output = run(folder.path(), &["compare", "old.record.json", "torn.record.json"]);
    assert_eq!(output.status.code(), Some(2), "{}", text(&output));
    let message = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(message.starts_with("torn.record.json:11:"), "{message}");
    assert!(message.contains("(broken-record)") && message.contains("do:"), "{message}");
}

#[test]
fn starter_specs_are_written_once() {
    let folder = Scratch::new("starter");
    for kind in ["layers", "parts", "matrix", "radial"] {
        let shown = run(folder.path(), &["new", kind]);
        assert_eq!(shown.status.code(), Some(0));
        let file = format!("{kind}.yaml");
        assert_eq!(run(folder.path(), &["new", kind, &file]).status.code(), Some(0));
        let written = std::fs::read(folder.path().join(&file)).expect("written");
        assert_eq!(written, shown.stdout);
        let again = run(folder.path(), &["new", kind, &file]);
        assert_eq!(again.status.code(), Some(2), "{}", text(&again));
        assert_eq!(std::fs::read(folder.path().join(&file)).expect("still there"), written);
    }
    assert_eq!(run(folder.path(), &["new", "layers", "no/such/folder.yaml"]).status.code(), Some(4));
    let names = std::fs::read_dir(folder.path()).expect("lists").count();
    assert_eq!(names, 4, "no temporary file is left");
}

#[test]
fn the_manual_and_the_completions_name_every_command() {
    let folder = Scratch::new("manual");
    for call in [&["manual"][..], &["completions", "bash"], &["completions", "zsh"], &["completions", "fish"]]
    {
        let output = run(folder.path(), call);
        assert_eq!(output.status.code(), Some(0));
        let shown = String::from_utf8_lossy(&output.stdout).to_lowercase();
        for command in ["generate", "check", "compare", "explain", "report", "sweep", "new", "manual"] {
            assert!(shown.contains(command), "{call:?} lacks {command}");
        }
    }
}
