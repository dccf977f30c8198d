//! C99: a header and a source.

use minijinja::syntax::SyntaxConfig;
use minijinja::{Environment, UndefinedBehavior, Value, context};

use super::header::{self, Entry};
use super::text::{coefficient_unit, real, real_single, unit_name};
use super::{Source, arguments, cuts, end, evaluation};
use crate::diagnostic::{Error, Result};
use crate::formula::{Expr, Float, FloatForm, Formula, Numbers, horner, horner_slope};
use crate::outcome::Outcome;

mod fixed;

/// Header and source.
///
/// # Errors
/// Only if a rule of the program itself is broken: a template does not fit.
pub fn print(outcome: &Outcome, stem: &str, formulas: &[Formula]) -> Result<[Source; 2]> {
    let entries: Vec<Entry<'_>> = formulas.iter().map(super::entry).collect();
    let (words, sentence) = evaluation(formulas);
    let header = header::lines(outcome, stem, words, sentence, &entries);
    let fixed = formulas.iter().any(|f| matches!(f.numbers, Numbers::Fixed(_)));
    let (context, templates) = if fixed {
        let templates =
            [include_str!("../../../templates/fixed.h"), include_str!("../../../templates/fixed.c")];
        (fixed::context(outcome, stem, formulas, &header)?, templates)
    } else {
        let templates =
            [include_str!("../../../templates/float.h"), include_str!("../../../templates/float.c")];
        (float_context(outcome, stem, formulas, &header)?, templates)
    };
    let [h, c] = templates.map(|template| fill(template, &context));
    Ok([Source { file: format!("{stem}.h"), text: h? }, Source { file: format!("{stem}.c"), text: c? }])
}

/// Fills a template; an unknown name in it is an error.
pub(super) fn fill(template: &str, context: &Value) -> Result<String> {
    let mut environment = Environment::new();
    let syntax = SyntaxConfig::builder()
        .trim_blocks(true)
        .lstrip_blocks(true)
        .keep_trailing_newline(true)
        .build()
        .map_err(Error::internal)?;
    environment.set_syntax(syntax);
    environment.set_undefined_behavior(UndefinedBehavior::Strict);
    environment.render_str(template, context).map_err(Error::internal)
}

/// A literal with its suffix; negative ones carry their sign.
fn number(value: f64, wide: bool) -> String {
    if wide { real(value) } else { format!("{}f", real_single(value)) }
}

fn float_context(outcome: &Outcome, stem: &str, formulas: &[Formula], header: &[String]) -> Result<Value> {
    let wide = !formulas.iter().any(|f| matches!(f.numbers, Numbers::Single(_)));
    let argument = arguments(&outcome.control.symbol);
    let mut root = false;
    let mut list = Vec::new();
    for formula in formulas {
        let (Numbers::Double(float) | Numbers::Single(float)) = &formula.numbers else { continue };
        root |= float.roots();
        list.push(one(outcome, stem, formula, float, wide, &argument));
    }
    Ok(context! {
        header => header.to_vec(),
        stem,
        upper => stem.to_uppercase(),
        sha256 => outcome.spec.sha256.clone(),
        type => if wide { "double" } else { "float" },
        bits => if wide { "uint64_t" } else { "uint32_t" },
        fraction => if wide { 52 } else { 23 },
        bias => if wide { 1023 } else { 127 },
        infinite => if wide { "0x7ff0000000000000U" } else { "0x7f800000U" },
        zero => if wide { "0.0" } else { "0.0f" },
        half => if wide { "0.5" } else { "0.5f" },
        halvings => if wide {
            shiftwright_runtime::double::BISECTIONS
        } else {
            shiftwright_runtime::single::BISECTIONS
        },
        newton => shiftwright_runtime::double::NEWTON_STEPS,
        argument,
        root,
        formulas => list,
    })
}

/// Names of a formula's constants by rising power.
fn names(prefix: &str, word: &str, count: usize) -> Vec<String> {
    (0..count).map(|k| format!("{prefix}_{word}{k}")).collect()
}

