//! Specs that are read, and specs that are refused.

use std::path::{Path, PathBuf};

use super::*;

struct Folder(PathBuf);

impl Loader for Folder {
    fn load(&self, path: &str) -> std::result::Result<Vec<u8>, String> {
        std::fs::read(self.0.join(path)).map_err(|error| error.to_string())
    }
}

fn specs() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("../specs")
}

fn read(text: &str) -> crate::Result<Spec> {
    Document::parse("well.yaml", text.as_bytes(), &Folder(specs()))?.resolve(&[])
}

#[test]
fn every_demo_and_starter_spec_is_read() {
    let mut count = 0;
    for folder in [specs(), specs().join("../templates/new")] {
        for entry in std::fs::read_dir(&folder).unwrap() {
            let path = entry.unwrap().path();
            if path.extension().is_none_or(|ending| ending != "yaml") {
                continue;
            }
            let bytes = std::fs::read(&path).unwrap();
            let name = path.file_name().unwrap().to_str().unwrap();
            let spec = Document::parse(name, &bytes, &Folder(folder.clone())).and_then(|d| d.resolve(&[]));
            match spec {
                Ok(spec) => assert!(!spec.formulas.is_empty() && !spec.inputs.is_empty()),
                Err(error) => panic!("{name}: {:#?}", error.diagnostics()),
            }
            count += 1;
        }
    }
    assert!(count >= 15, "{count}");
}

#[test]
fn numbers_come_out_in_the_units_that_the_stages_take() {
    let spec = read(GOOD).unwrap();
    let Kind::Layers(layers) = &spec.systems[0].kind else { panic!("layers") };
    assert_eq!(layers.stack.len(), 3);
    assert_eq!(layers.stack[1].thickness, 9.0);
    assert_eq!(layers.origin, 16.5);
    assert_eq!(layers.stack[0].edge, Profile::Constant(Tree::Number(0.232)));
    // 60 kV/cm are 0.006 V/nm.
    assert!((layers.field.as_ref().unwrap().value(60.0, 0.0) - 0.006).abs() < 1e-18);
    let input = |path: &str| spec.inputs.iter().find(|one| one.path == path).unwrap();
    assert_eq!(input("constants.well").value, 9.0);
    assert_eq!(input("systems.electron.stack[1].thickness").unit, "nm");
    assert_eq!(input("systems.electron.stack[1].mass").unit, "1");
    assert_eq!(input("control.within[0]").value, -60.0);
    assert_eq!(spec.formulas[0].tolerance, 0.05);
}

#[test]
fn overrides_replace_constants_in_their_own_unit() {
    let document = Document::parse("well.yaml", GOOD.as_bytes(), &NoFiles).unwrap();
    let spec = document.resolve(&[("well".to_owned(), 8.5)]).unwrap();
    let Kind::Layers(layers) = &spec.systems[0].kind else { panic!("layers") };
    assert_eq!(layers.stack[1].thickness, 8.5);
    assert!(document.resolve(&[("wall".to_owned(), 8.5)]).is_err());
}

const GOOD: &str = "\
spec: 1
name: shutter
constants:
  well: 9 nm
  barrier: 232 meV
systems:
  electron:
    kind: layers
    charge: -1
    field: F
    stack:
      - {thickness: 12 nm, edge: barrier, mass: 0.0919}
      - {thickness: well, edge: 0 meV, mass: 0.0665}
      - {thickness: 12 nm, edge: barrier, mass: 0.0919}
control:
  symbol: F
  unit: kV/cm
  within: [-60, 60]
formulas:
  edge:
    unit: meV
    sum:
      - {system: electron, level: 1}
    tolerance: 0.05 meV
";

