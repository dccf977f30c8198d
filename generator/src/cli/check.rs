//! `check`: what differs between the disk and the spec.

use std::path::{Path, PathBuf};

use serde_json::{Value, json};

use crate::diagnostic::Result;
use crate::review::check::{Finding, Subject, check as review};

use super::{Ended, files, load, message, print};

/// Checks every spec; the highest status wins.
pub fn check(specs: &[PathBuf], out: Option<&Path>, as_json: bool) -> Ended {
    let mut status = 0;
    let mut results: Vec<Value> = Vec::new();
    for path in specs {
        let findings = match one(path, out) {
            Ok(findings) => findings,
            Err(error) => {
                status = status.max(message::show(&error));
                continue;
            }
        };
        let differences = findings.iter().filter(|f| f.kind.is_difference()).count();
        status = status.max(u8::from(differences > 0));
        if as_json {
            let list: Vec<Value> = findings
                .iter()
                .map(|finding| {
                    json!({
                        "file": finding.file, "line": finding.line, "kind": finding.kind,
                        "difference": finding.kind.is_difference(), "text": finding.text,
                    })
                })
                .collect();
            results.push(json!({
                "spec": path.display().to_string(), "differences": differences, "findings": list,
            }));
            continue;
        }
        let mut text: String = findings.iter().map(|finding| finding.line() + "\n").collect();
        let shown = path.display();
        text.push_str(&match differences {
            0 => format!("{shown}: the files are what the spec gives\n"),
            1 => format!("{shown}: 1 difference\n"),
            count => format!("{shown}: {count} differences\n"),
        });
        print::people(&text)?;
    }
    if as_json {
        print::json(&json!({ "specs": results }))?;
    }
    Ok(status)
}

fn one(path: &Path, out: Option<&Path>) -> Result<Vec<Finding>> {
    let loaded = load::load(path)?;
    let folder = loaded.folder(out);
    let run = load::run(&loaded.spec)?;
    let shown = path.display().to_string();
    let subject = Subject {
        outcome: &run.outcome,
        sources: &run.sources,
        spec: &shown,
        formula_line: &|name| loaded.formula_line(name),
        folder: &folder.display().to_string(),
    };
    review(&subject, &|name| files::read(&folder.join(name)))
}
