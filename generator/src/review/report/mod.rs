//! One self-contained page about a run: pictures first, then tables.
//!
//! In: an outcome, pictures of its systems, and possibly an older outcome to
//! lay under it. Out: HTML without a single outside reference.
//!
//! Not here: solving; reading records.

mod figure;

use minijinja::syntax::SyntaxConfig;
use minijinja::value::Serde;
use minijinja::{AutoEscape, Environment, UndefinedBehavior};
use serde::Serialize;

use crate::diagnostic::{Error, Result};
use crate::form::Form;
use crate::outcome::{FormulaOutcome, Outcome, Picture, block_name};

use super::compare::compare;
use super::explain::{Explanation, explain};
use super::numbers::{reason, short, with_unit};
use figure::{Bar, Figure, bars, extent};

/// Width of every figure in its own units; the page scales it.
const WIDTH: f64 = 720.0;

/// Points of a drawn curve.
const POINTS: u32 = 120;

#[derive(Serialize)]
struct Section {
    name: String,
    range: String,
    largest_error: String,
    value: String,
    residual: String,
    contributions: String,
    budget: String,
    terms: Vec<[String; 4]>,
    advice: Vec<String>,
    notes: Vec<String>,
}

#[derive(Serialize)]
struct SystemSection {
    name: String,
    picture: String,
}

#[derive(Serialize)]
struct InputRow {
    path: String,
    value: String,
    old: String,
    changed: bool,
}

/// The page.
///
/// # Errors
/// Only a broken template of the program itself.
pub fn page(outcome: &Outcome, pictures: &[Picture], old: Option<&Outcome>) -> Result<String> {
    let explanations = explain(outcome);
    let formulas: Vec<Section> = outcome
        .formulas
        .iter()
        .zip(&explanations)
        .map(|(formula, explanation)| section(outcome, formula, explanation, old))
        .collect();
    let systems: Vec<SystemSection> = pictures
        .iter()
        .map(|picture| SystemSection { name: picture.system.clone(), picture: stack(picture) })
        .collect();
    let comparison = old.map(|old| compare(old, outcome));
    let inputs: Vec<InputRow> = outcome
        .inputs
        .iter()
        .map(|input| {
            let show = |value: f64, unit: &str| with_unit(&format!("{value}"), unit);
            let before = old.and_then(|old| old.inputs.iter().find(|o| o.path == input.path));
            InputRow {
                path: input.path.clone(),
                value: show(input.value, &input.unit),
                old: before.map_or(String::new(), |b| show(b.value, &b.unit)),
                changed: old.is_some() && before != Some(input),
            }
        })
        .collect();
    let files: Vec<[String; 2]> =
        outcome.outputs.iter().map(|o| [o.file.clone(), o.sha256.clone()]).collect();
    let mut environment = Environment::new();
    environment.set_undefined_behavior(UndefinedBehavior::Strict);
    let syntax = SyntaxConfig::builder()
        .trim_blocks(true)
        .lstrip_blocks(true)
        .keep_trailing_newline(true)
        .build()
        .map_err(Error::internal)?;
    environment.set_syntax(syntax);
    environment.set_auto_escape_callback(|_| AutoEscape::Html);
    environment
        .add_template("report.html", include_str!("../../../../templates/report.html"))
        .map_err(Error::internal)?;
    let template = environment.get_template("report.html").map_err(Error::internal)?;
    template
        .render(Serde(serde_json::json!({
            "name": outcome.name,
            "summary": outcome.summary,
            "spec": outcome.spec.file,
            "digest": outcome.spec.sha256,
            "version": env!("CARGO_PKG_VERSION"),
            "formulas": formulas,
            "systems": systems,
            "inputs": inputs,
            "files": files,
            "overlaid": old.is_some(),
            "moves": comparison.map(|c| c.lines()).unwrap_or_default(),
            "warnings": outcome.warnings.iter().map(|w| w.text.clone()).collect::<Vec<_>>(),
        })))
        .map_err(Error::internal)
}

