//! The demo families: files compiled without a warning, C and Rust with the same
//! bits, within the tolerance of full exact solves everywhere in box and range;
//! and the circuit outputs in a compiler for the language standard and in a simulator.
//!
//! Exact levels come from `scripts/family.py`, dense diagonalisation with numpy of
//! stacks written down there a second time.

use std::fmt::Write as _;
use std::path::Path;

use serde_json::{Value, json};
use shiftwright_tests::{Scratch, number, repository, run, text};

use crate::circuit::{script, sweep};
use crate::host;

/// Random points per family.
const POINTS: usize = 500;

/// A family of the demo, generated into a folder of its own.
struct Family {
    scratch: Scratch,
    name: &'static str,
    record: Value,
}

impl Family {
    fn new(name: &'static str, test: &str) -> Self {
        let scratch = Scratch::new(&format!("family-{name}-{test}"));
        let file = format!("{name}.yaml");
        scratch.write(&file, std::fs::read(repository().join("specs").join(&file)).expect("a demo spec"));
        let output = run(scratch.path(), &["generate", &file, "--out", "."]);
        assert_eq!(output.status.code(), Some(0), "{}", text(&output));
        let record =
            std::fs::read_to_string(scratch.path().join(format!("{name}.record.json"))).expect("a record");
        Self { scratch, name, record: serde_json::from_str(&record).expect("JSON") }
    }

    fn formulas(&self) -> Vec<String> {
        self.record["formulas"].as_object().expect("formulas").keys().cloned().collect()
    }

    /// Bounds of control and parameters, the control's over all formulas.
    fn bounds(&self) -> Vec<(f64, f64)> {
        let ends = |end: &str, pick: fn(f64, f64) -> f64, start: f64| {
            self.formulas()
                .iter()
                .map(|f| number(&self.record, &format!("formulas/{f}/valid/{end}")))
                .fold(start, pick)
        };
        let mut out = vec![(ends("from", f64::max, f64::NEG_INFINITY), ends("to", f64::min, f64::INFINITY))];
        for one in self.record["family"]["parameters"].as_array().expect("parameters") {
            out.push((one["from"].as_f64().expect("a number"), one["to"].as_f64().expect("a number")));
        }
        out
    }

    /// Points in box and range: corners first, then drawn ones.
    fn points(&self) -> Vec<Vec<f64>> {
        let bounds = self.bounds();
        let mut out: Vec<Vec<f64>> = (0..1 << bounds.len())
            .map(|k| {
                bounds.iter().enumerate().map(|(i, b)| if k >> i & 1 == 0 { b.0 } else { b.1 }).collect()
            })
            .collect();
        let mut word = 0x2545_F491_4F6C_DD1D_u64;
        while out.len() < POINTS {
            out.push(
                bounds
                    .iter()
                    .map(|(from, to)| {
                        word ^= word << 13;
                        word ^= word >> 7;
                        word ^= word << 17;
                        from + (to - from) * ((word >> 11) as f64 / (1_u64 << 53) as f64)
                    })
                    .collect(),
            );
        }
        out
    }

    fn parameters(&self) -> Vec<String> {
        let list = self.record["family"]["parameters"].as_array().expect("parameters");
        list.iter().map(|one| one["name"].as_str().expect("a name").to_lowercase()).collect()
    }

    /// A program that answers per line of arguments and formula: bits of value, slope and
    /// slopes by parameter, then status and bits of checked value and inverse.
    fn rust(&self) {
        let names = self.parameters();
        let given = (0..names.len()).map(|k| format!(", a[{}]", k + 1)).collect::<String>();
        let mut body = String::new();
        for formula in self.formulas() {
            let call = |f: &str| format!("m::{formula}::{f}(a[0]{given})");
            let mut answers = vec![call("value"), call("slope")];
            answers.extend(names.iter().map(|name| call(&format!("slope_{name}"))));
            for answer in answers {
                let _ = writeln!(body, "print!(\"{{:016x}} \", {answer}.to_bits());");
            }
            let _ = writeln!(body, "show({});", call("checked"));
            let _ = writeln!(body, "show(m::{formula}::inverse({}{given}));", call("value"));
        }
        let stem = format!("{}_f64", self.name);
        let main = format!(
            "#[path = \"{stem}.rs\"]\nmod m;\nfn show(x: Result<f64, m::OutOfRange>) {{ match x {{ Ok(x) => print!(\"0 {{:016x}} \", x.to_bits()), \
             Err(e) => print!(\"{{}} - \", match e {{ m::OutOfRange::Below => 1, m::OutOfRange::Above => 2, m::OutOfRange::NotANumber => 3, \
             m::OutOfRange::NoSolution => 4, m::OutOfRange::OutsideFamily => 5 }}) }} }}\n\
             fn main() {{ for line in std::io::stdin().lines() {{ let line = line.unwrap(); \
             let a: Vec<f64> = line.split_whitespace().map(|x| x.parse().unwrap()).collect();\n{body}println!(); }} }}\n"
        );
        self.scratch.write("main.rs", main);
        host::rust(self.scratch.path(), &["-C", "opt-level=2"], "from_rust");
    }

