//! The compilers of this machine, and how generated files are put to them.

use std::io::Write;
use std::path::Path;
use std::process::{Command, Stdio};

use shiftwright_tests::{text, tool};

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

/// Compiles `main.rs` with its modules, warnings as errors.
pub fn rust(folder: &Path, options: &[&str], program: &str) {
    let fixed = ["--edition", "2021", "-D", "warnings", "main.rs", "-o", program];
    tool(folder, "rustc", &[options, &fixed].concat());
}

/// Compiles `STEM.c` with every warning, and `main.c` around it.
pub fn c(folder: &Path, compiler: &str, stem: &str, options: &[&str], program: &str) {
    let source = format!("{stem}.c");
    tool(folder, compiler, &[WARNINGS, options, &["-c", &source, "-o", "formula.o"]].concat());
    tool(folder, compiler, &[&["-std=c99"], options, &["main.c", "formula.o", "-o", program]].concat());
}

/// Compiles `STEM.c` with checks that end the program at the first fault, and
/// `main.c` around it.
pub fn sanitized(folder: &Path, compiler: &str, stem: &str, checks: &str, program: &str) {
    let source = format!("{stem}.c");
    let watch = format!("-fsanitize={checks}");
    let watched = ["-O1", "-g", &watch, "-fno-sanitize-recover=all", "-c", &source, "-o", "formula.o"];
    tool(folder, compiler, &[WARNINGS, &watched].concat());
    // Of the program around it only what the language leaves undefined is watched.
    let plain = ["-std=c99", "-O1", "main.c", "formula.o", "-fsanitize=undefined", "-o", program];
    tool(folder, compiler, &plain);
}

/// Every warning that clang has, and the header as C++.
pub fn everything(folder: &Path, stem: &str) {
    let source = format!("{stem}.c");
    let all = [
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
    tool(folder, "clang", &all);
    tool(folder, "g++", &["-x", "c++", "-fsyntax-only", "-Wall", "-Werror", &format!("{stem}.h")]);
}

/// All lints of clippy, in the editions that may include the file.
pub fn pedantic(folder: &Path, stem: &str, editions: &[&str]) {
    for edition in editions {
        let source = format!("{stem}.rs");
        let options = ["--edition", edition, "--crate-type", "lib", "--emit", "metadata", "-o", "x.rmeta"];
        let lints = ["-D", "warnings", "-D", "clippy::all", "-D", "clippy::pedantic", &source];
        tool(folder, "clippy-driver", &[&options[..], &lints[..]].concat());
    }
}

/// Runs a compiled program on an input and gives what it prints.
pub fn feed(folder: &Path, program: &str, input: &str) -> String {
    let mut child = Command::new(folder.join(program))
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("the compiled program starts");
    let mut stdin = child.stdin.take().expect("a pipe");
    let input = input.to_owned();
    let writer = std::thread::spawn(move || stdin.write_all(input.as_bytes()).is_ok());
    let output = child.wait_with_output().expect("the program ends");
    let all_read = writer.join().expect("no panic");
    assert!(output.status.success(), "{program}: {}", text(&output));
    assert!(all_read, "{program} stopped reading");
    String::from_utf8(output.stdout).expect("text")
}
