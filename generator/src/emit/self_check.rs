//! Optional test vectors beside a source, to be run on the target.
//!
//! Exact values are the record's samples; each must come back within the
//! tolerance, the inverse must answer at the operating point, and controls outside the
//! range must be reported.

use std::fmt::Write as _;

use super::text::{real, real_single};
use super::{Source, Target};
use crate::formula::{Formula, Numbers};

/// One formula's vectors in the words of both languages.
struct Vectors {
    /// Control, exact value in value units (or counts), allowed difference.
    rows: Vec<[String; 3]>,
    /// A control below and one above the range.
    outside: [Option<String>; 2],
    control: &'static str,
    value: &'static str,
    rust: [&'static str; 2],
    whole: bool,
}

/// `STEM_check.c` or `STEM_check.rs`.
///
/// C: `int STEM_check(void)` gives 0 if all vectors pass, else the number of the
/// first that fails. Rust: `pub fn check() -> Result<(), usize>` with the same
/// number; the module of the formulas lies beside it under the name of the stem.
#[must_use]
pub fn self_check(target: Target, stem: &str, formulas: &[Formula]) -> Source {
    let mut body = String::new();
    for formula in formulas {
        let vectors = vectors(formula);
        match target {
            Target::C => c(&mut body, stem, &formula.measured.name, &vectors),
            Target::Rust => rust(&mut body, stem, &formula.measured.name, &vectors),
        }
    }
    match target {
        Target::C => Source {
            file: format!("{stem}_check.c"),
            text: format!(
                "/* Test vectors of {stem}: exact values of the model, and statuses outside the range. */\n\
                 #include \"{stem}.h\"\n\n/* 0 if all vectors pass, else the number of the first that fails. */\n\
                 int {stem}_check(void);\n\nint {stem}_check(void)\n{{\n    int number = 0;\n\n{body}    return 0;\n}}\n"
            ),
        },
        Target::Rust => Source {
            file: format!("{stem}_check.rs"),
            text: format!(
                "// Test vectors of {stem}: exact values of the model, and statuses outside the range.\n\n\
                 use super::{stem};\n\n/// Runs all vectors.\n///\n/// # Errors\n///\n/// The number of the first that fails.\n\
                 #[allow(dead_code, clippy::unreadable_literal, clippy::too_many_lines)]\n\
                 pub fn check() -> Result<(), usize> {{\n    let mut number = 0;\n{body}    Ok(())\n}}\n"
            ),
        },
    }
}

fn vectors(formula: &Formula) -> Vectors {
    let samples = formula.measured.samples.iter();
    let inside = samples.filter(|s| s.control >= formula.valid.from && s.control <= formula.valid.to);
    let tolerance = formula.measured.tolerance;
    match &formula.numbers {
        Numbers::Double(f) => Vectors {
            rows: inside.map(|s| [real(s.control), real(s.exact), real(tolerance)]).collect(),
            outside: [Some(real(f.from.next_down())), Some(real(f.to.next_up()))],
            control: "double",
            value: "double",
            rust: ["f64", "f64"],
            whole: false,
        },
        Numbers::Single(f) => {
            // A control is rounded to the format; there the value moves by what the slope makes of it.
            let text = |x: f64| real_single(x);
            let rows = inside
                .filter(|s| f64::from(s.control as f32) >= f.from && f64::from(s.control as f32) <= f.to)
                .map(|s| [text(s.control), text(s.exact), text(1.001 * tolerance)])
                .collect();
            let below = f64::from((f.from as f32).next_down());
            let above = f64::from((f.to as f32).next_up());
            Vectors {
                rows,
                outside: [Some(text(below)), Some(text(above))],
                control: "float",
                value: "float",
                rust: ["f32", "f32"],
                whole: false,
            }
        }
        Numbers::Fixed(f) => {
            let rows = inside
                .filter(|s| {
                    // Only samples that lie on a count.
                    let n = s.control / f.control_step;
                    (n - libm::round(n)).abs() < 1e-9 * n.abs().max(1.0)
                })
                .map(|s| {
                    let n = libm::round(s.control / f.control_step);
                    let value = libm::round(s.exact / f.value_step);
                    [
                        format!("{n:.0}"),
                        format!("{value:.0}"),
                        format!("{:.0}", libm::ceil(tolerance / f.value_step) + 1.0),
                    ]
                })
                .collect();
            let (least, most) = (-(1_i64 << (f.control_bits - 1)), (1_i64 << (f.control_bits - 1)) - 1);
            let types = |bits: u32| match bits {
                8 => ("int8_t", "i8"),
                16 => ("int16_t", "i16"),
                _ => ("int32_t", "i32"),
            };
            let ((control, x), (value, y)) = (types(f.control_bits), types(f.value_bits));
            Vectors {
                rows,
                outside: [
                    (f.from > least).then(|| (f.from - 1).to_string()),
                    (f.to < most).then(|| (f.to + 1).to_string()),
                ],
                control,
                value,
                rust: [x, y],
                whole: true,
            }
        }
    }
}

fn c(body: &mut String, stem: &str, name: &str, v: &Vectors) {
    let upper = stem.to_uppercase();
    let literal = |text: &str| match v.value {
        "float" => format!("{text}f"),
        _ => text.to_owned(),
    };
    let work = if v.whole { "int64_t" } else { v.value };
    body.push_str("    {\n");
    if !v.whole {
        let _ = writeln!(body, "        {} back = 0;", v.control);
    }
    let _ = writeln!(body, "        {} value = 0;\n", v.value);
    for [control, exact, allowed] in &v.rows {
        let (control, exact, allowed) = (literal(control), literal(exact), literal(allowed));
        let _ = write!(
            body,
            "        number += 1;\n        if ({stem}_{name}_checked({control}, &value) != {upper}_OK) {{\n            return number;\n        }}\n\
             \x20       if ((({work})value - ({exact}) > {allowed}) || (({exact}) - ({work})value > {allowed})) {{\n            return number;\n        }}\n"
        );
    }
    for (status, control) in ["BELOW", "ABOVE"].iter().zip(&v.outside) {
        let Some(control) = control else { continue };
        let _ = write!(
            body,
            "        number += 1;\n        if ({stem}_{name}_checked({}, &value) != {upper}_{status}) {{\n            return number;\n        }}\n",
            literal(control)
        );
    }
    if !v.whole {
        let at = format!("{stem}_{name}").to_uppercase() + "_AT";
        let _ = write!(
            body,
            "        number += 1;\n        if ({stem}_{name}_inverse({stem}_{name}({at}), &back) != {upper}_OK) {{\n            return number;\n        }}\n"
        );
    }
    body.push_str("    }\n");
}

fn rust(body: &mut String, stem: &str, name: &str, v: &Vectors) {
    let [x, y] = v.rust;
    let list: Vec<String> = v.rows.iter().map(|[a, b, c]| format!("({a}, {b}, {c})")).collect();
    let work = if v.whole { "i64" } else { y };
    let wide = if v.whole { "i64::from(value)" } else { "value" };
    let _ = writeln!(body, "    let vectors: [({x}, {work}, {work}); {}] = [", list.len());
    for row in &list {
        let _ = writeln!(body, "        {row},");
    }
    let _ = write!(
        body,
        "    ];\n    for (control, exact, allowed) in vectors {{\n        number += 1;\n        match {stem}::{name}::checked(control) {{\n\
         \x20           Ok(value) if ({wide} - exact).abs() <= allowed => {{}}\n            _ => return Err(number),\n        }}\n    }}\n"
    );
    for (status, control) in ["Below", "Above"].iter().zip(&v.outside) {
        let Some(control) = control else { continue };
        let _ = write!(
            body,
            "    number += 1;\n    if {stem}::{name}::checked({control}) != Err({stem}::OutOfRange::{status}) {{\n        return Err(number);\n    }}\n"
        );
    }
    if !v.whole {
        let _ = write!(
            body,
            "    number += 1;\n    if {stem}::{name}::inverse({stem}::{name}::value({stem}::{name}::AT)).is_err() {{\n        return Err(number);\n    }}\n"
        );
    }
}
