//! Files that are written whole or not at all.

use std::fs::{self, File, OpenOptions};
use std::io::{ErrorKind, Read, Write};
use std::path::{Path, PathBuf};

use crate::diagnostic::{Diagnostic, Error, Result};
use crate::emit::Source;

/// Largest file that is read: far above any spec, record or matrix of use.
const LARGEST: u64 = 64 << 20;

/// A refusal of the system about one file.
pub fn refused(what: &str, file: impl AsRef<Path>, error: &std::io::Error) -> Error {
    let file = file.as_ref().display();
    Error::system(
        Diagnostic::new("system", format!("{file}: {what}: {error}"))
            .action("check that the path exists, that it may be used, and that the disk has room"),
    )
}

/// Reads a whole file; `None` if it is not there.
///
/// # Errors
/// The system's refusal, or a file that is too large to be ours.
pub fn read(path: &Path) -> Result<Option<Vec<u8>>> {
    let file = match File::open(path) {
        Ok(file) => file,
        Err(e) if e.kind() == ErrorKind::NotFound => return Ok(None),
        Err(e) => return Err(refused("cannot be opened", path, &e)),
    };
    let mut bytes = Vec::new();
    file.take(LARGEST + 1).read_to_end(&mut bytes).map_err(|e| refused("cannot be read", path, &e))?;
    if bytes.len() as u64 > LARGEST {
        let message = format!("{}: the file is larger than {LARGEST} bytes", path.display());
        return Err(Error::system(Diagnostic::new("too-large", message)));
    }
    Ok(Some(bytes))
}

/// A finished text under a temporary name.
struct Pending {
    temporary: PathBuf,
    target: PathBuf,
}

impl Drop for Pending {
    /// What was not renamed is removed.
    fn drop(&mut self) {
        let _ = fs::remove_file(&self.temporary);
    }
}

/// Writes a set of files into `folder` in the given order: all texts are put
/// on disk under temporary names first, then each takes its name. A file that
/// already holds its text is left alone. Two runs at once do not meet, since
/// temporary names are their own.
///
/// # Errors
/// The system's refusal; a name that would leave the folder.
pub fn write_set(folder: &Path, sources: &[Source]) -> Result<()> {
    fs::create_dir_all(folder).map_err(|e| refused("cannot be made", folder, &e))?;
    let mut pending = Vec::new();
    for source in sources {
        let name = source.file.as_str();
        if name.is_empty() || name.starts_with('.') || name.contains(['/', '\\', ':', '\0']) {
            return Err(Error::internal(format!("`{name}` is no name of an output file")));
        }
        let target = folder.join(name);
        if read(&target).is_ok_and(|old| old.as_deref() == Some(source.text.as_bytes())) {
            continue;
        }
        pending.push(prepare(folder, name, target, source.text.as_bytes())?);
    }
    for file in &pending {
        fs::rename(&file.temporary, &file.target)
            .map_err(|e| refused("cannot be replaced", &file.target, &e))?;
    }
    if !pending.is_empty() {
        sync_folder(folder);
    }
    Ok(())
}

/// Writes one file whole or not at all.
///
/// # Errors
/// The system's refusal.
pub fn write_one(path: &Path, text: &[u8]) -> Result<()> {
    let folder = path.parent().filter(|p| !p.as_os_str().is_empty()).unwrap_or(Path::new("."));
    let Some(name) = path.file_name() else {
        let message = format!("{}: this is no name of a file", path.display());
        return Err(Error::spec(Diagnostic::new("no-file-name", message)));
    };
    let file = prepare(folder, &name.to_string_lossy(), path.to_owned(), text)?;
    fs::rename(&file.temporary, &file.target).map_err(|e| refused("cannot be replaced", path, &e))?;
    sync_folder(folder);
    Ok(())
}

fn prepare(folder: &Path, name: &str, target: PathBuf, text: &[u8]) -> Result<Pending> {
    // A leftover of a killed run may have the same process number: try on.
    for attempt in 0..1000 {
        let temporary = folder.join(format!(".{name}.{}-{attempt}.partial", std::process::id()));
        let mut file = match OpenOptions::new().write(true).create_new(true).open(&temporary) {
            Ok(file) => file,
            Err(e) if e.kind() == ErrorKind::AlreadyExists => continue,
            Err(e) => return Err(refused("cannot be written", &target, &e)),
        };
        let pending = Pending { temporary, target };
        return match file.write_all(text).and_then(|()| file.sync_all()) {
            Ok(()) => Ok(pending),
            Err(e) => Err(refused("cannot be written", &pending.target, &e)),
        };
    }
    let message = format!("{}: too many leftovers of killed runs", target.display());
    Err(Error::system(
        Diagnostic::new("leftovers", message).action("remove the `.partial` files of this folder"),
    ))
}

/// Makes renames last through a power cut, where the system can.
fn sync_folder(folder: &Path) {
    if let Ok(handle) = File::open(folder) {
        let _ = handle.sync_all();
    }
}
