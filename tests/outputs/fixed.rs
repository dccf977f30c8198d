//! Fixed-point files: every code of the control, in Rust, C and the runtime crate.

use std::fmt::Write as _;

use shiftwright::diagnostic::Place;
use shiftwright::emit::{self, Target};
use shiftwright::form::Form;
use shiftwright::formula::{Fixed, FixedForm, Formula, NumberFormat, Numbers};
use shiftwright::spec::Count;
use shiftwright_runtime::{OutOfRange, fixed};
use shiftwright_tests::{Scratch, text, tool};

use crate::float::WARNINGS;
use crate::samples;

fn count(bits: u32, step: f64) -> Count {
    Count { bits, step, place: Place { file: "shapes.yaml".to_owned(), start: 0, end: 1 } }
}

fn format(control: (u32, f64), value: (u32, f64)) -> NumberFormat {
    NumberFormat::Fixed { control: count(control.0, control.1), value: count(value.0, value.1) }
}

fn reference(fixed: &Fixed) -> fixed::Formula<'_> {
    let form = match &fixed.form {
        FixedForm::Polynomial { value, slope } => {
            fixed::Form::Polynomial { value: &value.rungs, slope: &slope.rungs }
        }
        FixedForm::Paired { mean, mean_slope, half_gap_squared, half_gap_squared_slope, upper } => {
            fixed::Form::Paired {
                mean: &mean.rungs,
                mean_slope: &mean_slope.rungs,
                half_gap_squared: &half_gap_squared.rungs,
                half_gap_squared_slope: &half_gap_squared_slope.rungs,
                upper: *upper,
            }
        }
    };
    fixed::Formula {
        from: fixed.from,
        to: fixed.to,
        origin: fixed.origin,
        rounding: fixed.rounding,
        halvings: fixed.control_bits,
        form,
    }
}

fn numbers(formula: &Formula) -> &Fixed {
    let Numbers::Fixed(fixed) = &formula.numbers else { panic!("counts") };
    fixed
}

/// A checksum of every answer, so that the programs print little.
fn mix(sum: u64, word: i64) -> u64 {
    (sum ^ word.cast_unsigned()).wrapping_mul(0x0000_0100_0000_01b3)
}

fn expected(formula: &Formula, at: f64) -> String {
    let fixed = numbers(formula);
    let reference = reference(fixed);
    let mut sum = 0xcbf2_9ce4_8422_2325_u64;
    let (mut worst, mut worst_back) = (0.0_f64, 0.0_f64);
    let put = |sum: u64, r: Result<i64, OutOfRange>| match r {
        Ok(v) => mix(mix(sum, 0), v),
        Err(e) => mix(sum, e as i64 + 1),
    };
    for n in i64::from(i16::MIN)..=i64::from(i16::MAX) {
        let y = reference.value(n);
        sum = mix(mix(sum, y), reference.slope(n));
        sum = put(sum, reference.checked(n));
        for (_, _, branch, _) in fixed.branches() {
            let back = reference.inverse_on(y, &branch);
            sum = put(sum, back);
            sum = put(sum, reference.inverse_on(n, &branch));
            if let Ok(back) = back {
                worst_back = worst_back.max((reference.value(back) - y).abs() as f64 * fixed.value_step);
            }
        }
        if n >= fixed.from && n <= fixed.to {
            let d = n as f64 * fixed.control_step - at;
            let exact = formula.measured.form.value(d);
            worst = worst.max((y as f64 * fixed.value_step - exact).abs());
        }
    }
    let name = &formula.measured.name;
    println!(
        "{name}: rounding {worst:.3e}, bound {:.3e}, {} bits",
        formula.rounding,
        if fixed.wide { 64 } else { 32 }
    );
    assert!(worst <= formula.rounding * (1.0 + 1e-9), "{name}: {worst:e} {:e}", formula.rounding);
    // A constant may be exact; double precision of its coefficient still counts.
    assert!(
        formula.rounding <= 20.0 * worst + 1e-9 * fixed.value_step,
        "{name}: {worst:e} {:e}",
        formula.rounding
    );
    assert!(worst_back <= formula.inverse_rounding, "{name}: {worst_back:e} {:e}", formula.inverse_rounding);
    format!("{name} {sum:x}\n")
}

