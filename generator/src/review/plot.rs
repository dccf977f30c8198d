//! A residual plot in characters, for terminals.

use crate::outcome::FormulaOutcome;

use super::numbers::{short, with_unit};

/// Rows of the plot; odd, so that zero has a row.
const ROWS: usize = 11;

/// Narrowest terminal that gets a plot.
const NARROWEST: usize = 60;

/// Widest plot.
const WIDEST: usize = 72;

/// Exact level minus formula over the range, inside the band of the tolerance;
/// `None` where the terminal is too narrow or there are no samples.
#[must_use]
pub fn residual(formula: &FormulaOutcome, control_unit: &str, width: usize) -> Option<String> {
    let first = formula.samples.first()?.control;
    let last = formula.samples.last()?.control;
    let span = last - first;
    if width < NARROWEST || span.is_nan() || span <= 0.0 {
        return None;
    }
    let label = 10;
    let columns = width.min(WIDEST) - label - 3;
    let mut grid = vec![vec![' '; columns]; ROWS];
    let half = (ROWS - 1) / 2;
    for row in [0, ROWS - 1] {
        grid[row].fill('.');
    }
    grid[half].fill('-');
    for sample in &formula.samples {
        let column = position((sample.control - first) / span, columns - 1);
        let height = (sample.exact - sample.formula) / formula.tolerance;
        // The band's edges are the outermost rows; what lies beyond is drawn on them.
        let row = position((1.0 - height.clamp(-1.0, 1.0)) / 2.0, ROWS - 1);
        if let Some(cell) = grid.get_mut(row).and_then(|line| line.get_mut(column)) {
            *cell = '*';
        }
    }
    let mut out = format!("  exact minus formula, {}\n", with_unit("", &formula.unit).trim());
    for (row, line) in grid.iter().enumerate() {
        let text = match row {
            0 => short(formula.tolerance, 3),
            row if row == half => "0".to_owned(),
            row if row == ROWS - 1 => short(-formula.tolerance, 3),
            _ => String::new(),
        };
        let line: String = line.iter().collect();
        out.push_str(format!("{text:>label$} |{line}").trim_end());
        out.push('\n');
    }
    let (left, right) = (short(first, 5), with_unit(&short(last, 5), control_unit));
    let gap = columns.saturating_sub(left.chars().count() + right.chars().count());
    out.push_str(&format!("{:label$}  {left}{}{right}\n", "", " ".repeat(gap)));
    Some(out)
}

/// `fraction` of `last`, rounded to a cell.
fn position(fraction: f64, last: usize) -> usize {
    let mut cell = 0;
    while cell < last && fraction * last as f64 >= cell as f64 + 0.5 {
        cell += 1;
    }
    cell
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::review::example;

    #[test]
    fn the_plot_has_every_sample_and_fits() {
        let outcome = example::outcome();
        let text = residual(&outcome.formulas[0], "kV/cm", 80).expect("wide enough");
        assert!(text.lines().all(|line| line.chars().count() <= 80));
        assert_eq!(text.matches('*').count(), outcome.formulas[0].samples.len());
        assert!(residual(&outcome.formulas[0], "kV/cm", 59).is_none());
    }
}
