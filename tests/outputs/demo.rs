//! The demo specs through the whole program: every output compiled without a
//! warning, run, the same bits in Rust, C and the runtime crate, and within the
//! stated error of exact values.
//!
//! Exact values come from `scripts/exact.py`, dense diagonalisation with numpy
//! of Hamiltonians written down there a second time. A spec that is not known
//! there is held against the samples of its record.

use std::collections::BTreeMap;
use std::fmt::Write as _;
use std::io::Write as _;
use std::path::Path;
use std::process::{Command, Stdio};
use std::sync::Mutex;

use serde_json::{Value, json};
use shiftwright_runtime::record::{Loaded, Numbers};
use shiftwright_tests::{Scratch, number, repository, run, text};

use crate::answers;
use crate::host;
use crate::programs::{self, Callable, inverses};

/// Steps of control and value in fixed point per demo spec; a demo spec that is
/// not named here is tried in double and single precision.
const STEPS: [(&str, &str, &str); 14] = [
    ("bead", "0.01 kV/cm", "10 ueV"),
    ("shutter", "0.01 kV/cm", "1 ueV"),
    ("shutter_best", "0.01 kV/cm", "0.5 ueV"),
    ("latch", "0.01 kV/cm", "1 ueV"),
    ("window", "0.01 kV/cm", "5 ueV"),
    ("gate", "0.1 mV", "1 ueV"),
    ("clock", "10 nT", "10 mHz"),
    ("relay", "20 kHz", "1 kHz"),
    ("dots", "0.1 uV", "1 neV"),
    ("needle", "1 uT", "1 kHz"),
    ("slot", "0.01 kV/cm", "1 ueV"),
    ("drum", "0.0001", "5 kHz"),
    ("rotor", "0.2 V/cm", "10 kHz"),
    ("dial", "0.00005", "10 kHz"),
];

/// Demo specs that the program may still refuse, and with which word.
const REFUSED: [(&str, &str); 4] =
    [("blind", "not-built"), ("pane", "not-built"), ("glow", "not-built"), ("needle", "range-not-covered")];

/// The spec with all number formats as outputs in place of its own.
fn in_every_format(name: &str, spec: &str) -> String {
    let mut out = String::new();
    let mut inside = false;
    for line in spec.lines() {
        let top = line.starts_with(|c: char| c.is_ascii_alphabetic());
        inside = if top { line.starts_with("outputs:") } else { inside };
        if !inside {
            let _ = writeln!(out, "{line}");
        }
    }
    out.push_str("outputs:\n");
    for language in ["rust", "c"] {
        let _ = writeln!(out, "  - {{language: {language}, number: f64}}");
        let _ = writeln!(out, "  - {{language: {language}, number: f32}}");
        if let Some((_, control, value)) = STEPS.iter().find(|(spec, ..)| *spec == name) {
            let _ = writeln!(
                out,
                "  - {{language: {language}, number: fixed, control: {{bits: 16, step: {control}}}, value: {{bits: 32, step: {value}}}}}"
            );
        }
    }
    out
}

/// Controls at which one formula in one format is held against exact values,
/// and the formula's values there.
struct Asked {
    spec: String,
    formula: String,
    format: &'static str,
    controls: Vec<f64>,
    values: Vec<f64>,
    tolerance: f64,
    /// Stated error: the record's parts and the format's rounding.
    stated: f64,
    /// The record's remainder alone, which the worst point must come near.
    remainder: f64,
    samples: Vec<(f64, f64)>,
}

fn evenly(from: f64, to: f64, count: usize) -> Vec<f64> {
    (0..count).map(|i| from + (to - from) * i as f64 / (count - 1) as f64).collect()
}