fn rust_program(stem: &str, formulas: &[Formula]) -> String {
    let mut out = format!(
        "mod {stem};\nuse {stem}::OutOfRange;\n\
         fn mix(s: u64, w: i64) -> u64 {{ (s ^ w as u64).wrapping_mul(0x0000_0100_0000_01b3) }}\n\
         fn put<T: Into<i64>>(s: u64, r: Result<T, OutOfRange>) -> u64 {{ match r {{ Ok(v) => mix(mix(s, 0), v.into()), Err(e) => mix(s, e as i64 + 1) }} }}\n\
         fn main() {{\n"
    );
    for formula in formulas {
        let name = &formula.measured.name;
        let y = format!("i{}", numbers(formula).value_bits);
        let _ = writeln!(out, "{{ use {stem}::{name}::*; let mut s = 0xcbf2_9ce4_8422_2325_u64;");
        let _ = writeln!(
            out,
            "for n in i16::MIN..=i16::MAX {{ let mut y = [0]; many(&[n], &mut y); let y = y[0]; assert_eq!(y, value(n));"
        );
        let _ = writeln!(out, "s = mix(mix(s, y.into()), slope(n)); s = put(s, checked(n));");
        for (inverse, ..) in numbers(formula).branches() {
            let _ = writeln!(out, "s = put(s, {inverse}(y)); s = put(s, {inverse}({y}::from(n)));");
        }
        let _ = writeln!(out, "}} println!(\"{name} {{s:x}}\"); }}");
    }
    out.push_str("}\n");
    out
}

fn c_program(stem: &str, formulas: &[Formula]) -> String {
    let mut out = format!(
        "#include \"{stem}.h\"\n#include <inttypes.h>\n#include <stdio.h>\nstatic uint64_t s;\n\
         static void mix(int64_t w) {{ s = (s ^ (uint64_t)w) * UINT64_C(0x100000001b3); }}\n\
         static void put({stem}_status status, int64_t v) {{ mix((int64_t)status); if (status == 0) mix(v); }}\n\
         int main(void) {{ int32_t i;\n"
    );
    for formula in formulas {
        let name = format!("{stem}_{}", formula.measured.name);
        let y = format!("int{}_t", numbers(formula).value_bits);
        let _ = writeln!(
            out,
            "s = UINT64_C(0xcbf29ce484222325);\nfor (i = -32768; i < 32768; i++) {{ int16_t n = (int16_t)i; int16_t b = 0; {y} v = 0; {y} y; {stem}_status t;"
        );
        let _ = writeln!(
            out,
            "{name}_many(&n, &y, 1); mix(y); mix({name}_slope(n)); t = {name}_checked(n, &v); put(t, v);"
        );
        for (inverse, ..) in numbers(formula).branches() {
            let _ = writeln!(
                out,
                "t = {name}_{inverse}(y, &b); put(t, b); t = {name}_{inverse}(n, &b); put(t, b);"
            );
        }
        let _ = writeln!(out, "}} printf(\"{} %\" PRIx64 \"\\n\", s);", formula.measured.name);
    }
    out.push_str("return 0; }\n");
    out
}