/// What is told about a text, with the stretch of each message.
fn told(text: &str) -> String {
    let error = match read(text) {
        Ok(_) => return "no mistake\n".to_owned(),
        Err(error) => error,
    };
    assert_eq!(error.exit_status(), 2);
    let mut out = String::new();
    for one in error.diagnostics() {
        let place = one.place.as_ref().expect("every mistake has its place");
        let line = text[..place.start].matches('\n').count() + 1;
        let marked = &text[place.start..place.end];
        out.push_str(&format!("line {line} [{marked}] {} ({})", one.message, one.code));
        for (head, part) in [("found", &one.found), ("expected", &one.expected), ("do", &one.action)] {
            if let Some(part) = part {
                out.push_str(&format!("\n    {head}: {part}"));
            }
        }
        out.push('\n');
    }
    out
}

/// Each mistake is one replacement in a good spec.
#[test]
fn mistakes_are_told_at_their_place() {
    let mistakes = [
        ("spec: 1", "spec: 2"),
        ("name: shutter", "name: Shutter"),
        ("name: shutter", "name: shutter\nnmae: x"),
        ("name: shutter\n", ""),
        ("well: 9 nm", "well: 9 nn"),
        ("well: 9 nm", "well: 9"),
        ("well: 9 nm", "well: .nan"),
        ("well: 9 nm", "well: 1e400"),
        ("well: 9 nm", "well: ~"),
        ("well: 9 nm", "well: [9]"),
        ("well: 9 nm", "well: other\n  other: well"),
        ("well: 9 nm", "well: 9 nm\n  sqrt: 4"),
        ("well: 9 nm", "well: 9 nm\n  F: 4"),
        ("well: 9 nm", "well: 9 nm\n  well: 8 nm"),
        ("well: 9 nm", "well: &a 9 nm"),
        ("well: 9 nm", "well: !!str 9 nm"),
        ("well: 9 nm", "<<: 9 nm"),
        ("kind: layers", "kind: layer"),
        ("    charge: -1\n", ""),
        ("field: F", "field: G"),
        ("field: F", "field: F + 2*barrier"),
        ("field: F", "field: F*abs(F)"),
        ("field: F", "field: abs(F)"),
        ("thickness: 12 nm", "thickness: -12 nm"),
        ("thickness: 12 nm", "thikness: 12 nm"),
        ("thickness: well", "thickness: wel"),
        ("thickness: well", "thickness: well*F"),
        ("edge: 0 meV", "edge: 5"),
        ("mass: 0.0665", "mass: 0"),
        ("mass: 0.0665", "mass: F"),
        ("edge: 0 meV, mass: 0.0665", "material: GaAs"),
        ("within: [-60, 60]", "within: [60, -60]"),
        ("within: [-60, 60]", "within: [-60]"),
        ("within: [-60, 60]", "at: 90\n  within: [-60, 60]"),
        ("unit: kV/cm", "unit: kv/cm"),
        ("symbol: F", "symbol: z"),
        ("system: electron", "system: elctron"),
        ("level: 1", "level: 0"),
        ("level: 1", "level: 1.5"),
        ("level: 1", "level: 1, where: {m: 0}"),
        ("tolerance: 0.05 meV", "tolerance: 0"),
        ("tolerance: 0.05 meV", "tolerance: 0.05 nm"),
        ("tolerance: 0.05 meV", "tolerance: 0.05 meV\n    order: 5"),
        ("tolerance: 0.05 meV", "tolerance: 0.05 meV\n    partner: 2"),
        ("tolerance: 0.05 meV", "tolerance: 0.05 meV\n    form: paired\n    coefficients: minimax"),
        ("    unit: meV", "    unit: 1"),
        ("    unit: meV", "    unit: T"),
        ("  edge:\n", "  loop:\n"),
        ("  edge:\n", "  status:\n"),
        ("control:\n", "outputs:\n  - {language: c}\n  - {language: c, number: f64}\ncontrol:\n"),
        ("control:\n", "outputs:\n  - {language: c, number: fixed}\ncontrol:\n"),
        ("control:\n", "family: {wel: {from: 8 nm, to: 9 nm}}\ncontrol:\n"),
        ("control:\n", "---\ncontrol:\n"),
    ];
    let mut out = String::new();
    for (from, to) in mistakes {
        assert!(GOOD.contains(from), "{from}");
        let told = told(&GOOD.replacen(from, to, 1));
        assert!(told != "no mistake\n", "{from} -> {to}");
        out.push_str(&format!("== {from:?} -> {to:?}\n{told}"));
    }
    insta::assert_snapshot!(out);
}

