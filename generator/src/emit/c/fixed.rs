//! C files of fixed-point formulas.

use super::*;
use crate::formula::{Fixed, FixedForm, Ladder};
use shiftwright_runtime::fixed::Rung;

/// An integer constant of a width; the most negative number has no literal.
fn whole(value: i64, wide: bool) -> String {
    if !wide {
        return match value {
            -2_147_483_648 => "-2147483647 - 1".to_owned(),
            _ => value.to_string(),
        };
    }
    if value == i64::MIN {
        "-INT64_C(9223372036854775807) - 1".to_owned()
    } else if value < 0 {
        format!("-INT64_C({})", value.unsigned_abs())
    } else {
        format!("INT64_C({value})")
    }
}

/// Template values of a file.
pub(super) fn context(
    outcome: &Outcome,
    stem: &str,
    formulas: &[Formula],
    header: &[String],
) -> Result<Value> {
    let argument = arguments(&outcome.control.symbol);
    let mut list = Vec::new();
    let (mut root, mut shift32, mut shift64) = (false, false, false);
    for formula in formulas {
        let Numbers::Fixed(fixed) = &formula.numbers else { continue };
        root |= fixed.roots();
        let one = one(outcome, stem, formula, fixed, &argument);
        shift32 |= one.text.contains("_down32");
        shift64 |= one.text.contains("_down64");
        list.push(one.value);
    }
    Ok(context! {
        header => header.to_vec(),
        stem,
        upper => stem.to_uppercase(),
        sha256 => outcome.spec.sha256.clone(),
        argument,
        root, shift32, shift64,
        formulas => list,
    })
}

struct One {
    value: Value,
    /// All statements, to see which helpers they call.
    text: String,
}

fn one(outcome: &Outcome, stem: &str, formula: &Formula, fixed: &Fixed, argument: &str) -> One {
    let name = &formula.measured.name;
    let lower = format!("{stem}_{name}");
    let upper = lower.to_uppercase();
    let (value, slope) = bodies(fixed, stem, &lower, &upper, argument);
    let inverses: Vec<Value> = fixed
        .branches()
        .into_iter()
        .map(|(name, words, branch, same)| {
            let end = |x: i64| {
                if x == fixed.from {
                    format!("{upper}_FROM")
                } else if x == fixed.to {
                    format!("{upper}_TO")
                } else {
                    whole(x, false)
                }
            };
            context! {
                name, words, same,
                low => end(branch.low),
                high => end(branch.high),
                rising => u8::from(branch.rising),
                way => if branch.rising { "rises" } else { "falls" },
            }
        })
        .collect();
    let text = format!("{}{}", value.concat(), slope.concat());
    let value = context! {
        name,
        stem => lower,
        upper,
        unit => unit_name(&formula.measured.unit),
        control_unit => unit_name(&outcome.control.unit),
        value_step => real(fixed.value_step),
        control_step => real(fixed.control_step),
        x => format!("int{}_t", fixed.control_bits),
        y => format!("int{}_t", fixed.value_bits),
        // 32-bit counts may lie further apart than their own type holds.
        work => if fixed.control_bits == 32 { "int64_t" } else { "int32_t" },
        top => whole(1 << (fixed.control_bits - 1), fixed.control_bits == 32),
        constants => constants(outcome, formula, fixed),
        value, slope, inverses,
    };
    One { value, text }
}

fn constants(outcome: &Outcome, formula: &Formula, fixed: &Fixed) -> Vec<Value> {
    let (unit, control) = (unit_name(&formula.measured.unit), unit_name(&outcome.control.unit));
    let mut out = Vec::new();
    let mut push = |name: String, about: String, value: String| out.push(context! { name, about, value });
    let mut plain = |name: &str, about: String, value: String| push(name.to_owned(), about, value);
    plain("FROM", "Lower end of the range, a count.".into(), whole(fixed.from, false));
    plain("TO", "Upper end of the range, a count.".into(), whole(fixed.to, false));
    plain("AT", "Operating point in counts; it is folded into the coefficients.".into(), real(fixed.at));
    plain("E0", "Level at the operating point, a count.".into(), whole(fixed.e0, true));
    plain("ROUNDING", "Bound on the rounding of the value, in counts.".into(), whole(fixed.rounding, true));
    plain("CONTROL_STEP", format!("One count of the control, in {control}."), real(fixed.control_step));
    plain("VALUE_STEP", format!("One count of the value, in {unit}."), real(fixed.value_step));
    plain("PHYSICAL_FROM", format!("Lower end of the range, in {control}."), real(formula.valid.from));
    plain("PHYSICAL_TO", format!("Upper end of the range, in {control}."), real(formula.valid.to));
    plain(
        "PHYSICAL_E0",
        format!("Level at the operating point, in {unit}."),
        real(formula.measured.series[0]),
    );
    plain("ORIGIN", "Count from which the polynomials are taken.".into(), whole(fixed.origin, fixed.wide));
    let mut ladder = |prefix: &str, what: &str, ladder: &Ladder, wide: bool| {
        for (k, rung) in ladder.rungs.iter().enumerate() {
            push(
                format!("{prefix}{k}"),
                format!("{what}: coefficient of count^{k}, scaled by the shifts."),
                whole(rung.constant, wide),
            );
            if rung.shift > 0 {
                let lift = 1 << if wide { 62 } else { 30 };
                push(
                    format!("{prefix}{k}_BEFORE"),
                    "Added before the shift: half a unit, a fraction of the coefficient, and what keeps the sum positive."
                        .into(),
                    whole(rung.before + lift, wide),
                );
                push(
                    format!("{prefix}{k}_LIFT"),
                    "Taken off after the shift: what kept the sum positive.".into(),
                    whole(lift >> rung.shift, wide),
                );
                push(format!("{prefix}{k}_SHIFT"), "Bits shifted out.".into(), format!("{}U", rung.shift));
            }
        }
    };
    match &fixed.form {
        FixedForm::Polynomial { value, slope } => {
            ladder("C", "Value", value, fixed.wide);
            ladder("SLOPE_C", "Slope times 2^16", slope, true);
        }
        FixedForm::Paired { mean, mean_slope, half_gap_squared, half_gap_squared_slope, upper } => {
            ladder("MEAN_", "Mean", mean, true);
            ladder("HALF_GAP_SQUARED_", "Squared half gap", half_gap_squared, true);
            ladder("MEAN_SLOPE_", "Slope of the mean times 2^16", mean_slope, true);
            ladder(
                "SQUARED_SLOPE_",
                "Slope of the squared half gap times 2^16",
                half_gap_squared_slope,
                true,
            );
            push(
                "SIGN".into(),
                "Sign of the half gap.".into(),
                if *upper { "1".into() } else { "-1".into() },
            );
        }
    }
    out
}