fn one(outcome: &Outcome, stem: &str, formula: &Formula, float: &Float, wide: bool, argument: &str) -> Value {
    let name = &formula.measured.name;
    let lower = format!("{stem}_{name}");
    let upper = lower.to_uppercase();
    let inverses: Vec<Value> = super::branches(float)
        .into_iter()
        .map(|(name, words, branch, same)| {
            let end = |x: f64| format!("{upper}_{}", end(float, x));
            let (low, high) = (end(branch.low), end(branch.high));
            context! {
                name, words, same, low, high,
                rising => u8::from(branch.rising),
                way => if branch.rising { "rises" } else { "falls" },
            }
        })
        .collect();
    let (value, slope) = bodies(float, stem, &upper, argument, wide);
    let solve = solve(float, stem, &lower, &upper, wide);
    context! {
        name,
        stem => lower,
        solve,
        unit => unit_name(&formula.measured.unit),
        upper,
        constants => constants(outcome, formula, float, wide),
        value,
        slope,
        searches => float.searches(),
        inverses,
    }
}

fn constants(outcome: &Outcome, formula: &Formula, float: &Float, wide: bool) -> Vec<Value> {
    let (unit, control) = (&formula.measured.unit, &outcome.control.unit);
    let (unit_words, control_words) = (unit_name(unit), unit_name(control));
    let mut out = Vec::new();
    let mut push = |name: &str, about: String, value: String| {
        out.push(context! { name, about, value });
    };
    push("FROM", format!("Lower end of the range, in {control_words}."), number(float.from, wide));
    push("TO", format!("Upper end of the range, in {control_words}."), number(float.to, wide));
    push("AT", format!("Operating point, in {control_words}."), number(float.at, wide));
    push("E0", format!("Level at the operating point, in {unit_words}, a double."), number(float.e0, true));
    push(
        "ROUNDING",
        format!("Bound on the rounding of the value, in {unit_words}."),
        number(float.rounding, wide),
    );
    if !wide {
        push(
            "PHYSICAL_FROM",
            "Lower end of the range as a double.".to_owned(),
            number(formula.valid.from, true),
        );
        push("PHYSICAL_TO", "Upper end of the range as a double.".to_owned(), number(formula.valid.to, true));
    }
    match &float.form {
        FloatForm::Polynomial(c) => {
            for (k, value) in c.iter().enumerate() {
                let about = format!("Coefficient of d^{k}, in {}.", coefficient_unit(unit, control, k));
                push(&format!("C{k}"), about, number(*value, wide));
            }
        }
        FloatForm::Paired { mean, half_gap_squared, upper } => {
            let squared = if unit == "1" { "1".to_owned() } else { format!("{unit}^2") };
            for (k, value) in mean.iter().enumerate() {
                let about = format!("Mean: coefficient of d^{k}, in {}.", coefficient_unit(unit, control, k));
                push(&format!("MEAN_{k}"), about, number(*value, wide));
            }
            for (k, value) in half_gap_squared.iter().enumerate() {
                let about = format!(
                    "Squared half gap: coefficient of d^{k}, in {}.",
                    coefficient_unit(&squared, control, k)
                );
                push(&format!("HALF_GAP_SQUARED_{k}"), about, number(*value, wide));
            }
            push("SIGN", "Sign of the half gap.".to_owned(), number(if *upper { 1.0 } else { -1.0 }, wide));
        }
    }
    for (name, value) in cuts(float) {
        push(&name, format!("A zero of the slope, in {control_words}."), number(value, wide));
    }
    out
}

fn whole(wide: bool) -> impl Fn(u32) -> String {
    move |n| if wide { format!("{n}.0") } else { format!("{n}.0f") }
}