    fn c(&self, compiler: &str) {
        let names = self.parameters();
        let given = (0..names.len()).map(|k| format!(", a[{}]", k + 1)).collect::<String>();
        let stem = format!("{}_f64", self.name);
        let mut body = String::new();
        for formula in self.formulas() {
            let call = |f: &str| format!("{stem}_{formula}{f}(a[0]{given})");
            let mut answers = vec![call(""), call("_slope")];
            answers.extend(names.iter().map(|name| call(&format!("_slope_{name}"))));
            for answer in answers {
                let _ = writeln!(body, "bits({answer});");
            }
            let _ = writeln!(body, "x = 0; s = (int){stem}_{formula}_checked(a[0]{given}, &x); show(s, x);");
            let _ = writeln!(
                body,
                "x = 0; s = (int){stem}_{formula}_inverse({}{given}, &x); show(s, x);",
                call("")
            );
        }
        let reads = "&a[0], &a[1], &a[2], &a[3]";
        let format = "%lf ".repeat(names.len() + 1);
        let count = names.len() + 1;
        let reads = reads.split(", ").take(count).collect::<Vec<_>>().join(", ");
        let main = format!(
            "#include \"{stem}.h\"\n#include <inttypes.h>\n#include <stdio.h>\n#include <string.h>\n\
             static void bits(double x) {{ uint64_t w; memcpy(&w, &x, sizeof w); printf(\"%016\" PRIx64 \" \", w); }}\n\
             static void show(int status, double x) {{ printf(\"%d \", status); if (status == 0) bits(x); else printf(\"- \"); }}\n\
             int main(void) {{ double a[4], x; int s; while (scanf(\"{format}\", {reads}) == {count}) {{\n{body}printf(\"\\n\"); }} return 0; }}\n"
        );
        self.scratch.write("main.c", main);
        host::c(self.scratch.path(), compiler, &stem, &["-O2"], "from_c");
    }
}

fn lines(points: &[Vec<f64>]) -> String {
    points.iter().fold(String::new(), |mut text, point| {
        let words: Vec<String> = point.iter().map(|x| format!("{x:?}")).collect();
        let _ = writeln!(text, "{}", words.join(" "));
        text
    })
}

fn from_bits(word: &str) -> f64 {
    f64::from_bits(u64::from_str_radix(word, 16).expect("bits"))
}

