//! Where a formula's numbers come from, what limits it and what would widen it.
//!
//! In: an outcome. Out: an [`Explanation`] per formula, and its text.
//!
//! The measured remainder (exact level minus formula) is put beside what the
//! series' own next orders say of it; where they disagree, the series is past
//! its use, however small its terms look.

use serde::Serialize;

use crate::form::Form;
use crate::outcome::{FormulaOutcome, Outcome, ValueKind, block_name};

use super::numbers::{coefficient_unit, coefficients, headline, polynomial_name, reason, short, with_unit};
use super::plot;
use crate::study::sensitivity::Sensitivity;

/// Widest line of the text.
const WIDTH: usize = 80;

/// One coefficient with its uncertainty.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Term {
    /// `E0`, `a`, `b`, `E3`, `E4`.
    pub name: String,
    /// Value.
    pub value: f64,
    /// Estimated error.
    pub uncertainty: f64,
    /// Unit of both.
    pub unit: String,
    /// True if a symmetry makes it exactly zero.
    pub zero_by_symmetry: bool,
}

/// The remainder at one end of the range.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct EndRemainder {
    /// Control value.
    pub control: f64,
    /// Exact level minus formula.
    pub measured: f64,
    /// The series' next orders, E3 and E4 as far as they lie beyond the form.
    pub next_orders: f64,
}

/// A level of a system.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct LevelLine {
    /// System's name.
    pub system: String,
    /// Number in its block.
    pub level: usize,
    /// Energy at the operating point, formula's unit.
    pub energy: f64,
    /// Share of E2, where it has one that counts.
    pub share: Option<f64>,
    /// First-order amplitude per control unit, where listed.
    pub mixing: Option<f64>,
}

/// Everything about one formula.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Explanation {
    /// Name.
    pub formula: String,
    /// Unit of the value.
    pub unit: String,
    /// Unit of the control.
    pub control_unit: String,
    /// E0 to E4.
    pub series: Vec<Term>,
    /// Levels of every system, with contributions and mixing.
    pub levels: Vec<LevelLine>,
    /// Share of the second-order part of the Hamiltonian itself, per system.
    pub direct: Vec<(String, f64)>,
    /// Remainder, numerical error, error of written digits; largest in the range.
    pub error: [f64; 3],
    /// Largest error allowed.
    pub tolerance: f64,
    /// The range.
    pub range: [f64; 2],
    /// Why each side ends.
    pub limited_by: [String; 2],
    /// Where the tolerance is first exceeded.
    pub first_to_fail: [Option<f64>; 2],
    /// Where the next orders alone would reach the tolerance; none if they vanish.
    pub next_orders_reach: [Option<f64>; 2],
    /// Remainders at both ends.
    pub ends: Vec<EndRemainder>,
    /// What would widen the range.
    pub advice: Vec<String>,
    /// Remarks of the run.
    pub notes: Vec<String>,
}

/// The section on what one per cent more of each constant does.
#[must_use]
pub fn sensitivities(outcome: &Outcome, all: &[Sensitivity]) -> String {
    let mut out = String::new();
    for formula in &outcome.formulas {
        let own: Vec<&Sensitivity> = all.iter().filter(|one| one.formula == formula.name).collect();
        if own.is_empty() {
            continue;
        }
        out.push_str(&format!("\n{}: change for one per cent more of a constant\n", formula.name));
        let units: Vec<String> =
            (0..3).map(|power| coefficient_unit(&formula.unit, &outcome.control.unit, power)).collect();
        out.push_str(&format!("  E0 in {}, a in {}, b in {}\n", units[0], units[1], units[2]));
        for one in own {
            let [e0, a, b] = one.per_cent.map(|change| short(change, 4));
            let end = |side: usize| one.range[side].map(|end| short(0.01 * one.value.abs() * end, 3));
            let ends = match (end(0), end(1)) {
                (None, None) => String::new(),
                (low, high) => {
                    let word = |end: Option<String>| end.unwrap_or_else(|| "-".to_owned());
                    format!("  ends {} {}", word(low), word(high))
                }
            };
            out.push_str(&format!("    {:<16} E0 {e0:>11}  a {a:>11}  b {b:>11}{ends}\n", one.constant));
        }
    }
    out
}

/// Explains every formula of an outcome.
#[must_use]
pub fn explain(outcome: &Outcome) -> Vec<Explanation> {
    outcome.formulas.iter().map(|formula| explanation(outcome, formula)).collect()
}

/// Order of the form.
fn order(form: &Form) -> usize {
    match form {
        Form::Polynomial { coefficients } => coefficients.len().saturating_sub(1),
        Form::Paired { mean, .. } => mean.len().saturating_sub(1),
    }
}

