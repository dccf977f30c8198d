//! Coefficients and ranges over a grid of constants, or over random draws.
//!
//! In: a spec's text, a [`Plan`], and a function that runs one spec. Out: rows
//! of text in the order of the plan, computed in parallel and collected in
//! order, so that the bytes do not depend on threads or slices.
//!
//! Not here: files, progress bars, signals.

mod parquet;
mod plan;
mod random;
mod substitute;

pub use parquet::parquet;
pub use plan::{Law, Plan, Vary};
pub use substitute::Template;

use std::ops::Range;

use rayon::prelude::*;

use crate::diagnostic::Result;
use crate::form::Form;
use crate::outcome::{FormulaOutcome, Outcome};

/// A column of the table.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Column {
    /// `well`, `onset.c0`, `onset.from`.
    pub name: String,
    /// Its unit.
    pub unit: String,
}

/// Columns of a sweep: the varied constants, then each formula's coefficients
/// and range. `outcome` is that of the spec as it stands.
#[must_use]
pub fn columns(plan: &Plan, outcome: &Outcome) -> Vec<Column> {
    let mut out: Vec<Column> = plan
        .vary
        .iter()
        .map(|one| {
            let path = format!("constants.{}", one.name);
            let own = outcome.inputs.iter().find(|input| input.path == path);
            let unit = if one.unit.is_empty() {
                own.map_or("1".to_owned(), |input| input.unit.clone())
            } else {
                one.unit.clone()
            };
            Column { name: one.name.clone(), unit }
        })
        .collect();
    for formula in &outcome.formulas {
        let coefficients = crate::review::numbers::coefficients(formula, &outcome.control.unit);
        let paired = matches!(formula.form, Form::Paired { .. });
        for coefficient in coefficients {
            let name =
                if paired { coefficient.name.replace(' ', "_") } else { format!("c{}", coefficient.power) };
            out.push(Column { name: format!("{}.{name}", formula.name), unit: coefficient.unit });
        }
        for end in ["from", "to"] {
            out.push(Column { name: format!("{}.{end}", formula.name), unit: outcome.control.unit.clone() });
        }
    }
    out
}

/// The header line of a CSV file, without a line break.
#[must_use]
pub fn header(columns: &[Column]) -> String {
    let names: Vec<String> =
        columns.iter().map(|column| format!("{} [{}]", column.name, column.unit)).collect();
    names.join(",")
}

/// Numbers of one formula, in the order of [`columns`].
fn numbers(formula: &FormulaOutcome) -> Vec<f64> {
    let mut out = match &formula.form {
        Form::Polynomial { coefficients } => coefficients.clone(),
        Form::Paired { mean, half_gap_squared, .. } => [mean.as_slice(), half_gap_squared].concat(),
    };
    out.extend([formula.valid.from, formula.valid.to]);
    out
}

/// One finished row.
#[derive(Clone, Debug, PartialEq)]
pub struct Row {
    /// Values of the constants.
    pub values: Vec<f64>,
    /// Numbers of the formulas; `None` where the spec gave no formula there.
    pub numbers: Option<Vec<f64>>,
}

impl Row {
    /// The row as a line of CSV, without a line break; numbers that do not
    /// exist are left empty.
    #[must_use]
    pub fn line(&self, columns: usize) -> String {
        let mut cells: Vec<String> = self.values.iter().map(|v| format!("{v:?}")).collect();
        match &self.numbers {
            Some(numbers) => cells.extend(numbers.iter().map(|v| format!("{v:?}"))),
            None => cells.resize(columns, String::new()),
        }
        cells.join(",")
    }
}

/// Whether every formula of a row holds over the whole wanted range. Ends are
/// rounded inwards to seven digits, so a millionth of the range is let pass.
#[must_use]
pub fn holds(columns: &[Column], cells: &[Option<f64>], within: (f64, f64)) -> bool {
    let room = 1e-6 * (within.1 - within.0);
    columns.iter().zip(cells).all(|(column, cell)| {
        let reaches = |test: &dyn Fn(f64) -> bool| cell.is_some_and(test);
        if column.name.ends_with(".from") {
            reaches(&|value| value <= within.0 + room)
        } else if column.name.ends_with(".to") {
            reaches(&|value| value >= within.1 - room)
        } else {
            true
        }
    })
}

