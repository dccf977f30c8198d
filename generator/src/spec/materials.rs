//! Materials: compounds and alloys at one temperature.
//!
//! Values of an alloy are polynomials in its composition,
//! `x A + (1 - x) B - x (1 - x) bowing(x)`; gaps follow Varshni's formula
//! `gap - alpha T^2 / (T + beta)` for each compound first.
//!
//! Source: I. Vurgaftman, J. R. Meyer, L. R. Ram-Mohan, J. Appl. Phys. 89, 5815
//! (2001), eqs. (2.13) and (4.1) (numbers of the equations from memory).

use super::raw::{self, Entry, OneOr, Scalar, Sourced};
use super::scope::{Bare, Scope};
use super::tree::{Text, short};
use super::units_of::{mass_unit, unit};
use super::{Profile, shape, tree};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::expr::Tree;
use crate::units::{Unit, nearest};

/// The materials that are shipped with the program: name and text.
pub const SHIPPED: [(&str, &str); 1] = [("iii-v", include_str!("../../../specs/materials/iii-v.yaml"))];

/// A materials file as read.
#[derive(Clone, Debug)]
pub struct File {
    text: Text,
    raw: raw::Materials,
}

impl File {
    /// Reads a materials file.
    ///
    /// # Errors
    /// Its mistakes of form.
    pub fn read(file: &str, bytes: &[u8]) -> Result<Self> {
        let text = tree::read(file, bytes)?;
        let mistakes = shape::check(&text, &shape::MATERIALS);
        if !mistakes.is_empty() {
            return Err(Error::Spec(mistakes));
        }
        let raw: raw::Materials = super::document::typed(&text)?;
        if raw.materials.0 != "1" {
            let place = text.root.find("materials").map(|node| text.place(node.span.clone()));
            return Err(Error::spec(
                Diagnostic::new("version", "this version of the materials language is not known")
                    .at(place)
                    .found(short(&raw.materials.0))
                    .expected("1"),
            ));
        }
        Ok(Self { text, raw })
    }
}

/// Which band, and which mass in it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Carrier {
    Electron,
    HeavyHole,
    LightHole,
}

/// What is asked of a material.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Parameter {
    Gap,
    ValenceEdge,
    Mass(Carrier),
    Monolayer,
}

impl Parameter {
    fn key(self) -> &'static str {
        match self {
            Self::Gap => "gap",
            Self::ValenceEdge => "valence_edge",
            Self::Mass(Carrier::Electron) => "mass.electron",
            Self::Mass(Carrier::HeavyHole) => "mass.heavy_hole",
            Self::Mass(Carrier::LightHole) => "mass.light_hole",
            Self::Monolayer => "monolayer",
        }
    }

    fn unit(self) -> Option<Unit> {
        match self {
            Self::Gap | Self::ValenceEdge => unit("eV"),
            Self::Mass(_) => Some(mass_unit()),
            Self::Monolayer => unit("nm"),
        }
    }

    fn of(self, compound: &raw::Compound) -> Option<&Sourced> {
        match self {
            Self::Gap => compound.gap.as_ref(),
            Self::ValenceEdge => compound.valence_edge.as_ref(),
            Self::Mass(carrier) => mass(&compound.mass, carrier),
            Self::Monolayer => compound.monolayer.as_ref(),
        }
    }

    fn bowing(self, bowing: &raw::Bowing) -> Option<&Sourced> {
        match self {
            Self::Gap => bowing.gap.as_ref(),
            Self::ValenceEdge => bowing.valence_edge.as_ref(),
            Self::Mass(carrier) => mass(&bowing.mass, carrier),
            Self::Monolayer => bowing.monolayer.as_ref(),
        }
    }
}

fn mass(masses: &raw::Masses, carrier: Carrier) -> Option<&Sourced> {
    match carrier {
        Carrier::Electron => masses.electron.as_ref(),
        Carrier::HeavyHole => masses.heavy_hole.as_ref(),
        Carrier::LightHole => masses.light_hole.as_ref(),
    }
}

/// Edge and mass over a layer whose composition is graded.
#[derive(Clone, Debug)]
pub struct Graded {
    edge: Vec<f64>,
    mass: Vec<f64>,
    from: f64,
    to: f64,
}

impl Graded {
    /// The profiles, edge and mass, of a layer between two positions (nm).
    pub fn over(&self, start: f64, end: f64) -> (Profile, Profile) {
        let slope = (self.to - self.from) / (end - start);
        let x = Tree::Position
            .minus(Tree::Number(start))
            .times(Tree::Number(slope))
            .plus(Tree::Number(self.from));
        let profile = |polynomial: &[f64]| {
            let mut terms = polynomial.iter().rev();
            let highest = Tree::Number(terms.next().copied().unwrap_or(0.0));
            Profile::Function(terms.fold(highest, |sum, c| sum.times(x.clone()).plus(Tree::Number(*c))))
        };
        (profile(&self.edge), profile(&self.mass))
    }
}

