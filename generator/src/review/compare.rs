//! What moved between two outcomes, in physical terms.
//!
//! In: the older and the newer outcome. Out: a [`Comparison`] whose lines read
//! like `edge: b -3.21e-3 to -3.48e-3 meV/(kV/cm)^2 (+8.4 %), range 61 to 57
//! kV/cm, because systems.electron.stack[1].thickness 9 nm to 9.2 nm`.

use serde::Serialize;

use crate::outcome::{FormulaOutcome, Input, Outcome, Valid};

use super::numbers::{apart, coefficients, per_cent, polynomial_name, short, with_unit};

/// One number before and after.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Moved {
    /// `b`, `mean 1`, `tolerance`, an input's path.
    pub name: String,
    /// Unit of both numbers.
    pub unit: String,
    /// Before.
    pub old: f64,
    /// After.
    pub new: f64,
}

/// A range before and after, control's unit.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct MovedRange {
    /// Lower and upper end before.
    pub old: [f64; 2],
    /// Lower and upper end after.
    pub new: [f64; 2],
    /// Why each side ended before.
    pub old_limited_by: [String; 2],
    /// Why each side ends now.
    pub new_limited_by: [String; 2],
}

/// What moved in one formula.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FormulaMoves {
    /// Name.
    pub formula: String,
    /// Coefficients of the closed form, and the series beyond them.
    pub numbers: Vec<Moved>,
    /// The range.
    pub range: Option<MovedRange>,
    /// Sentences about what is no number: form, unit, value.
    pub words: Vec<String>,
    /// The whole as one line without the cause.
    pub text: String,
}

/// An input before and after; `None` where it does not exist.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct InputMove {
    /// Path of the key.
    pub path: String,
    /// Value and unit before.
    pub old: Option<(f64, String)>,
    /// Value and unit after.
    pub new: Option<(f64, String)>,
    /// `PATH 9 nm to 9.2 nm`.
    pub text: String,
}

/// Everything that moved.
#[derive(Clone, Debug, Default, PartialEq, Serialize)]
pub struct Comparison {
    /// Formulas that moved, in the newer order.
    pub formulas: Vec<FormulaMoves>,
    /// Formulas that only the newer outcome has.
    pub added: Vec<String>,
    /// Formulas that only the older outcome has.
    pub removed: Vec<String>,
    /// Inputs that changed.
    pub inputs: Vec<InputMove>,
    /// Changes of the control, of the spec's name, of files read.
    pub other: Vec<String>,
}

impl Comparison {
    /// True if no number, input or name differs.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.formulas.is_empty()
            && self.added.is_empty()
            && self.removed.is_empty()
            && self.inputs.is_empty()
            && self.other.is_empty()
    }

    /// The changed inputs as the end of a sentence, ` because ...`, or nothing.
    #[must_use]
    pub fn cause(&self) -> String {
        const SHOWN: usize = 4;
        // A constant and the layers that take it change together; the constant is the cause.
        let constants: Vec<&InputMove> =
            self.inputs.iter().filter(|input| input.path.starts_with("constants.")).collect();
        let follows = |input: &InputMove| {
            !input.path.starts_with("constants.")
                && constants.iter().any(|c| (&c.old, &c.new) == (&input.old, &input.new))
        };
        let list: Vec<&str> =
            self.inputs.iter().filter(|input| !follows(input)).map(|input| input.text.as_str()).collect();
        let more = list.len().saturating_sub(SHOWN);
        let shown = list.iter().take(SHOWN).copied().collect::<Vec<_>>().join(" and ");
        match (list.is_empty(), more) {
            (true, _) => String::new(),
            (false, 0) => format!(", because {shown}"),
            (false, more) => format!(", because {shown} and {more} more inputs"),
        }
    }

    /// One line per change, for people and for continuous integration.
    #[must_use]
    pub fn lines(&self) -> Vec<String> {
        let cause = self.cause();
        let mut lines: Vec<String> =
            self.formulas.iter().map(|moves| format!("{}{cause}", moves.text)).collect();
        lines.extend(self.added.iter().map(|name| format!("{name}: is new")));
        lines.extend(self.removed.iter().map(|name| format!("{name}: is gone")));
        lines.extend(self.other.iter().cloned());
        if self.formulas.is_empty() {
            lines.extend(self.inputs.iter().map(|input| format!("input {} moves no number", input.text)));
        }
        lines
    }
}

