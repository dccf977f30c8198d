//! Floating-point files: Rust, C and the runtime crate give the same bits.

use std::fmt::Write as _;

use shiftwright::emit::{self, Target};
use shiftwright::formula::{FloatForm, Formula, NumberFormat, Numbers};
use shiftwright::outcome::Outcome;
use shiftwright_runtime::{OutOfRange, double, single};
use shiftwright_tests::{Scratch, text, tool};

use crate::samples;

/// What gcc and clang are asked to find fault with.
pub const WARNINGS: &[&str] = &[
    "-std=c99",
    "-pedantic",
    "-Wall",
    "-Wextra",
    "-Wconversion",
    "-Wshadow",
    "-Wdouble-promotion",
    "-Wfloat-equal",
    "-Wundef",
    "-Wstrict-prototypes",
    "-Wmissing-prototypes",
    "-Wcast-qual",
    "-Wsign-conversion",
    "-Werror",
];

fn write_all(scratch: &Scratch, outcome: &Outcome, stem: &str, formulas: &[Formula]) {
    for target in [Target::Rust, Target::C] {
        for source in emit::files(outcome, target, stem, formulas).expect("files are printed") {
            scratch.write(&source.file, &source.text);
        }
    }
}

/// Names of the inverses of a formula in the files.
fn inverses(formula: &Formula) -> Vec<&'static str> {
    let (Numbers::Double(float) | Numbers::Single(float)) = &formula.numbers else { return vec![] };
    let mut out = vec!["inverse"];
    if float.branches.below.is_some() {
        out.push("inverse_below");
    }
    if float.branches.above.is_some() {
        out.push("inverse_above");
    }
    out
}

/// A program that reads words of bits and prints the bits of every function.
fn rust_program(stem: &str, formulas: &[Formula], ty: &str, bits: &str) -> String {
    let mut out = format!(
        "mod {stem};\nuse std::io::Read;\nuse {stem}::OutOfRange;\n\
         fn show(r: Result<{ty}, OutOfRange>) {{ match r {{ Ok(v) => print!(\" 0:{{:x}}\", v.to_bits()), \
         Err(e) => print!(\" {{}}:\", e as u8 + 1) }} }}\n\
         fn main() {{ let mut s = String::new(); std::io::stdin().read_to_string(&mut s).unwrap();\n\
         let x: Vec<{ty}> = s.split_whitespace().map(|w| {ty}::from_bits({bits}::from_str_radix(w, 16).unwrap())).collect();\n\
         let mut y = vec![0.0; x.len()];\n"
    );
    for formula in formulas {
        let name = &formula.measured.name;
        let _ = writeln!(out, "{stem}::{name}::many(&x, &mut y);");
        let _ = writeln!(out, "for (&x, &y) in x.iter().zip(&y) {{ use {stem}::{name}::*;");
        out.push_str("assert_eq!(value(x).to_bits(), y.to_bits()); print!(\"{:x} {:x}\", y.to_bits(), slope(x).to_bits()); show(checked(x));\n");
        for inverse in inverses(formula) {
            let _ = writeln!(out, "show({inverse}(x)); show({inverse}(y));");
        }
        out.push_str("println!(); }\n");
    }
    out.push_str("}\n");
    out
}

fn c_program(stem: &str, formulas: &[Formula], ty: &str, bits: &str) -> String {
    let (read, print) = if bits == "uint64_t" { ("SCNx64", "PRIx64") } else { ("SCNx32", "PRIx32") };
    let mut out = format!(
        "#include \"{stem}.h\"\n#include <inttypes.h>\n#include <stdio.h>\n#include <string.h>\n\
         static {ty} x[40000];\nstatic {ty} y[40000];\n\
         static {bits} word({ty} v) {{ {bits} w; memcpy(&w, &v, sizeof w); return w; }}\n\
         static void show({stem}_status s, {ty} v) {{ if (s == 0) printf(\" 0:%\" {print}, word(v)); else printf(\" %d:\", (int)s); }}\n\
         int main(void) {{ size_t n = 0; size_t i; {bits} w;\n\
         while (n < 40000 && scanf(\"%\" {read}, &w) == 1) {{ memcpy(&x[n], &w, sizeof w); n++; }}\n"
    );
    for formula in formulas {
        let name = format!("{stem}_{}", formula.measured.name);
        let _ = writeln!(
            out,
            "memcpy(y, x, sizeof x); {name}_many(y, y, n);\nfor (i = 0; i < n; i++) {{ {ty} v = 0; {stem}_status s;"
        );
        let _ = writeln!(out, "printf(\"%\" {print} \" %\" {print}, word(y[i]), word({name}_slope(x[i])));");
        let _ = writeln!(out, "s = {name}_checked(x[i], &v); show(s, v);");
        for inverse in inverses(formula) {
            let _ = writeln!(
                out,
                "s = {name}_{inverse}(x[i], &v); show(s, v); s = {name}_{inverse}(y[i], &v); show(s, v);"
            );
        }
        out.push_str("printf(\"\\n\"); }\n");
    }
    out.push_str("return 0; }\n");
    out
}

