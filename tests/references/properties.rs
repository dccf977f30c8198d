//! Random valid specs of every kind: what is emitted compiles and keeps to the
//! stated error of an independent dense solve, and changed problems give what
//! physics says.
//!
//! `scripts/properties.py` draws the specs from a seed and judges the results; it
//! builds every Hamiltonian from the same numbers with other bases and solves it
//! with numpy's dense eigenvalue solver (LAPACK). Which relations are held is said
//! there: a mirrored stack and the opposite charge give coefficients of alternating
//! sign; lengths times s with masses over s^2 leave E0 and multiply the k-th
//! coefficient by s^k; a smaller tolerance never widens the range.

use std::fmt::Write as _;
use std::panic::catch_unwind;

use serde_json::{Value, json};
use shiftwright::diagnostic::Error;
use shiftwright::spec::{Document, NoFiles};
use shiftwright_tests::{Scratch, repository, text, tool};

/// Fixed, so that a failure can be repeated; any number may stand here.
const SEED: &str = "1";

fn python(folder: &Scratch, arguments: &[&str]) -> std::process::Output {
    let script = repository().join("tests/references/scripts/properties.py");
    let python = std::env::var("SHIFTWRIGHT_TEST_PYTHON").unwrap_or_else(|_| "python3".to_owned());
    std::process::Command::new(&python)
        .arg(script)
        .args(arguments)
        .current_dir(folder.path())
        .env("OPENBLAS_NUM_THREADS", "1")
        .output()
        .unwrap_or_else(|e| panic!("{python} is needed by this check: {e}"))
}

/// Emits one spec; gives its record, or why it was refused.
///
/// # Panics
/// If the program panics or breaks a rule of its own.
fn emitted(folder: &Scratch, name: &str, spec: &str) -> Result<Value, String> {
    let run = catch_unwind(|| {
        let file = format!("{name}.yaml");
        Document::parse(&file, spec.as_bytes(), &NoFiles)
            .and_then(|document| document.resolve(&[]))
            .and_then(|spec| shiftwright::pipeline::run(&spec))
    });
    let run = run.unwrap_or_else(|_| panic!("the program panics on\n{spec}"));
    match run {
        Ok(run) => {
            for source in &run.sources {
                folder.write(&source.file, &source.text);
            }
            let record = run.sources.last().expect("a record is always written");
            Ok(serde_json::from_str(&record.text).expect("JSON"))
        }
        Err(error) => {
            assert!(!matches!(error, Error::Spec(_)), "a valid spec is called wrong: {error}\n{spec}");
            assert!(error.diagnostics().iter().all(|d| d.code != "internal"), "{error}\n{spec}");
            Err(error.to_string())
        }
    }
}

#[test]
fn random_specs_keep_what_their_records_state() {
    let folder = Scratch::new("properties");
    let drawn = python(&folder, &["draw", SEED]);
    assert!(drawn.status.success(), "{}", text(&drawn));
    folder.write("specs.json", &drawn.stdout);
    let specs: Vec<Value> = serde_json::from_slice(&drawn.stdout).expect("JSON");
    assert!(specs.len() > 150, "{}", specs.len());

    let mut results = serde_json::Map::new();
    let mut program = String::new();
    let mut calls = String::new();
    let mut sources = Vec::new();
    for one in &specs {
        let name = one["name"].as_str().expect("a name");
        let record = match emitted(&folder, name, one["spec"].as_str().expect("a text")) {
            Ok(record) => record,
            Err(reason) => {
                results.insert(name.to_owned(), json!({ "refused": reason }));
                continue;
            }
        };
        // The file's own range; its ends belong to it.
        let output = &record["outputs"][0]["formulas"]["f"];
        let end = |word: &str| output["valid"][word].as_f64().expect("a number");
        let (from, to) = (end("from"), end("to"));
        let fractions = one["fractions"].as_array().expect("fractions");
        let points: Vec<f64> = fractions
            .iter()
            .map(|t| (from + (to - from) * t.as_f64().expect("a number")).clamp(from, to))
            .collect();
        for stem in ["f64", "f32"].map(|number| format!("{name}_{number}")) {
            writeln!(program, "#[allow(dead_code)] mod {stem};").expect("text");
            sources.push(format!("{stem}.c"));
        }
        writeln!(
            calls,
            "    for x in {points:?} {{ println!(\"{name} {{:e}}\", {name}_f64::f::checked(x).expect(\"in range\")); }}"
        )
        .expect("text");
        let rounding = output["rounding"].as_f64().expect("a number");
        results.insert(
            name.to_owned(),
            json!({ "record": record, "points": points, "values": [], "rounding": rounding }),
        );
    }
    folder.write("main.rs", format!("{program}fn main() {{\n{calls}}}\n"));
    tool(folder.path(), "rustc", &["--edition", "2021", "-D", "warnings", "main.rs", "-o", "main"]);
    let c = ["-std=c99", "-pedantic", "-Wall", "-Wextra", "-Werror", "-fsyntax-only"];
    let files: Vec<&str> = sources.iter().map(String::as_str).collect();
    tool(folder.path(), "gcc", &[&c[..], &files].concat());

    let printed = tool(folder.path(), "./main", &[]).stdout;
    for line in String::from_utf8(printed).expect("text").lines() {
        let (name, value) = line.split_once(' ').expect("a name and a value");
        let value: f64 = value.parse().expect("a number");
        results[name]["values"].as_array_mut().expect("a list").push(json!(value));
    }
    folder.write("results.json", Value::Object(results).to_string());
    let judged = python(&folder, &["judge", "specs.json", "results.json"]);
    println!("{}", String::from_utf8_lossy(&judged.stdout));
    assert!(judged.status.success(), "{}", text(&judged));
}
