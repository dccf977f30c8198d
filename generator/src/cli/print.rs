//! Standard output, which may be closed or full.

use std::io::{ErrorKind, Write};

use super::Ended;
use super::files::refused;
use crate::diagnostic::visible;

/// Prints a result as it is. A reader that has gone away is no mistake.
pub fn result(text: &str) -> Ended {
    let mut out = std::io::stdout().lock();
    match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
        Ok(()) => Ok(0),
        Err(e) if e.kind() == ErrorKind::BrokenPipe => Ok(0),
        Err(e) => Err(refused("the result cannot be printed", "stdout", &e)),
    }
}

/// Prints a result that holds words of the user's files.
pub fn people(text: &str) -> Ended {
    result(&visible(text))
}

/// Prints a value as indented JSON.
pub fn json(value: &impl serde::Serialize) -> Ended {
    let mut text = serde_json::to_string_pretty(value).map_err(crate::diagnostic::Error::internal)?;
    text.push('\n');
    result(&text)
}
