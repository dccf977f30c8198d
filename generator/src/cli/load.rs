//! A spec and the files it names, from disk.

use std::path::{Path, PathBuf};

use crate::diagnostic::{Diagnostic, Error, Result};
use crate::outcome::{Outcome, Picture};
use crate::spec::{Document, Loader, Spec};
use crate::study::sensitivity::Sensitivity;

use super::files;

/// A spec as it was read.
pub struct Loaded {
    /// The checked spec.
    pub spec: Spec,
    /// Its text.
    pub text: String,
    /// Its path, as the user gave it.
    pub path: PathBuf,
}

impl Loaded {
    /// Line of a formula's name, from 1; 1 if there is no such formula.
    #[must_use]
    pub fn formula_line(&self, name: &str) -> usize {
        let place = self.spec.formulas.iter().find(|f| f.name == name).map(|f| f.place.start);
        let head = place.and_then(|start| self.text.get(..start));
        head.map_or(1, |head| head.matches('\n').count() + 1)
    }

    /// Folder of the generated files: `out`, or `generated` beside the spec.
    #[must_use]
    pub fn folder(&self, out: Option<&Path>) -> PathBuf {
        match (out, self.path.parent()) {
            (Some(out), _) => out.to_owned(),
            (None, Some(parent)) => parent.join("generated"),
            (None, None) => PathBuf::from("generated"),
        }
    }
}

/// Text of a spec from disk.
///
/// # Errors
/// The system's refusal.
pub fn text_of(path: &Path) -> Result<Vec<u8>> {
    files::read(path)?.ok_or_else(|| {
        Error::system(
            Diagnostic::new("no-file", format!("{}: there is no such file", path.display()))
                .action("give the path of a spec; `shiftwright new layers well.yaml` writes one"),
        )
    })
}

/// Reads and checks a spec.
///
/// # Errors
/// The spec's mistakes; the system's refusal.
pub fn load(path: &Path) -> Result<Loaded> {
    read(path, &text_of(path)?)
}

/// Checks a spec whose bytes are at hand; `path` is where it stands, for
/// messages and for the files that it names.
///
/// # Errors
/// The spec's mistakes; the system's refusal of a file that it names.
pub fn read(path: &Path, bytes: &[u8]) -> Result<Loaded> {
    let folder = path.parent().map(Path::to_owned).unwrap_or_default();
    let spec = Document::parse(&path.display().to_string(), bytes, &Beside(folder))?.resolve(&[])?;
    let text = String::from_utf8_lossy(bytes).into_owned();
    Ok(Loaded { spec, text, path: path.to_owned() })
}

/// Files in the folder of the spec.
struct Beside(PathBuf);

impl Loader for Beside {
    fn load(&self, path: &str) -> std::result::Result<Vec<u8>, String> {
        match files::read(&self.0.join(path)) {
            Ok(Some(bytes)) => Ok(bytes),
            Ok(None) => Err("there is no such file".to_owned()),
            Err(error) => Err(error.to_string()),
        }
    }
}

/// Sensitivities of a spec's formulas to its constants.
///
/// # Errors
/// What the stages return.
pub fn sensitivities(loaded: &Loaded) -> Result<Vec<Sensitivity>> {
    let folder = loaded.path.parent().map(Path::to_owned).unwrap_or_default();
    let name = loaded.path.display().to_string();
    let document = Document::parse(&name, loaded.text.as_bytes(), &Beside(folder))?;
    Ok(crate::study::sensitivity::sensitivities(&document, &loaded.spec))
}

pub use crate::pipeline::{Run, run, solve};

/// What is drawn of a spec's systems.
///
/// # Errors
/// What the stages return.
pub fn pictures(_spec: &Spec, _outcome: &Outcome) -> Result<Vec<Picture>> {
    Ok(Vec::new())
}
