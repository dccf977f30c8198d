//! Records and generated files as they may stand on disk.
#![no_main]

use std::sync::LazyLock;

use libfuzzer_sys::fuzz_target;
use shiftwright::emit::record;
use shiftwright::pipeline::{self, Run};
use shiftwright::review::check::{Subject, check};
use shiftwright::review::compare;
use shiftwright::spec::{Document, NoFiles};

const SPEC: &str = "spec: 1
name: fuzz
systems:
  pair: {kind: matrix, unit: meV, h0: [[0, 1], [1, 3]], h1: [[0.5, 0], [0, 0]]}
control: {symbol: F, unit: kV/cm, within: [-0.5, 0.5]}
formulas:
  low: {unit: meV, sum: [{system: pair, level: 1}], tolerance: 0.05 meV}
outputs: [{language: rust, number: f64}, {language: c, number: f64}, {language: verilog-a}, {language: spice}]
";

static RUN: LazyLock<Run> = LazyLock::new(|| {
    let document = Document::parse("fuzz.yaml", SPEC.as_bytes(), &NoFiles).expect("a spec");
    pipeline::run(&document.resolve(&[]).expect("a spec")).expect("it is solved")
});

fuzz_target!(|bytes: &[u8]| {
    let [place, text @ ..] = bytes else { return };
    let run = &*RUN;
    let place = usize::from(*place) % run.sources.len();
    let subject = Subject {
        outcome: &run.outcome,
        sources: &run.sources,
        spec: "fuzz.yaml",
        formula_line: &|_| 1,
        folder: "",
    };
    let read = |name: &str| {
        let found = run.sources.iter().position(|source| source.file == name);
        Ok(found.map(|found| if found == place { text.to_vec() } else { run.sources[found].text.clone().into_bytes() }))
    };
    let findings = check(&subject, &read).expect("reading never fails here");
    let same = text == run.sources[place].text.as_bytes();
    assert_eq!(same, findings.iter().all(|finding| !finding.kind.is_difference()), "{findings:?}");
    if let Ok(old) = record::read(&String::from_utf8_lossy(text), "fuzz.record.json") {
        let _ = compare::compare(&old.outcome, &run.outcome).lines().len();
    }
});
