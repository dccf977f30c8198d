//! `generate`: solve, write, show the table.

use std::path::{Path, PathBuf};

use serde_json::{Value, json};

use crate::diagnostic::{Diagnostic, Error, Result};
use crate::emit::record;
use crate::review::table::table;

use super::{Ended, files, load, message, print};

/// Runs every spec; a failing one leaves the others right.
pub fn generate(specs: &[PathBuf], out: Option<&Path>, as_json: bool) -> Ended {
    let mut status = 0;
    let mut results = Vec::new();
    let mut taken: Vec<(PathBuf, PathBuf)> = Vec::new();
    for path in specs {
        match one(path, out, as_json, &mut taken) {
            Ok(result) => results.extend(result),
            Err(error) => status = status.max(message::show(&error)),
        }
    }
    if as_json {
        print::json(&json!({ "specs": results }))?;
    }
    Ok(status)
}

fn one(
    path: &Path,
    out: Option<&Path>,
    as_json: bool,
    taken: &mut Vec<(PathBuf, PathBuf)>,
) -> Result<Option<Value>> {
    let loaded = load::load(path)?;
    let folder = loaded.folder(out);
    let run = load::run(&loaded.spec)?;
    let record_path = folder.join(record::file_name(&run.outcome.name));
    if let Some((_, other)) = taken.iter().find(|(file, _)| *file == record_path) {
        return Err(Error::spec(
            Diagnostic::new(
                "same-files",
                format!("{} and {} write the same files", other.display(), path.display()),
            )
            .found(format!("`name: {}` in both", run.outcome.name))
            .action("give each spec a `name` of its own, or run them with different folders"),
        ));
    }
    taken.push((record_path, path.to_owned()));
    files::write_set(&folder, &run.sources)?;
    let shown = folder.display().to_string();
    if as_json {
        let files: Vec<&str> = run.sources.iter().map(|source| source.file.as_str()).collect();
        let text = record::write(&run.outcome)?;
        let record: Value = serde_json::from_str(&text).map_err(Error::internal)?;
        return Ok(Some(json!({
            "spec": path.display().to_string(), "folder": shown, "files": files, "record": record,
        })));
    }
    let mut text = table(&run.outcome, &shown);
    if !taken.is_empty() && taken.len() > 1 {
        text.insert(0, '\n');
    }
    print::people(&text)?;
    Ok(None)
}
