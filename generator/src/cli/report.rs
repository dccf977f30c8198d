//! `report`: the page about a run.

use std::path::Path;

use crate::review::report::page;

use super::compare::outcome;
use super::{Ended, files, load, print};

/// Writes the page; `against` is an older record or spec to lay under it.
pub fn report(spec: &Path, out: &Path, against: Option<&Path>) -> Ended {
    let old = against.map(outcome).transpose()?;
    let loaded = load::load(spec)?;
    let run = load::run(&loaded.spec)?;
    let pictures = load::pictures(&loaded.spec, &run.outcome)?;
    let html = page(&run.outcome, &pictures, old.as_ref())?;
    files::write_one(out, html.as_bytes())?;
    print::people(&format!("{} written\n", out.display()))
}