#[test]
fn hostile_text_ends_soon_in_a_message() {
    let bomb = {
        let mut text = "a0: &a0 [x, x, x, x, x, x, x, x, x]\n".to_owned();
        for level in 1..30 {
            let before = format!("*a{}", level - 1);
            text.push_str(&format!("a{level}: &a{level} [{}]\n", vec![before; 9].join(", ")));
        }
        text
    };
    let chain: String = (1..20_000).map(|k| format!("  c{k}: c{}\n", k - 1)).collect();
    let quotes = format!("spec: {}", "'".repeat(900_001));
    let cases: Vec<Vec<u8>> = vec![
        bomb.into_bytes(),
        "[".repeat(1 << 20).into_bytes(),
        "{a: ".repeat(200_000).into_bytes(),
        "- ".repeat(500_000).into_bytes(),
        "? ".repeat(500_000).into_bytes(),
        format!("spec: {}", "9".repeat(1_000_000)).into_bytes(),
        format!("spec: 1\nname: {}", "a".repeat(1_000_000)).into_bytes(),
        format!("spec: \"{}", "a".repeat(1_000_000)).into_bytes(),
        quotes.into_bytes(),
        GOOD.replace("9 nm", &"(".repeat(900_000)).into_bytes(),
        GOOD.replace("9 nm", &format!("9{} nm", "9".repeat(900_000))).into_bytes(),
        GOOD.replace("9 nm", &format!("1e{} nm", "9".repeat(5_000))).into_bytes(),
        GOOD.replace("9 nm", &format!("9 {}", "m*".repeat(400_000))).into_bytes(),
        GOOD.replace("9 nm", &"barrier+".repeat(100_000)).into_bytes(),
        GOOD.replace("  well: 9 nm\n", &format!("  c0: well\n  well: c19999\n{chain}")).into_bytes(),
        GOOD.replace("      - {thickness: well", "      - {repeat: 20000, stack: [{repeat: 20000, stack: [{thickness: 1 nm, edge: 0, mass: 1}]}]}\n      - {thickness: well").into_bytes(),
        GOOD.replace("  well: 9 nm\n", &(0..40_000).map(|k| format!("  c{k}: d{k}\n")).collect::<String>()).into_bytes(),
        (0..60_000).map(|k| format!("k{k}: 1\n")).collect::<String>().into_bytes(),
        "a: 1\n".repeat(200_000).into_bytes(),
        "\n".repeat(1 << 20).into_bytes(),
        "#".repeat(1 << 20).into_bytes(),
        vec![b' '; (1 << 20) + 1],
        vec![b'\t'; 1 << 20],
        vec![0; 1000],
        vec![0xff; 1000],
        b"\xff\xfes\0p\0e\0c\0".to_vec(),
        b"spec: 1\nname: \xc3\x28\n".to_vec(),
        Vec::new(),
        b"- spec\n".to_vec(),
        b"spec".to_vec(),
        b"spec: 1\n---\nspec: 1\n".to_vec(),
        b"%YAML 9.9\n---\nspec: 1\n".to_vec(),
        b"spec: |\n".to_vec(),
        b"spec: >9\n  a\n".to_vec(),
        b"{spec: 1, [a]: 2}".to_vec(),
        GOOD.replace("  well", "\twell").into_bytes(),
        GOOD.replace("9 nm", "9\u{0}nm").into_bytes(),
        GOOD.replace("shutter", "\u{202e}shutter").into_bytes(),
        GOOD.replace("9 nm", "\"\\u0000\\uD800\"").into_bytes(),
    ];
    for (index, bytes) in cases.iter().enumerate() {
        let begin = std::time::Instant::now();
        let result = Document::parse("x.yaml", bytes, &NoFiles).and_then(|document| document.resolve(&[]));
        let head: String = String::from_utf8_lossy(bytes).chars().take(60).collect();
        let error = result.err().unwrap_or_else(|| panic!("case {index} is read: {head}"));
        assert_eq!(error.exit_status(), 2, "case {index}: {head}");
        for one in error.diagnostics() {
            let place = one.place.as_ref().unwrap_or_else(|| panic!("case {index} {head}: {one:?}"));
            assert!(place.start <= place.end && place.end <= bytes.len(), "case {index} {head}: {place:?}");
            let long = [Some(&one.message), one.found.as_ref(), one.expected.as_ref(), one.action.as_ref()]
                .into_iter()
                .flatten()
                .any(|text| text.len() > 4000);
            assert!(!long, "case {index} {head}: a message is too long");
        }
        let taken = begin.elapsed().as_secs_f64();
        // A hang or a blow-up takes minutes; a debug build on a loaded machine takes
        // seconds where the program takes tenths.
        assert!(taken < 20.0, "case {index} takes {taken} s: {head}");
    }
}

