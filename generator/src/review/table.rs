//! What `generate` prints: one row per formula, for people, in 80 columns.

use crate::form::Form;
use crate::outcome::{FormulaOutcome, Outcome, ValueKind};

use super::numbers::{coefficients, headline, reason, short, with_unit};

/// Widest line.
const WIDTH: usize = 80;

/// Significant digits of a coefficient; the record has all of them.
const DIGITS: usize = 7;

/// The table of a run; `folder` is where its files are, as the user would type it.
#[must_use]
pub fn table(outcome: &Outcome, folder: &str) -> String {
    let mut out = String::new();
    line(&mut out, &headline(outcome));
    let rows: Vec<[Vec<String>; 4]> = outcome.formulas.iter().map(|formula| row(outcome, formula)).collect();
    let range_head = match outcome.control.unit.as_str() {
        "1" => format!("range of {}", outcome.control.symbol),
        unit => format!("range ({unit})"),
    };
    let head = ["formula", "coefficients", &range_head, "largest error"];
    let mut widths = head.map(str::len);
    for cells in &rows {
        for (width, cell) in widths.iter_mut().zip(cells) {
            *width = cell.iter().map(|text| text.chars().count()).chain([*width]).max().unwrap_or(0);
        }
    }
    // A long name stands on a line of its own rather than widening every row.
    widths[0] = widths[0].min(10);
    let fits = widths.iter().sum::<usize>() + 6 <= WIDTH;
    line(&mut out, &columns(&head.map(str::to_owned), &widths, fits));
    for cells in &rows {
        let [name, terms, range, error] = cells;
        let mut first = name.first().cloned().unwrap_or_default();
        if first.chars().count() > widths[0] {
            line(&mut out, &first);
            first.clear();
        }
        if fits {
            let height = terms.len().max(range.len()).max(error.len());
            for idx in 0..height {
                let cell = |list: &Vec<String>| list.get(idx).cloned().unwrap_or_default();
                let head = if idx == 0 { first.clone() } else { String::new() };
                line(&mut out, &columns(&[head, cell(terms), cell(range), cell(error)], &widths, fits));
            }
        } else {
            // Spans below: coefficients first, then the range and the error.
            for (idx, text) in terms.iter().chain(range).enumerate() {
                let head = if idx == 0 { first.as_str() } else { "" };
                line(&mut out, &format!("{head:<width$}  {text}", width = widths[0]));
            }
            line(&mut out, &format!("{:<width$}  largest error {}", "", error.join(" "), width = widths[0]));
        }
    }
    for warning in &outcome.warnings {
        wrapped(&mut out, "warning", &warning.text);
    }
    for formula in &outcome.formulas {
        for note in &formula.notes {
            wrapped(&mut out, "note", &format!("{}: {} ({})", formula.name, note.text, note.code));
        }
    }
    if !outcome.outputs.is_empty() {
        let separator = if folder.is_empty() || folder.ends_with('/') { "" } else { "/" };
        let mut names: Vec<String> = outcome.outputs.iter().map(|output| output.file.clone()).collect();
        names.push(crate::emit::record::file_name(&outcome.name));
        wrapped(&mut out, "files", &format!("{} in {folder}{separator}", names.join(" ")));
    }
    out
}

fn line(out: &mut String, text: &str) {
    out.push_str(text.trim_end());
    out.push('\n');
}

/// Text broken at blanks, later lines under the first; `head` leads.
fn wrapped(out: &mut String, head: &str, text: &str) {
    let mut current = format!("{head:<7}");
    let mut empty = true;
    for word in text.split_whitespace() {
        if !empty && current.chars().count() + 1 + word.chars().count() > WIDTH {
            line(out, &current);
            current = " ".repeat(7);
        }
        current.push(' ');
        current.push_str(word);
        empty = false;
    }
    line(out, &current);
}

fn columns(cells: &[String; 4], widths: &[usize; 4], fits: bool) -> String {
    if !fits {
        return format!("{:<width$}  {}", cells[0], cells[1..].join("; "), width = widths[0]);
    }
    let mut text = String::new();
    for (cell, &width) in cells.iter().zip(widths) {
        text.push_str(&format!("{cell:<width$}  "));
    }
    text
}

/// Cells of one formula, each a list of lines.
fn row(outcome: &Outcome, formula: &FormulaOutcome) -> [Vec<String>; 4] {
    let control = &outcome.control;
    let mut terms = Vec::new();
    let family = formula.family.is_some();
    for coefficient in coefficients(formula, &control.unit) {
        let symmetric = matches!(formula.form, Form::Polynomial { .. })
            && formula.zero_by_symmetry.contains(&coefficient.power);
        let value = if symmetric {
            "0 by symmetry".to_owned()
        } else {
            with_unit(&short(coefficient.value, DIGITS), &coefficient.unit)
        };
        let name = coefficient.name.replace("half_gap_squared", "gap");
        terms.push(format!("{name:<2} {value}"));
    }
    if let Form::Paired { sign, partner, .. } = &formula.form {
        let sign = if *sign < 0.0 { "-" } else { "+" };
        terms.push(format!("mean {sign} sqrt(gap), partner {partner}"));
    }
    if formula.value == ValueKind::Shift {
        terms.push("value is the shift from E0".to_owned());
    }
    if family {
        terms.push("at the centre of the family's box".to_owned());
    }
    let valid = &formula.valid;
    let mut range = vec![format!("{} to {}", short(valid.from, 7), short(valid.to, 7))];
    let [below, above] = &valid.limited_by;
    if below == above {
        range.push(format!("ends {}", reason(below)));
    } else {
        range.push(format!("below {}", reason(below)));
        range.push(format!("above {}", reason(above)));
    }
    let total: f64 = formula.error.iter().sum();
    let error =
        vec![with_unit(&short(total, 3), &formula.unit), format!("of {}", short(formula.tolerance, 3))];
    [vec![formula.name.clone()], terms, range, error]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::review::example;

    #[test]
    fn every_line_fits_eighty_columns() {
        let mut outcome = example::outcome();
        outcome.formulas[1].name = "a_name_of_a_formula_that_is_rather_long_".to_owned();
        let text = table(&outcome, "specs/generated");
        assert!(text.lines().all(|line| line.chars().count() <= WIDTH), "{text}");
        for part in
            ["1458.934 meV", "meV/(kV/cm)^2", "0 by symmetry", "shutter_f64.rs", "(even)", "partner 2"]
        {
            assert!(text.contains(part), "{part}: {text}");
        }
        insta::assert_snapshot!(table(&example::outcome(), "specs/generated"));
    }
}