/// What the series beyond `order` adds at offset `d`.
fn beyond(series: &[f64; 5], order: usize, d: f64) -> f64 {
    series.iter().rev().take(4_usize.saturating_sub(order)).fold(0.0, |sum, &c| (sum + c) * d)
        * (0..order).fold(1.0, |power, _| power * d)
}

fn explanation(outcome: &Outcome, formula: &FormulaOutcome) -> Explanation {
    let control = &outcome.control;
    let order = order(&formula.form);
    let polynomial = matches!(formula.form, Form::Polynomial { .. });
    let series = formula
        .series
        .iter()
        .zip(&formula.uncertainty)
        .enumerate()
        .map(|(power, (&value, &uncertainty))| Term {
            name: polynomial_name(power),
            value,
            uncertainty,
            unit: coefficient_unit(&formula.unit, &control.unit, power),
            zero_by_symmetry: formula.zero_by_symmetry.contains(&power),
        })
        .collect();
    let mut levels = Vec::new();
    for (system, energies) in &formula.levels {
        for (idx, &energy) in energies.iter().enumerate() {
            let level = idx + 1;
            levels.push(LevelLine {
                system: system.clone(),
                level,
                energy,
                share: formula
                    .contributions
                    .iter()
                    .find(|c| c.block.is_empty() && c.system == *system && c.level == Some(level))
                    .map(|c| c.share),
                mixing: formula
                    .mixing
                    .iter()
                    .find(|m| m.block.is_empty() && m.system == *system && m.level == level)
                    .map(|m| m.coefficient),
            });
        }
    }
    let ends = [formula.samples.first(), formula.samples.last()]
        .into_iter()
        .flatten()
        .map(|sample| EndRemainder {
            control: sample.control,
            measured: sample.exact - sample.formula,
            next_orders: beyond(&formula.series, order, sample.control - control.at),
        })
        .collect();
    let reach = |end: f64| {
        let span = 2.0 * (end - control.at);
        (polynomial && order < 4).then(|| first_reach(formula, order, span)).flatten()
    };
    let next_orders_reach =
        [reach(control.within.0).map(|d| control.at + d), reach(control.within.1).map(|d| control.at + d)];
    // States beyond the listed twelve, and of other blocks, that still count.
    for part in &formula.contributions {
        let system = block_name(&part.system, &part.block);
        let listed = |line: &LevelLine| line.system == system && Some(line.level) == part.level;
        if let Some(level) = part.level
            && !levels.iter().any(listed)
        {
            let mixing = formula
                .mixing
                .iter()
                .find(|m| m.system == part.system && m.block == part.block && m.level == level)
                .map(|m| m.coefficient);
            levels.push(LevelLine { system, level, energy: part.energy, share: Some(part.share), mixing });
        }
    }
    Explanation {
        formula: formula.name.clone(),
        unit: formula.unit.clone(),
        control_unit: control.unit.clone(),
        series,
        levels,
        direct: formula
            .contributions
            .iter()
            .filter(|c| c.level.is_none())
            .map(|c| (c.system.clone(), c.share))
            .collect(),
        error: formula.error,
        tolerance: formula.tolerance,
        range: [formula.valid.from, formula.valid.to],
        limited_by: formula.valid.limited_by.clone(),
        first_to_fail: formula.first_to_fail,
        next_orders_reach,
        ends,
        advice: advice(outcome, formula, order),
        notes: formula.notes.iter().map(|note| format!("{} ({})", note.text, note.code)).collect(),
    }
}

/// Smallest offset towards `span` at which the next orders reach the tolerance.
fn first_reach(formula: &FormulaOutcome, order: usize, span: f64) -> Option<f64> {
    const STEPS: u32 = 400;
    let over = |d: f64| beyond(&formula.series, order, d).abs() >= formula.tolerance;
    let step = span / f64::from(STEPS);
    let mut inside = 0.0;
    let outside = (1..=STEPS).map(|k| f64::from(k) * step).find(|&d| {
        let over = over(d);
        if !over {
            inside = d;
        }
        over
    });
    let mut outside = outside?;
    for _ in 0..60 {
        let middle = 0.5 * (inside + outside);
        if over(middle) {
            outside = middle;
        } else {
            inside = middle;
        }
    }
    Some(inside)
}