fn ask(record: &Value, spec: &str, formula: &str, format: &'static str, loaded: &Loaded) -> Asked {
    let part = |name: &str| number(record, &format!("formulas/{formula}/error/{name}"));
    let file = format!("{spec}_{format}.c");
    let outputs = record["outputs"].as_array().expect("outputs");
    let output = outputs.iter().find(|o| o["file"] == file.as_str()).expect("the file is listed");
    let rounding = output["formulas"][formula]["rounding"].as_f64().expect("a bound");
    let (controls, values) = match &loaded.numbers {
        Numbers::Double(f) => {
            let x = evenly(f.from, f.to, 1001);
            (x.clone(), x.iter().map(|x| f.formula().checked(*x).expect("inside")).collect())
        }
        Numbers::Single(f) => {
            let x: Vec<f32> = evenly(f.from.into(), f.to.into(), 201).iter().map(|x| *x as f32).collect();
            let y = x.iter().map(|x| f64::from(f.formula().checked(*x).expect("inside"))).collect();
            (x.iter().map(|x| f64::from(*x)).collect(), y)
        }
        Numbers::Fixed(f) => {
            let n: Vec<i64> =
                evenly(f.from as f64, f.to as f64, 201).iter().map(|x| x.round() as i64).collect();
            let y = n.iter().map(|n| f.formula().checked(*n).expect("inside") as f64 * f.value_step);
            (n.iter().map(|n| *n as f64 * f.control_step).collect(), y.collect())
        }
    };
    let samples = record["formulas"][formula]["samples"].as_array().expect("samples").iter();
    Asked {
        spec: spec.to_owned(),
        formula: formula.to_owned(),
        format,
        controls,
        values,
        tolerance: number(record, &format!("formulas/{formula}/tolerance")),
        stated: part("remainder") + part("numerical") + part("written_digits") + rounding,
        remainder: part("remainder"),
        samples: samples.filter_map(|s| Some((s["control"].as_f64()?, s["exact"].as_f64()?))).collect(),
    }
}

/// Compiles and runs the outputs of one format; the bits must be those that the
/// runtime crate gives for the record.
fn compiled(folder: &Path, stem: &str, loaded: &[(String, Loaded)]) {
    let callable: Vec<Callable> = loaded
        .iter()
        .map(|(name, one)| {
            let (below, above, bits) = match &one.numbers {
                Numbers::Double(f) => {
                    let b = f.formula().branches();
                    (b.below.is_some(), b.above.is_some(), (0, 0))
                }
                Numbers::Single(f) => {
                    let b = f.formula().branches();
                    (b.below.is_some(), b.above.is_some(), (0, 0))
                }
                Numbers::Fixed(f) => {
                    let [_, below, above] = f.branches;
                    (below.is_some(), above.is_some(), (f.control_bits, f.value_bits))
                }
            };
            Callable { name: name.clone(), inverses: inverses(below, above), bits }
        })
        .collect();
    // All formulas of a file are asked at the same points.
    let (mut points, mut narrow) = (Vec::new(), Vec::new());
    for (_, one) in loaded {
        match &one.numbers {
            Numbers::Double(f) => {
                let span = f.to - f.from;
                points.extend(evenly(f.from - 0.1 * span, f.to + 0.1 * span, 201));
                points.extend([f64::NAN, f64::INFINITY, f64::NEG_INFINITY, f.from, f.to, f.at]);
            }
            Numbers::Single(f) => {
                let span = f.to - f.from;
                let even = evenly((f.from - 0.1 * span).into(), (f.to + 0.1 * span).into(), 201);
                narrow.extend(even.iter().map(|x| *x as f32));
                narrow.extend([f32::NAN, f32::INFINITY, f32::NEG_INFINITY, f.from, f.to, f.at]);
            }
            Numbers::Fixed(_) => {}
        }
    }
    let mut expected = String::new();
    for (name, one) in loaded {
        match &one.numbers {
            Numbers::Double(f) => answers::of_double(&f.formula(), &points, &mut |_, _| {}, &mut expected),
            Numbers::Single(f) => answers::of_single(&f.formula(), &narrow, &mut |_, _| {}, &mut expected),
            Numbers::Fixed(f) => {
                let branches: Vec<_> = f.branches.iter().copied().flatten().collect();
                let bits = (f.control_bits, f.value_bits);
                let sum = answers::of_fixed(&f.formula(), &branches, bits, &mut |_, _| {});
                let _ = writeln!(expected, "{name} {sum:x}");
            }
        }
    }
    let wide = narrow.is_empty();
    let input: String = if wide {
        points.iter().map(|x| format!("{:x}\n", x.to_bits())).collect()
    } else {
        narrow.iter().map(|x| format!("{:x}\n", x.to_bits())).collect()
    };
    let fixed = stem.ends_with("_fixed");
    let (rust, c) = if fixed {
        (programs::fixed_rust(stem, &callable), programs::fixed_c(stem, &callable))
    } else {
        (programs::float_rust(stem, &callable, wide), programs::float_c(stem, &callable, wide))
    };
    std::fs::write(folder.join("main.rs"), rust).expect("a scratch file");
    std::fs::write(folder.join("main.c"), c).expect("a scratch file");
    let same = |program: &str, what: &str| {
        let found = host::feed(folder, program, &input);
        answers::same(&found, &expected, !fixed && wide, &format!("{stem} {what}"));
    };
    host::rust(folder, &["-O"], "from_rust");
    same("from_rust", "Rust");
    for compiler in ["gcc", "clang"] {
        host::c(folder, compiler, stem, &["-O2"], "from_c");
        same("from_c", compiler);
    }
    host::everything(folder, stem);
    host::pedantic(folder, stem, &["2021"]);
}

