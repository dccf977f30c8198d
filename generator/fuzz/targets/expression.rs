//! One expression wherever specs take one.
#![no_main]

use libfuzzer_sys::fuzz_target;
use shiftwright::spec::{Document, NoFiles};

const SPEC: &str = "spec: 1
name: fuzz
constants: {len: 9 nm, gap: 1.4 eV, ratio: 0.5, PUT_CONSTANT}
systems:
  stack:
    kind: layers
    charge: -1
    field: F
    stack: [{thickness: len, edge: PUT_EDGE, mass: 0.1}]
  spins:
    kind: parts
    parts: {S: spin 1/2, I: spin 1, Q: oscillator, X: interval 0 to 1, R: rotor}
    hamiltonian: PUT_OPERATOR
control: {symbol: F, unit: kV/cm, within: [-1, 1]}
formulas:
  f: {unit: meV, sum: [{system: stack, level: 1}, PUT_TERM], tolerance: 1 meV}
";

fuzz_target!(|bytes: &[u8]| {
    let [place, text @ ..] = bytes else { return };
    let Ok(text) = std::str::from_utf8(text) else { return };
    let quoted = format!("\"{}\"", text.escape_default().to_string().replace("\\'", "'"));
    let put = |mark: &str, plain: &str| match mark {
        "CONSTANT" => format!("put: {plain}"),
        "TERM" => format!("{{expression: {plain}}}"),
        _ => plain.to_owned(),
    };
    let mut spec = SPEC.to_owned();
    for (number, (mark, plain)) in
        [("CONSTANT", "1"), ("EDGE", "0 eV"), ("OPERATOR", "gap*S.z"), ("TERM", "gap")].into_iter().enumerate()
    {
        let chosen = number == usize::from(*place) % 4;
        spec = spec.replace(&format!("PUT_{mark}"), &put(mark, if chosen { &quoted } else { plain }));
    }
    if let Ok(document) = Document::parse("fuzz.yaml", spec.as_bytes(), &NoFiles) {
        let _ = document.resolve(&[]);
    }
});