/// What limits the range, side by side, and what would widen it.
fn advice(outcome: &Outcome, formula: &FormulaOutcome, order: usize) -> Vec<String> {
    let control = &outcome.control;
    let mut out = Vec::new();
    let sides = [
        ("below", &formula.valid.limited_by[0], formula.valid.from, formula.first_to_fail[0]),
        ("above", &formula.valid.limited_by[1], formula.valid.to, formula.first_to_fail[1]),
    ];
    for (side, word, end, fail) in sides {
        let text = match word.as_str() {
            "within" => match fail {
                Some(fail) => format!(
                    "{side} the range ends where it was asked to; widening `within` gains up to {}",
                    with_unit(&short(fail, 6), &control.unit)
                ),
                None => format!(
                    "{side} the range ends where it was asked to, and the formula holds at least twice as far"
                ),
            },
            "remainder" if order < 4 => format!(
                "{side} the remainder ends it: a larger `tolerance`, `order: {}`, `coefficients: minimax` or \
                 `form: auto` may carry it further",
                order + 1
            ),
            "remainder" => format!(
                "{side} the remainder ends it at the highest order: a larger `tolerance`, an operating point \
                 nearer to {} or `form: auto` may carry it further",
                with_unit(&short(end, 4), &control.unit)
            ),
            "crossing" => format!(
                "{side} another level of the same block meets this one: no smooth formula goes on; `form: paired` \
                 describes both"
            ),
            "escape" => format!(
                "{side} the level reaches the lowered outer edge and is no longer bound: a thicker or higher outer \
                 layer would hold it"
            ),
            "rounding" => format!("{side} the number format ends it: `value: shift` or a wider format helps"),
            "half_gap" => {
                format!("{side} the squared half gap becomes negative: a higher `order` may carry it further")
            }
            "formal" => {
                format!("{side} it is the series' own estimate, for the level is not bound in the field")
            }
            other => format!("{side} it ends because of: {other}"),
        };
        out.push(text);
    }
    if out.len() == 2 && formula.valid.from == -formula.valid.to && control.at == 0.0 {
        // A symmetric range needs one sentence.
        if out[0].replacen("below", "above", 1) == out[1]
            || formula.first_to_fail[0] == formula.first_to_fail[1].map(|x| -x)
        {
            out.remove(0);
            if let Some(text) = out.first_mut() {
                *text = text.replacen("above", "on both sides", 1);
            }
        }
    }
    out
}

/// The explanation as text; `width` columns are there for the residual plot.
#[must_use]
pub fn text(outcome: &Outcome, width: usize) -> String {
    let mut out = headline(outcome) + "\n";
    for (formula, explanation) in outcome.formulas.iter().zip(explain(outcome)) {
        out.push('\n');
        formula_text(outcome, formula, &explanation, width, &mut out);
    }
    out
}

fn formula_text(
    outcome: &Outcome,
    formula: &FormulaOutcome,
    it: &Explanation,
    width: usize,
    out: &mut String,
) {
    let control = &outcome.control;
    let mut say = |text: String| {
        let mut rest = text.trim_end();
        while rest.chars().count() > WIDTH {
            let end = rest.char_indices().nth(WIDTH).map_or(rest.len(), |(at, _)| at);
            let Some((head, _)) = rest.get(..end).and_then(|head| head.rsplit_once(' ')) else { break };
            if head.trim().is_empty() {
                break;
            }
            out.push_str(head.trim_end());
            out.push_str("\n       ");
            rest = rest.get(head.len()..).unwrap_or("");
        }
        out.push_str(rest);
        out.push('\n');
    };
    let kind = match formula.value {
        ValueKind::Absolute => "the level itself",
        ValueKind::Shift => "the shift from E0",
    };
    let at = with_unit(&short(control.at, 7), &control.unit);
    say(format!("{} ({kind}, about {} = {at})", it.formula, control.symbol));
    say("  series, with uncertainty".to_owned());
    for term in &it.series {
        if term.zero_by_symmetry {
            say(format!("    {:<3} 0, by symmetry", term.name));
        } else {
            say(format!(
                "    {:<3} {}  +- {} {}",
                term.name,
                short(term.value, 12),
                short(term.uncertainty, 1),
                if term.unit == "1" { "" } else { &term.unit }
            ));
        }
    }
    if let Form::Paired { .. } = formula.form {
        say("  closed form: mean and squared half gap".to_owned());
        for coefficient in coefficients(formula, &control.unit) {
            let value = with_unit(&short(coefficient.value, 10), &coefficient.unit);
            say(format!("    {:<18} {value}", coefficient.name));
        }
    }
    if !it.levels.is_empty() {
        let per_control = coefficient_unit("1", &control.unit, 1);
        say(format!("  levels in {}, share of b, first-order mixing in {per_control}", it.unit));
        let wide = it.levels.iter().map(|level| level.system.len()).fold(14, usize::max);
        for level in &it.levels {
            let share = level.share.map_or(String::new(), |s| format!("{} %", short(100.0 * s, 4)));
            let mixing = level.mixing.map_or(String::new(), |m| short(m, 4));
            say(format!(
                "    {:<wide$} {:>3}  {:>14}  {share:>10}  {mixing:>11}",
                level.system,
                level.level,
                short(level.energy, 8)
            ));
        }
    }
    for (system, share) in &it.direct {
        let share = short(100.0 * share, 4);
        say(format!("    {system:<14} second-order part of its Hamiltonian  {share} %"));
    }
    let total: f64 = it.error.iter().sum();
    say(format!("  largest errors in the range, {}", it.unit));
    for (name, value) in [
        ("remainder", it.error[0]),
        ("numerical", it.error[1]),
        ("written digits", it.error[2]),
        ("sum", total),
        ("tolerance", it.tolerance),
    ] {
        say(format!("    {name:<15} {}", short(value, 4)));
    }
    for output in &outcome.outputs {
        if let Some(part) = output.formulas.iter().find(|f| f.name == it.formula) {
            say(format!("    rounding in {}: {}", output.file, short(part.rounding, 3)));
        }
    }
    let end = |value: f64| with_unit(&short(value, 7), &control.unit);
    say(format!(
        "  range {} ({}) to {} ({})",
        end(it.range[0]),
        reason(&it.limited_by[0]),
        end(it.range[1]),
        reason(&it.limited_by[1])
    ));
    if matches!(formula.form, Form::Polynomial { .. }) && order(&formula.form) < 4 {
        for remainder in &it.ends {
            say(format!(
                "    at {}: remainder {} measured, {} by next orders",
                end(remainder.control),
                short(remainder.measured, 4),
                with_unit(&short(remainder.next_orders, 4), &it.unit)
            ));
        }
        let reach = |value: Option<f64>| value.map_or("not reached".to_owned(), end);
        say(format!(
            "    next orders alone reach the tolerance at {} and {}",
            reach(it.next_orders_reach[0]),
            reach(it.next_orders_reach[1])
        ));
        say(format!(
            "    tolerance is first exceeded at       {} and {}",
            reach(it.first_to_fail[0]),
            reach(it.first_to_fail[1])
        ));
    }
    for advice in &it.advice {
        for (idx, line) in wrap(advice, 74).into_iter().enumerate() {
            say(format!("  {}{line}", if idx == 0 { "- " } else { "  " }));
        }
    }
    for note in &it.notes {
        for (idx, line) in wrap(note, 74).into_iter().enumerate() {
            say(format!("  {}{line}", if idx == 0 { "note: " } else { "      " }));
        }
    }
    if let Some(picture) = plot::residual(formula, &control.unit, width) {
        out.push_str(&picture);
    }
}

