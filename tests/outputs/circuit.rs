//! Circuit outputs in real tools: the Verilog-A module compiled by a compiler
//! for the language standard, the SPICE sub-circuit run by a simulator in batch.

use std::collections::BTreeMap;
use std::fmt::Write as _;
use std::io::Write as _;
use std::path::Path;
use std::process::{Command, Stdio};

use serde_json::{Value, json};
use shiftwright_tests::{Scratch, number, record, repository, run, text};

use crate::host;

/// Runs a script of this folder on a question, both JSON.
pub fn script(name: &str, question: &Value) -> Value {
    let python = std::env::var("SHIFTWRIGHT_TEST_PYTHON").unwrap_or_else(|_| "python3".to_owned());
    let mut child = Command::new(python)
        .arg(repository().join("tests/outputs/scripts").join(name))
        .env("OMP_NUM_THREADS", "1")
        .env("OPENBLAS_NUM_THREADS", "1")
        .env("PYTHONDONTWRITEBYTECODE", "1")
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("python with its modules is needed by this check; see tests/run");
    child.stdin.take().expect("a pipe").write_all(question.to_string().as_bytes()).expect("the script reads");
    let output = child.wait_with_output().expect("the script ends");
    assert!(output.status.success(), "{name}: {}", text(&output));
    serde_json::from_slice(&output.stdout).expect("the script prints JSON")
}

/// Runs a netlist and reads the table that it writes to `table`.
fn simulate(folder: &Path, netlist: &str) -> Vec<Vec<f64>> {
    std::fs::write(folder.join("run.cir"), netlist).expect("a netlist can be written");
    let _ = std::fs::remove_file(folder.join("table.dat"));
    // In batch it ends with status 1 where nothing is plotted; the table is what counts.
    let output = Command::new("ngspice")
        .args(["-b", "run.cir"])
        .current_dir(folder)
        .output()
        .expect("ngspice is needed by this check; see tests/run");
    let table = std::fs::read_to_string(folder.join("table.dat"))
        .unwrap_or_else(|error| panic!("the simulator wrote no table ({error}): {}", text(&output)));
    table
        .lines()
        .skip(1)
        .map(|line| line.split_whitespace().map(|x| x.parse().expect("a number")).collect())
        .collect()
}

/// Tolerances at which a simulator prints what it computes, and a table with all digits.
const OPTIONS: &str = ".options reltol=1e-14 vntol=1e-15 abstol=1e-15 gmin=1e-15";
const DIGITS: &str = "set numdgt=17\nset wr_singlescale\nset wr_vecnames\n";

/// Values of every port of a sub-circuit by a DC sweep, with the controls as the simulator
/// added them up; `controls` are equally spaced.
pub fn sweep(
    folder: &Path,
    name: &str,
    ports: &[&str],
    parameters: &str,
    controls: &[f64],
) -> (Vec<f64>, BTreeMap<String, Vec<f64>>) {
    let (from, to) = (controls[0], controls[controls.len() - 1]);
    let step = (to - from) / (controls.len() - 1) as f64;
    let mut netlist =
        format!("sweep\n.include {name}.cir\nVc c 0 0\nX1 c {} ok 0 {name} {parameters}\n", ports.join(" "));
    let columns: Vec<String> = ports.iter().chain(&["ok"]).map(|port| format!("v({port})")).collect();
    let _ = writeln!(
        netlist,
        "{OPTIONS}\n.control\n{DIGITS}dc Vc {from:?} {:?} {step:?}\nwrdata table.dat v(c) {}\n.endc\n.end",
        to + 0.5 * step,
        columns.join(" ")
    );
    let mut out: BTreeMap<String, Vec<f64>> = BTreeMap::new();
    let rows = simulate(folder, &netlist);
    assert_eq!(rows.len(), controls.len());
    let mut swept = Vec::with_capacity(rows.len());
    for (row, control) in rows.iter().zip(controls) {
        assert!((row[1] - control).abs() <= 1e-9 * (from.abs() + to.abs()), "swept {} for {control}", row[1]);
        swept.push(row[1]);
        for (port, value) in ports.iter().chain(&["ok"]).zip(&row[2..]) {
            out.entry((*port).to_owned()).or_default().push(*value);
        }
    }
    (swept, out)
}

