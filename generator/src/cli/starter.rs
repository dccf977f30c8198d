//! `new`: starter specs.

use std::path::Path;

use crate::diagnostic::{Diagnostic, Error};

use super::arguments::StarterKind;
use super::{Ended, files, print};

/// Text of the starter spec of a kind.
#[must_use]
pub fn text(kind: StarterKind) -> &'static str {
    match kind {
        StarterKind::Layers => include_str!("../../../templates/new/layers.yaml"),
        StarterKind::Parts => include_str!("../../../templates/new/parts.yaml"),
        StarterKind::Matrix => include_str!("../../../templates/new/matrix.yaml"),
        StarterKind::Radial => include_str!("../../../templates/new/radial.yaml"),
    }
}

/// Writes a starter spec, never over a file that is there.
pub fn new(kind: StarterKind, file: Option<&Path>) -> Ended {
    let Some(path) = file else {
        return print::result(text(kind));
    };
    if path.symlink_metadata().is_ok() {
        return Err(Error::spec(
            Diagnostic::new("file-exists", format!("{}: there is such a file", path.display()))
                .action("give another name, or remove the file first"),
        ));
    }
    files::write_one(path, text(kind).as_bytes())?;
    print::people(&format!("{} written; next: shiftwright generate {}\n", path.display(), path.display()))
}