macro_rules! reference {
    ($name:ident, $module:ident, $float:ident) => {
        fn $name(formula: &Formula, points: &[$float], out: &mut String) {
            let (Numbers::Double(float) | Numbers::Single(float)) = &formula.numbers else {
                panic!("a float")
            };
            let narrow = |list: &[f64]| list.iter().map(|c| *c as $float).collect::<Vec<_>>();
            let (a, b);
            let form = match &float.form {
                FloatForm::Polynomial(c) => {
                    a = narrow(c);
                    $module::Form::Polynomial(&a)
                }
                FloatForm::Paired { mean, half_gap_squared, upper } => {
                    a = narrow(mean);
                    b = narrow(half_gap_squared);
                    $module::Form::Paired { mean: &a, half_gap_squared: &b, upper: *upper }
                }
            };
            let reference = $module::Formula {
                from: float.from as $float,
                to: float.to as $float,
                at: float.at as $float,
                rounding: float.rounding as $float,
                form,
            };
            let branches = reference.branches();
            let show = |out: &mut String, r: Result<$float, OutOfRange>| {
                let _ = match r {
                    Ok(v) => {
                        assert!(v.is_finite());
                        write!(out, " 0:{:x}", v.to_bits())
                    }
                    Err(e) => write!(out, " {}:", e as u8 + 1),
                };
            };
            for &x in points {
                let y = reference.value(x);
                let _ = write!(out, "{:x} {:x}", y.to_bits(), reference.slope(x).to_bits());
                show(out, reference.checked(x));
                for branch in [Some(branches.main), branches.below, branches.above].into_iter().flatten() {
                    show(out, reference.inverse_on(x, &branch));
                    let back = reference.inverse_on(y, &branch);
                    if let Ok(back) = back {
                        let error = (reference.value(back) as f64 - y as f64).abs();
                        // A value just beyond a branch end gives that end.
                        let allowed = formula.inverse_rounding.max(float.rounding);
                        assert!(error <= allowed, "{}: {error:e} {allowed:e}", formula.measured.name);
                    }
                    show(out, back);
                }
                out.push('\n');
            }
        }
    };
}

reference!(reference_double, double, f64);
reference!(reference_single, single, f32);

/// NaN bits carry no meaning and differ between machines.
fn without_nan(text: &str, wide: bool) -> String {
    let word = |w: &str| {
        let (status, bits) = w.split_once(':').map_or(("", w), |(s, b)| (s, b));
        let nan = u64::from_str_radix(bits, 16).is_ok_and(|b| {
            if wide {
                f64::from_bits(b).is_nan()
            } else {
                u32::try_from(b).is_ok_and(|b| f32::from_bits(b).is_nan())
            }
        });
        if nan { format!("{status}:nan") } else { w.to_owned() }
    };
    text.lines()
        .map(|line| line.split(' ').map(word).collect::<Vec<_>>().join(" "))
        .collect::<Vec<_>>()
        .join("\n")
}

fn points(at: f64) -> Vec<f64> {
    let mut out: Vec<f64> = (0..=1200).map(|i| at - 60.0 + 0.117 * f64::from(i)).collect();
    out.extend([
        f64::NAN,
        f64::INFINITY,
        f64::NEG_INFINITY,
        -0.0,
        0.0,
        at,
        1e300,
        -1e300,
        5e-324,
        1458.934408104531,
    ]);
    out.extend((0..200).map(|i| 34.0 + 0.01 * f64::from(i)));
    out
}

