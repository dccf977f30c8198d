//! Generated C before static analysers: MISRA C:2012 by cppcheck's addon, with
//! the deviations of `misra.md` and no other, and gcc's path analysis.

use std::collections::BTreeSet;
use std::fmt::Write as _;

use shiftwright::diagnostic::Place;
use shiftwright::emit::{self, Target};
use shiftwright::formula::NumberFormat;
use shiftwright::spec::Count;
use shiftwright_tests::{Scratch, repository, tool};

use crate::programs::Callable;
use crate::samples;

/// Identifiers of everything that cppcheck and its MISRA addon find.
///
/// Whole-program findings leave the exit status at 0, so the text is read.
fn findings(scratch: &Scratch, sources: &[String]) -> BTreeSet<String> {
    let mut arguments = vec![
        "-q",
        "--std=c99",
        "--platform=unix32",
        "--enable=warning,portability,performance,style",
        "--addon=misra",
    ];
    arguments.extend(sources.iter().map(String::as_str));
    let output = tool(scratch.path(), "cppcheck", &arguments);
    let text =
        String::from_utf8_lossy(&output.stderr).into_owned() + &String::from_utf8_lossy(&output.stdout);
    text.lines()
        .filter_map(|line| {
            let (_, id) = line.strip_suffix(']')?.rsplit_once('[')?;
            Some(id.trim_start_matches("misra-c2012-").to_owned())
        })
        .collect()
}

/// Every shape of formula in every number format, as C files.
fn all_sources(scratch: &Scratch) -> Vec<String> {
    let place = Place { file: "shapes.yaml".to_owned(), start: 0, end: 1 };
    let count = |bits, step| Count { bits, step, place: place.clone() };
    let counts = NumberFormat::Fixed { control: count(16, 0.01), value: count(32, 1e-3) };
    let outcome = samples::outcome("shapes", "F", 12.3, samples::every_shape(12.3));
    let mut out = Vec::new();
    for format in [NumberFormat::F64, NumberFormat::F32, counts] {
        let stem = format!("shapes_{}", format.word());
        let formulas = samples::in_format(&outcome, &format);
        for source in emit::files(&outcome, Target::C, &stem, &formulas).expect("files are printed") {
            scratch.write(&source.file, &source.text);
        }
        out.push(format!("{stem}.c"));
    }
    out
}

#[test]
fn misra_deviations_are_those_that_are_listed_and_justified() {
    let page = repository().join("tests/outputs/misra.md");
    let page = std::fs::read_to_string(page).expect("the list of deviations");
    let listed: BTreeSet<String> = page
        .lines()
        .filter_map(|line| line.strip_prefix("| ")?.split(" |").next())
        .filter(|id| id.starts_with(|c: char| c.is_ascii_digit()))
        .map(str::to_owned)
        .collect();
    let scratch = Scratch::new("misra");
    let sources = all_sources(&scratch);
    let found = findings(&scratch, &sources);
    assert_eq!(found, listed, "found on the left, listed in tests/outputs/misra.md on the right");
}

/// The analyser sees what it should: each of these breaks a rule that no
/// generated file breaks.
#[test]
fn the_misra_check_sees_a_breach() {
    let scratch = Scratch::new("misra-control");
    scratch.write(
        "bad.c",
        "int bad(int x);\nint bad(int x)\n{\n    if (x > 0) {\n        return 1;\n    }\n    return x == 3 ? 0 : 1 + 2 * x;\n}\n",
    );
    let found = findings(&scratch, &["bad.c".to_owned()]);
    assert!(found.contains("15.5"), "{found:?}");
    assert!(found.contains("12.1"), "{found:?}");
}

/// gcc's analyser follows every path of every function; it must see the fault
/// of the control, a pointer that may be null.
#[test]
fn no_path_through_generated_c_is_faulty() {
    let scratch = Scratch::new("paths");
    for source in all_sources(&scratch) {
        tool(
            scratch.path(),
            "gcc",
            &["-std=c99", "-O1", "-Wall", "-Wextra", "-fanalyzer", "-Werror", "-c", &source, "-o", "x.o"],
        );
    }
    scratch.write("bad.c", "#include <stdlib.h>\nint bad(void);\nint bad(void) { int *p = malloc(4); *p = 3; free(p); return *p; }\n");
    let arguments = ["-std=c99", "-fanalyzer", "-Werror", "-c", "bad.c", "-o", "x.o"];
    let output = std::process::Command::new("gcc")
        .args(arguments)
        .current_dir(scratch.path())
        .output()
        .expect("gcc starts");
    assert!(!output.status.success(), "the control passes");
}