fn holds(name: &'static str) {
    let family = Family::new(name, "exact");
    let folder: &Path = family.scratch.path();
    let points = family.points();
    let input = lines(&points);
    family.rust();
    let rust = host::feed(folder, "from_rust", &input);
    for compiler in ["gcc", "clang"] {
        family.c(compiler);
        assert!(rust == host::feed(folder, "from_c", &input), "{name}: Rust and {compiler} differ in bits");
    }
    let exact = script("family.py", &json!({ name: points }));
    let names = family.parameters();
    let width = 2 + names.len() + 4;
    let mut worst = 0.0_f64;
    for (k, formula) in family.formulas().iter().enumerate() {
        let tolerance = number(&family.record, &format!("formulas/{formula}/tolerance"));
        let levels = exact[name][formula.as_str()].as_array().expect("energies");
        for ((line, point), exact) in rust.lines().zip(&points).zip(levels) {
            let words: Vec<&str> = line.split_whitespace().skip(k * width).take(width).collect();
            let value = from_bits(words[0]);
            let off = (value - exact.as_f64().expect("an energy")).abs();
            worst = worst.max(off / tolerance);
            assert!(off <= tolerance, "{name} {formula} at {point:?}: off by {off:e}");
            let checked = &words[width - 4..width - 2];
            assert_eq!(checked, ["0", words[0]], "{name} {formula} at {point:?}");
        }
        // Derivatives against central differences of the values.
        let steps = [1e-4, 1e-4, 1e-6];
        let mut around = Vec::new();
        for point in points.iter().skip(20).take(20) {
            for axis in 0..point.len() {
                for sign in [-1.0, 1.0] {
                    let mut there = point.clone();
                    there[axis] += sign * steps[axis];
                    around.push(there);
                }
            }
        }
        let near = host::feed(folder, "from_rust", &lines(&around));
        let near: Vec<f64> = near
            .lines()
            .map(|line| from_bits(line.split_whitespace().nth(k * width).expect("a value")))
            .collect();
        for (idx, line) in rust.lines().skip(20).take(20).enumerate() {
            let words: Vec<&str> = line.split_whitespace().skip(k * width).collect();
            for axis in 0..=names.len() {
                let place = 2 * (idx * (names.len() + 1) + axis);
                let difference = (near[place + 1] - near[place]) / (2.0 * steps[axis]);
                let slope = from_bits(words[1 + axis]);
                let scale = difference.abs().max(1e-3);
                assert!(
                    (slope - difference).abs() < 1e-5 * scale,
                    "{name} {formula} axis {axis}: {slope} {difference}"
                );
            }
        }
    }
    println!("{name}: {} points, worst error {:.0} % of the tolerance", points.len(), 100.0 * worst);

    // Statuses outside: NaN first, then the box, then the range.
    let bounds = family.bounds();
    let inside: Vec<f64> = bounds.iter().map(|b| 0.5 * (b.0 + b.1)).collect();
    let mut outside = vec![inside.clone(); 6];
    let wide: Vec<(f64, f64)> = family
        .formulas()
        .iter()
        .map(|f| {
            (
                number(&family.record, &format!("formulas/{f}/valid/from")),
                number(&family.record, &format!("formulas/{f}/valid/to")),
            )
        })
        .collect();
    outside[0][0] = f64::NAN;
    outside[1][1] = f64::NAN;
    outside[1][0] = 1e9;
    outside[2][1] = bounds[1].1.next_up();
    outside[2][0] = 1e9;
    outside[3][1] = bounds[1].0.next_down();
    outside[4][0] = wide.iter().fold(f64::INFINITY, |least, w| least.min(w.0)).next_down();
    outside[5][0] = f64::INFINITY;
    let text: String = lines(&outside).replace("inf", "1e999");
    let answers = host::feed(folder, "from_rust", &text);
    assert_eq!(answers, host::feed(folder, "from_c", &text), "{name}: statuses");
    let found: Vec<&str> =
        answers.lines().map(|line| line.split_whitespace().nth(width - 4).expect("a status")).collect();
    assert_eq!(found, ["3", "3", "5", "5", "1", "2"]);
}

#[test]
fn a_family_over_one_width_holds_against_exact_levels() {
    holds("blind");
}

#[test]
fn a_family_over_width_and_height_holds_against_exact_levels() {
    holds("pane");
}

/// At 1,000 biases the compiled Verilog-A and the simulated sub-circuit give what C gives.
#[test]
fn circuits_of_a_family_give_the_values_of_c() {
    let family = Family::new("pane", "circuits");
    let (well, barrier) = (10.73, 0.2317);
    family.c("gcc");
    let bounds = family.bounds();
    let controls: Vec<f64> =
        (0..1000).map(|k| bounds[0].0 + (bounds[0].1 - bounds[0].0) * f64::from(k) / 999.0).collect();
    let points: Vec<Vec<f64>> = controls.iter().map(|x| vec![*x, well, barrier]).collect();
    let answers = host::feed(family.scratch.path(), "from_c", &lines(&points));
    let formulas = family.formulas();
    let width = 2 + family.parameters().len() + 4;
    let file = family.scratch.path().join("pane.va");
    let found = script(
        "verilog.py",
        &json!({
            "file": file, "ports": ["line", "base"], "controls": controls,
            "parameters": {"well": well, "barrier": barrier},
        }),
    );
    let (swept, simulated) =
        sweep(family.scratch.path(), "pane", &["line", "base"], "well=10.73 barrier=0.2317", &controls);
    let points: Vec<Vec<f64>> = swept.iter().map(|x| vec![*x, well, barrier]).collect();
    let at_swept = host::feed(family.scratch.path(), "from_c", &lines(&points));
    for (k, formula) in formulas.iter().enumerate() {
        let (compiled, run) = (&found["values"][formula.as_str()], &simulated[formula.as_str()]);
        let value = |line: &str| from_bits(line.split_whitespace().nth(k * width).expect("a value"));
        for (idx, (line, there)) in answers.lines().zip(at_swept.lines()).enumerate() {
            let (value, there) = (value(line), value(there));
            let verilog = compiled[idx].as_f64().expect("a number");
            assert!((verilog - value).abs() <= 1e-12 * value.abs(), "{formula} Verilog-A: {verilog} {value}");
            assert!((run[idx] - there).abs() <= 1e-12 * there.abs(), "{formula} SPICE: {} {there}", run[idx]);
        }
    }
    assert!(found["ok"].as_array().expect("a list").iter().all(|ok| *ok == json!(1.0)));
    assert!(simulated["ok"].iter().all(|ok| *ok == 1.0));
}