fn every_code(at: f64, value: (u32, f64), label: &str) {
    let mut shapes = samples::every_shape(at);
    for shape in &mut shapes {
        // The first shape's level is too large for narrow values.
        if let (Form::Polynomial { coefficients }, true) = (&mut shape.form, value.0 < 32) {
            coefficients[0] %= 30.0;
            shape.series[0] = coefficients[0];
        }
        shape.tolerance = 0.05_f64.max(4.0 * value.1);
    }
    let stem = "shapes_fixed";
    let outcome = samples::outcome("shapes", "F", at, shapes);
    let formulas = samples::in_format(&outcome, &format((16, 0.01), value));
    let scratch = Scratch::new(&format!("every-code-{label}"));
    for target in [Target::Rust, Target::C] {
        for source in emit::files(&outcome, target, stem, &formulas).expect("files are printed") {
            scratch.write(&source.file, &source.text);
        }
    }
    scratch.write("main.rs", rust_program(stem, &formulas));
    scratch.write("main.c", c_program(stem, &formulas));
    let expected: String = formulas.iter().map(|f| expected(f, at)).collect();
    let path = scratch.path();
    // Overflow checks on: every addition and product is watched.
    tool(
        path,
        "rustc",
        &[
            "--edition",
            "2021",
            "-O",
            "-C",
            "overflow-checks=on",
            "-D",
            "warnings",
            "main.rs",
            "-o",
            "from_rust",
        ],
    );
    let run = |program: &str| {
        let output = std::process::Command::new(path.join(program)).output().expect("the program starts");
        assert!(output.status.success(), "{}", text(&output));
        String::from_utf8(output.stdout).expect("text")
    };
    assert_eq!(run("from_rust"), expected, "Rust");
    let source = format!("{stem}.c");
    for (compiler, sanitizer) in [("gcc", "undefined"), ("clang", "undefined,integer,implicit-conversion")] {
        let mut arguments = WARNINGS.to_vec();
        arguments.extend(["-O2", "-c", source.as_str(), "-o", "formula.o"]);
        tool(path, compiler, &arguments);
        let sanitize = format!("-fsanitize={sanitizer}");
        arguments.extend([sanitize.as_str(), "-fno-sanitize-recover=all"]);
        tool(path, compiler, &arguments);
        tool(
            path,
            compiler,
            &[
                "-std=c99",
                "-O1",
                "main.c",
                "formula.o",
                &format!("-fsanitize={}", "undefined"),
                "-o",
                "from_c",
            ],
        );
        assert_eq!(run("from_c"), expected, "{compiler}");
    }
    tool(path, "g++", &["-x", "c++", "-fsyntax-only", "-Wall", "-Werror", &format!("{stem}.h")]);
    tool(
        path,
        "clippy-driver",
        &[
            "--edition",
            "2021",
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
            &format!("{stem}.rs"),
            "-o",
            "x.rmeta",
        ],
    );
}

#[test]
fn every_code_of_a_16_bit_control_gives_the_same_32_bit_value() {
    every_code(0.0, (32, 1e-3), "i32");
    every_code(12.305, (32, 1e-3), "i32-at");
}

#[test]
fn every_code_of_a_16_bit_control_gives_the_same_16_bit_value() {
    every_code(12.3, (16, 0.01), "i16");
}

/// A step or width that cannot do is refused with one that would.
#[test]
fn steps_and_widths_that_cannot_do_are_refused_with_one_that_would() {
    let outcome = samples::outcome("shapes", "F", 0.0, samples::every_shape(0.0));
    let refused = |control, value| {
        let f = &outcome.formulas[1];
        let error =
            Formula::new(f, &outcome.control, &format(control, value), None, &|_| Ok(f.valid.clone()))
                .expect_err("it cannot be done");
        assert_eq!(error.exit_status(), 2);
        let one = error.diagnostics()[0].clone();
        assert!(one.place.is_some());
        (one.code, one.action.expect("advice"))
    };
    assert_eq!(refused((8, 0.01), (32, 1e-3)).0, "width");
    assert_eq!(refused((16, 0.01), (8, 1e-3)).0, "width");
    let (code, action) = refused((16, 0.01), (32, 0.2));
    assert_eq!(code, "step");
    let step: f64 = action.rsplit(' ').next().and_then(|w| w.parse().ok()).expect("a step is named");
    let f = &outcome.formulas[1];
    Formula::new(f, &outcome.control, &format((16, 0.01), (32, step)), None, &|_| Ok(f.valid.clone()))
        .expect("the step that was named does");
}
