//! Floating-point files: Rust, C and the runtime crate give the same bits.

use std::fmt::Write as _;

use shiftwright::emit::{self, Target};
use shiftwright::formula::{FloatForm, Formula, NumberFormat, Numbers};
use shiftwright::outcome::Outcome;
use shiftwright_runtime::{double, single};
use shiftwright_tests::Scratch;

use crate::answers;
use crate::programs::{self, Callable};
use crate::{host, samples};

fn write_all(scratch: &Scratch, outcome: &Outcome, stem: &str, formulas: &[Formula]) {
    for target in [Target::Rust, Target::C] {
        for source in emit::files(outcome, target, stem, formulas).expect("files are printed") {
            scratch.write(&source.file, &source.text);
        }
    }
}

macro_rules! reference {
    ($name:ident, $module:ident, $float:ident, $answers:path) => {
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
            // A value just beyond a branch end gives that end.
            let allowed = formula.inverse_rounding.max(float.rounding);
            let mut back = |y: $float, x: $float| {
                let error = (reference.value(x) as f64 - y as f64).abs();
                assert!(error <= allowed, "{}: {error:e} {allowed:e}", formula.measured.name);
            };
            $answers(&reference, points, &mut back, out);
        }
    };
}

reference!(reference_double, double, f64, answers::of_double);
reference!(reference_single, single, f32, answers::of_single);

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

fn same_bits(format: &NumberFormat, at: f64, label: &str) {
    let wide = matches!(format, NumberFormat::F64);
    let stem = format!("shapes_{}", format.word());
    let outcome = samples::outcome("shapes", "F", at, samples::every_shape(at));
    let formulas = samples::in_format(&outcome, format);
    let scratch = Scratch::new(&format!("same-bits-{label}"));
    write_all(&scratch, &outcome, &stem, &formulas);
    let callable = Callable::all(&formulas);
    scratch.write("main.rs", programs::float_rust(&stem, &callable, wide));
    scratch.write("main.c", programs::float_c(&stem, &callable, wide));
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
    let path = scratch.path();
    host::rust(path, &["-O"], "from_rust");
    answers::same(&host::feed(path, "from_rust", &input), &expected, wide, "Rust");
    for (compiler, level) in [("gcc", "-O2"), ("gcc", "-O0"), ("clang", "-O2")] {
        host::c(path, compiler, &stem, &[level], "from_c");
        answers::same(&host::feed(path, "from_c", &input), &expected, wide, &format!("{compiler} {level}"));
    }
    let float = "undefined,float-divide-by-zero,float-cast-overflow";
    for (compiler, checks) in
        [("gcc", float.to_owned()), ("clang", format!("{float},integer,implicit-conversion"))]
    {
        host::sanitized(path, compiler, &stem, &checks, "from_c");
        answers::same(&host::feed(path, "from_c", &input), &expected, wide, &format!("{compiler} watched"));
    }
    host::everything(path, &stem);
    host::pedantic(path, &stem, &["2018", "2021", "2024"]);
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
