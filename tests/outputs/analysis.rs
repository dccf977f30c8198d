//! Generated C before static analysers: MISRA C:2012 by cppcheck's addon, with
//! the deviations of `misra.md` and no other, and gcc's path analysis.

use std::collections::BTreeSet;

use shiftwright::diagnostic::Place;
use shiftwright::emit::{self, Target};
use shiftwright::formula::NumberFormat;
use shiftwright::spec::Count;
use shiftwright_tests::{Scratch, repository, tool};

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