/// A well with a polynomial and a driven pair, in one module each.
const WELL: &str = "spec: 1\nname: stave\nsummary: test of circuits\nsystems:\n  e:\n    kind: layers\n    charge: -1\n    field: F\n    stack:\n\
    \x20     - {thickness: 12 nm, edge: 232 meV, mass: 0.0919}\n      - {thickness: 9 nm, edge: {from: 0 meV, to: 30 meV}, mass: 0.0665}\n\
    \x20     - {thickness: 12 nm, edge: 232 meV, mass: 0.0919}\ncontrol: {symbol: F, unit: kV/cm, at: 5, within: [-40, 40]}\n\
    formulas:\n  level:\n    unit: meV\n    sum: [{system: e, level: 1}]\n    tolerance: 0.05 meV\n    order: 3\n\
    \x20 shift:\n    unit: meV\n    sum: [{system: e, level: 2}]\n    value: shift\n    tolerance: 0.05 meV\n    order: 4\n\
    outputs: [{language: c, number: f64}, {language: verilog-a}, {language: spice}]\n";
const PAIR: &str = "spec: 1\nname: hinge\nsummary: test of circuits\nsystems:\n  s:\n    kind: matrix\n    unit: GHz\n    h0: [[1, 0.3], [0.3, 1]]\n    h1: [[1, 0], [0, -0.8]]\n\
    control: {symbol: x, unit: 1, at: 0, within: [-2, 2]}\nformulas:\n  upper:\n    unit: GHz\n    sum: [{system: s, level: 2}]\n    form: paired\n    tolerance: 1 MHz\n\
    outputs: [{language: c, number: f64}, {language: verilog-a}, {language: spice}]\n";

struct Circuit {
    scratch: Scratch,
    formulas: Vec<&'static str>,
    record: Value,
}

impl Circuit {
    fn new(name: &'static str, test: &str, spec: &str, formulas: &[&'static str]) -> Self {
        let scratch = Scratch::new(&format!("circuit-{name}-{test}"));
        scratch.write("spec.yaml", spec);
        let output = run(scratch.path(), &["generate", "spec.yaml", "--out", "."]);
        assert_eq!(output.status.code(), Some(0), "{}", text(&output));
        let record = record(&format!("circuit-record-{name}-{test}"), spec);
        let mut body = String::new();
        for formula in formulas {
            let _ = writeln!(
                body,
                "printf(\"%.17g \", {name}_f64_{formula}(x)); printf(\"%.17g \", {name}_f64_{formula}_slope(x));"
            );
        }
        scratch.write(
            "main.c",
            format!(
                "#include \"{name}_f64.h\"\n#include <stdio.h>\nint main(void) {{ double x; while (scanf(\"%lf\", &x) == 1) {{\n{body}printf(\"\\n\"); }} return 0; }}\n"
            ),
        );
        host::c(scratch.path(), "gcc", &format!("{name}_f64"), &["-O2"], "from_c");
        Self { scratch, formulas: formulas.to_vec(), record }
    }

    fn ends(&self, formula: &str) -> (f64, f64) {
        let end = |word: &str| number(&self.record, &format!("formulas/{formula}/valid/{word}"));
        (end("from"), end("to"))
    }

    /// The range that all formulas share.
    fn range(&self) -> (f64, f64) {
        self.formulas
            .iter()
            .map(|f| self.ends(f))
            .fold((f64::NEG_INFINITY, f64::INFINITY), |a, b| (a.0.max(b.0), a.1.min(b.1)))
    }

    /// Value and slope of every formula from C.
    fn c(&self, controls: &[f64]) -> Vec<Vec<f64>> {
        let input: String = controls.iter().map(|x| format!("{x:?}\n")).collect();
        let answers = host::feed(self.scratch.path(), "from_c", &input);
        answers
            .lines()
            .map(|line| line.split_whitespace().map(|x| x.parse().expect("a number")).collect())
            .collect()
    }

    fn grid(&self) -> Vec<f64> {
        let (from, to) = self.range();
        (0..1000).map(|k| from + (to - from) * f64::from(k) / 999.0).collect()
    }
}

