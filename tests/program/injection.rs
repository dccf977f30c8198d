//! Text of a spec that tries to become code, to forge a message or to leave the
//! output folder.
//!
//! What is code is decided by other readers than the program's own: the C
//! preprocessor takes comments away as a compiler does, and the Rust lexer gives
//! tokens without them.

use std::path::{Path, PathBuf};
use std::str::FromStr;
use std::time::Instant;

use proc_macro2::TokenStream;
use shiftwright_tests::{Scratch, run, text, tool};

/// Marks that reorder, hide or break a line, in the order of their code points.
const MARKS: [char; 12] = [
    '\u{200b}', '\u{200e}', '\u{200f}', '\u{202a}', '\u{202b}', '\u{202d}', '\u{202e}', '\u{2028}',
    '\u{2029}', '\u{2066}', '\u{2069}', '\u{feff}',
];

/// Texts that would do harm if they were pasted.
fn hostile() -> Vec<String> {
    let mut list: Vec<String> = [
        "*/ int injected = 1; /*",
        "* / */ */*/ //*/",
        "/* never closed",
        "x \\",
        "x ??/",
        "\nint injected = 1;\n#error injected\n",
        "\r\n.injected 1 0 1k\r",
        "\u{b}#error\u{c}#error\u{85}#error",
        "// */ fn injected() {} /* \"\\\"\"",
        "\"); fn injected() {} (\"",
        "r#\"' ` $injected `include \"x\" \\\"",
        "{{ 7 * 7 }}{% include 'x' %}{# x #}",
        "%s%n${HOME}$(id)`id`",
        "</style><script>injected()</script><!-- -->",
        "\u{1b}[2J\u{1b}]0;injected\u{7}\u{9b}31m",
        "../../injected",
        "C:\\injected\\..\\x",
    ]
    .map(str::to_owned)
    .to_vec();
    list.push(MARKS.iter().flat_map(|mark| [*mark, '/', '*', *mark, '*', '/']).collect());
    list.push(MARKS.iter().flat_map(|mark| [*mark, '\n', 'x']).collect());
    list
}

/// Two coupled levels and every output language.
fn spec(summary: &str) -> String {
    format!(
        "spec: 1
name: lamp
summary: {}
systems:
  pair: {{kind: matrix, unit: meV, h0: [[0, 1], [1, 3]], h1: [[0.5, 0], [0, 0]]}}
control: {{symbol: F, unit: kV/cm, within: [-0.5, 0.5]}}
formulas:
  low:
    unit: meV
    sum: [{{system: pair, level: 1}}]
    tolerance: 0.05 meV
outputs:
  - {{language: rust, number: f64}}
  - {{language: rust, number: fixed, control: {{bits: 16, step: 0.001 kV/cm}}, value: {{bits: 32, step: 0.1 ueV}}}}
  - {{language: c, number: f64}}
  - {{language: c, number: f32}}
  - {{language: c, number: fixed, control: {{bits: 16, step: 0.001 kV/cm}}, value: {{bits: 32, step: 0.1 ueV}}}}
  - {{language: verilog-a}}
  - {{language: spice}}
",
        quoted(summary)
    )
}

/// A text as a YAML double-quoted scalar, marks that may not stand in a file
/// written as escapes.
fn quoted(text: &str) -> String {
    let mut out = String::from("\"");
    for c in text.chars() {
        match c {
            '"' | '\\' => out.extend(['\\', c]),
            c if c.is_control() || MARKS.contains(&c) => out.push_str(&format!("\\u{:04x}", u32::from(c))),
            c => out.push(c),
        }
    }
    out + "\""
}

/// Whether a terminal, an editor or a log would be misled.
fn misleads(shown: &str) -> Option<char> {
    shown.chars().find(|c| (c.is_control() && *c != '\n') || MARKS.contains(c))
}