/// Compares two outcomes number by number.
#[must_use]
pub fn compare(old: &Outcome, new: &Outcome) -> Comparison {
    let mut out = Comparison { inputs: inputs(&old.inputs, &new.inputs), ..Comparison::default() };
    for formula in &new.formulas {
        match old.formulas.iter().find(|other| other.name == formula.name) {
            None => out.added.push(formula.name.clone()),
            Some(before) => out.formulas.extend(formula_moves(old, new, before, formula)),
        }
    }
    for formula in &old.formulas {
        if !new.formulas.iter().any(|other| other.name == formula.name) {
            out.removed.push(formula.name.clone());
        }
    }
    let (before, after) = (&old.control, &new.control);
    if old.name != new.name {
        out.other.push(format!("the spec's name {} to {}", old.name, new.name));
    }
    if (&before.symbol, &before.unit) != (&after.symbol, &after.unit) {
        out.other.push(format!(
            "the control {} in {} to {} in {}",
            before.symbol, before.unit, after.symbol, after.unit
        ));
    }
    if before.at != after.at {
        let (a, b) = apart(before.at, after.at, 3);
        out.other.push(format!("the operating point {a} to {}", with_unit(&b, &after.unit)));
    }
    if before.within != after.within {
        out.other.push(format!(
            "the wanted range [{}, {}] to [{}, {}] {}",
            short(before.within.0, 7),
            short(before.within.1, 7),
            short(after.within.0, 7),
            short(after.within.1, 7),
            after.unit
        ));
    }
    if old.family != new.family {
        out.other.push("the family's parameters or their box changed".to_owned());
    }
    out
}

fn formula_moves(
    old_outcome: &Outcome,
    new_outcome: &Outcome,
    old: &FormulaOutcome,
    new: &FormulaOutcome,
) -> Option<FormulaMoves> {
    let mut words = Vec::new();
    let (before, after) =
        (coefficients(old, &old_outcome.control.unit), coefficients(new, &new_outcome.control.unit));
    let mut numbers: Vec<Moved> = Vec::new();
    for coefficient in &after {
        let Some(other) = before.iter().find(|other| other.name == coefficient.name) else {
            words.push(format!(
                "{} is new, {}",
                coefficient.name,
                with_unit(&short(coefficient.value, 4), &coefficient.unit)
            ));
            continue;
        };
        if other.unit != coefficient.unit {
            words.push(format!("{} in {} to {}", coefficient.name, other.unit, coefficient.unit));
        }
        if other.value != coefficient.value {
            numbers.push(Moved {
                name: coefficient.name.clone(),
                unit: coefficient.unit.clone(),
                old: other.value,
                new: coefficient.value,
            });
        }
    }
    for coefficient in &before {
        if !after.iter().any(|other| other.name == coefficient.name) {
            words.push(format!("{} is gone", coefficient.name));
        }
    }
    // A shift's E0 and the orders beyond the form show a change that the form hides.
    for (power, (&a, &b)) in old.series.iter().zip(&new.series).enumerate() {
        let name = polynomial_name(power);
        if a != b && !after.iter().any(|c| c.name == name) {
            let unit = super::numbers::coefficient_unit(&new.unit, &new_outcome.control.unit, power);
            numbers.push(Moved { name: format!("{name} of the series"), unit, old: a, new: b });
        }
    }
    for (name, a, b) in [
        ("tolerance", old.tolerance, new.tolerance),
        ("remainder", old.error[0], new.error[0]),
        ("numerical error", old.error[1], new.error[1]),
        ("error of written digits", old.error[2], new.error[2]),
    ] {
        if a != b {
            numbers.push(Moved { name: name.to_owned(), unit: new.unit.clone(), old: a, new: b });
        }
    }
    if old.value != new.value {
        words.push("value is now the other of level and shift".to_owned());
    }
    let partner = |formula: &FormulaOutcome| match &formula.form {
        crate::form::Form::Paired { sign, partner, .. } => Some((*sign, *partner)),
        crate::form::Form::Polynomial { .. } => None,
    };
    if partner(old) != partner(new) {
        words.push("form or partner changed".to_owned());
    }
    if old.zero_by_symmetry != new.zero_by_symmetry {
        words.push(format!("zero by symmetry {:?} to {:?}", old.zero_by_symmetry, new.zero_by_symmetry));
    }
    let range = (old.valid != new.valid).then(|| MovedRange {
        old: [old.valid.from, old.valid.to],
        new: [new.valid.from, new.valid.to],
        old_limited_by: old.valid.limited_by.clone(),
        new_limited_by: new.valid.limited_by.clone(),
    });
    if numbers.is_empty() && range.is_none() && words.is_empty() && differs_elsewhere(old, new) {
        words.push("levels, contributions, samples or notes changed".to_owned());
    }
    if numbers.is_empty() && range.is_none() && words.is_empty() {
        return None;
    }
    let text = formula_text(new_outcome, old, new, &numbers, range.is_some(), &words);
    Some(FormulaMoves { formula: new.name.clone(), numbers, range, words, text })
}

fn differs_elsewhere(old: &FormulaOutcome, new: &FormulaOutcome) -> bool {
    old != new
}