/// Statements that climb a ladder into `name`.
fn climb(ladder: &Ladder, name: &str, stem: &str, prefix: &str, wide: bool) -> Vec<String> {
    let ty = if wide { "int64_t" } else { "int32_t" };
    let bits = if wide { 64 } else { 32 };
    let used =
        ladder.rungs.iter().rposition(|r| *r != Rung { constant: 0, before: 0, shift: 0 }).unwrap_or(0);
    let mut out = vec![format!("{ty} {name} = {prefix}{used};")];
    for (k, rung) in ladder.rungs.iter().enumerate().take(used).rev() {
        let product = format!("(k * {name})");
        let shifted = if rung.shift == 0 {
            product
        } else {
            format!(
                "({stem}_down{bits}({product} + {prefix}{k}_BEFORE, {prefix}{k}_SHIFT) - {prefix}{k}_LIFT)"
            )
        };
        out.push(if rung.constant == 0 {
            format!("{name} = {shifted};")
        } else {
            format!("{name} = {prefix}{k} + {shifted};")
        });
    }
    out
}

/// Statements of value and slope. Declarations come first, as in older C.
fn bodies(fixed: &Fixed, stem: &str, lower: &str, upper: &str, argument: &str) -> (Vec<String>, Vec<String>) {
    let offset = |wide: bool| {
        let ty = if wide { "int64_t" } else { "int32_t" };
        let held = format!("const {ty} k = ({ty}){lower}_held({argument})");
        if fixed.origin == 0 { format!("{held};") } else { format!("{held} - ({ty}){upper}_ORIGIN;") }
    };
    let y = format!("int{}_t", fixed.value_bits);
    let prefix = |word: &str| format!("{upper}_{word}");
    // All declarations of a list of ladders, then all their steps.
    let climbs = |wide: bool, ladders: &[(&Ladder, &str, &str)]| {
        let all: Vec<Vec<String>> =
            ladders.iter().map(|(l, name, word)| climb(l, name, stem, &prefix(word), wide)).collect();
        let mut out = vec![offset(wide)];
        out.extend(all.iter().filter_map(|lines| lines.first().cloned()));
        out.push(String::new());
        out.extend(all.iter().flat_map(|lines| lines.iter().skip(1).cloned()));
        if all.iter().all(|lines| lines.len() == 1) {
            out.push("(void)k;".to_owned());
        }
        out
    };
    match &fixed.form {
        FixedForm::Polynomial { value, slope } => {
            let mut a = climbs(fixed.wide, &[(value, "sum", "C")]);
            a.push(format!("return ({y})sum;"));
            let mut b = climbs(true, &[(slope, "sum", "SLOPE_C")]);
            b.push("return sum;".to_owned());
            (a, b)
        }
        FixedForm::Paired { mean, mean_slope, half_gap_squared, half_gap_squared_slope, upper } => {
            let sign = if *upper { '+' } else { '-' };
            let mut a =
                climbs(true, &[(mean, "mean", "MEAN_"), (half_gap_squared, "squared", "HALF_GAP_SQUARED_")]);
            a.push(format!("mean {sign}= {stem}_root(squared);"));
            a.push(format!("return ({y})mean;"));
            let mut b = climbs(
                true,
                &[
                    (mean_slope, "slope", "MEAN_SLOPE_"),
                    (half_gap_squared, "squared", "HALF_GAP_SQUARED_"),
                    (half_gap_squared_slope, "rise", "SQUARED_SLOPE_"),
                ],
            );
            let (down, up) = if *upper { ("-=", "+=") } else { ("+=", "-=") };
            b.extend([
                format!("squared = {stem}_root(squared);"),
                "/* Where the gap is closed it is the slope of the mean. */".to_owned(),
                "if (squared > 0) {".to_owned(),
                "    if (rise < 0) {".to_owned(),
                format!("        slope {down} {stem}_quotient((uint64_t)(-rise), 2U * (uint64_t)squared);"),
                "    } else {".to_owned(),
                format!("        slope {up} {stem}_quotient((uint64_t)rise, 2U * (uint64_t)squared);"),
                "    }".to_owned(),
                "}".to_owned(),
                "return slope;".to_owned(),
            ]);
            (a, b)
        }
    }
}