fn feed(folder: &Scratch, program: &str, input: &str) -> String {
    use std::io::Write;
    use std::process::{Command, Stdio};
    let mut child = Command::new(folder.path().join(program))
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("the compiled program starts");
    let mut stdin = child.stdin.take().expect("a pipe");
    let input = input.to_owned();
    let writer = std::thread::spawn(move || stdin.write_all(input.as_bytes()));
    let output = child.wait_with_output().expect("the program ends");
    writer.join().expect("no panic").expect("all input is read");
    assert!(output.status.success(), "{}", text(&output));
    String::from_utf8(output.stdout).expect("text")
}

fn same_bits(format: &NumberFormat, at: f64, label: &str) {
    let wide = matches!(format, NumberFormat::F64);
    let stem = format!("shapes_{}", format.word());
    let outcome = samples::outcome("shapes", "F", at, samples::every_shape(at));
    let formulas = samples::in_format(&outcome, format);
    let scratch = Scratch::new(&format!("same-bits-{label}"));
    write_all(&scratch, &outcome, &stem, &formulas);
    let (ty, bits, c_ty, c_bits) =
        if wide { ("f64", "u64", "double", "uint64_t") } else { ("f32", "u32", "float", "uint32_t") };
    scratch.write("main.rs", rust_program(&stem, &formulas, ty, bits));
    scratch.write("main.c", c_program(&stem, &formulas, c_ty, c_bits));
    let points = points(at);
    let mut expected = String::new();
    let mut input = String::new();
    for x in &points {
        let _ = if wide {
            writeln!(input, "{:x}", x.to_bits())
        } else {
            writeln!(input, "{:x}", (*x as f32).to_bits())
        };
    }
    let narrow: Vec<f32> = points.iter().map(|x| *x as f32).collect();
    for formula in &formulas {
        if wide {
            reference_double(formula, &points, &mut expected);
        } else {
            reference_single(formula, &narrow, &mut expected);
        }
    }
    let expected = without_nan(&expected, wide);
    let path = scratch.path();
    tool(path, "rustc", &["--edition", "2021", "-O", "-D", "warnings", "main.rs", "-o", "from_rust"]);
    assert_eq!(without_nan(&feed(&scratch, "from_rust", &input), wide), expected, "Rust");
    let source = format!("{stem}.c");
    for (compiler, level) in [("gcc", "-O2"), ("gcc", "-O0"), ("clang", "-O2")] {
        let mut arguments = WARNINGS.to_vec();
        arguments.extend([level, "-c", source.as_str(), "-o", "formula.o"]);
        tool(path, compiler, &arguments);
        tool(path, compiler, &["-std=c99", level, "main.c", "formula.o", "-o", "from_c"]);
        assert_eq!(without_nan(&feed(&scratch, "from_c", &input), wide), expected, "{compiler} {level}");
    }
    let everything = [
        "-std=c99",
        "-Weverything",
        "-Werror",
        "-Wno-unsafe-buffer-usage",
        "-Wno-unknown-warning-option",
        "-c",
        source.as_str(),
        "-o",
        "x.o",
    ];
    tool(path, "clang", &everything);
    tool(path, "g++", &["-x", "c++", "-fsyntax-only", "-Wall", "-Werror", &format!("{stem}.h")]);
    let rust = format!("{stem}.rs");
    for edition in ["2018", "2021", "2024"] {
        let pedantic = [
            "--edition",
            edition,
            "--crate-type",
            "lib",
            "--emit",
            "metadata",
            "-D",
            "warnings",
            "-D",
            "clippy::all",
            "-D",
            "clippy::pedantic",
            rust.as_str(),
            "-o",
            "x.rmeta",
        ];
        tool(path, "clippy-driver", &pedantic);
    }
}

#[test]
fn double_precision_gives_the_same_bits_in_rust_c_and_the_runtime() {
    same_bits(&NumberFormat::F64, 0.0, "f64");
    same_bits(&NumberFormat::F64, 12.3, "f64-at");
}

#[test]
fn single_precision_gives_the_same_bits_in_rust_c_and_the_runtime() {
    same_bits(&NumberFormat::F32, 0.0, "f32");
    same_bits(&NumberFormat::F32, 12.3, "f32-at");
}
