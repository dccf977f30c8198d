//! One file per language: a [`Formula`](crate::formula) to text.
//!
//! Not here: physics.

pub mod record;

pub mod c;
pub mod circuit;
pub mod family;
pub mod header;
mod output;
pub mod rust;
mod self_check;
mod spice;
pub mod text;
mod verilog_a;

pub use output::{Circuit, outputs};
pub use self_check::self_check;

use shiftwright_runtime::double::Branch;

use crate::diagnostic::Result;
use crate::formula::{Float, Formula, Numbers};
use crate::outcome::Outcome;

/// A finished file, not yet written.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Source {
    /// File name, no folder.
    pub file: String,
    /// Whole text.
    pub text: String,
}

/// The languages of this folder that take a [`Formula`].
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Target {
    /// Rust, one file.
    Rust,
    /// C99, header and source.
    C,
}

/// The files of one output: all formulas of a run in one number format.
///
/// - `stem`: file name without its ending, which prefixes every C symbol.
///
/// # Errors
/// Only if a rule of the program itself is broken.
pub fn files(outcome: &Outcome, target: Target, stem: &str, formulas: &[Formula]) -> Result<Vec<Source>> {
    Ok(match target {
        Target::Rust => vec![rust::print(outcome, stem, formulas)?],
        Target::C => c::print(outcome, stem, formulas)?.into(),
    })
}

/// What the head comment tells of a formula.
fn entry(formula: &Formula) -> header::Entry<'_> {
    header::Entry {
        measured: &formula.measured,
        valid: &formula.valid,
        rounding: formula.rounding,
        inverse_rounding: Some(formula.inverse_rounding),
    }
}

/// Words for the number format, and how numbers are computed.
fn evaluation(formulas: &[Formula]) -> (&'static str, &'static str) {
    const FLOAT: &str = "Evaluated as c0 + d*(c1 + d*c2) with one rounding per operation and no fused multiply-add; \
                         terms that are exactly zero are left out, which changes no bit. Outside the range value and \
                         slope evaluate the same expression and promise nothing: use the checked value in control loops.";
    match formulas.first().map(|f| &f.numbers) {
        Some(Numbers::Single(_)) => ("single precision", FLOAT),
        Some(Numbers::Fixed(_)) => (
            "fixed point",
            "Integers that count steps: compare, multiply, add and shift only, with one rounding per step. Inputs outside \
             the range are held at its ends, so that nothing overflows for any input; the checked value reports them.",
        ),
        _ => ("double precision", FLOAT),
    }
}

/// The argument's name: the control's symbol in lower case unless that clashes.
fn arguments(symbol: &str) -> String {
    const TAKEN: [&str; 20] = [
        "d", "value", "slope", "low", "high", "mean", "count", "i", "x", "k", "least", "most", "rise",
        "root", "held", "search", "self", "inverse", "many", "checked",
    ];
    let lower = symbol.to_lowercase();
    let numbered = lower.len() == 2
        && lower.starts_with(['c', 'm', 'h', 'r'])
        && lower.ends_with(|c: char| c.is_ascii_digit());
    let safe = lower.starts_with(|c: char| c.is_ascii_lowercase())
        && lower.chars().all(|c| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '_')
        && !lower.ends_with('_')
        && !lower.contains("__");
    if safe && !numbered && !TAKEN.contains(&lower.as_str()) && !KEYWORDS.contains(&lower.as_str()) {
        lower
    } else {
        "control".to_owned()
    }
}

/// Words that no argument may be in Rust, C or C++.
const KEYWORDS: [&str; 111] = [
    "abstract",
    "alignas",
    "alignof",
    "and",
    "as",
    "asm",
    "async",
    "auto",
    "await",
    "become",
    "bool",
    "box",
    "break",
    "case",
    "catch",
    "char",
    "class",
    "compl",
    "const",
    "constexpr",
    "continue",
    "crate",
    "default",
    "delete",
    "do",
    "double",
    "dyn",
    "else",
    "enum",
    "explicit",
    "export",
    "extern",
    "false",
    "final",
    "float",
    "fn",
    "for",
    "friend",
    "gen",
    "goto",
    "if",
    "impl",
    "in",
    "inline",
    "int",
    "let",
    "long",
    "loop",
    "macro",
    "match",
    "mod",
    "move",
    "mut",
    "mutable",
    "namespace",
    "new",
    "noexcept",
    "not",
    "nullptr",
    "operator",
    "or",
    "override",
    "priv",
    "private",
    "protected",
    "pub",
    "public",
    "ref",
    "register",
    "reinterpret",
    "restrict",
    "return",
    "short",
    "signed",
    "sizeof",
    "static",
    "struct",
    "super",
    "switch",
    "template",
    "this",
    "throw",
    "trait",
    "true",
    "try",
    "type",
    "typedef",
    "typename",
    "typeof",
    "u8",
    "union",
    "unsafe",
    "unsigned",
    "unsized",
    "use",
    "using",
    "virtual",
    "void",
    "volatile",
    "where",
    "while",
    "xor",
    "yield",
    "f32",
    "f64",
    "i8",
    "i32",
    "i64",
    "str",
    "u32",
    "linux",
];

/// Cuts of the range that need a constant of their own, by rising position.
fn cuts(float: &Float) -> Vec<(String, f64)> {
    let b = &float.branches;
    let mut ends: Vec<f64> =
        [Some(b.main), b.below, b.above].into_iter().flatten().flat_map(|b| [b.low, b.high]).collect();
    ends.sort_by(f64::total_cmp);
    ends.dedup();
    ends.retain(|x| *x != float.from && *x != float.to && *x != float.at);
    ends.into_iter().enumerate().map(|(i, x)| (format!("CUT_{}", i + 1), x)).collect()
}

/// Name of the constant that holds a branch's end.
fn end(float: &Float, x: f64) -> String {
    if x == float.from {
        "FROM".to_owned()
    } else if x == float.to {
        "TO".to_owned()
    } else if x == float.at {
        "AT".to_owned()
    } else {
        cuts(float).into_iter().find(|(_, cut)| *cut == x).map_or_else(|| "AT".to_owned(), |(name, _)| name)
    }
}

/// The inverses that a file has: function, words, branch, and whether it is
/// that of `inverse` once more.
fn branches(float: &Float) -> Vec<(&'static str, &'static str, Branch, bool)> {
    let b = &float.branches;
    let mut out = vec![("inverse", "that holds the operating point", b.main, false)];
    let below = "that ends at the turning point nearest the operating point";
    let above = "that begins at the turning point nearest the operating point";
    for (name, words, branch) in [("inverse_below", below, b.below), ("inverse_above", above, b.above)] {
        if let Some(branch) = branch {
            out.push((name, words, branch, branch == b.main));
        }
    }
    out
}