/// A materials file at one temperature, for layers.
pub struct Materials {
    file: File,
    temperature: f64,
}

fn value(polynomial: &[f64], x: f64) -> f64 {
    polynomial.iter().rev().fold(0.0, |sum, c| sum * x + c)
}

impl Materials {
    pub fn new(file: File, temperature: f64) -> Self {
        Self { file, temperature }
    }

    /// Edge, mass and monolayer of a material; a graded one waits for the
    /// layer's position.
    pub fn layer(
        &self,
        scope: &Scope<'_>,
        path: &str,
        carrier_path: &str,
        carrier: &Scalar,
        raw: &OneOr<raw::Alloy>,
    ) -> Option<(Profile, Profile, Option<f64>, Option<Graded>)> {
        let carrier = scope.word(
            carrier_path,
            carrier,
            &[
                ("electron", Carrier::Electron),
                ("heavy hole", Carrier::HeavyHole),
                ("light hole", Carrier::LightHole),
            ],
        )?;
        let (name_path, name) = match raw {
            OneOr::One(name) => (path.to_owned(), &name.0),
            OneOr::More(alloy) => (format!("{path}.alloy"), &alloy.alloy.0),
        };
        let is_alloy = self.file.raw.alloys.0.iter().any(|(other, _)| other == name);
        let is_compound = self.file.raw.compounds.0.iter().any(|(other, _)| other == name);
        let wanted_alloy = matches!(raw, OneOr::More(_));
        if (wanted_alloy && !is_alloy) || (!wanted_alloy && !is_compound) {
            let compounds: Vec<&str> =
                self.file.raw.compounds.0.iter().map(|(name, _)| name.as_str()).collect();
            let alloys: Vec<&str> = self.file.raw.alloys.0.iter().map(|(name, _)| name.as_str()).collect();
            let known = if wanted_alloy { alloys } else { compounds };
            let fault = scope
                .wrong(
                    "unknown-material",
                    &name_path,
                    format!("`{}` is not in the materials file", short(name)),
                )
                .expected(format!("one of {}", known.join(", ")));
            scope.problem(if is_alloy && !wanted_alloy {
                fault.action(format!("it is an alloy: write `{{alloy: {name}, x: 0.3}}`"))
            } else {
                match nearest(name, known.iter().copied()) {
                    Some(near) => fault.action(format!("write `{near}`, if that is meant")),
                    None => fault,
                }
            });
            return None;
        }
        let ask = |parameter| match self.polynomial(name, parameter) {
            Ok(polynomial) => Some(polynomial),
            Err(diagnostic) => {
                let mut diagnostic = *diagnostic;
                diagnostic.place = Some(scope.place(path));
                scope.problem(diagnostic);
                None
            }
        };
        let valence = ask(Parameter::ValenceEdge)?;
        let edge = if carrier == Carrier::Electron {
            added(&valence, &ask(Parameter::Gap)?)
        } else {
            valence.iter().map(|c| -c).collect()
        };
        let mass = ask(Parameter::Mass(carrier))?;
        let monolayer = self.polynomial(name, Parameter::Monolayer).ok();
        let one = Unit::one();
        let share = |path: &str, scalar: &Scalar| {
            let x = scope.number(path, scalar, &one, Bare::InUnit)?;
            if (0.0..=1.0).contains(&x) {
                return Some(x);
            }
            scope.problem(
                scope.wrong("composition", path, "a composition lies between 0 and 1").found(x.to_string()),
            );
            None
        };
        let (from, to) = match raw {
            OneOr::One(_) => (0.0, 0.0),
            OneOr::More(alloy) => match &alloy.x {
                OneOr::One(x) => {
                    let x = share(&format!("{path}.x"), x)?;
                    (x, x)
                }
                OneOr::More(range) => {
                    let from = share(&format!("{path}.x.from"), &range.from);
                    let to = share(&format!("{path}.x.to"), &range.to);
                    from.zip(to)?
                }
            },
        };
        let middle = 0.5 * (from + to);
        let at = |polynomial: &[f64]| Profile::Constant(Tree::Number(value(polynomial, middle)));
        if value(&mass, middle) <= 0.0 {
            scope.problem(scope.wrong("not-positive", path, "the mass of this material is not positive"));
            return None;
        }
        let graded = (from != to).then(|| Graded { edge: edge.clone(), mass: mass.clone(), from, to });
        Some((at(&edge), at(&mass), monolayer.map(|polynomial| value(&polynomial, middle)), graded))
    }