fn section(outcome: &Outcome, formula: &FormulaOutcome, it: &Explanation, old: Option<&Outcome>) -> Section {
    let control = &outcome.control;
    let before = old.and_then(|old| {
        let same = |f: &&FormulaOutcome| f.name == formula.name && f.unit == formula.unit;
        (old.control.unit == control.unit).then(|| old.formulas.iter().find(same)).flatten().map(|f| (old, f))
    });
    let end = |value: f64| with_unit(&short(value, 7), &control.unit);
    Section {
        name: formula.name.clone(),
        range: format!(
            "{} ({}) to {} ({})",
            end(formula.valid.from),
            reason(&formula.valid.limited_by[0]),
            end(formula.valid.to),
            reason(&formula.valid.limited_by[1])
        ),
        largest_error: format!(
            "{} of {}",
            short(formula.error.iter().sum(), 3),
            with_unit(&short(formula.tolerance, 3), &formula.unit)
        ),
        value: value_figure(outcome, formula, before),
        residual: residual_figure(outcome, formula, before),
        contributions: contribution_figure(formula),
        budget: budget_figure(outcome, formula),
        terms: it
            .series
            .iter()
            .map(|term| {
                let value =
                    if term.zero_by_symmetry { "0 by symmetry".to_owned() } else { short(term.value, 12) };
                [term.name.clone(), value, short(term.uncertainty, 2), term.unit.clone()]
            })
            .collect(),
        advice: it.advice.clone(),
        notes: it.notes.clone(),
    }
}

/// Control values over the range, with a little room on both sides.
fn control_extent(outcome: &Outcome, formula: &FormulaOutcome) -> (f64, f64) {
    let within = outcome.control.within;
    let (low, high) = (within.0.min(formula.valid.from), within.1.max(formula.valid.to));
    let room = 0.04 * (high - low);
    (low - room, high + room)
}

fn curve(form: &Form, at: f64, x: (f64, f64)) -> Vec<(f64, f64)> {
    (0..=POINTS)
        .map(|k| {
            let control = x.0 + (x.1 - x.0) * f64::from(k) / f64::from(POINTS);
            (control, form.value(control - at))
        })
        .collect()
}

fn axis(outcome: &Outcome) -> String {
    match outcome.control.unit.as_str() {
        "1" => outcome.control.symbol.clone(),
        unit => format!("{} ({unit})", outcome.control.symbol),
    }
}

fn value_axis(formula: &FormulaOutcome) -> String {
    match formula.unit.as_str() {
        "1" => formula.name.clone(),
        unit => format!("{} ({unit})", formula.name),
    }
}

fn value_figure(
    outcome: &Outcome,
    formula: &FormulaOutcome,
    before: Option<(&Outcome, &FormulaOutcome)>,
) -> String {
    let at = outcome.control.at;
    let x = control_extent(outcome, formula);
    let line = curve(&formula.form, at, x);
    let older = before.map(|(old, f)| curve(&f.form, old.control.at, x)).unwrap_or_default();
    let y =
        extent(line.iter().chain(&older).map(|p| p.1).chain(formula.samples.iter().map(|s| s.exact)), 0.08);
    let mut figure = Figure::new(WIDTH, 300.0, x, y);
    figure.area("inside", (formula.valid.from, formula.valid.to), y);
    if before.is_some() {
        figure.line("old", older.into_iter());
    }
    figure.line("new", line.into_iter());
    figure.markers("exact", formula.samples.iter().map(|s| (s.control, s.exact)));
    let title = format!(
        "{}: formula as a line, exact level as circles, over the control; the stated range is shaded",
        formula.name
    );
    figure.finish(&format!("value-{}", formula.name), &title, &axis(outcome), &value_axis(formula))
}

