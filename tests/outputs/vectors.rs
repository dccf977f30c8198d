//! Test vectors beside a source: they pass on a right file and fail on a wrong one.

use shiftwright::diagnostic::Place;
use shiftwright::emit::{self, Target};
use shiftwright::formula::NumberFormat;
use shiftwright::range::Sample;
use shiftwright::spec::Count;
use shiftwright_tests::{Scratch, tool};

use crate::host::WARNINGS;
use crate::samples;

fn check(format: &NumberFormat, error: f64, passes: bool) {
    let mut shape = samples::every_shape(12.0).remove(1);
    let form = shape.form.clone();
    let sample =
        |x: f64| Sample { control: x, exact: form.value(x - 12.0) + error, formula: form.value(x - 12.0) };
    shape.samples = (0..9).map(|i| sample(-29.5 + 12.5 * f64::from(i) * 0.64)).collect();
    let outcome = samples::outcome("shutter", "F", 12.0, vec![shape]);
    let formulas = samples::in_format(&outcome, format);
    let stem = format!("shutter_{}", format.word());
    let scratch = Scratch::new(&format!("vectors-{stem}-{passes}"));
    for target in [Target::Rust, Target::C] {
        for source in emit::files(&outcome, target, &stem, &formulas).expect("files are printed") {
            scratch.write(&source.file, &source.text);
        }
        let source = emit::self_check(target, &stem, &formulas);
        scratch.write(&source.file, &source.text);
    }
    scratch.write("main.rs", format!("mod {stem};\nmod {stem}_check;\nfn main() {{ std::process::exit({stem}_check::check().is_err().into()); }}\n"));
    scratch.write(
        "main.c",
        format!("int {stem}_check(void);\nint main(void) {{ return {stem}_check() != 0; }}\n"),
    );
    let path = scratch.path();
    tool(path, "rustc", &["--edition", "2021", "-D", "warnings", "main.rs", "-o", "from_rust"]);
    let mut arguments = WARNINGS.to_vec();
    let checked = format!("{stem}_check.c");
    arguments.extend(["-c", checked.as_str(), "-o", "check.o"]);
    tool(path, "gcc", &arguments);
    tool(path, "gcc", &["-std=c99", "main.c", "check.o", &format!("{stem}.c"), "-o", "from_c"]);
    for program in ["from_rust", "from_c"] {
        let status = std::process::Command::new(path.join(program)).status().expect("the program starts");
        assert_eq!(status.code(), Some(i32::from(!passes)), "{stem} {program}");
    }
}

#[test]
fn test_vectors_pass_on_a_right_file_and_fail_on_a_wrong_one() {
    let place = Place { file: "shutter.yaml".to_owned(), start: 0, end: 1 };
    let count = |bits, step| Count { bits, step, place: place.clone() };
    let counts = NumberFormat::Fixed { control: count(16, 0.01), value: count(32, 1e-3) };
    for format in [NumberFormat::F64, NumberFormat::F32, counts] {
        check(&format, 0.04, true);
        check(&format, 0.06, false);
    }
}
