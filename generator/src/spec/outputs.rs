//! Wanted files, and names that the generated code cannot have.

use super::raw;
use super::scope::Scope;
use super::tree::short;
use super::{Control, Formula, Language, Number, Output, OutputCounts, formulas};
use crate::diagnostic::Diagnostic;

/// Names that a language keeps for itself, lower case.
///
/// Sources: *The Rust Reference*, "Keywords"; ISO/IEC 9899:1999, 6.4.1, with
/// the words of C++ that a header must avoid; *Verilog-AMS Language Reference
/// Manual* 2.4, annex B (from memory, those that can be names here).
fn keywords(language: Language) -> &'static [&'static str] {
    match language {
        Language::Rust => &[
            "abstract", "as", "async", "await", "become", "box", "break", "const", "continue", "crate", "do",
            "dyn", "else", "enum", "extern", "false", "final", "fn", "for", "gen", "if", "impl", "in", "let",
            "loop", "macro", "match", "mod", "move", "mut", "override", "priv", "pub", "ref", "return",
            "self", "static", "struct", "super", "trait", "true", "try", "type", "typeof", "unsafe",
            "unsized", "use", "virtual", "where", "while", "yield",
        ],
        Language::C => &[
            "auto",
            "break",
            "case",
            "char",
            "const",
            "continue",
            "default",
            "do",
            "double",
            "else",
            "enum",
            "extern",
            "float",
            "for",
            "goto",
            "if",
            "inline",
            "int",
            "long",
            "register",
            "restrict",
            "return",
            "short",
            "signed",
            "sizeof",
            "static",
            "struct",
            "switch",
            "typedef",
            "union",
            "unsigned",
            "void",
            "volatile",
            "while",
            "class",
            "delete",
            "namespace",
            "new",
            "operator",
            "private",
            "protected",
            "public",
            "template",
            "this",
            "throw",
            "try",
            "catch",
            "typename",
            "using",
            "virtual",
        ],
        Language::VerilogA => &[
            "above",
            "abs",
            "absdelay",
            "absdelta",
            "ac_stim",
            "acos",
            "acosh",
            "aliasparam",
            "always",
            "analog",
            "analysis",
            "and",
            "asin",
            "asinh",
            "assert",
            "assign",
            "atan",
            "atan2",
            "atanh",
            "automatic",
            "begin",
            "branch",
            "buf",
            "bufif0",
            "bufif1",
            "case",
            "casex",
            "casez",
            "ceil",
            "cell",
            "cmos",
            "config",
            "connect",
            "connectmodule",
            "connectrules",
            "continuous",
            "cos",
            "cosh",
            "cross",
            "ddt",
            "ddt_nature",
            "ddx",
            "deassign",
            "default",
            "defparam",
            "design",
            "disable",
            "discipline",
            "discrete",
            "domain",
            "driver_update",
            "edge",
            "electrical",
            "else",
            "end",
            "endcase",
            "endconfig",
            "endconnectrules",
            "enddiscipline",
            "endfunction",
            "endgenerate",
            "endmodule",
            "endnature",
            "endparamset",
            "endprimitive",
            "endspecify",
            "endtable",
            "endtask",
            "event",
            "exclude",
            "exp",
            "final_step",
            "flicker_noise",
            "floor",
            "flow",
            "for",
            "force",
            "forever",
            "fork",
            "from",
            "function",
            "generate",
            "genvar",
            "ground",
            "highz0",
            "highz1",
            "hypot",
            "idt",
            "idt_nature",
            "idtmod",
            "if",
            "ifnone",
            "incdir",
            "include",
            "inf",
            "initial",
            "initial_step",
            "inout",
            "input",
            "instance",
            "integer",
            "join",
            "laplace_nd",
            "laplace_np",
            "laplace_zd",
            "laplace_zp",
            "large",
            "last_crossing",
            "liblist",
            "library",
            "limexp",
            "ln",
            "localparam",
            "log",
            "macromodule",
            "max",
            "medium",
            "merged",
            "min",
            "module",
            "nand",
            "nature",
            "negedge",
            "net_resolution",
            "nmos",
            "noise_table",
            "noise_table_log",
            "nor",
            "noshowcancelled",
            "not",
            "notif0",
            "notif1",
            "or",
            "output",
            "parameter",
            "paramset",
            "pmos",
            "posedge",
            "potential",
            "pow",
            "primitive",
            "pull0",
            "pull1",
            "pulldown",
            "pullup",
            "pulsestyle_ondetect",
            "pulsestyle_onevent",
            "rcmos",
            "real",
            "realtime",
            "reg",
            "release",
            "repeat",
            "resolveto",
            "rnmos",
            "rpmos",
            "rtran",
            "rtranif0",
            "rtranif1",
            "scalared",
            "showcancelled",
            "signed",
            "sin",
            "sinh",
            "slew",
            "small",
            "specify",
            "specparam",
            "split",
            "sqrt",
            "string",
            "strong0",
            "strong1",
            "supply0",
            "supply1",
            "table",
            "tan",
            "tanh",
            "task",
            "time",
            "timer",
            "tran",
            "tranif0",
            "tranif1",
            "transition",
            "tri",
            "tri0",
            "tri1",
            "triand",
            "trior",
            "trireg",
            "unsigned",
            "use",
            "uwire",
            "vectored",
            "wait",
            "wand",
            "weak0",
            "weak1",
            "while",
            "white_noise",
            "wire",
            "wor",
            "wreal",
            "xnor",
            "xor",
            "zi_nd",
            "zi_np",
            "zi_zd",
            "zi_zp",
        ],
        Language::Spice => &[],
    }
}

