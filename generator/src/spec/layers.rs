//! Layer stacks and shells.

use super::materials::{Graded, Materials};
use super::raw::{self, OneOr, Scalar};
use super::scope::{Allowed, Bare, Scope};
use super::units_of::{charge_unit, field_unit, mass_unit, unit};
use super::{Ends, Layer, Layers, Profile, Radial};
use crate::expr::Tree;

/// Most layers of a stack, repeats written out.
const MOST_LAYERS: usize = 20_000;

/// A layer whose profile over a graded alloy waits for its position.
struct Draft {
    layer: Layer,
    path: String,
    graded: Option<Graded>,
}

/// What the layers of one system share.
struct Stack<'a> {
    scope: &'a Scope<'a>,
    materials: Option<&'a Materials>,
    carrier: Option<&'a Scalar>,
    path: String,
}

/// A layer stack.
pub fn layers(
    scope: &Scope<'_>,
    materials: Option<&Materials>,
    path: &str,
    raw: &raw::System,
) -> Option<Layers> {
    let (charge, field, ends) = common(scope, path, raw)?;
    let stack = Stack { scope, materials, carrier: raw.carrier.as_ref(), path: path.to_owned() };
    let mut drafts = Vec::new();
    stack.list(&format!("{path}.stack"), &raw.stack, &mut drafts)?;
    let total = drafts.iter().map(|draft| draft.layer.thickness).sum::<f64>();
    let origin_path = format!("{path}.origin");
    let (origin, centred) = match &raw.origin {
        None => (total / 2.0, true),
        Some(word) if word.0 == "centre" => (total / 2.0, true),
        Some(word) if word.0 == "start" => (0.0, false),
        Some(length) => (scope.number(&origin_path, length, &unit("nm")?, Bare::Refused)?, false),
    };
    let stack = place(scope, drafts, -origin)?;
    Some(Layers { charge, field, origin, centred, ends, stack })
}

/// Concentric shells.
pub fn radial(
    scope: &Scope<'_>,
    materials: Option<&Materials>,
    path: &str,
    raw: &raw::System,
) -> Option<Radial> {
    let (charge, field, ends) = common(scope, path, raw)?;
    let stack = Stack { scope, materials, carrier: raw.carrier.as_ref(), path: path.to_owned() };
    let mut drafts = Vec::new();
    stack.list(&format!("{path}.shells"), &raw.shells, &mut drafts)?;
    let number = |key: &str, scalar: &Option<Scalar>, default: f64, unit: crate::units::Unit| match scalar {
        None => Some(default),
        Some(scalar) => scope.number(&format!("{path}.{key}"), scalar, &unit, Bare::InUnit),
    };
    let centre_charge = number("centre_charge", &raw.centre_charge, 0.0, charge_unit())?;
    let permittivity = number("permittivity", &raw.permittivity, 1.0, crate::units::Unit::one())?;
    if permittivity <= 0.0 {
        scope.problem(
            scope
                .wrong("not-positive", &format!("{path}.permittivity"), "the permittivity must be positive")
                .found(permittivity.to_string()),
        );
        return None;
    }
    if centre_charge != 0.0 && raw.charge.is_none() {
        scope.problem(
            scope
                .wrong("missing-key", path, "`charge` is missing here")
                .action("add `charge: -1` for an electron, `charge: 1` for a hole"),
        );
        return None;
    }
    let shells = place(scope, drafts, 0.0)?;
    Some(Radial { charge, field, ends, shells, centre_charge, permittivity })
}

fn common(scope: &Scope<'_>, path: &str, raw: &raw::System) -> Option<(f64, Option<Tree>, Ends)> {
    let charge = match &raw.charge {
        Some(scalar) => scope.number(&format!("{path}.charge"), scalar, &charge_unit(), Bare::InUnit),
        None if raw.field.is_some() => {
            scope.problem(
                scope
                    .wrong("missing-key", &format!("{path}.field"), "a field needs `charge`")
                    .action("add `charge: -1` for an electron, `charge: 1` for a hole"),
            );
            None
        }
        None => Some(0.0),
    };
    let field = match &raw.field {
        None => Some(None),
        Some(scalar) => {
            let allowed = Allowed { control: true, ..Allowed::default() };
            scope.tree(&format!("{path}.field"), scalar, &field_unit()?, Bare::Refused, allowed).map(Some)
        }
    };
    let ends = match &raw.ends {
        None => Some(Ends::Wall),
        Some(word) => {
            scope.word(&format!("{path}.ends"), word, &[("wall", Ends::Wall), ("decay", Ends::Decay)])
        }
    };
    Some((charge?, field?, ends?))
}