fn residual_figure(
    outcome: &Outcome,
    formula: &FormulaOutcome,
    before: Option<(&Outcome, &FormulaOutcome)>,
) -> String {
    let x = control_extent(outcome, formula);
    let t = formula.tolerance;
    let residuals =
        |f: &FormulaOutcome| f.samples.iter().map(|s| (s.control, s.exact - s.formula)).collect::<Vec<_>>();
    let new = residuals(formula);
    let old = before.map(|(_, f)| residuals(f)).unwrap_or_default();
    let y = extent(new.iter().chain(&old).map(|p| p.1).chain([-1.25 * t, 1.25 * t]), 0.02);
    let mut figure = Figure::new(WIDTH, 280.0, x, y);
    figure.area("band", x, (-t, t));
    figure.line("limit", [(x.0, t), (x.1, t)].into_iter());
    figure.line("limit", [(x.0, -t), (x.1, -t)].into_iter());
    let label = |k: usize, side: &str| format!("{side}: {}", reason(&formula.valid.limited_by[k]));
    figure.upright("end", formula.valid.from, &label(0, "from"), false);
    figure.upright("end", formula.valid.to, &label(1, "to"), true);
    if before.is_some() {
        figure.line("old", old.into_iter());
    }
    figure.line("new", new.iter().copied());
    figure.markers("exact", new.iter().copied());
    let tolerance = with_unit(&short(t, 3), &formula.unit);
    figure.text(x.0 + 0.5 * (x.1 - x.0), -t, "middle", &format!("tolerance {tolerance}"));
    let title = format!(
        "{}: exact level minus formula over the control, inside a band of plus and minus {tolerance}",
        formula.name
    );
    let y_label = match formula.unit.as_str() {
        "1" => "exact - formula".to_owned(),
        unit => format!("exact - formula ({unit})"),
    };
    figure.finish(&format!("residual-{}", formula.name), &title, &axis(outcome), &y_label)
}

fn contribution_figure(formula: &FormulaOutcome) -> String {
    if formula.contributions.is_empty() {
        return String::new();
    }
    let largest = formula.contributions.iter().fold(1e-300, |m: f64, c| m.max(c.share.abs()));
    let list: Vec<Bar> = formula
        .contributions
        .iter()
        .map(|part| Bar {
            label: match part.level {
                Some(level) => format!("{} level {level}", block_name(&part.system, &part.block)),
                None => format!("{} direct", part.system),
            },
            length: part.share / largest,
            value: format!("{} %", short(100.0 * part.share, 4)),
        })
        .collect();
    let title = format!("{}: share of each state in the second-order coefficient", formula.name);
    bars(&format!("contributions-{}", formula.name), &title, WIDTH, &list, None)
}

/// Error parts on a logarithmic scale that ends a decade above the tolerance.
fn budget_figure(outcome: &Outcome, formula: &FormulaOutcome) -> String {
    let mut parts = vec![
        ("remainder".to_owned(), formula.error[0]),
        ("numerical".to_owned(), formula.error[1]),
        ("written digits".to_owned(), formula.error[2]),
    ];
    for output in &outcome.outputs {
        if let Some(part) = output.formulas.iter().find(|f| f.name == formula.name) {
            let label = match &output.number {
                Some(number) => format!("rounding, {} {number}", output.language),
                None => format!("rounding, {}", output.language),
            };
            if !parts.iter().any(|(other, _)| *other == label) {
                parts.push((label, part.rounding));
            }
        }
    }
    let decade = |value: f64| libm::log10(value.max(1e-300));
    let high = decade(formula.tolerance) + 1.0;
    let low = parts
        .iter()
        .map(|(_, value)| *value)
        .filter(|value| *value > 0.0)
        .fold(high - 6.0, |m, value| m.min(decade(value) - 1.0));
    let share = |value: f64| if value > 0.0 { (decade(value) - low) / (high - low) } else { 0.0 };
    let list: Vec<Bar> = parts
        .into_iter()
        .map(|(label, value)| Bar {
            label,
            length: share(value),
            value: with_unit(&short(value, 2), &formula.unit),
        })
        .collect();
    let title = format!("{}: parts of the error on a logarithmic scale, beside the tolerance", formula.name);
    let mark = Some((share(formula.tolerance), "tolerance"));
    bars(&format!("budget-{}", formula.name), &title, WIDTH, &list, mark)
}