#[test]
fn line_ends_and_byte_order_marks_change_nothing() {
    let plain = read(GOOD).unwrap();
    for text in [GOOD.replace('\n', "\r\n"), format!("\u{feff}{GOOD}"), format!("# \u{e9}\u{1f600}\n{GOOD}")]
    {
        let spec = read(&text).unwrap();
        assert_eq!(spec.inputs, plain.inputs);
        let place = &spec.formulas[0].place;
        assert_eq!(&text[place.start..place.end], "edge");
        let place = &spec.control.within_place;
        assert_eq!(&text[place.start..place.end], "[-60, 60]");
    }
}

proptest::proptest! {
    #[test]
    fn changed_specs_never_panic(
        which in 0usize..4,
        changes in proptest::collection::vec((0usize..2000, 0usize..24), 1..6),
    ) {
        let texts = [
            GOOD,
            include_str!("../../../specs/clock.yaml"),
            include_str!("../../../specs/bead.yaml"),
            include_str!("../../../templates/new/matrix.yaml"),
        ];
        let pieces = [
            "", " ", "\n", ":", "-", "[", "]", "{", "}", ",", "'", "\"", "#", "&a ", "*a ", "!t ", "1e308", "^-99",
            "F", "/0", "\u{e9}", "\t", "9 nm", "(",
        ];
        let mut text: Vec<char> = texts[which].chars().collect();
        for (at, piece) in changes {
            let at = at % text.len();
            text.splice(at..(at + 1).min(text.len()), pieces[piece].chars());
        }
        let text: String = text.into_iter().collect();
        if let Err(error) = read(&text) {
            for one in error.diagnostics() {
                let place = one.place.as_ref().expect("every mistake has its place");
                assert!(text.get(place.start..place.end).is_some() || place.file != "well.yaml");
            }
        }
    }
}