/// What is left of a generated file without its comments, digests put aside.
fn code(folder: &Path, file: &Path) -> String {
    let name = file.file_name().and_then(|name| name.to_str()).expect("a name of ours");
    let text = std::fs::read_to_string(file).expect("a generated file");
    let bare = match name.rsplit('.').next().expect("an ending") {
        "rs" => TokenStream::from_str(&text).expect("Rust").to_string(),
        "cir" => {
            text.lines().filter(|line| !line.starts_with('*')).map(|line| line.to_owned() + "\n").collect()
        }
        "h" | "c" | "va" => {
            let path = file.to_str().expect("a path of ours");
            let options = ["-x", "c", "-std=c99", "-E", "-P", "-dD", "-w", path];
            String::from_utf8(tool(folder, "gcc", &options).stdout).expect("text")
        }
        other => panic!("{other} is new: say how its comments are taken away"),
    };
    let digest = |part: &str| part.len() == 64 && part.bytes().all(|b| b.is_ascii_hexdigit());
    bare.split('"').map(|part| if digest(part) { "DIGEST" } else { part }).collect::<Vec<_>>().join("\"")
}

/// Every file of a folder but records, sorted.
fn sources(folder: &Path) -> Vec<PathBuf> {
    let mut list: Vec<PathBuf> = std::fs::read_dir(folder)
        .expect("the output folder")
        .map(|entry| entry.expect("an entry").path())
        .filter(|path| path.extension() != Some("json".as_ref()))
        .collect();
    list.sort();
    list
}

/// Everything under a folder, by path.
fn tree(folder: &Path) -> Vec<PathBuf> {
    let mut list = vec![];
    for entry in std::fs::read_dir(folder).expect("a folder") {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            list.extend(tree(&path));
        }
        list.push(path);
    }
    list.sort();
    list
}

#[test]
fn a_summary_never_becomes_code() {
    let folder = Scratch::new("summary");
    folder.write("plain.yaml", spec("plain"));
    let output = run(folder.path(), &["generate", "plain.yaml", "--out", "plain"]);
    assert!(output.status.success(), "{}", text(&output));
    let plain = sources(&folder.path().join("plain"));
    assert_eq!(plain.len(), 10, "{plain:?}");
    let expected: Vec<String> = plain.iter().map(|file| code(folder.path(), file)).collect();
    for (place, summary) in hostile().into_iter().enumerate() {
        let out = format!("out{place}");
        folder.write("plain.yaml", spec(&summary));
        let output = run(folder.path(), &["generate", "plain.yaml", "--out", &out]);
        assert!(output.status.success(), "{summary:?}: {}", text(&output));
        let shown = String::from_utf8(output.stdout).expect("text");
        assert_eq!(misleads(&shown), None, "{summary:?} on the terminal: {shown:?}");
        let explained = run(folder.path(), &["explain", "plain.yaml"]);
        let shown = String::from_utf8(explained.stdout).expect("text");
        assert_eq!(misleads(&shown), None, "{summary:?} on the terminal: {shown:?}");

        let out = folder.path().join(out);
        let found = sources(&out);
        assert_eq!(found.len(), plain.len());
        for (file, expected) in found.iter().zip(&expected) {
            let written = std::fs::read_to_string(file).expect("a generated file");
            assert_eq!(misleads(&written), None, "{summary:?} in {}", file.display());
            assert_eq!(code(folder.path(), file), *expected, "{summary:?} in {}", file.display());
        }
        let record = std::fs::read_to_string(out.join("lamp.record.json")).expect("a record");
        let record: serde_json::Value = serde_json::from_str(&record).expect("JSON");
        assert_eq!(record["spec"]["summary"], summary.as_str());
        let c = ["-std=c99", "-pedantic", "-Wall", "-Wextra", "-Wcomment", "-Werror", "-fsyntax-only"];
        tool(&out, "gcc", &[&c[..], &["lamp_f64.c", "lamp_f32.c", "lamp_fixed.c"]].concat());
        for stem in ["lamp_f64.rs", "lamp_fixed.rs"] {
            let metadata = ["--emit", "metadata", "-o", "x.rmeta", "-D", "warnings", stem];
            tool(&out, "rustc", &[&["--edition", "2021", "--crate-type", "lib"], &metadata[..]].concat());
        }
    }
}

/// The page is text around one document; a summary adds no element to it.
#[test]
fn a_summary_never_becomes_markup() {
    let folder = Scratch::new("markup");
    let elements = |summary: &str| {
        folder.write("page.yaml", spec(summary));
        let output = run(folder.path(), &["report", "page.yaml", "--out", "page.html"]);
        assert!(output.status.success(), "{summary:?}: {}", text(&output));
        let page = std::fs::read_to_string(folder.path().join("page.html")).expect("a page");
        page.matches('<').count()
    };
    let plain = elements("plain");
    for summary in hostile() {
        assert_eq!(elements(&summary), plain, "{summary:?}");
    }
}

