//! Fixed-point files: every code of the control, in Rust, C and the runtime crate.

use shiftwright::diagnostic::Place;
use shiftwright::emit::{self, Target};
use shiftwright::form::Form;
use shiftwright::formula::{Fixed, FixedForm, Formula, NumberFormat, Numbers};
use shiftwright::spec::Count;
use shiftwright_runtime::fixed;
use shiftwright_tests::Scratch;

use crate::programs::{self, Callable, codes};
use crate::{answers, host, samples};

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
        bits: fixed.control_bits,
        form,
    }
}

fn numbers(formula: &Formula) -> &Fixed {
    let Numbers::Fixed(fixed) = &formula.numbers else { panic!("counts") };
    fixed
}

fn expected(formula: &Formula, at: f64) -> String {
    let fixed = numbers(formula);
    let reference = reference(fixed);
    let (mut worst, mut worst_back) = (0.0_f64, 0.0_f64);
    let branches: Vec<_> = fixed.branches().into_iter().map(|(_, _, branch, _)| branch).collect();
    let mut back = |y: i64, n: i64| {
        worst_back = worst_back.max((reference.value(n) - y).abs() as f64 * fixed.value_step);
    };
    let sum = answers::of_fixed(&reference, &branches, (fixed.control_bits, fixed.value_bits), &mut back);
    for n in codes(fixed.control_bits).filter(|n| *n >= fixed.from && *n <= fixed.to) {
        let d = n as f64 * fixed.control_step - at;
        let exact = formula.measured.form.value(d);
        worst = worst.max((reference.value(n) as f64 * fixed.value_step - exact).abs());
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

fn every_code(at: f64, control: (u32, f64), value: (u32, f64), label: &str) {
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
    let formulas = samples::in_format(&outcome, &format(control, value));
    let scratch = Scratch::new(&format!("every-code-{label}"));
    for target in [Target::Rust, Target::C] {
        for source in emit::files(&outcome, target, stem, &formulas).expect("files are printed") {
            scratch.write(&source.file, &source.text);
        }
    }
    let callable = Callable::all(&formulas);
    scratch.write("main.rs", programs::fixed_rust(stem, &callable));
    scratch.write("main.c", programs::fixed_c(stem, &callable));
    let expected: String = formulas.iter().map(|f| expected(f, at)).collect();
    let path = scratch.path();
    // Overflow checks on: every addition and product is watched.
    host::rust(path, &["-O", "-C", "overflow-checks=on"], "from_rust");
    answers::same(&host::feed(path, "from_rust", ""), &expected, false, "Rust");
    for (compiler, sanitizer) in [("gcc", "undefined"), ("clang", "undefined,integer,implicit-conversion")] {
        host::c(path, compiler, stem, &["-O2"], "from_c");
        answers::same(&host::feed(path, "from_c", ""), &expected, false, compiler);
        host::sanitized(path, compiler, stem, sanitizer, "from_c");
        answers::same(&host::feed(path, "from_c", ""), &expected, false, &format!("{compiler} watched"));
    }
    host::everything(path, stem);
    host::pedantic(path, stem, &["2021"]);
}

#[test]
fn every_code_of_a_16_bit_control_gives_the_same_32_bit_value() {
    every_code(0.0, (16, 0.01), (32, 1e-3), "i32");
    every_code(12.305, (16, 0.01), (32, 1e-3), "i32-at");
}

#[test]
fn every_code_of_a_16_bit_control_gives_the_same_16_bit_value() {
    every_code(12.3, (16, 0.01), (16, 0.01), "i16");
}

/// An 8-bit control at every code, and a 32-bit control on a comb of 43,000 codes.
#[test]
fn narrow_and_wide_controls_give_the_same_values() {
    every_code(0.0, (8, 0.5), (32, 1e-3), "i8-i32");
    every_code(0.0, (8, 0.5), (8, 0.5), "i8-i8");
    every_code(0.0, (32, 1e-6), (32, 1e-4), "i32-i32");
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
