//! The JSON Schema of the language, held by an independent validator against
//! the specs that the program reads.

use shiftwright_tests::{Scratch, repository, run, text, tool};

const CHECK: &str = "
import json, sys
from jsonschema import Draft202012Validator as Validator
schema = json.load(open('schema.json'))
Validator.check_schema(schema)
for name, good in json.load(open('cases.json')):
    found = [error.message for error in Validator(schema).iter_errors(json.load(open(name)))]
    assert (not found) == good, (name, found)
";

/// Source of the draft: <https://json-schema.org/draft/2020-12>; the validator
/// is the Python package `jsonschema`.
#[test]
fn every_spec_fits_the_schema_and_slips_do_not() {
    let folder = Scratch::new("schema");
    let output = run(folder.path(), &["schema"]);
    assert!(output.status.success(), "{}", text(&output));
    folder.write("schema.json", &output.stdout);
    let mut cases = Vec::new();
    let mut add = |name: String, spec: &serde_json::Value, good: bool| {
        folder.write(&name, spec.to_string());
        cases.push(serde_json::json!([name, good]));
    };
    for place in ["specs", "templates/new"] {
        for entry in std::fs::read_dir(repository().join(place)).unwrap() {
            let path = entry.unwrap().path();
            if path.extension() != Some("yaml".as_ref()) {
                continue;
            }
            let stem = path.file_stem().and_then(|stem| stem.to_str()).unwrap();
            let spec: serde_json::Value =
                serde_yaml::from_str(&std::fs::read_to_string(&path).unwrap()).unwrap();
            add(format!("{}-{stem}.json", place.replace('/', "-")), &spec, true);
            let mut slip = spec.clone();
            slip["formulsa"] = serde_json::json!({});
            add(format!("slip-{stem}.json"), &slip, false);
            let mut missing = spec;
            missing.as_object_mut().unwrap().remove("control");
            add(format!("missing-{stem}.json"), &missing, false);
        }
    }
    assert!(cases.len() > 40, "{}", cases.len());
    folder.write("cases.json", serde_json::Value::Array(cases).to_string());
    let python = std::env::var("SHIFTWRIGHT_TEST_PYTHON").unwrap_or_else(|_| "python3".to_owned());
    tool(folder.path(), &python, &["-c", CHECK]);
}