    /// A parameter as a polynomial in the composition; of degree 0 for a compound.
    fn polynomial(&self, name: &str, parameter: Parameter) -> std::result::Result<Vec<f64>, Box<Diagnostic>> {
        if let Some((_, compound)) = self.file.raw.compounds.0.iter().find(|(other, _)| other == name) {
            return self.compound(name, compound, parameter).map(|value| vec![value]);
        }
        let missing = |what: String| Box::new(Diagnostic::new("missing-parameter", what));
        let Some((_, alloy)) = self.file.raw.alloys.0.iter().find(|(other, _)| other == name) else {
            return Err(missing(format!("`{}` is not in the materials file", short(name))));
        };
        let [first, second] = alloy.of.as_slice() else {
            return Err(missing(format!("`{name}` must be of two compounds")));
        };
        let end = |of: &Scalar| match self.file.raw.compounds.0.iter().find(|(other, _)| *other == of.0) {
            Some((name, compound)) => self.compound(name, compound, parameter),
            None => {
                Err(missing(format!("`{name}` is of `{}`, which is no compound of the file", short(&of.0))))
            }
        };
        let (a, b) = (end(first)?, end(second)?);
        let mut out = vec![b, a - b];
        if let Some(bowing) = parameter.bowing(&alloy.bowing) {
            let path = format!("alloys.{name}.bowing.{}", parameter.key());
            let terms: Vec<&Scalar> = match bowing.entry() {
                Entry::One(one) => vec![one],
                Entry::List(list) => list.iter().collect(),
            };
            for (power, term) in terms.into_iter().enumerate().take(8) {
                let c = self.number(&path, term, parameter)?;
                // - x (1 - x) c x^power
                out.resize(out.len().max(power + 3), 0.0);
                for (slot, change) in [(power + 1, -c), (power + 2, c)] {
                    if let Some(slot) = out.get_mut(slot) {
                        *slot += change;
                    }
                }
            }
        }
        Ok(out)
    }

    fn compound(
        &self,
        name: &str,
        compound: &raw::Compound,
        parameter: Parameter,
    ) -> std::result::Result<f64, Box<Diagnostic>> {
        let path = format!("compounds.{name}.{}", parameter.key());
        let Some(sourced) = parameter.of(compound) else {
            return Err(Box::new(
                Diagnostic::new(
                    "missing-parameter",
                    format!("the materials file has no `{}` for `{name}`", parameter.key()),
                )
                .action(format!("add `{path}` to {}", self.file.text.file)),
            ));
        };
        let value = self.single(&path, sourced, parameter.unit())?;
        let Some(varshni) = compound.varshni.as_ref().filter(|_| parameter == Parameter::Gap) else {
            return Ok(value);
        };
        let path = format!("compounds.{name}.varshni");
        let alpha = self.single(&format!("{path}.alpha"), &varshni.alpha, unit("eV/K"))?;
        let beta = self.single(&format!("{path}.beta"), &varshni.beta, unit("K"))?;
        let t = self.temperature;
        let change = alpha * t * t / (t + beta);
        if change.is_finite() {
            Ok(value - change)
        } else {
            Err(Box::new(Diagnostic::new("not-finite", format!("the gap of `{name}` is not finite"))))
        }
    }

    fn single(
        &self,
        path: &str,
        sourced: &Sourced,
        unit: Option<Unit>,
    ) -> std::result::Result<f64, Box<Diagnostic>> {
        match (sourced.entry(), unit) {
            (Entry::One(scalar), Some(unit)) => self.read(path, scalar, &unit),
            _ => Err(Box::new(Diagnostic::new("wrong-form", format!("`{path}` must be one number")))),
        }
    }

    fn number(
        &self,
        path: &str,
        scalar: &Scalar,
        parameter: Parameter,
    ) -> std::result::Result<f64, Box<Diagnostic>> {
        let Some(unit) = parameter.unit() else {
            return Err(Box::new(Diagnostic::new("wrong-form", format!("`{path}` has no unit"))));
        };
        self.read(path, scalar, &unit)
    }

    fn read(&self, path: &str, scalar: &Scalar, unit: &Unit) -> std::result::Result<f64, Box<Diagnostic>> {
        let scope = Scope::new(&self.file.text);
        match scope.number(path, scalar, unit, bare_of(unit)) {
            Some(value) => Ok(value),
            None => {
                let (problems, _) = scope.finish();
                let text = problems.first().map_or(String::new(), |one| format!(": {}", one.message));
                Err(Box::new(
                    Diagnostic::new(
                        "materials",
                        format!("`{path}` of {} is wrong{text}", self.file.text.file),
                    )
                    .found(format!("`{}`", short(&scalar.0)))
                    .expected(format!("a number in `{}`", unit.symbol)),
                ))
            }
        }
    }
}

fn bare_of(unit: &Unit) -> Bare {
    if unit.symbol == "me" { Bare::InUnit } else { Bare::Refused }
}

fn added(a: &[f64], b: &[f64]) -> Vec<f64> {
    let term = |list: &[f64], power: usize| list.get(power).copied().unwrap_or(0.0);
    (0..a.len().max(b.len())).map(|power| term(a, power) + term(b, power)).collect()
}