/// Every other text is a name, a unit or a word of the language.
#[test]
fn hostile_names_are_refused_and_write_nothing() {
    let folder = Scratch::new("names");
    let good = "spec: 1
name: lamp
constants: {gap: 1 meV}
systems:
  pair: {kind: parts, parts: {P: spin 1/2}, hamiltonian: gap*P.z*F, conserved: {m: P.z}}
  well: {kind: layers, charge: -1, field: F, ends: wall, stack: [{thickness: 9 nm, edge: 0 eV, mass: 0.1}]}
control: {symbol: F, unit: 1, within: [-1, 1]}
formulas:
  low: {unit: meV, sum: [{system: pair, level: 1}], tolerance: 0.05 meV}
outputs:
  - {language: c, number: f64, suffix: wide}
";
    let places = [
        "name: lamp",
        "{gap:",
        "  pair:",
        "kind: parts",
        "{P:",
        "spin 1/2",
        "hamiltonian: gap*P.z*F",
        "{m:",
        "ends: wall",
        "thickness: 9 nm",
        "symbol: F",
        "unit: 1",
        "  low:",
        "unit: meV",
        "system: pair",
        "tolerance: 0.05 meV",
        "language: c",
        "number: f64",
        "suffix: wide",
        "outputs:",
    ];
    let before = {
        folder.write("names.yaml", good);
        tree(folder.path())
    };
    for place in places {
        assert_eq!(good.matches(place).count(), 1, "{place}");
        for hostile in hostile() {
            let put = match (place.strip_suffix(':'), place.split_once(": ")) {
                (Some(key), _) => {
                    let head: String = key.chars().take_while(|c| !c.is_ascii_alphabetic()).collect();
                    format!("{head}{}:", quoted(&hostile))
                }
                (None, Some((key, _))) => format!("{key}: {}", quoted(&hostile)),
                (None, None) => quoted(&hostile),
            };
            folder.write("names.yaml", good.replace(place, &put));
            let output = run(folder.path(), &["generate", "names.yaml", "--out", "out"]);
            assert_eq!(output.status.code(), Some(2), "{place} as {hostile:?}: {}", text(&output));
            assert!(output.stdout.is_empty());
            let told = String::from_utf8(output.stderr).expect("text");
            assert_eq!(misleads(&told), None, "{place} as {hostile:?}: {told:?}");
            assert_eq!(tree(folder.path()), before, "{place} as {hostile:?}");
        }
    }
}

/// A file's name and its folder's stand in comments and messages.
#[test]
fn hostile_file_names_never_become_code() {
    let folder = Scratch::new("files");
    let plain = {
        folder.write("plain.yaml", spec("plain"));
        let output = run(folder.path(), &["generate", "plain.yaml", "--out", "plain"]);
        assert!(output.status.success(), "{}", text(&output));
        sources(&folder.path().join("plain"))
    };
    let expected: Vec<String> = plain.iter().map(|file| code(folder.path(), file)).collect();
    // The parts of a path are joined by the very slash that ends a comment.
    let names = [
        "x */ int injected;.yaml",
        "x \\",
        "\"'`$(id);.yaml",
        "\u{202e}lmay.*/x",
        "\u{1b}[2J*/.yaml",
        "line\n#error injected\n.yaml",
        "*/{{ 7 }}??/y",
    ];
    for (place, name) in names.into_iter().enumerate() {
        let out = format!("out{place}");
        folder.write(name, spec("plain"));
        let output = run(folder.path(), &["generate", name, "--out", &out]);
        assert!(output.status.success(), "{name:?}: {}", text(&output));
        let shown = String::from_utf8(output.stdout).expect("text");
        assert_eq!(misleads(&shown), None, "{name:?}: {shown:?}");
        let found = sources(&folder.path().join(out));
        for (file, expected) in found.iter().zip(&expected) {
            let written = std::fs::read_to_string(file).expect("a generated file");
            assert_eq!(misleads(&written), None, "{name:?} in {}", file.display());
            assert_eq!(code(folder.path(), file), *expected, "{name:?} in {}", file.display());
        }
        assert_eq!(found.len(), expected.len());

        let wrong = format!("wrong{place}/{name}");
        folder.write(&wrong, "spec: 1\nname: 1\n");
        let told = String::from_utf8(run(folder.path(), &["generate", &wrong]).stderr).expect("text");
        assert_eq!(misleads(&told), None, "{name:?}: {told:?}");
        assert!(!told.contains("\n#error"), "{name:?} forges a line: {told:?}");
    }
}