/// One line: the coefficients that moved, the range, the rest.
fn formula_text(
    outcome: &Outcome,
    old: &FormulaOutcome,
    new: &FormulaOutcome,
    numbers: &[Moved],
    range_moved: bool,
    words: &[String],
) -> String {
    let mut parts = Vec::new();
    // Series beyond the form and the error budget follow from the rest; they are
    // shown only when nothing else moved.
    let form_names = coefficients(new, &outcome.control.unit);
    let leading =
        |moved: &&Moved| moved.name == "tolerance" || form_names.iter().any(|c| c.name == moved.name);
    let lead: Vec<&Moved> = numbers.iter().filter(leading).collect();
    let shown = if lead.is_empty() && !range_moved { numbers.iter().collect() } else { lead };
    for moved in shown {
        let (a, b) = apart(moved.old, moved.new, 3);
        let new_text = with_unit(&b, &moved.unit);
        parts.push(format!("{} {a} to {new_text}{}", moved.name, per_cent(moved.old, moved.new)));
    }
    if range_moved {
        parts.push(range_text(&old.valid, &new.valid, outcome.control.at, &outcome.control.unit));
    }
    parts.extend(words.iter().cloned());
    format!("{}: {}", new.name, parts.join(", "))
}

/// `range 61 to 57 kV/cm` where both are symmetric about 0, else both intervals.
fn range_text(old: &Valid, new: &Valid, at: f64, unit: &str) -> String {
    let symmetric = |valid: &Valid| valid.from == -valid.to;
    let mut text = if at == 0.0 && symmetric(old) && symmetric(new) && old.to != new.to {
        let (a, b) = apart(old.to, new.to, 2);
        format!("range {a} to {}", with_unit(&b, unit))
    } else {
        let (a, b) = apart(old.from, new.from, 3);
        let (c, d) = apart(old.to, new.to, 3);
        let (a, b) = if old.from == new.from { (short(old.from, 7), short(new.from, 7)) } else { (a, b) };
        let (c, d) = if old.to == new.to { (short(old.to, 7), short(new.to, 7)) } else { (c, d) };
        format!("range [{a}, {c}] to {}", with_unit(&format!("[{b}, {d}]"), unit))
    };
    if old.limited_by != new.limited_by {
        let pair = |words: &[String; 2]| {
            if words[0] == words[1] { words[0].clone() } else { words.join(" and ") }
        };
        text.push_str(&format!(" (limited by {}, was {})", pair(&new.limited_by), pair(&old.limited_by)));
    }
    text
}

fn inputs(old: &[Input], new: &[Input]) -> Vec<InputMove> {
    let show = |input: &Input| with_unit(&format!("{}", input.value), &input.unit);
    let mut out = Vec::new();
    for input in new {
        let before = old.iter().find(|other| other.path == input.path);
        let text = match before {
            Some(before) if before.value == input.value && before.unit == input.unit => continue,
            Some(before) => format!("{} {} to {}", input.path, show(before), show(input)),
            None => format!("{} {} is new", input.path, show(input)),
        };
        out.push(InputMove {
            path: input.path.clone(),
            old: before.map(|i| (i.value, i.unit.clone())),
            new: Some((input.value, input.unit.clone())),
            text,
        });
    }
    for input in old {
        if !new.iter().any(|other| other.path == input.path) {
            out.push(InputMove {
                path: input.path.clone(),
                old: Some((input.value, input.unit.clone())),
                new: None,
                text: format!("{} {} is gone", input.path, show(input)),
            });
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::form::Form;
    use crate::review::example;

    #[test]
    fn equal_outcomes_have_nothing_to_say() {
        let comparison = compare(&example::outcome(), &example::outcome());
        assert!(comparison.is_empty());
        assert!(comparison.lines().is_empty());
    }

    #[test]
    fn a_moved_layer_is_named_as_the_cause() {
        let (mut old, mut new) = (example::outcome(), example::outcome());
        for (outcome, b, to, thickness) in [(&mut old, -3.21e-3, 61.0, 9.0), (&mut new, -3.48e-3, 57.0, 9.2)]
        {
            outcome.formulas.truncate(1);
            outcome.formulas[0].form = Form::Polynomial { coefficients: vec![1_458.934_408_104_531, 0.0, b] };
            outcome.formulas[0].valid.from = -to;
            outcome.formulas[0].valid.to = to;
            outcome.inputs[1].value = thickness;
        }
        let lines = compare(&old, &new).lines();
        assert_eq!(
            lines,
            ["onset: b -0.00321 to -0.00348 meV/(kV/cm)^2 (+8.4 %), range 61 to 57 kV/cm, because \
              systems.electron.stack[0].thickness 9 nm to 9.2 nm"]
        );
    }

    #[test]
    fn every_number_of_a_formula_counts() {
        let base = example::outcome();
        let mut cases = vec![base.clone(); 8];
        cases[0].formulas[0].error[0] *= 1.1;
        cases[1].formulas[0].series[4] *= 1.1;
        cases[2].formulas[0].uncertainty[2] *= 1.1;
        cases[3].formulas[0].samples[0].exact += 1e-9;
        cases[4].formulas[0].valid.limited_by[0] = "remainder".to_owned();
        cases[5].control.within.1 = 61.0;
        cases[6].formulas.pop();
        cases[7].formulas[1].form = Form::Polynomial { coefficients: vec![0.0, 1.0, 2.0] };
        for (idx, case) in cases.iter().enumerate() {
            let comparison = compare(&base, case);
            assert!(!comparison.is_empty(), "case {idx}");
            assert!(!comparison.lines().is_empty(), "case {idx}");
        }
    }
}