impl Stack<'_> {
    fn list(&self, path: &str, raw: &[raw::Layer], out: &mut Vec<Draft>) -> Option<()> {
        if raw.is_empty() {
            let fault = self.scope.wrong("empty-stack", path, "there is no layer here");
            self.scope.problem(fault.expected("at least one layer"));
            return None;
        }
        let mut good = true;
        for (index, layer) in raw.iter().enumerate() {
            let path = format!("{path}[{index}]");
            good &= match (&layer.repeat, &layer.stack) {
                (None, None) => self.one(&path, layer).map(|draft| out.push(draft)).is_some(),
                _ => self.repeat(&path, layer, out).is_some(),
            };
            if out.len() > MOST_LAYERS {
                self.scope.problem(
                    self.scope
                        .wrong("too-many-layers", &path, "the stack has too many layers")
                        .expected(format!("at most {MOST_LAYERS}, repeats written out")),
                );
                return None;
            }
            if self.scope.full() {
                return None;
            }
        }
        good.then_some(())
    }

    fn repeat(&self, path: &str, raw: &raw::Layer, out: &mut Vec<Draft>) -> Option<()> {
        let (Some(count), Some(stack), None, None, None, None) =
            (&raw.repeat, &raw.stack, &raw.thickness, &raw.edge, &raw.mass, &raw.material)
        else {
            self.scope.problem(
                self.scope
                    .wrong("repeat", path, "a repeat has just two keys")
                    .expected("`{repeat: n, stack: [...]}`"),
            );
            return None;
        };
        let count = self.scope.whole(&format!("{path}.repeat"), count, 1, MOST_LAYERS)?;
        let mut inner = Vec::new();
        self.list(&format!("{path}.stack"), stack, &mut inner)?;
        if inner.len().saturating_mul(count).saturating_add(out.len()) > MOST_LAYERS {
            self.scope.problem(
                self.scope
                    .wrong("too-many-layers", &format!("{path}.repeat"), "the stack has too many layers")
                    .expected(format!("at most {MOST_LAYERS}, repeats written out")),
            );
            return None;
        }
        for _ in 0..count {
            out.extend(inner.iter().map(|draft| Draft {
                layer: draft.layer.clone(),
                path: draft.path.clone(),
                graded: draft.graded.clone(),
            }));
        }
        Some(())
    }

    fn one(&self, path: &str, raw: &raw::Layer) -> Option<Draft> {
        let scope = self.scope;
        let thickness = match &raw.thickness {
            Some(scalar) => {
                let path = format!("{path}.thickness");
                let thickness = scope.number(&path, scalar, &unit("nm")?, Bare::Refused);
                thickness.filter(|value| {
                    let good = *value > 0.0;
                    if !good {
                        scope.problem(
                            scope
                                .wrong("not-positive", &path, "a thickness must be positive")
                                .found(format!("{value} nm")),
                        );
                    }
                    good
                })
            }
            None => {
                scope.problem(scope.wrong("missing-key", path, "`thickness` is missing here"));
                None
            }
        };
        let profiles = match (&raw.material, &raw.edge, &raw.mass) {
            (Some(material), None, None) => self.material(path, material),
            (None, Some(edge), Some(mass)) => {
                let edge = self.profile(&format!("{path}.edge"), edge, true);
                let mass = self.profile(&format!("{path}.mass"), mass, false);
                edge.zip(mass).map(|(edge, mass)| (edge, mass, None, None))
            }
            (Some(_), _, _) => {
                scope.problem(
                    scope
                        .wrong("material", path, "`material` stands in place of `edge` and `mass`")
                        .action("remove `edge` and `mass`, or `material`"),
                );
                None
            }
            (None, edge, _) => {
                let missing = if edge.is_none() { "edge" } else { "mass" };
                scope.problem(
                    scope
                        .wrong("missing-key", path, format!("`{missing}` is missing here"))
                        .action(format!("add `{missing}: ...`, or `material: ...`")),
                );
                None
            }
        };
        let (edge, mass, monolayer, graded) = profiles?;
        let name = raw.name.as_ref().map(|name| super::tree::short(&name.0));
        let layer = Layer { name, thickness: thickness?, edge, mass, monolayer, place: scope.place(path) };
        Some(Draft { layer, path: path.to_owned(), graded })
    }

    fn material(
        &self,
        path: &str,
        raw: &OneOr<raw::Alloy>,
    ) -> Option<(Profile, Profile, Option<f64>, Option<Graded>)> {
        let path = format!("{path}.material");
        let Some(materials) = self.materials else {
            self.scope.problem(
                self.scope
                    .wrong("no-materials", &path, "no materials are named")
                    .action("add `materials: iii-v` and `temperature: 300 K` at the top level"),
            );
            return None;
        };
        let Some(carrier) = self.carrier else {
            self.scope.problem(
                self.scope
                    .wrong("missing-key", &self.path, "`carrier` is missing here")
                    .expected("electron, heavy hole or light hole"),
            );
            return None;
        };
        materials.layer(self.scope, &path, &format!("{}.carrier", self.path), carrier, raw)
    }

    fn profile(&self, path: &str, raw: &OneOr<raw::Range>, edge: bool) -> Option<Profile> {
        let scope = self.scope;
        let (unit, bare) = if edge { (unit("eV")?, Bare::Refused) } else { (mass_unit(), Bare::InUnit) };
        let allowed = Allowed { control: edge, position: true, parts: &[] };
        let tree = |path: &str, scalar: &Scalar, allowed| {
            let tree = scope.tree(path, scalar, &unit, bare, allowed)?;
            if !edge && tree.as_number().is_some_and(|mass| mass <= 0.0) {
                scope.problem(scope.wrong("not-positive", path, "a mass must be positive").action(
                    "a hole has a positive mass, and an edge that rises where the valence edge falls",
                ));
                return None;
            }
            Some(tree)
        };
        match raw {
            OneOr::One(scalar) => {
                let tree = tree(path, scalar, allowed)?;
                Some(if tree.uses_position() { Profile::Function(tree) } else { Profile::Constant(tree) })
            }
            OneOr::More(grade) => {
                let allowed = Allowed { position: false, ..allowed };
                let from = tree(&format!("{path}.from"), &grade.from, allowed);
                let to = tree(&format!("{path}.to"), &grade.to, allowed);
                from.zip(to).map(|(from, to)| Profile::Linear(from, to))
            }
        }
    }
}