/// A link that stands in place of an output is replaced, not followed, and a
/// record that names files elsewhere reaches none of them.
#[test]
fn outputs_never_leave_the_output_folder() {
    let folder = Scratch::new("leave");
    folder.write("lamp.yaml", spec("plain"));
    let victim = folder.write("victim.txt", "untouched");
    let out = folder.path().join("out");
    std::fs::create_dir(&out).expect("a folder");
    for name in ["lamp_f64.rs", "lamp.va", "lamp.record.json"] {
        std::os::unix::fs::symlink(&victim, out.join(name)).expect("a link");
    }
    let output = run(folder.path(), &["generate", "lamp.yaml", "--out", "out"]);
    assert!(output.status.success(), "{}", text(&output));
    assert_eq!(std::fs::read_to_string(&victim).expect("still there"), "untouched");
    let output = run(folder.path(), &["check", "lamp.yaml", "--out", "out"]);
    assert!(output.status.success(), "{}", text(&output));

    let path = out.join("lamp.record.json");
    let record = std::fs::read_to_string(&path).expect("a record");
    let absolute = victim.to_str().expect("a path of ours").to_owned();
    for elsewhere in ["../victim.txt", &absolute, "/dev/zero", "lamp_f64.rs/../../victim.txt"] {
        std::fs::write(&path, record.replace("\"lamp_f64.rs\"", &format!("{elsewhere:?}"))).expect("written");
        let begin = Instant::now();
        let output = run(folder.path(), &["check", "lamp.yaml", "--out", "out"]);
        assert_eq!(output.status.code(), Some(1), "{elsewhere}: {}", text(&output));
        assert!(!text(&output).contains("untouched"), "{elsewhere}: {}", text(&output));
        assert!(begin.elapsed().as_secs() < 10, "{elsewhere}");
    }
    let output = run(folder.path(), &["generate", "lamp.yaml", "--out", "out"]);
    assert!(output.status.success(), "{}", text(&output));
    assert_eq!(std::fs::read_to_string(&victim).expect("still there"), "untouched");
    assert_eq!(std::fs::read_to_string(&path).expect("a record"), record);
}

/// Ten million characters in a summary, a name, a unit and a comment: refused
/// before they are read as a spec. What the limit lets through makes no file
/// long but the record, which holds it.
#[test]
fn long_texts_are_refused_or_cut() {
    let folder = Scratch::new("long");
    let long = "*/ int injected; ".repeat(10_000_000 / 17);
    for (place, put) in [
        ("summary: \"plain\"", format!("summary: {}", quoted(&long))),
        ("name: lamp", format!("name: {}", "a".repeat(10_000_000))),
        ("unit: kV/cm", format!("unit: {}", "*m".repeat(5_000_000))),
        ("spec: 1", format!("# {long}\nspec: 1")),
    ] {
        let text_of = spec("plain").replacen(place, &put, 1);
        assert!(text_of.len() > 9_000_000, "{place}");
        folder.write("long.yaml", text_of);
        let begin = Instant::now();
        let output = run(folder.path(), &["generate", "long.yaml", "--out", "out"]);
        assert_eq!(output.status.code(), Some(2), "{place}: {}", text(&output));
        assert!(output.stderr.len() < 2000 && begin.elapsed().as_secs() < 5, "{place}");
        assert!(!folder.path().join("out").exists());
    }
    folder.write("long.yaml", spec(&long[..900_000]));
    let output = run(folder.path(), &["generate", "long.yaml", "--out", "out"]);
    assert!(output.status.success(), "{}", text(&output));
    assert!(output.stdout.len() < 5000, "{} bytes are shown", output.stdout.len());
    for file in sources(&folder.path().join("out")) {
        let size = std::fs::metadata(&file).expect("a file").len();
        assert!(size < 40_000, "{} has {size} bytes", file.display());
    }
}