/// Calls every function of one formula with every control and every value there is.
fn driver(stem: &str, name: &str, bits: (u32, u32), inverses: &[&str]) -> String {
    let every = |bits: u32| {
        let top = (1_i64 << (bits - 1)) - 1;
        format!("(int{bits}_t)Frama_C_interval(-{top} - 1, {top})")
    };
    let (x, y) = (format!("int{}_t", bits.0), format!("int{}_t", bits.1));
    let f = format!("{stem}_{name}");
    let mut out = format!(
        "void try_{name}(void)\n{{\n    {x} x = {};\n    {y} wanted = {};\n    {x} back = 0;\n    {y} y = 0;\n    {x} xs[2] = {{x, x}};\n    {y} ys[2];\n\n    \
         value_{name} = {f}(x);\n    slope_{name} = {f}_slope(x);\n    (void){f}_checked(x, &y);\n    {f}_many(xs, ys, 2);\n",
        every(bits.0),
        every(bits.1)
    );
    for inverse in inverses {
        let _ = writeln!(out, "    (void){f}_{inverse}(wanted, &back);");
    }
    format!("{y} value_{name};\nint64_t slope_{name};\n{out}}}\n\n")
}

/// Alarms that Eva raises: overflow of signed integers, casts that lose
/// something, shifts and indices out of bounds, uninitialised reads.
fn eva(scratch: &Scratch, source: &str) -> (usize, String) {
    // Frama-C goes by the variable PWD, so names are absolute.
    let [driver, source] = ["driver.c", source].map(|name| scratch.path().join(name).display().to_string());
    let arguments = [
        "-machdep",
        "x86_64",
        "-eva",
        "-main",
        "entry",
        "-lib-entry",
        "-warn-signed-downcast",
        "-eva-auto-loop-unroll",
        "70",
        &driver,
        &source,
    ];
    let output = tool(scratch.path(), "frama-c", &arguments);
    let text =
        String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr);
    // The exit status is 0 with alarms too.
    let count = text
        .lines()
        .find_map(|line| line.trim().split_once(" alarms generated")?.0.parse().ok())
        .or_else(|| text.contains("1 alarm generated").then_some(1))
        .unwrap_or_else(|| panic!("no summary:\n{text}"));
    (count, text)
}

/// Every function of every shape, called with every input that its types hold:
/// no signed operation overflows and no cast loses a bit.
#[test]
fn fixed_point_files_cannot_overflow_for_any_input() {
    let place = Place { file: "shapes.yaml".to_owned(), start: 0, end: 1 };
    let count = |bits, step| Count { bits, step, place: place.clone() };
    for (control, value) in [((16, 0.01), (32, 1e-3)), ((16, 0.01), (16, 0.01)), ((32, 1e-6), (32, 1e-4))] {
        let mut shapes = samples::every_shape(12.3);
        if value.0 == 16 {
            // This level does not fit 16 bits.
            shapes.remove(0);
        }
        let outcome = samples::outcome("shapes", "F", 12.3, shapes);
        let format =
            NumberFormat::Fixed { control: count(control.0, control.1), value: count(value.0, value.1) };
        let formulas = samples::in_format(&outcome, &format);
        let scratch = Scratch::new(&format!("overflow-{}-{}", control.0, value.0));
        for source in emit::files(&outcome, Target::C, "shapes_fixed", &formulas).expect("files are printed")
        {
            scratch.write(&source.file, &source.text);
        }
        let mut text = String::from("#include \"__fc_builtin.h\"\n#include \"shapes_fixed.h\"\n\n");
        let mut entry = String::new();
        for one in Callable::all(&formulas) {
            text.push_str(&driver("shapes_fixed", &one.name, one.bits, &one.inverses));
            let _ = writeln!(entry, "    try_{}();", one.name);
        }
        let _ = writeln!(text, "void entry(void)\n{{\n{entry}}}");
        scratch.write("driver.c", &text);
        let (alarms, text) = eva(&scratch, "shapes_fixed.c");
        assert_eq!(alarms, 0, "{control:?} {value:?}\n{text}");
        for one in Callable::all(&formulas) {
            // The analysis went through, and not round, each function.
            for function in ["", "_slope", "_checked", "_many", "_inverse"] {
                let reached = format!("Values at end of function shapes_fixed_{}{function}:", one.name);
                assert!(text.contains(&reached), "{reached}");
            }
        }
        if control.0 == 16 && value.0 == 32 {
            // Without the hold at the ends of the range products do overflow, and Eva says so.
            let file = scratch.path().join("shapes_fixed.c");
            let held = std::fs::read_to_string(file).expect("the source");
            let loose = held.replace("_FROM) {\n        inside =", "_FROM) {\n        (void)");
            assert_ne!(held, loose);
            scratch.write("loose.c", loose);
            let (alarms, _) = eva(&scratch, "loose.c");
            assert!(alarms > 0, "the control passes");
        }
    }
}