/// Names that every circuit output has already.
const PORTS: [&str; 5] = ["control", "ok", "ref", "control_scale", "value_scale"];

/// Endings of generated names after the name of a formula.
const ENDINGS: [&str; 14] = [
    "slope",
    "checked",
    "inverse",
    "inverse_below",
    "inverse_above",
    "many",
    "from",
    "to",
    "at",
    "e0",
    "c0",
    "c1",
    "c2",
    "c3",
];

pub fn outputs(
    scope: &Scope<'_>,
    raw: &raw::Spec,
    control: Option<&Control>,
    formulas: &[Formula],
) -> Vec<Output> {
    let mut out = Vec::new();
    let mut taken: Vec<(String, usize)> = Vec::new();
    let listed = raw.outputs.as_deref().filter(|list| !list.is_empty());
    match listed {
        None => {
            for language in [Language::Rust, Language::C] {
                out.push(Output {
                    language,
                    number: Some(Number::F64),
                    suffix: None,
                    counts: None,
                    place: scope.place(if raw.outputs.is_some() { "outputs" } else { "spec" }),
                });
            }
        }
        Some(list) => {
            for (index, raw_output) in list.iter().enumerate() {
                let path = format!("outputs[{index}]");
                let Some(output) = one(scope, &path, raw_output, control, formulas) else { continue };
                let name = path_of(&raw.name.0, &output);
                match taken.iter().find(|(other, _)| *other == name) {
                    Some((_, other)) => scope.problem(
                        scope
                            .wrong("same-path", &path, format!("two outputs would write `{name}`"))
                            .found(format!("the same file as output {}", other + 1))
                            .action("remove one, or give it a `suffix`"),
                    ),
                    None => taken.push((name, index)),
                }
                out.push(output);
            }
        }
    }
    names(scope, raw, &out);
    out
}

fn path_of(name: &str, output: &Output) -> String {
    let word = match output.number {
        Some(Number::F64) => "f64",
        Some(Number::F32) => "f32",
        Some(Number::Fixed) => "fixed",
        None => "",
    };
    let stem = match (&output.suffix, word) {
        (Some(suffix), _) => format!("{name}_{suffix}"),
        (None, "") => name.to_owned(),
        (None, word) => format!("{name}_{word}"),
    };
    let ending = match output.language {
        Language::Rust => "rs",
        Language::C => "c",
        Language::VerilogA => "va",
        Language::Spice => "cir",
    };
    format!("{stem}.{ending}")
}

fn one(
    scope: &Scope<'_>,
    path: &str,
    raw: &raw::Output,
    control: Option<&Control>,
    formulas: &[Formula],
) -> Option<Output> {
    let language = scope.word(
        &format!("{path}.language"),
        &raw.language,
        &[
            ("rust", Language::Rust),
            ("c", Language::C),
            ("verilog-a", Language::VerilogA),
            ("spice", Language::Spice),
        ],
    )?;
    let circuit = matches!(language, Language::VerilogA | Language::Spice);
    let number = match &raw.number {
        None if circuit => None,
        None => Some(Number::F64),
        Some(_) if circuit => {
            scope.problem(
                scope
                    .wrong("number", &format!("{path}.number"), "this language has one number format")
                    .action("remove `number`"),
            );
            return None;
        }
        Some(word) => Some(scope.word(
            &format!("{path}.number"),
            word,
            &[("f64", Number::F64), ("f32", Number::F32), ("fixed", Number::Fixed)],
        )?),
    };
    let suffix = match &raw.suffix {
        None => None,
        Some(suffix) => {
            let path = format!("{path}.suffix");
            // A suffix never begins a name, so it may begin with a digit.
            if !scope.name(&path, &format!("s{}", suffix.0), true, scope.place(&path)) {
                return None;
            }
            Some(suffix.0.clone())
        }
    };
    let counts = if number == Some(Number::Fixed) {
        Some(counts(scope, path, raw, control?, formulas)?)
    } else {
        if raw.control.is_some() || raw.value.is_some() {
            scope.problem(
                scope
                    .wrong("number", path, "only `number: fixed` counts steps")
                    .action("remove `control` and `value`, or write `number: fixed`"),
            );
            return None;
        }
        None
    };
    Some(Output { language, number, suffix, counts, place: scope.place(path) })
}

