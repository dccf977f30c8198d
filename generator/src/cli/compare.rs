//! `compare`: two records, two specs, or one of each.

use std::path::Path;

use crate::diagnostic::{Diagnostic, Error, Result};
use crate::emit::record;
use crate::outcome::Outcome;
use crate::review::compare::compare as review;

use super::{Ended, files, load, print};

/// Prints what moved.
pub fn compare(old: &Path, new: &Path, as_json: bool) -> Ended {
    let comparison = review(&outcome(old)?, &outcome(new)?);
    if as_json {
        return print::json(&comparison);
    }
    let mut text: String = comparison.lines().iter().map(|line| format!("{line}\n")).collect();
    if text.is_empty() {
        text.push_str("nothing moved\n");
    }
    print::people(&text)
}

/// The outcome of a record (by its ending) or of a spec.
pub fn outcome(path: &Path) -> Result<Outcome> {
    if path.extension().is_some_and(|ending| ending == "json") {
        let shown = path.display().to_string();
        let bytes = files::read(path)?.ok_or_else(|| {
            Error::system(Diagnostic::new("no-file", format!("{shown}: there is no such file")))
        })?;
        let text = String::from_utf8_lossy(&bytes);
        return Ok(record::read(&text, &shown)?.outcome);
    }
    load::solve(&load::load(path)?.spec)
}
