//! Problems that are too large are refused before memory is taken for them.

use std::process::Command;
use std::time::Instant;

use shiftwright_tests::{Scratch, program, text};

/// Memory that a refusal may take, bytes of address space.
const MEMORY: u64 = 512 << 20;

/// Each is a valid spec but for its size.
fn too_large() -> Vec<(&'static str, String)> {
    let parts = |parts: &str, hamiltonian: &str| {
        format!(
            "spec: 1\nname: large\nconstants: {{u: 1 meV}}\nsystems:\n  s: {{kind: parts, parts: {{{parts}}}, hamiltonian: \
             {hamiltonian}}}\ncontrol: {{symbol: x, unit: 1, within: [-1, 1]}}\nformulas:\n  f: {{unit: meV, sum: \
             [{{system: s, level: 1}}], tolerance: 1 meV}}\n"
        )
    };
    let spins = |count: usize, spin: &str| {
        let names: Vec<String> = (0..count).map(|k| format!("S{k}")).collect();
        let list: Vec<String> = names.iter().map(|name| format!("{name}: {spin}")).collect();
        let terms: Vec<String> = names.iter().map(|name| format!("u*x*{name}.x")).collect();
        parts(&list.join(", "), &format!("{} + u*S0.z", terms.join(" + ")))
    };
    let stack = |repeat: &str, level: &str| {
        format!(
            "spec: 1\nname: large\nsystems:\n  s:\n    kind: layers\n    charge: -1\n    field: x\n    stack: \
             [{{repeat: {repeat}, stack: [{{thickness: 1 nm, edge: 0 eV, mass: 0.1}}]}}]\ncontrol: {{symbol: x, unit: \
             kV/cm, within: [-1, 1]}}\nformulas:\n  f: {{unit: meV, sum: [{{system: s, level: {level}}}], tolerance: 1 meV}}\n"
        )
    };
    let matrix = "spec: 1\nname: large\nsystems:\n  s: {kind: matrix, unit: meV, h0: {file: huge.mtx}, h1: {file: huge.mtx}}\n\
                  control: {symbol: x, unit: mV, within: [-1, 1]}\nformulas:\n  f: {unit: meV, sum: [{system: s, level: 1}], \
                  tolerance: 1 meV}\n";
    vec![
        ("fifty spins", spins(50, "spin 1/2")),
        ("a huge spin", spins(1, "spin 1000000001/2")),
        ("two large spins", spins(2, "spin 5001/2")),
        ("many states", parts("a: states 4000000000", "u*x*a.projector(1)")),
        ("states beyond a word", parts("a: states 99999999999999999999999", "u*x*a.projector(1)")),
        ("a high power", parts("a: oscillator", "u*x*a.x + u*a.x^1000000000")),
        ("a deep stack", stack("1000000000", "1")),
        ("a high level", stack("3", "1000000")),
        ("a deep nest", stack("100000, stack: [{repeat: 100000", "1").replace("}]}]", "}]}]}]")),
        ("a huge matrix", matrix.to_owned()),
    ]
}

#[test]
fn too_large_a_problem_is_refused_before_memory_is_taken() {
    let folder = Scratch::new("limits");
    folder.write(
        "huge.mtx",
        "%%MatrixMarket matrix coordinate real symmetric\n2000000000 2000000000 1\n1 1 1.0\n",
    );
    for (name, spec) in too_large() {
        folder.write("large.yaml", &spec);
        let script = format!("ulimit -v {}; exec \"$0\" generate large.yaml", MEMORY / 1024);
        let _ = program();
        let begin = Instant::now();
        let output = Command::new("sh")
            .args(["-c", &script])
            .arg(program())
            .current_dir(folder.path())
            .output()
            .expect("a shell");
        let taken = begin.elapsed().as_secs_f64();
        let told = String::from_utf8_lossy(&output.stderr).into_owned();
        println!("{name}: {taken:.2} s, {}", told.lines().next().unwrap_or(""));
        assert_eq!(output.status.code(), Some(2), "{name}: {}\n{spec}", text(&output));
        assert!(
            told.contains(": error: ") && (told.contains("do:") || told.contains("expected:")),
            "{name}: {told}"
        );
        assert!(taken < 10.0, "{name} takes {taken} s");
        assert!(!folder.path().join("generated").exists(), "{name}");
    }
}