/// Widths and steps of a fixed output: its own, else those of the control and
/// of each formula.
fn counts(
    scope: &Scope<'_>,
    path: &str,
    raw: &raw::Output,
    control: &Control,
    list: &[Formula],
) -> Option<OutputCounts> {
    let of_control = match &raw.control {
        Some(count) => {
            formulas::count(scope, &format!("{path}.control"), &count.bits, &count.step, &control.unit)?
        }
        None => match &control.count {
            Some(count) => count.clone(),
            None => {
                scope.problem(
                    scope
                        .wrong("missing-key", path, "fixed point needs the control's width and step")
                        .action(format!("add `control: {{bits: 16, step: 0.01 {}}}`", control.unit.symbol)),
                );
                return None;
            }
        },
    };
    let mut values = Vec::new();
    for formula in list {
        let count = match (&raw.value, &formula.count) {
            (Some(count), _) => {
                formulas::count(scope, &format!("{path}.value"), &count.bits, &count.step, &formula.unit)?
            }
            (None, Some(count)) => count.clone(),
            (None, None) => {
                scope.problem(
                    scope
                        .wrong("missing-key", path, "fixed point needs the value's width and step")
                        .action(format!("add `value: {{bits: 32, step: 0.001 {}}}`", formula.unit.symbol)),
                );
                return None;
            }
        };
        values.push(count);
    }
    Some(OutputCounts { control: of_control, values })
}

/// Keywords, and generated names that would be the same.
fn names(scope: &Scope<'_>, raw: &raw::Spec, outputs: &[Output]) {
    let mut list: Vec<(&str, String)> = vec![(raw.name.0.as_str(), "name".to_owned())];
    list.extend(raw.formulas.0.iter().map(|(name, _)| (name.as_str(), format!("formulas.{name}"))));
    // A family's parameters are names of their own in circuits alone.
    let circuits = outputs.iter().any(|one| matches!(one.language, Language::VerilogA | Language::Spice));
    if circuits {
        list.extend(raw.family.0.iter().map(|(name, _)| (name.as_str(), format!("family.{name}"))));
    }
    for (name, path) in &list {
        let place = if path == "name" { scope.place(path) } else { scope.key_place(path) };
        for (language, word) in [
            (Language::Rust, "Rust"),
            (Language::C, "C"),
            (Language::VerilogA, "Verilog-A"),
            (Language::Spice, "SPICE"),
        ] {
            let asked = outputs.iter().any(|output| output.language == language);
            // C names of formulas begin with the stem, so only a circuit's own
            // names and Rust modules stand alone.
            let family = path.starts_with("family.");
            let alone = if family {
                language == Language::VerilogA
            } else {
                language != Language::C || path == "name"
            };
            if asked
                && PORTS.contains(name)
                && path != "name"
                && matches!(language, Language::VerilogA | Language::Spice)
            {
                scope.problem(
                    Diagnostic::new(
                        "reserved-name",
                        format!("`{name}` is a port or a parameter of every circuit"),
                    )
                    .at(Some(place.clone()))
                    .action("choose another name, or leave out that language"),
                );
            }
            if asked && alone && keywords(language).contains(name) {
                scope.problem(
                    Diagnostic::new("keyword", format!("`{name}` is a keyword of {word}"))
                        .at(Some(place.clone()))
                        .action("choose another name, or leave out that language"),
                );
            }
        }
        if path != "name" && *name == "status" {
            scope.problem(
                Diagnostic::new("reserved-name", "a formula may not be called `status`")
                    .at(Some(place.clone()))
                    .action("choose another name"),
            );
        }
    }
    let mut symbols: Vec<(String, &str, &str)> = Vec::new();
    for (name, _) in &raw.formulas.0 {
        symbols.push((name.to_ascii_lowercase(), name, ""));
        for ending in ENDINGS {
            symbols.push((format!("{name}_{ending}").to_ascii_lowercase(), name, ending));
        }
        for (parameter, _) in &raw.family.0 {
            symbols.push((format!("{name}_slope_{parameter}").to_ascii_lowercase(), name, "slope_"));
        }
    }
    symbols.sort();
    for pair in symbols.windows(2) {
        if let [(one, a, ending), (other, b, other_ending)] = pair
            && one == other
            && a != b
        {
            scope.problem(
                Diagnostic::new("name-clash", format!("two generated names would be `{one}`"))
                    .at(Some(scope.key_place(&format!("formulas.{b}"))))
                    .found(format!("`{}` from `{a}` {ending}, and from `{b}` {other_ending}", short(one)))
                    .action("rename one of the formulas"),
            );
        }
    }
}