/// Text in lines of at most `width` characters.
fn wrap(text: &str, width: usize) -> Vec<String> {
    let mut lines = vec![String::new()];
    for word in text.split_whitespace() {
        let full = lines
            .last()
            .is_some_and(|line| !line.is_empty() && line.chars().count() + 1 + word.chars().count() > width);
        if full {
            lines.push(String::new());
        }
        if let Some(line) = lines.last_mut() {
            if !line.is_empty() {
                line.push(' ');
            }
            line.push_str(word);
        }
    }
    lines
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::review::example;

    #[test]
    fn next_orders_of_the_series_are_summed_from_the_first_left_out() {
        let series = [5.0, 4.0, 3.0, 2.0, 1.0];
        // By hand: 2 d^3 + d^4 at d = 2 is 32; d^4 is 16; a d + ... at order 0 is 8 + 12 + 32.
        assert_eq!(beyond(&series, 2, 2.0), 32.0);
        assert_eq!(beyond(&series, 3, 2.0), 16.0);
        assert_eq!(beyond(&series, 4, 2.0), 0.0);
        assert_eq!(beyond(&series, 0, 2.0), 52.0);
    }

    /// The example's only next order is E4: it reaches the tolerance where
    /// E4 d^4 = 0.05, at d = (0.05 / E4)^(1/4) = 84.9944 (by hand).
    #[test]
    fn the_reach_of_the_next_orders_solves_their_equation() {
        let mut outcome = example::outcome();
        outcome.formulas.truncate(1);
        let it = &explain(&outcome)[0];
        let wanted = (0.05_f64 / 9.580_690_3e-10).powf(0.25);
        let found = it.next_orders_reach[1].expect("reached");
        assert!((found / wanted - 1.0).abs() < 1e-12, "{found} {wanted}");
        assert_eq!(it.next_orders_reach[0], Some(-found));
        assert!((it.ends[0].measured - it.ends[0].next_orders).abs() < 1e-9);
    }

    #[test]
    fn the_text_fits_eighty_columns_and_names_every_part() {
        let text = text(&example::outcome(), 80);
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
        for part in [
            "by symmetry",
            "99.93 %",
            "written digits",
            "next orders",
            "note:",
            "half_gap_squared 2",
            "widening `within`",
        ] {
            assert!(text.contains(part), "{part}\n{text}");
        }
        insta::assert_snapshot!(text);
    }
}