/// Statements of value and slope.
fn bodies(float: &Float, stem: &str, upper: &str, argument: &str, wide: bool) -> (Vec<String>, Vec<String>) {
    let ty = if wide { "double" } else { "float" };
    let print = |expr: &Option<Expr>| {
        expr.as_ref().map_or_else(|| number(0.0, wide), |e| e.print_bracketed(&whole(wide)))
    };
    let offset = |exprs: &[&Option<Expr>]| {
        if exprs.iter().any(|e| e.as_ref().is_some_and(|e| e.names().contains(&"d"))) {
            format!("const {ty} d = {argument} - {upper}_AT;")
        } else {
            format!("(void){argument};")
        }
    };
    match &float.form {
        FloatForm::Polynomial(c) => {
            let names = names(upper, "C", c.len());
            let (value, slope) = (horner(&names, c, "d"), horner_slope(&names, c, "d"));
            let body = |expr: Option<Expr>| {
                vec![offset(&[&expr]), String::new(), format!("return {};", print(&expr))]
            };
            (body(value), body(slope))
        }
        FloatForm::Paired { mean, half_gap_squared, upper: plus } => {
            let m = names(upper, "MEAN_", mean.len());
            let h = names(upper, "HALF_GAP_SQUARED_", half_gap_squared.len());
            let (m0, h0) = (horner(&m, mean, "d"), horner(&h, half_gap_squared, "d"));
            let (m1, h1) = (horner_slope(&m, mean, "d"), horner_slope(&h, half_gap_squared, "d"));
            let sign = if *plus { '+' } else { '-' };
            let two = whole(wide)(2);
            let value = vec![
                offset(&[&m0, &h0]),
                format!("const {ty} mean = {};", print(&m0)),
                format!("const {ty} half_gap_squared = {};", print(&h0)),
                String::new(),
                format!("return mean {sign} {stem}_root(half_gap_squared);"),
            ];
            let slope = vec![
                offset(&[&h0, &m1, &h1]),
                format!("const {ty} half_gap = {stem}_root({});", print(&h0)),
                format!("{ty} slope = {};", print(&m1)),
                String::new(),
                "/* Where the gap is closed it is the slope of the mean. */".to_owned(),
                format!("if (half_gap > {}) {{", number(0.0, wide)),
                format!("    const {ty} squared_slope = {};", print(&h1)),
                format!("    slope = slope {sign} (squared_slope / ({two} * half_gap));"),
                "}".to_owned(),
                "return slope;".to_owned(),
            ];
            (value, slope)
        }
    }
}

/// Statements that put the control of a value inside a stretch into `*found`.
fn solve(float: &Float, stem: &str, lower: &str, upper: &str, wide: bool) -> Vec<String> {
    let ty = if wide { "double" } else { "float" };
    let held = |x: &str| format!("*found = {stem}_held({x}, from, to);");
    let (two, four) = (whole(wide)(2), whole(wide)(4));
    match &float.form {
        FloatForm::Polynomial(c) if !float.searches() => match (float.degree(), c.as_slice()) {
            (1, _) => vec![held(&format!("{upper}_AT + ((value - {upper}_C0) / {upper}_C1)"))],
            (_, [_, c1, c2, ..]) if *c1 == 0.0 => {
                let plus = if *c2 > 0.0 { "rising != 0" } else { "rising == 0" };
                vec![
                    format!("const {ty} d = {stem}_root((value - {upper}_C0) / {upper}_C2);"),
                    held(&format!("({plus}) ? ({upper}_AT + d) : ({upper}_AT - d)")),
                ]
            }
            (_, [_, c1, ..]) => {
                let alike = if *c1 > 0.0 { "rising != 0" } else { "rising == 0" };
                vec![
                    format!("const {ty} rise = value - {upper}_C0;"),
                    format!(
                        "const {ty} root = {stem}_root(({upper}_C1 * {upper}_C1) + (({four} * {upper}_C2) * rise));"
                    ),
                    format!("const {ty} slope = (rising != 0) ? root : -root;"),
                    "/* The quotient in which nothing cancels. */".to_owned(),
                    format!("const {ty} d = ({alike}) ? (({two} * rise) / ({upper}_C1 + slope))"),
                    format!("    : ((slope - {upper}_C1) / ({two} * {upper}_C2));"),
                    held(&format!("{upper}_AT + d")),
                ]
            }
            _ => vec![held(&format!("{upper}_AT"))],
        },
        _ => vec![held(&format!("{lower}_search(value, from, to, rising)"))],
    }
}