fn compared(name: &'static str, spec: &str, formulas: &[&'static str]) {
    let circuit = Circuit::new(name, "compared", spec, formulas);
    let controls = circuit.grid();
    let expected = circuit.c(&controls);
    let file = circuit.scratch.path().join(format!("{name}.va"));
    let question = |file: &Path| json!({"file": file, "ports": formulas, "controls": controls, "parameters": constants(file)});
    let compiled = script("verilog.py", &question(&file));
    let (swept, simulated) = sweep(circuit.scratch.path(), name, formulas, "", &controls);
    let at_swept = circuit.c(&swept);
    for (k, formula) in formulas.iter().enumerate() {
        let largest = expected.iter().map(|row| row[2 * k].abs()).fold(0.0, f64::max);
        for (idx, row) in expected.iter().enumerate() {
            let verilog = compiled["values"][*formula][idx].as_f64().expect("a number");
            assert!(
                (verilog - row[2 * k]).abs() <= 1e-12 * largest,
                "{formula} Verilog-A {verilog} {}",
                row[2 * k]
            );
            // The simulator stops its iterations about a part in 1e12 short, seen with any tolerance.
            let (spice, there) = (simulated[*formula][idx], at_swept[idx][2 * k]);
            assert!(
                (spice - there).abs() <= 4e-12 * largest,
                "{formula} SPICE {spice} {there} at {}",
                swept[idx]
            );
        }
    }
    assert!(simulated["ok"].iter().all(|ok| *ok == 1.0));

    // The comparison sees a flipped sign.
    let source = std::fs::read_to_string(&file).expect("the module");
    let wrong = source.replacen("+ d * (", "- d * (", 1);
    assert_ne!(source, wrong, "the formula has no term to flip");
    let file = circuit.scratch.write("wrong.va", wrong);
    let flipped = script("verilog.py", &question(&file));
    let off = flipped["values"][formulas[0]][0].as_f64().expect("a number") - expected[0][0];
    assert!(off.abs() > 1e-6, "a flipped sign went unseen");
}

/// Local parameters, which the interpreter wants to be told as well.
fn constants(file: &Path) -> Value {
    let source = std::fs::read_to_string(file).expect("the module");
    let mut out = serde_json::Map::new();
    for line in source.lines() {
        if let Some((name, value)) =
            line.trim().strip_prefix("localparam real ").and_then(|rest| rest.split_once(" = "))
        {
            let value: f64 = value.trim_end_matches(';').trim_matches(['(', ')']).parse().expect("a literal");
            out.insert(name.to_owned(), json!(value));
        }
    }
    Value::Object(out)
}

#[test]
fn circuits_of_polynomials_give_the_values_of_c() {
    compared("stave", WELL, &["level", "shift"]);
}

#[test]
fn circuits_of_pairs_give_the_values_of_c() {
    compared("hinge", PAIR, &["upper"]);
}

/// A bias in a feedback loop: the operating point is where loop and formula agree.
#[test]
fn an_operating_point_in_a_feedback_loop_converges() {
    let circuit = Circuit::new("stave", "loop", WELL, &["level", "shift"]);
    let target = circuit.c(&[17.0])[0][0];
    let netlist = format!(
        "loop\n.include stave.cir\nX1 c level shift ok 0 stave\nBc c 0 V = 100 * ({target:?} - V(level)) + 3\n{OPTIONS}\n\
         .control\n{DIGITS}op\nwrdata table.dat v(c) v(level) v(ok)\n.endc\n.end\n"
    );
    let rows = simulate(circuit.scratch.path(), &netlist);
    let (bias, level) = (rows[0][1], rows[0][2]);
    let formula = circuit.c(&[bias])[0][0];
    assert!((level - formula).abs() <= 1e-9, "the level at the operating point: {level} {formula}");
    assert!((bias - (100.0 * (target - level) + 3.0)).abs() < 1e-6, "the loop is not closed: {bias}");
    assert_eq!(rows[0][3], 1.0);
}

/// Through the end of the range the value goes on along the tangent, and `ok` falls.
#[test]
fn a_transient_through_the_end_of_the_range_stays_continuous() {
    let circuit = Circuit::new("stave", "ramp", WELL, &["level", "shift"]);
    let (_, to) = circuit.range();
    let end = circuit.c(&[to])[0].clone();
    let stop = to + 20.0;
    let netlist = format!(
        "ramp\n.include stave.cir\nVc c 0 PWL(0 {:?} 1 {stop:?})\nX1 c level shift ok 0 stave\n{OPTIONS}\n\
         .control\n{DIGITS}tran 1m 1 0 1m\nwrdata table.dat v(c) v(level) v(ok)\n.endc\n.end\n",
        to - 20.0
    );
    let rows = simulate(circuit.scratch.path(), &netlist);
    assert!(rows.len() > 900);
    let (_, level_end) = circuit.ends("level");
    for two in rows.windows(2) {
        let (dx, dy) = (two[1][1] - two[0][1], two[1][2] - two[0][2]);
        assert!(dy.abs() <= 1.5 * dx.abs() * end[1].abs() + 1e-6, "a jump of {dy} at {}", two[0][1]);
    }
    let last = rows.last().expect("rows");
    if level_end == to {
        let tangent = end[0] + end[1] * (last[1] - to);
        assert!((last[2] - tangent).abs() < 1e-6, "{} is not on the tangent {tangent}", last[2]);
    }
    let changes = rows.windows(2).filter(|two| two[0][3] != two[1][3]).count();
    assert_eq!((changes, rows[0][3], last[3]), (1, 1.0, 0.0), "`ok` falls once");
}