/// One demo spec; gives what is to be held against exact values.
fn one(name: &str, specs: &Path) -> Vec<Asked> {
    let scratch = Scratch::new(&format!("demo-{name}"));
    let spec = std::fs::read_to_string(specs.join(format!("{name}.yaml"))).expect("a demo spec");
    let varied = specs.join(format!(".all_formats_of_{name}.yaml"));
    std::fs::write(&varied, in_every_format(name, &spec)).expect("a scratch file");
    let varied = varied.to_str().expect("a path of ours").to_owned();
    let output = run(scratch.path(), &["generate", &varied, "--out", "out"]);
    let refused = REFUSED.iter().any(|(spec, word)| {
        *spec == name
            && text(&output).lines().any(|l| l.contains("error:") && l.ends_with(&format!("({word})")))
    });
    if output.status.code() != Some(0) && refused {
        println!("{name}: {}", String::from_utf8_lossy(&output.stderr).lines().next().unwrap_or_default());
        return Vec::new();
    }
    assert_eq!(output.status.code(), Some(0), "{name}: {}", text(&output));
    let folder = scratch.path().join("out");
    let record = std::fs::read_to_string(folder.join(format!("{name}.record.json"))).expect("a record");
    let read: Value = serde_json::from_str(&record).expect("the record is JSON");
    let formulas: Vec<String> = read["formulas"].as_object().expect("formulas").keys().cloned().collect();
    let mut asked = Vec::new();
    for format in ["f64", "f32", "fixed"] {
        let stem = format!("{name}_{format}");
        if !folder.join(format!("{stem}.rs")).exists() {
            continue;
        }
        let loaded: Vec<(String, Loaded)> = formulas
            .iter()
            .map(|f| (f.clone(), Loaded::new(&record, &format!("{stem}.rs"), f).expect("a formula")))
            .collect();
        compiled(&folder, &stem, &loaded);
        asked.extend(loaded.iter().map(|(f, one)| ask(&read, name, f, format, one)));
    }
    asked
}