/// Gaps at room temperature by Varshni's formula: GaAs 1.42 eV at 300 K (common
/// practice, no single source), and Al(0.3)Ga(0.7)As 1.424 + 1.247 x = 1.798 eV by
/// the common linear rule (no source), from which the recommended bowing departs by
/// some 0.04 eV, hence the bound of 0.05; together
/// electron and hole edge give the gap without adding it.
#[test]
fn materials_give_edges_on_one_zero() {
    let text = GOOD
        .replace("name: shutter\n", "name: shutter\nmaterials: iii-v\ntemperature: 300 K\n")
        .replace("edge: 0 meV, mass: 0.0665", "material: GaAs")
        .replace("edge: barrier, mass: 0.0919", "material: {alloy: AlGaAs, x: 0.3}");
    let edges = |carrier: &str| -> Vec<(f64, f64)> {
        let spec = read(&text.replace("charge: -1", &format!("charge: -1\n    carrier: {carrier}"))).unwrap();
        assert_eq!(spec.sources[0].file, "iii-v");
        let Kind::Layers(layers) = &spec.systems[0].kind else { panic!("layers") };
        let number = |profile: &Profile| match profile {
            Profile::Constant(tree) => tree.as_number().unwrap(),
            other => panic!("{other:?}"),
        };
        layers.stack.iter().map(|layer| (number(&layer.edge), number(&layer.mass))).collect()
    };
    let (electron, hole) = (edges("electron"), edges("heavy hole"));
    assert!((electron[1].0 + hole[1].0 - 1.4225).abs() < 1e-3, "{electron:?} {hole:?}");
    assert!((electron[0].0 + hole[0].0 - 1.798).abs() < 0.05, "{electron:?} {hole:?}");
    // Both carriers sit in the well.
    assert!(electron[0].0 > electron[1].0 && hole[0].0 > hole[1].0);
    assert_eq!((electron[1].1, hole[1].1), (0.067, 0.3497));
    assert!(told(&text).contains("`carrier` is missing"));
    let graded = text.replace("charge: -1", "charge: -1\n    carrier: electron").replacen(
        "x: 0.3}",
        "x: {from: 0.3, to: 0}}",
        1,
    );
    let spec = read(&graded).unwrap();
    let Kind::Layers(layers) = &spec.systems[0].kind else { panic!("layers") };
    let Profile::Function(edge) = &layers.stack[0].edge else { panic!("a grade is a function") };
    assert!((edge.value(0.0, -16.5) - electron[0].0).abs() < 1e-12);
    assert!((edge.value(0.0, -4.5) - electron[1].0).abs() < 1e-12);
}

/// Every number of the shipped file is read in its unit, for every carrier.
#[test]
fn shipped_materials_are_whole() {
    let raw: serde_yaml::Value = serde_yaml::from_str(SHIPPED_MATERIALS[0].1).unwrap();
    for (section, shape) in [("compounds", "NAME"), ("alloys", "{alloy: NAME, x: 0.4}")] {
        for name in raw[section].as_mapping().unwrap().keys() {
            for carrier in ["electron", "heavy hole", "light hole"] {
                let material = shape.replace("NAME", name.as_str().unwrap());
                let text = GOOD
                    .replace("name: shutter\n", "name: shutter\nmaterials: iii-v\ntemperature: 77 K\n")
                    .replace("charge: -1", &format!("charge: -1\n    carrier: {carrier}"))
                    .replace("edge: 0 meV, mass: 0.0665", &format!("material: {material}"));
                assert_eq!(told(&text), "no mistake\n", "{material} {carrier}");
            }
        }
    }
}

#[test]
fn matrices_are_held_to_be_hermitian() {
    let text = |h0: &str| {
        format!(
            "spec: 1\nname: pair\nsystems:\n  pair:\n    kind: matrix\n    unit: ueV\n    h0: {h0}\n    h2: [[0, 1], [1, 0]]\ncontrol:\n  \
             symbol: G\n  unit: mV\n  within: [-1, 1]\nformulas:\n  low:\n    unit: ueV\n    sum:\n      - {{system: pair, level: 2}}\n    tolerance: 1\n"
        )
    };
    let spec = read(&text("[[1, [0, 2]], [[0, -2], \"3\"]]")).unwrap();
    let Kind::Matrix(matrix) = &spec.systems[0].kind else { panic!("matrix") };
    assert_eq!(matrix.h.len(), 3);
    assert_eq!(matrix.h[0][(0, 1)], C64::new(0.0, 2.0));
    assert_eq!(matrix.h[1][(0, 1)], C64::new(0.0, 0.0));
    insta::assert_snapshot!(
        [
            "[[1, [0, 2]], [[0, 2], 3]]",
            "[[1, 2], [3]]",
            "[[1, 2, 3], [2, 3, 4], [3, 4, 5]]",
            "[[1, G], [2, 1]]",
            "{file: nothing.mtx}",
            "{file: /etc/passwd.mtx}",
            "[[1, [0, 2, 3]], [2, 1]]",
        ]
        .map(|h0| format!("== {h0}\n{}", told(&text(h0))))
        .concat()
    );
}
