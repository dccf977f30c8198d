//! A matrix file that a spec names.
#![no_main]

use libfuzzer_sys::fuzz_target;
use shiftwright::pipeline;
use shiftwright::spec::{Document, Loader};

struct Given<'a>(&'a [u8]);

impl Loader for Given<'_> {
    fn load(&self, _path: &str) -> Result<Vec<u8>, String> {
        Ok(self.0.to_vec())
    }
}

fuzz_target!(|bytes: &[u8]| {
    for ending in ["mtx", "csv"] {
        let spec = format!(
            "spec: 1\nname: fuzz\nsystems:\n  s: {{kind: matrix, unit: meV, h0: {{file: m.{ending}}}, h1: {{file: m.{ending}}}}}\n\
             control: {{symbol: x, unit: mV, within: [-0.1, 0.1]}}\n\
             formulas:\n  f: {{unit: meV, sum: [{{system: s, level: 1}}], tolerance: 1 meV}}\n"
        );
        let Ok(document) = Document::parse("fuzz.yaml", spec.as_bytes(), &Given(bytes)) else { continue };
        let Ok(spec) = document.resolve(&[]) else { continue };
        if bytes.len() < 400
            && let Err(error) = pipeline::run(&spec)
        {
            assert!(error.diagnostics().iter().all(|d| d.code != "internal"), "{error}");
        }
    }
});