/// Exact values at all asked controls, by spec, formula and format.
fn exact(asked: &[Asked]) -> BTreeMap<String, Vec<f64>> {
    let mut question = serde_json::Map::new();
    for one in asked {
        let spec = question.entry(one.spec.clone()).or_insert_with(|| json!({}));
        let known = spec[one.formula.as_str()].as_array().cloned().unwrap_or_default();
        let all: Vec<Value> = known.into_iter().chain(one.controls.iter().map(|x| json!(x))).collect();
        spec[one.formula.as_str()] = all.into();
    }
    let python = std::env::var("SHIFTWRIGHT_TEST_PYTHON").unwrap_or_else(|_| "python3".to_owned());
    let mut child = Command::new(python)
        .arg(repository().join("tests/outputs/scripts/exact.py"))
        .current_dir(repository().join("specs"))
        .env("OMP_NUM_THREADS", "1")
        .env("OPENBLAS_NUM_THREADS", "1")
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .spawn()
        .expect("python with numpy is needed by this check; see tests/run");
    let question = Value::from(question).to_string();
    child.stdin.take().expect("a pipe").write_all(question.as_bytes()).expect("the script reads");
    let output = child.wait_with_output().expect("the script ends");
    assert!(output.status.success(), "scripts/exact.py: {}", text(&output));
    let answer: Value = serde_json::from_slice(&output.stdout).expect("the script prints JSON");
    let mut out = BTreeMap::new();
    let mut used: BTreeMap<String, usize> = BTreeMap::new();
    for one in asked {
        let Some(all) = answer[one.spec.as_str()][one.formula.as_str()].as_array() else { continue };
        let start = used.entry(format!("{} {}", one.spec, one.formula)).or_default();
        let part = all.iter().skip(*start).take(one.controls.len());
        out.insert(
            format!("{} {} {}", one.spec, one.formula, one.format),
            part.map(|x| x.as_f64().expect("an energy")).collect(),
        );
        *start += one.controls.len();
    }
    out
}

#[test]
fn demo_files_compile_agree_bit_for_bit_and_hold_against_exact_levels() {
    // Specs name files beside them, so the folder is copied whole.
    let copy = Scratch::new("demo-specs");
    let mut names = Vec::new();
    for entry in std::fs::read_dir(repository().join("specs")).expect("the demo folder") {
        let path = entry.expect("an entry").path();
        if path.is_file() {
            let file = path.file_name().and_then(|n| n.to_str()).expect("a plain name").to_owned();
            copy.write(&file, std::fs::read(&path).expect("a demo file"));
            names.extend(file.strip_suffix(".yaml").map(str::to_owned));
        }
    }
    names.sort();
    assert!(names.len() > 10, "{names:?}");
    let queue = Mutex::new(names.clone());
    let found = Mutex::new(Vec::new());
    let failed: Vec<String> = std::thread::scope(|scope| {
        let work = || {
            let mut failed = Vec::new();
            loop {
                let Some(name) = queue.lock().expect("no panic under the lock").pop() else { return failed };
                match std::panic::catch_unwind(|| one(&name, copy.path())) {
                    Ok(asked) => found.lock().expect("no panic under the lock").extend(asked),
                    Err(_) => failed.push(name),
                }
            }
        };
        let threads = [scope.spawn(work), scope.spawn(work)];
        threads.into_iter().flat_map(|t| t.join().expect("panics are caught inside")).collect()
    });
    let mut asked = found.into_inner().expect("no panic under the lock");
    asked.sort_by(|a, b| (&a.spec, &a.formula, a.format).cmp(&(&b.spec, &b.formula, b.format)));
    let exact = exact(&asked);
    for one in &asked {
        let key = format!("{} {} {}", one.spec, one.formula, one.format);
        let Some(exact) = exact.get(&key) else {
            println!("{key}: no independent solver here, {} samples", one.samples.len());
            continue;
        };
        let worst = one.values.iter().zip(exact).map(|(y, e)| (y - e).abs()).fold(0.0, f64::max);
        println!("{key}: worst {worst:.4e}, stated {:.4e}", one.stated);
        // Double precision of the dense solver itself, which knows no shifts.
        let own = 64.0 * f64::EPSILON * exact.iter().fold(1.0, |a: f64, e| a.max(e.abs()));
        assert!(worst <= one.stated + own, "{key}: {worst:e} {:e}", one.stated);
        assert!(worst <= one.tolerance * (1.0 + 1e-9) + own, "{key}: {worst:e} {:e}", one.tolerance);
        // The record rounds errors up to two digits; sums of parts need not meet at one point.
        assert!(
            worst >= 0.85 * one.remainder - (one.stated - one.remainder) - own,
            "{key}: {worst:e} {:e}",
            one.stated
        );
    }
    assert_eq!(failed, Vec::<String>::new(), "their messages stand above");
}
