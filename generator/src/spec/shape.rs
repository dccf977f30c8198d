//! Which keys stand where: unknown and missing keys, and values of the wrong
//! form, all at once.
//!
//! In: a tree. Out: every mistake of structure with its place. After this pass
//! the typed reader finds every key that it needs.

use super::tree::{Node, NodeKind, Text, short};
use crate::diagnostic::Diagnostic;
use crate::units::nearest;

/// Most messages that are told at once.
const MOST: usize = 50;

/// Form of a value.
pub enum Shape {
    /// Text or number, not empty.
    Scalar,
    /// Anything in one of these forms.
    Either(&'static [Shape]),
    /// A list of one form.
    List(&'static Shape),
    /// Exactly these keys may stand.
    Map(&'static [Field]),
    /// Any names, all of one form.
    Names(&'static Shape),
    /// A mapping whose `kind` says which keys may stand.
    Kinds(&'static [(&'static str, &'static [Field])]),
}

/// A key that may stand in a mapping.
pub struct Field {
    pub name: &'static str,
    pub required: bool,
    pub shape: Shape,
}

const fn need(name: &'static str, shape: Shape) -> Field {
    Field { name, required: true, shape }
}

const fn may(name: &'static str, shape: Shape) -> Field {
    Field { name, required: false, shape }
}

use Shape::{Either, Kinds, List, Map, Names, Scalar};

static GRADE: [Field; 2] = [need("from", Scalar), need("to", Scalar)];
static SCALAR: Shape = Scalar;
static PROFILE: [Shape; 2] = [Scalar, Map(&GRADE)];
static ALLOY: [Field; 2] = [need("alloy", Scalar), need("x", Either(&PROFILE))];
static MATERIAL: [Shape; 2] = [Scalar, Map(&ALLOY)];
/// A layer or a repeat; it holds itself.
pub static LAYER: Shape = Map(&[
    may("name", Scalar),
    may("thickness", Scalar),
    may("edge", Either(&PROFILE)),
    may("mass", Either(&PROFILE)),
    may("material", Either(&MATERIAL)),
    may("repeat", Scalar),
    may("stack", List(&LAYER)),
]);
static SHELL: Shape = Map(&[
    may("name", Scalar),
    need("thickness", Scalar),
    may("edge", Either(&PROFILE)),
    may("mass", Either(&PROFILE)),
    may("material", Either(&MATERIAL)),
]);
static SIZE: Shape = Map(&[need("size", Scalar)]);
static PART: Shape = Either(&[Scalar, Names(&SIZE)]);
static ENTRY: Shape = Either(&[Scalar, List(&SCALAR)]);
static ROW: Shape = List(&ENTRY);
static MATRIX: [Shape; 2] = [List(&ROW), Map(&[need("file", Scalar)])];
static SYSTEM: Shape = Kinds(&[
    (
        "layers",
        &[
            need("kind", Scalar),
            may("charge", Scalar),
            may("field", Scalar),
            may("origin", Scalar),
            may("ends", Scalar),
            may("carrier", Scalar),
            need("stack", List(&LAYER)),
        ],
    ),
    (
        "parts",
        &[
            need("kind", Scalar),
            need("parts", Names(&PART)),
            need("hamiltonian", Scalar),
            may("conserved", Names(&SCALAR)),
        ],
    ),
    (
        "matrix",
        &[
            need("kind", Scalar),
            need("unit", Scalar),
            need("h0", Either(&MATRIX)),
            may("h1", Either(&MATRIX)),
            may("h2", Either(&MATRIX)),
            may("h3", Either(&MATRIX)),
            may("h4", Either(&MATRIX)),
            may("h5", Either(&MATRIX)),
            may("h6", Either(&MATRIX)),
            may("h7", Either(&MATRIX)),
            may("h8", Either(&MATRIX)),
        ],
    ),
    (
        "radial",
        &[
            need("kind", Scalar),
            may("charge", Scalar),
            may("field", Scalar),
            may("ends", Scalar),
            may("carrier", Scalar),
            may("centre_charge", Scalar),
            may("permittivity", Scalar),
            need("shells", List(&SHELL)),
        ],
    ),
]);
static LEVEL: [Field; 3] = [need("system", Scalar), need("level", Scalar), may("where", Names(&SCALAR))];
static LEVEL_SHAPE: Shape = Map(&LEVEL);
static TERM: Shape = Map(&[
    may("constant", Scalar),
    may("expression", Scalar),
    may("system", Scalar),
    may("level", Scalar),
    may("where", Names(&SCALAR)),
    may("times", Scalar),
]);
static VALUE: [Shape; 2] = [Scalar, Map(&[need("bits", Scalar), need("step", Scalar), may("of", Scalar)])];
static FORMULA: Shape = Map(&[
    need("unit", Scalar),
    may("sum", List(&TERM)),
    may("overlap", List(&LEVEL_SHAPE)),
    may("form", Scalar),
    may("partner", Scalar),
    may("order", Scalar),
    may("coefficients", Scalar),
    may("value", Either(&VALUE)),
    need("tolerance", Scalar),
]);
static RANGE: Shape = Map(&GRADE);
static OUTPUT: Shape = Map(&[
    need("language", Scalar),
    may("number", Scalar),
    may("suffix", Scalar),
    may("control", Map(&[need("bits", Scalar), need("step", Scalar)])),
    may("value", Map(&[need("bits", Scalar), need("step", Scalar)])),
]);

/// The form of a spec.
pub static SPEC: Shape = Map(&[
    need("spec", Scalar),
    need("name", Scalar),
    may("summary", Scalar),
    may("constants", Names(&SCALAR)),
    may("materials", Scalar),
    may("temperature", Scalar),
    need("systems", Names(&SYSTEM)),
    need(
        "control",
        Map(&[
            need("symbol", Scalar),
            need("unit", Scalar),
            may("at", Scalar),
            need("within", List(&SCALAR)),
            may("bits", Scalar),
            may("step", Scalar),
        ]),
    ),
    need("formulas", Names(&FORMULA)),
    may("family", Names(&RANGE)),
    may("outputs", List(&OUTPUT)),
]);

static SOURCED: [Field; 2] = [need("value", Either(&NUMBERS)), may("source", Scalar)];
static NUMBERS: [Shape; 2] = [Scalar, List(&SCALAR)];
static PLAIN: [Shape; 2] = [Scalar, Map(&SOURCED)];
static BOWED: [Shape; 3] = [Scalar, List(&SCALAR), Map(&SOURCED)];
static COMPOUND: Shape = Map(&[
    may("gap", Either(&PLAIN)),
    may("varshni", Map(&[need("alpha", Either(&PLAIN)), need("beta", Either(&PLAIN))])),
    may("valence_edge", Either(&PLAIN)),
    may("split_off", Either(&PLAIN)),
    may(
        "mass",
        Map(&[
            may("electron", Either(&PLAIN)),
            may("heavy_hole", Either(&PLAIN)),
            may("light_hole", Either(&PLAIN)),
        ]),
    ),
    may("permittivity", Either(&PLAIN)),
    may("monolayer", Either(&PLAIN)),
    may("source", Scalar),
]);
static ALLOY_OF: Shape = Map(&[
    need("of", List(&SCALAR)),
    may(
        "bowing",
        Map(&[
            may("gap", Either(&BOWED)),
            may("valence_edge", Either(&BOWED)),
            may("split_off", Either(&BOWED)),
            may("permittivity", Either(&BOWED)),
            may("monolayer", Either(&BOWED)),
            may(
                "mass",
                Map(&[
                    may("electron", Either(&BOWED)),
                    may("heavy_hole", Either(&BOWED)),
                    may("light_hole", Either(&BOWED)),
                ]),
            ),
        ]),
    ),
    may("source", Scalar),
]);

/// The form of a materials file.
pub static MATERIALS: Shape = Map(&[
    need("materials", Scalar),
    may("source", Scalar),
    need("compounds", Names(&COMPOUND)),
    may("alloys", Names(&ALLOY_OF)),
]);

/// All mistakes of structure, in order of their places; at most about fifty.
pub fn check(text: &Text, shape: &Shape) -> Vec<Diagnostic> {
    let mut out = Vec::new();
    visit(text, &text.root, shape, &mut out);
    out.sort_by_key(|one| one.place.as_ref().map_or(0, |place| place.start));
    out
}

impl Shape {
    fn describe(&self) -> &'static str {
        match self {
            Scalar => "one value",
            List(_) => "a list",
            Map(_) | Names(_) | Kinds(_) => "a mapping, `key: value`",
            Either(_) => "a value",
        }
    }

    fn fits(&self, node: &Node) -> bool {
        match (self, &node.kind) {
            (Scalar, NodeKind::Scalar { .. })
            | (List(_), NodeKind::List(_))
            | (Map(_) | Names(_) | Kinds(_), NodeKind::Map { .. }) => true,
            (Either(shapes), _) => shapes.iter().any(|shape| shape.fits(node)),
            _ => false,
        }
    }
}

fn visit(text: &Text, node: &Node, shape: &Shape, out: &mut Vec<Diagnostic>) {
    if out.len() > MOST {
        return;
    }
    let shape = match shape {
        Either(shapes) => match shapes.iter().find(|shape| shape.fits(node)) {
            Some(shape) => shape,
            None => {
                let wanted: Vec<&str> = shapes.iter().map(Shape::describe).collect();
                out.push(wrong(text, node, &wanted.join(" or ")));
                return;
            }
        },
        other => other,
    };
    match (shape, &node.kind) {
        (Scalar, NodeKind::Scalar { text: value, plain }) => scalar(text, node, value, *plain, out),
        (List(item), NodeKind::List(items)) => items.iter().for_each(|node| visit(text, node, item, out)),
        (Names(value), NodeKind::Map { keys, .. }) => {
            keys.iter().for_each(|key| visit(text, &key.value, value, out));
        }
        (Map(fields), NodeKind::Map { .. }) => fields_of(text, node, fields, out),
        (Kinds(kinds), NodeKind::Map { .. }) => {
            let kind = node.get("kind");
            match kind.and_then(Node::text).and_then(|word| kinds.iter().find(|(name, _)| *name == word)) {
                Some((_, fields)) => fields_of(text, node, fields, out),
                None => {
                    let words: Vec<&str> = kinds.iter().map(|(name, _)| *name).collect();
                    let found = kind.and_then(Node::text);
                    let mut fault = match kind {
                        Some(kind) => Diagnostic::new("unknown-kind", "there is no such kind of system")
                            .at(Some(text.place(kind.span.clone())))
                            .found(format!("`{}`", short(found.unwrap_or("a list or mapping")))),
                        None => Diagnostic::new("missing-key", "`kind` is missing here")
                            .at(Some(text.place(first_line(text, node)))),
                    }
                    .expected(format!("one of {}", words.join(", ")));
                    if let Some(near) = found.and_then(|word| nearest(word, words.iter().copied())) {
                        fault = fault.action(format!("write `{near}`, if that is meant"));
                    }
                    out.push(fault);
                }
            }
        }
        _ => out.push(wrong(text, node, shape.describe())),
    }
}

fn wrong(text: &Text, node: &Node, expected: &str) -> Diagnostic {
    let found = match &node.kind {
        NodeKind::Scalar { text, .. } if text.is_empty() => "nothing".to_owned(),
        NodeKind::Scalar { text, .. } => format!("`{}`", short(text)),
        NodeKind::List(_) => "a list".to_owned(),
        NodeKind::Map { .. } => "a mapping".to_owned(),
    };
    Diagnostic::new("wrong-form", "the value has the wrong form")
        .at(Some(text.place(first_line(text, node))))
        .found(found)
        .expected(expected)
}

/// The part of a node's stretch on its first line.
pub fn first_line(text: &Text, node: &Node) -> std::ops::Range<usize> {
    let start = node.span.start;
    let local = start.saturating_sub(text.offset);
    let shown = text.text.get(local..node.span.end.saturating_sub(text.offset)).unwrap_or("");
    let length = shown.split(['\n', '\r']).next().unwrap_or("").trim_end().len();
    start..start + length
}

fn scalar(text: &Text, node: &Node, value: &str, plain: bool, out: &mut Vec<Diagnostic>) {
    let place = Some(text.place(node.span.clone()));
    if value.trim().is_empty() || (plain && matches!(value, "~" | "null" | "Null" | "NULL")) {
        out.push(
            Diagnostic::new("no-value", "there is no value here")
                .at(place)
                .action("write a value, or remove the key"),
        );
        return;
    }
    let word = value.trim_start_matches(['+', '-']).to_ascii_lowercase();
    let infinite = matches!(word.as_str(), ".inf" | ".nan")
        || (value.bytes().all(|b| b.is_ascii_digit() || b"+-.eE".contains(&b))
            && value.parse::<f64>().is_ok_and(|number| !number.is_finite()));
    if infinite {
        out.push(
            Diagnostic::new("not-finite", "this is not a finite number of double precision")
                .at(place)
                .found(format!("`{}`", short(value)))
                .expected("a number of size at most 1e308"),
        );
    }
}

fn fields_of(text: &Text, node: &Node, fields: &'static [Field], out: &mut Vec<Diagnostic>) {
    let names: Vec<&str> = fields.iter().map(|field| field.name).collect();
    for key in node.keys() {
        if out.len() > MOST {
            return;
        }
        match fields.iter().find(|field| field.name == key.text) {
            Some(field) => visit(text, &key.value, &field.shape, out),
            None => {
                let fault = Diagnostic::new(
                    "unknown-key",
                    format!("`{}` is not a key of this place", short(&key.text)),
                )
                .at(Some(text.place(key.span.clone())))
                .expected(format!("one of {}", names.join(", ")));
                out.push(match nearest(&key.text, names.iter().copied()) {
                    Some(near) => fault.action(format!("write `{near}`, if that is meant")),
                    None => fault.action("remove it"),
                });
            }
        }
    }
    for field in fields.iter().filter(|field| field.required && node.get(field.name).is_none()) {
        // A slip in a key that is needed is told once, as an unknown key.
        let slip = node
            .keys()
            .iter()
            .filter(|key| !names.contains(&key.text.as_str()))
            .any(|key| nearest(&key.text, names.iter().copied()) == Some(field.name));
        if !slip {
            out.push(
                Diagnostic::new("missing-key", format!("`{}` is missing here", field.name))
                    .at(Some(text.place(first_line(text, node))))
                    .action(format!("add `{}: ...`", field.name)),
            );
        }
    }
}