/// Gives every layer its position, and checks what depends on it.
fn place(scope: &Scope<'_>, drafts: Vec<Draft>, start: f64) -> Option<Vec<Layer>> {
    let mut from = start;
    let mut good = true;
    let mut out = Vec::with_capacity(drafts.len());
    for mut draft in drafts {
        let to = from + draft.layer.thickness;
        if let Some(graded) = &draft.graded {
            (draft.layer.edge, draft.layer.mass) = graded.over(from, to);
        }
        if let Profile::Function(tree) = &draft.layer.edge {
            good &= scope.unkinked(&format!("{}.edge", draft.path), tree, (from, to));
            good &= finite(scope, &format!("{}.edge", draft.path), tree, (from, to), f64::NEG_INFINITY);
        }
        if let Profile::Function(tree) = &draft.layer.mass {
            good &= finite(scope, &format!("{}.mass", draft.path), tree, (from, to), 0.0);
        }
        from = to;
        out.push(draft.layer);
    }
    good.then_some(out)
}

/// Samples a function over a layer: finite, and above a limit.
fn finite(scope: &Scope<'_>, path: &str, tree: &Tree, (from, to): (f64, f64), above: f64) -> bool {
    let control = scope.control.as_ref().map_or(0.0, |control| 0.5 * (control.within.0 + control.within.1));
    for step in 0..=32_u32 {
        let z = from + (to - from) * f64::from(step) / 32.0;
        let value = tree.value(control, z);
        if !value.is_finite() || value <= above {
            let what =
                if above == 0.0 { "a mass must be positive and finite" } else { "the edge is not finite" };
            scope.problem(scope.wrong("not-finite", path, what).found(format!("{value} at z = {z:.6} nm")));
            return false;
        }
    }
    true
}