/// Runs one spec text.
pub type Runner<'a> = dyn Fn(&str) -> Result<Outcome> + Sync + 'a;

/// Computes rows of a plan in parallel, collected in order.
#[must_use]
pub fn rows(
    plan: &Plan,
    template: &Template,
    columns: &[Column],
    range: Range<u64>,
    run: &Runner<'_>,
) -> Vec<Row> {
    let list: Vec<u64> = range.collect();
    list.into_par_iter()
        .map(|row| {
            let values = plan.values(row);
            let texts: Vec<String> = values
                .iter()
                .zip(columns)
                .map(|(value, column)| match column.unit.as_str() {
                    "1" => format!("{value:?}"),
                    unit => format!("{value:?} {unit}"),
                })
                .collect();
            let wanted = columns.len() - plan.vary.len();
            let numbers = run(&template.fill(&texts))
                .ok()
                .map(|outcome| outcome.formulas.iter().flat_map(numbers).collect::<Vec<f64>>());
            Row { values, numbers: numbers.filter(|list| list.len() == wanted) }
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::review::example;

    /// A runner whose second-order coefficient is the width squared, in the
    /// first formula; it fails where the width is 10.
    fn run(text: &str) -> Result<Outcome> {
        let width: f64 = text
            .split("well: ")
            .nth(1)
            .and_then(|rest| rest.split(' ').next())
            .and_then(|number| number.parse().ok())
            .expect("a width");
        if width == 10.0 {
            return Err(crate::diagnostic::Error::internal("too wide"));
        }
        let mut outcome = example::outcome();
        outcome.formulas.truncate(1);
        outcome.formulas[0].form = Form::Polynomial { coefficients: vec![1.0, 0.0, width * width] };
        Ok(outcome)
    }

    fn table(parts: u64) -> String {
        let vary = vec![Vary::parse("well=8 nm:10 nm:9").expect("reads")];
        let plan = Plan::new(vary, None, 0).expect("plans");
        let template = Template::new("constants:\n  well: 9 nm\n", &["well"]).expect("finds");
        let columns = columns(&plan, &run("well: 9 nm").expect("runs"));
        let mut out = header(&columns) + "\n";
        for k in 1..=parts {
            for row in rows(&plan, &template, &columns, plan.slice(k, parts), &run) {
                out.push_str(&row.line(columns.len()));
                out.push('\n');
            }
        }
        out
    }

    #[test]
    fn a_row_counts_as_whole_only_if_both_ends_reach_the_wanted_range() {
        let column = |name: &str| Column { name: name.to_owned(), unit: "T".to_owned() };
        let columns = [column("w"), column("a.c0"), column("a.from"), column("a.to")];
        let row = |from, to| [Some(1.0), None, from, to];
        assert!(holds(&columns, &row(Some(-6.0), Some(5.999_999)), (-6.0, 6.0)));
        assert!(!holds(&columns, &row(Some(-6.0), Some(5.9)), (-6.0, 6.0)));
        assert!(!holds(&columns, &row(Some(-5.9), Some(6.0)), (-6.0, 6.0)));
        assert!(!holds(&columns, &row(None, None), (-6.0, 6.0)));
    }

    #[test]
    fn rows_are_in_order_and_slices_give_the_same_bytes() {
        let whole = table(1);
        let lines: Vec<&str> = whole.lines().collect();
        assert_eq!(
            lines[0],
            "well [nm],onset.c0 [meV],onset.c1 [meV/(kV/cm)],onset.c2 [meV/(kV/cm)^2],onset.from [kV/cm],onset.to [kV/cm]"
        );
        assert_eq!(lines[1], "8.0,1.0,0.0,64.0,-60.0,60.0");
        assert_eq!(lines[9], "10.0,,,,,");
        assert_eq!(lines.len(), 10);
        for parts in [2, 3, 9, 20] {
            assert_eq!(table(parts), whole);
        }
    }
}
