//! `explain`: where the numbers come from.

use std::path::Path;

use serde_json::json;

use crate::review::explain as review;

use super::{Ended, load, print};

/// Columns when standard output is no terminal.
const COLUMNS: usize = 80;

/// Prints the explanation of a spec.
pub fn explain(path: &Path, as_json: bool) -> Ended {
    let loaded = load::load(path)?;
    let outcome = load::run(&loaded.spec)?.outcome;
    let sensitivities = load::sensitivities(&loaded)?;
    if as_json {
        return print::json(&json!({
            "name": outcome.name,
            "control": {"symbol": outcome.control.symbol, "unit": outcome.control.unit,
                        "at": outcome.control.at},
            "formulas": review::explain(&outcome),
            "sensitivities": sensitivities,
        }));
    }
    let width = terminal_size::terminal_size().map_or(COLUMNS, |(width, _)| usize::from(width.0));
    let mut text = review::text(&outcome, width);
    text.push_str(&review::sensitivities(&outcome, &sensitivities));
    print::people(&text)
}
