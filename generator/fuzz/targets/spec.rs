//! Text of a spec to its record.
#![no_main]

use libfuzzer_sys::fuzz_target;
use shiftwright::pipeline;
use shiftwright::spec::{Document, NoFiles};

fuzz_target!(|bytes: &[u8]| {
    let Ok(document) = Document::parse("fuzz.yaml", bytes, &NoFiles) else { return };
    let Ok(spec) = document.resolve(&[]) else { return };
    // A long valid spec may rightly take its time.
    if bytes.len() > 1500 {
        return;
    }
    if let Err(error) = pipeline::run(&spec) {
        assert!(error.diagnostics().iter().all(|d| d.code != "internal"), "{error}");
    }
});