/// Edges at both ends of the range and at the operating point, envelopes on their levels.
fn stack(picture: &Picture) -> String {
    let x = extent(picture.position.iter().copied(), 0.02);
    let edges = picture.edges.iter().flatten().copied();
    let levels = picture.envelopes.iter().map(|e| e.energy);
    let y = extent(edges.chain(levels), 0.12);
    let mut figure = Figure::new(WIDTH, 340.0, x, y);
    let points =
        |edge: &[f64]| picture.position.iter().copied().zip(edge.iter().copied()).collect::<Vec<_>>();
    let [below, at, above] = &picture.edges;
    for (class, edge) in [("tilt-below", below), ("tilt-above", above), ("edge", at)] {
        figure.line(class, points(edge).into_iter());
    }
    for envelope in &picture.envelopes {
        let largest = envelope.amplitude.iter().fold(1e-300, |m: f64, a| m.max(a.abs()));
        let scale = 0.11 * (y.1 - y.0) / largest;
        let ends = [(x.0, envelope.energy), (x.1, envelope.energy)];
        figure.line("level", ends.into_iter());
        let drawn: Vec<f64> = envelope.amplitude.iter().map(|a| envelope.energy + scale * a).collect();
        figure.line("envelope", points(&drawn).into_iter());
        figure.text(x.1, envelope.energy, "end", &format!("level {}", envelope.level));
    }
    let title = format!(
        "{}: potential edge along {} at the operating point and, tilted, at both ends of the range; \
         envelopes drawn on their levels",
        picture.system, picture.coordinate
    );
    let y_label = format!("energy ({})", picture.unit);
    figure.finish(&format!("stack-{}", picture.system), &title, &picture.coordinate, &y_label)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::outcome::Envelope;
    use crate::review::example;

    fn picture() -> Picture {
        let position: Vec<f64> = (0..=60).map(|k| f64::from(k) * 0.5 - 15.0).collect();
        let edge = |tilt: f64| {
            position.iter().map(|z| if z.abs() < 5.0 { 0.0 } else { 230.0 } + tilt * z).collect::<Vec<_>>()
        };
        Picture {
            system: "electron".to_owned(),
            coordinate: "z (nm)".to_owned(),
            unit: "meV".to_owned(),
            controls: [-60.0, 0.0, 60.0],
            edges: [edge(-6.0), edge(0.0), edge(6.0)],
            envelopes: vec![Envelope {
                level: 1,
                energy: 35.0,
                amplitude: position.iter().map(|z| (-z * z / 20.0).exp()).collect(),
            }],
            position,
        }
    }

    #[test]
    fn the_page_has_every_section_and_no_outside_reference() {
        let mut outcome = example::outcome();
        outcome.summary = "<script>alert(1)</script>".to_owned();
        let mut old = example::outcome();
        old.inputs[0].value = 8.0;
        let html = page(&outcome, &[picture()], Some(&old)).expect("renders");
        for part in [
            "stack-electron",
            "value-onset",
            "residual-line",
            "contributions-onset",
            "budget-onset",
            "class=\"changed\"",
            "class=\"old\"",
            "prefers-color-scheme: dark",
            "@media print",
        ] {
            assert!(html.contains(part), "{part}");
        }
        assert!(!html.contains("<script"));
        assert!(!html.contains("http:") && !html.contains("https:") && !html.contains("url("));
        assert_eq!(html.matches("<svg").count(), html.matches("</svg>").count());
        assert_eq!(html.matches("<svg").count(), html.matches("<title id=").count());
        if let Some(folder) = std::env::var_os("SHIFTWRIGHT_KEEP_PAGE") {
            std::fs::write(std::path::Path::new(&folder).join("report.html"), &html).expect("writes");
        }
    }
}
