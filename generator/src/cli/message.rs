//! Messages on standard error.

use std::collections::BTreeMap;
use std::io::{IsTerminal, Write};
use std::path::Path;

use crate::diagnostic::{Diagnostic, Error, visible};

use super::files;

/// Longest part of a line that is shown.
const SHOWN: usize = 100;

/// Prints the messages of an error; gives its exit status.
pub fn show(error: &Error) -> u8 {
    print(&colored(&text(error)));
    error.exit_status()
}

/// The messages of an error, with the lines that they speak of.
#[must_use]
pub fn text(error: &Error) -> String {
    let mut texts = BTreeMap::new();
    let mut out = String::new();
    for diagnostic in error.diagnostics() {
        if !out.is_empty() {
            out.push('\n');
        }
        if let Some(place) = &diagnostic.place {
            texts.entry(place.file.clone()).or_insert_with(|| text_of(&place.file));
        }
        let text = diagnostic.place.as_ref().and_then(|p| texts.get(&p.file)?.as_deref());
        out.push_str(&render(diagnostic, text));
    }
    out
}

/// Prints to standard error; nobody is left to hear of a failure.
pub fn print(text: &str) {
    let mut err = std::io::stderr().lock();
    let _ = err.write_all(text.as_bytes()).and_then(|()| err.flush());
}

fn text_of(file: &str) -> Option<String> {
    let bytes = files::read(Path::new(file)).ok()??;
    Some(String::from_utf8_lossy(&bytes).into_owned())
}

/// The word `error:` in bold red, on a terminal that wants colour.
fn colored(text: &str) -> String {
    let wanted =
        std::io::stderr().is_terminal() && std::env::var_os("NO_COLOR").is_none_or(|value| value.is_empty());
    if wanted { text.replace(" error: ", " \u{1b}[1;31merror:\u{1b}[0m ") } else { text.to_owned() }
}

/// One message as text: place, headline, the line with the place underlined,
/// what was found, what was expected, what to do.
#[must_use]
pub fn render(diagnostic: &Diagnostic, text: Option<&str>) -> String {
    let mut out = String::new();
    let headline = visible(&diagnostic.message);
    match &diagnostic.place {
        None => out.push_str(&format!("shiftwright: error: {headline} ({})\n", diagnostic.code)),
        Some(place) => {
            let spot = text.map_or(Spot::default(), |text| Spot::of(text, place.start, place.end));
            out.push_str(&format!(
                "{}:{}:{}: error: {headline} ({})\n",
                visible(&place.file).replace('\n', "\u{fffd}"),
                spot.line,
                spot.column,
                diagnostic.code
            ));
            if !spot.shown.trim().is_empty() {
                let number = spot.line.to_string();
                let margin = " ".repeat(number.len());
                out.push_str(&format!("\n  {number} | {}\n", spot.shown));
                out.push_str(&format!(
                    "  {margin} | {}{}\n\n",
                    " ".repeat(spot.lead),
                    "~".repeat(spot.width)
                ));
            }
        }
    }
    for (head, part) in [
        ("found:   ", &diagnostic.found),
        ("expected:", &diagnostic.expected),
        ("do:      ", &diagnostic.action),
    ] {
        if let Some(part) = part {
            out.push_str(&format!("{head} {}\n", visible(part)));
        }
    }
    out
}

/// Where a place stands in a text, and the line cut to what is shown.
#[derive(Default)]
struct Spot {
    line: usize,
    column: usize,
    shown: String,
    lead: usize,
    width: usize,
}

impl Spot {
    fn of(text: &str, start: usize, end: usize) -> Self {
        let mut start = start.min(text.len());
        while !text.is_char_boundary(start) {
            start -= 1;
        }
        let (before, after) = text.split_at(start);
        let head = before.rsplit('\n').next().unwrap_or("");
        let rest = after.split('\n').next().unwrap_or("").trim_end_matches('\r');
        let lead = head.chars().count();
        let marked = rest.get(..end.saturating_sub(start).min(rest.len())).unwrap_or(rest);
        // A long line is shown around its place.
        let skip = lead.saturating_sub(SHOWN / 2);
        let shown: String =
            visible(&head.chars().chain(rest.chars()).skip(skip).take(SHOWN).collect::<String>());
        let lead_shown = lead - skip;
        Self {
            line: before.matches('\n').count() + 1,
            column: lead + 1,
            width: marked.chars().count().clamp(1, SHOWN.saturating_sub(lead_shown).max(1)),
            lead: lead_shown,
            shown,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diagnostic::Place;

    #[test]
    fn a_message_shows_its_line_underlined() {
        let text = "a: 1\nwithin: [-5, 5]\n";
        let place = Place { file: "well.yaml".to_owned(), start: 13, end: 20 };
        let diagnostic = Diagnostic::new("past-range", "the control goes too far")
            .at(Some(place))
            .found("-5 to 5 kV/cm")
            .action("narrow `within`");
        assert_eq!(
            render(&diagnostic, Some(text)),
            "well.yaml:2:9: error: the control goes too far (past-range)\n\n  2 | within: [-5, 5]\n    \
             |         ~~~~~~~\n\nfound:    -5 to 5 kV/cm\ndo:       narrow `within`\n"
        );
    }

    #[test]
    fn odd_places_and_long_lines_are_survived() {
        let long = "é".repeat(5000);
        for text in ["", "é", "a\r\n", long.as_str()] {
            for start in 0..text.len().min(300) + 3 {
                let place = Place { file: "x".to_owned(), start, end: start + 7 };
                let out = render(&Diagnostic::new("c", "m").at(Some(place)), Some(text));
                assert!(out.lines().all(|line| line.chars().count() < 140));
            }
        }
        assert!(!render(&Diagnostic::new("c", "a\u{202e}\u{7}b"), None).contains('\u{202e}'));
    }
}
