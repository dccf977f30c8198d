//! The main job for callers other than a person: build scripts and tests.

use std::path::{Path, PathBuf};

use crate::diagnostic::{Error, Result};
use crate::emit::Source;

use super::{files, load, message};

/// Regenerates a spec's files from a build script: writes them into `OUT_DIR`
/// and tells cargo to run the script again when the spec or a file that it
/// reads changes.
///
/// Returns the paths of the written files, the record last.
///
/// In `build.rs`:
///
/// ```no_run
/// shiftwright::build_script("well.yaml").unwrap_or_else(|message| panic!("{message}"));
/// ```
///
/// and in the crate: `mod well { include!(concat!(env!("OUT_DIR"), "/well_f64.rs")); }`
///
/// # Errors
/// The whole message as the program would print it, ready to be shown.
pub fn build_script(spec: impl AsRef<Path>) -> std::result::Result<Vec<PathBuf>, String> {
    let spec = spec.as_ref();
    println!("cargo:rerun-if-changed={}", spec.display());
    let folder = std::env::var_os("OUT_DIR")
        .map(PathBuf::from)
        .ok_or_else(|| "OUT_DIR is not set: call this from a build script".to_owned())?;
    let run = solved(spec).map_err(|error| message::text(&error))?;
    let beside = spec.parent().unwrap_or(Path::new(""));
    for source in &run.outcome.sources {
        println!("cargo:rerun-if-changed={}", beside.join(&source.file).display());
    }
    files::write_set(&folder, &run.sources).map_err(|error| message::text(&error))?;
    Ok(run.sources.iter().map(|source| folder.join(&source.file)).collect())
}

/// The files that a spec gives, as texts, for reviewed snapshots.
///
/// A test that keeps the generated files of a project under review with a
/// snapshot library:
///
/// ```no_run
/// for file in shiftwright::generated("well.yaml").unwrap_or_else(|message| panic!("{message}")) {
///     // insta::assert_snapshot!(file.file, file.text);
///     assert!(!file.text.is_empty(), "{}", file.file);
/// }
/// ```
///
/// # Errors
/// The whole message as the program would print it.
pub fn generated(spec: impl AsRef<Path>) -> std::result::Result<Vec<Source>, String> {
    solved(spec.as_ref()).map(|run| run.sources).map_err(|error: Error| message::text(&error))
}

fn solved(spec: &Path) -> Result<load::Run> {
    load::run(&load::load(spec)?.spec)
}
