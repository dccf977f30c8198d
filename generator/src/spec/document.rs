//! A spec as it was read, and its resolution to numbers.

use std::collections::BTreeMap;

use serde::de::DeserializeOwned;
use sha2::{Digest, Sha256};

use super::materials::{self, Materials};
use super::outputs;
use super::raw;
use super::scope::{Bare, ControlSymbol, Scope};
use super::tree::{self, Text, short};
use super::units_of::unit;
use super::{
    Control, FamilyParameter, Formula, Kind, Spec, System, Target, TermKind, formulas, layers, matrix, parts,
    shape,
};
use crate::diagnostic::{Diagnostic, Error, Place, Result};
use crate::outcome::{DigestedFile, Note};
use crate::units::{Quantity, is_quantity};

/// Reads the files that a spec names.
pub trait Loader {
    /// The bytes of a file, its path relative to the spec.
    ///
    /// # Errors
    /// Why it cannot be read, in a few words.
    fn load(&self, path: &str) -> std::result::Result<Vec<u8>, String>;
}

/// A loader without files, for specs that stand alone.
#[derive(Clone, Copy, Debug, Default)]
pub struct NoFiles;

impl Loader for NoFiles {
    fn load(&self, _path: &str) -> std::result::Result<Vec<u8>, String> {
        Err("no files are read here".to_owned())
    }
}

/// A file that a spec names.
#[derive(Clone, Debug)]
pub struct Loaded {
    /// Path for messages.
    pub shown: String,
    /// Its bytes.
    pub bytes: Vec<u8>,
}

/// Files by the path in the spec.
pub type Files = BTreeMap<String, Loaded>;

/// A spec that is sound in form, with the files it names. Resolving it, with
/// other numbers for some constants or without, reads nothing again.
#[derive(Clone, Debug)]
pub struct Document {
    text: Text,
    raw: raw::Spec,
    digest: DigestedFile,
    files: Files,
    materials: Option<materials::File>,
}

/// SHA-256 in lower-case hexadecimal.
#[must_use]
pub fn sha256(bytes: &[u8]) -> String {
    Sha256::digest(bytes).iter().map(|byte| format!("{byte:02x}")).collect()
}

/// The name of a file without its folders.
fn base_name(path: &str) -> String {
    path.rsplit(['/', '\\']).next().unwrap_or(path).to_owned()
}

/// The typed form of checked text.
pub fn typed<T: DeserializeOwned>(text: &Text) -> Result<T> {
    serde_yaml::from_str(&text.text).map_err(|error| {
        let at = text.offset + error.location().map_or(0, |location| location.index().min(text.text.len()));
        let mut start = at;
        while start > text.offset && !text.text.is_char_boundary(start - text.offset) {
            start -= 1;
        }
        Error::spec(
            Diagnostic::new("wrong-form", format!("the value cannot be read: {error}"))
                .at(Some(text.place(start..start))),
        )
    })
}

impl Document {
    /// Reads a spec and the files it names.
    ///
    /// - `file`: its path as the user gave it, for messages.
    /// - `bytes`: its content.
    ///
    /// # Errors
    /// Mistakes of form, all at once; a file that cannot be read.
    pub fn parse(file: &str, bytes: &[u8], loader: &dyn Loader) -> Result<Self> {
        let text = tree::read(file, bytes)?;
        // The version goes first: another version may have other keys.
        if let Some(version) = text.root.find("spec").filter(|node| node.text().is_some_and(|v| v != "1")) {
            return Err(Error::spec(
                Diagnostic::new("version", "this version of the spec language is not known")
                    .at(Some(text.place(version.span.clone())))
                    .found(short(version.text().unwrap_or("")))
                    .expected("1"),
            ));
        }
        let mistakes = shape::check(&text, &shape::SPEC);
        if !mistakes.is_empty() {
            return Err(Error::Spec(mistakes));
        }
        let raw: raw::Spec = typed(&text)?;
        let digest = DigestedFile { file: base_name(file), sha256: sha256(bytes) };
        let mut files = Files::new();
        let mut problems = Vec::new();
        for (name, system) in &raw.systems.0 {
            for (power, matrix) in system.matrices().into_iter().enumerate() {
                if let Some(raw::Matrix::File(path)) = matrix {
                    let place = place_of(&text, &format!("systems.{name}.h{power}.file"));
                    load(file, &path.0, place, loader, &mut files, &mut problems);
                }
            }
        }
        let mut materials = None;
        if let Some(path) = &raw.materials {
            let shipped = materials::SHIPPED.iter().find(|(name, _)| *name == path.0);
            match shipped {
                Some((name, content)) => materials = Some(materials::File::read(name, content.as_bytes())?),
                None => {
                    let place = place_of(&text, "materials");
                    load(file, &path.0, place, loader, &mut files, &mut problems);
                    if let Some(loaded) = files.get(&path.0) {
                        materials = Some(materials::File::read(&loaded.shown, &loaded.bytes)?);
                    }
                }
            }
        }
        if problems.is_empty() {
            Ok(Self { text, raw, digest, files, materials })
        } else {
            Err(Error::Spec(problems))
        }
    }

    /// The constants that are written as numbers: name, number and unit as written.
    #[must_use]
    pub fn numbers(&self, spec: &Spec) -> Vec<(String, f64, String)> {
        let written = |name: &str| {
            self.raw.constants.0.iter().any(|(other, scalar)| other == name && is_quantity(&scalar.0))
        };
        spec.inputs
            .iter()
            .filter_map(|input| {
                let name = input.path.strip_prefix("constants.")?;
                written(name).then(|| (name.to_owned(), input.value, input.unit.clone()))
            })
            .collect()
    }

    /// Turns the spec into numbers.
    ///
    /// - `overrides`: constants with other numbers, each in the unit in which
    ///   the constant is written.
    ///
    /// # Errors
    /// The spec's mistakes, in order of their places.
    pub fn resolve(&self, overrides: &[(String, f64)]) -> Result<Spec> {
        let mut scope = Scope::new(&self.text);
        let raw = &self.raw;
        scope.name("name", &raw.name.0, true, scope.place("name"));
        super::constants::read(&mut scope, &raw.constants, overrides);
        let control = control(&mut scope, &raw.control);
        let family: Vec<FamilyParameter> =
            raw.family.0.iter().take(4).filter_map(|(name, range)| family(&scope, name, range)).collect();
        if raw.family.0.len() > 3 {
            scope.problem(
                scope
                    .wrong("family", "family", "a family has too many parameters")
                    .found(raw.family.0.len().to_string())
                    .expected("at most 3"),
            );
        }
        let materials = self.temperature(&scope);
        let mut systems = Vec::new();
        // Messages about what rests on a wrong constant or control would only repeat it.
        let sound = control.is_some() && scope.problems() == 0;
        if sound {
            for (name, raw) in &raw.systems.0 {
                if scope.full() {
                    break;
                }
                let path = format!("systems.{name}");
                let place = scope.key_place(&path);
                scope.name(&path, name, false, place.clone());
                let kind = match raw.kind.0.as_str() {
                    "layers" => layers::layers(&scope, materials.as_ref(), &path, raw).map(Kind::Layers),
                    "radial" => layers::radial(&scope, materials.as_ref(), &path, raw).map(Kind::Radial),
                    "parts" => parts::parts(&scope, &path, raw).map(Kind::Parts),
                    _ => matrix::matrix(&scope, &self.files, &path, raw).map(Kind::Matrix),
                };
                systems.extend(kind.map(|kind| System { name: name.clone(), place, kind }));
            }
        }
        let mut all = Vec::new();
        if sound && systems.len() == raw.systems.0.len() {
            for (name, raw) in &raw.formulas.0 {
                if scope.full() {
                    break;
                }
                let path = format!("formulas.{name}");
                if scope.name(&path, name, true, scope.key_place(&path)) {
                    all.extend(formulas::formula(&scope, &systems, !family.is_empty(), name, raw));
                }
            }
            if raw.formulas.0.is_empty() {
                scope.problem(scope.wrong("no-formula", "formulas", "there is no formula here"));
            }
        }
        let outputs = outputs::outputs(&scope, raw, control.as_ref(), &all);
        let warnings = warnings(&systems, &all, materials.is_some());
        let (problems, inputs) = scope.finish();
        let Some(control) = control.filter(|_| problems.is_empty()) else {
            return Err(Error::Spec(problems));
        };
        let mut sources: Vec<DigestedFile> = self
            .files
            .iter()
            .map(|(name, file)| DigestedFile { file: base_name(name), sha256: sha256(&file.bytes) })
            .collect();
        if let (Some(path), true) = (&raw.materials, self.materials.is_some())
            && let Some((name, content)) = materials::SHIPPED.iter().find(|(name, _)| *name == path.0)
        {
            sources.push(DigestedFile { file: (*name).to_owned(), sha256: sha256(content.as_bytes()) });
        }
        sources.sort_by(|a, b| a.file.cmp(&b.file));
        Ok(Spec {
            name: raw.name.0.clone(),
            summary: raw.summary.as_ref().map_or_else(String::new, |text| text.0.clone()),
            file: self.digest.clone(),
            sources,
            inputs,
            systems,
            control,
            formulas: all,
            document: (!family.is_empty()).then(|| std::rc::Rc::new(self.clone())),
            family,
            outputs,
            warnings,
        })
    }

    /// The materials at the spec's temperature.
    fn temperature(&self, scope: &Scope<'_>) -> Option<Materials> {
        let file = self.materials.as_ref()?;
        let Some(scalar) = &self.raw.temperature else {
            scope.problem(
                scope
                    .wrong("missing-key", "materials", "materials need `temperature`")
                    .action("add `temperature: 300 K` at the top level"),
            );
            return None;
        };
        let kelvin = scope.number("temperature", scalar, &unit("K")?, Bare::Refused)?;
        if kelvin < 0.0 {
            scope.problem(
                scope
                    .wrong("not-positive", "temperature", "a temperature is not negative")
                    .found(format!("{kelvin} K")),
            );
            return None;
        }
        Some(Materials::new(file.clone(), kelvin))
    }
}

fn place_of(text: &Text, path: &str) -> Option<Place> {
    text.root.find(path).map(|node| text.place(node.span.clone()))
}

fn load(
    spec: &str,
    path: &str,
    place: Option<Place>,
    loader: &dyn Loader,
    files: &mut Files,
    problems: &mut Vec<Diagnostic>,
) {
    if files.contains_key(path) {
        return;
    }
    let odd = path.is_empty()
        || path.len() > 1000
        || path.starts_with(['/', '\\'])
        || path.contains(['\0', '\\'])
        || path.split('/').filter(|part| *part == "..").count() > 8
        || path.get(1..2) == Some(":");
    if odd {
        problems.push(
            Diagnostic::new("file-path", "this path is not read")
                .at(place)
                .found(format!("`{}`", short(path)))
                .expected("a path relative to the spec, with `/` between folders"),
        );
        return;
    }
    match loader.load(path) {
        Ok(bytes) => {
            let shown = match spec.rfind('/') {
                Some(end) => format!("{}/{path}", spec.get(..end).unwrap_or("")),
                None => path.to_owned(),
            };
            files.insert(path.to_owned(), Loaded { shown, bytes });
        }
        Err(reason) => problems.push(
            Diagnostic::new("no-file", format!("`{}` cannot be read: {reason}", short(path)))
                .at(place)
                .action("give a path relative to the spec"),
        ),
    }
}

fn control(scope: &mut Scope<'_>, raw: &raw::Control) -> Option<Control> {
    let symbol = raw.symbol.0.clone();
    let place = scope.place("control.symbol");
    if !scope.symbol("control.symbol", &symbol, place.clone()) {
        return None;
    }
    if scope.constants.contains_key(&symbol) {
        scope.problem(
            Diagnostic::new("name-clash", format!("`{symbol}` names the control and a constant"))
                .at(Some(place))
                .action("rename one of them"),
        );
        return None;
    }
    let unit = scope.unit("control.unit", &raw.unit)?;
    let at = match &raw.at {
        None => {
            scope.input("control.at", 0.0, unit.symbol.clone());
            0.0
        }
        Some(scalar) => scope.number("control.at", scalar, &unit, Bare::InUnit)?,
    };
    let [from, to] = raw.within.as_slice() else {
        scope.problem(
            scope
                .wrong("within", "control.within", "`within` has two ends")
                .found(format!("{} values", raw.within.len()))
                .expected("`[from, to]`"),
        );
        return None;
    };
    let from = scope.number("control.within[0]", from, &unit, Bare::InUnit);
    let to = scope.number("control.within[1]", to, &unit, Bare::InUnit);
    let (from, to) = (from?, to?);
    if from >= to || at < from || at > to {
        let message = if from >= to { "`within` is empty" } else { "the operating point is not in `within`" };
        scope.problem(
            scope
                .wrong("within", "control.within", message)
                .found(format!("{from} to {to} {}, at {at} {}", unit.symbol, unit.symbol))
                .expected("from < to, and `at` between them"),
        );
        return None;
    }
    scope.control = Some(ControlSymbol { symbol: symbol.clone(), unit: unit.clone(), within: (from, to) });
    let count = match (&raw.bits, &raw.step) {
        (None, None) => None,
        (Some(bits), Some(step)) => formulas::count(scope, "control", bits, step, &unit),
        (bits, _) => {
            let missing = if bits.is_none() { "bits" } else { "step" };
            scope.problem(scope.wrong("missing-key", "control", format!("`{missing}` is missing here")));
            None
        }
    };
    let within_place = scope.place("control.within");
    Some(Control { symbol, unit, at, within: (from, to), within_place, count })
}

fn family(scope: &Scope<'_>, name: &str, raw: &raw::Range) -> Option<FamilyParameter> {
    let path = format!("family.{name}");
    let Some(constant) = scope.constants.get(name) else {
        let names: Vec<&str> = scope.constants.keys().map(String::as_str).collect();
        let fault = Diagnostic::new("unknown-name", format!("there is no constant `{}`", short(name)))
            .at(Some(scope.key_place(&path)));
        scope.problem(match crate::units::nearest(name, names) {
            Some(near) => fault.action(format!("write `{near}`, if that is meant")),
            None => fault.action("a family varies names of `constants`"),
        });
        return None;
    };
    let unit = Quantity::parse(&raw.from.0)
        .ok()
        .and_then(|quantity| quantity.unit)
        .unwrap_or_else(|| constant.written.1.clone());
    if unit.dimension != constant.value.dimension {
        scope.problem(
            scope
                .wrong("dimension", &format!("{path}.from"), "the constant is of another kind")
                .found(unit.dimension.describe())
                .expected(constant.value.dimension.describe()),
        );
        return None;
    }
    let from = scope.number(&format!("{path}.from"), &raw.from, &unit, Bare::InUnit)?;
    let to = scope.number(&format!("{path}.to"), &raw.to, &unit, Bare::InUnit)?;
    if from < to {
        let (written, place) = (constant.written.1.clone(), scope.key_place(&path));
        return Some(FamilyParameter { name: name.to_owned(), unit, written, from, to, place });
    }
    scope.problem(
        scope
            .wrong("family", &path, "the range is empty")
            .found(format!("{from} to {to} {}", unit.symbol))
            .expected("from < to"),
    );
    None
}

/// With materials, electron and hole share one zero: a gap on top counts twice.
fn warnings(systems: &[System], formulas: &[Formula], materials: bool) -> Vec<Note> {
    let mut out = Vec::new();
    if !materials {
        return out;
    }
    for formula in formulas {
        let Target::Sum(terms) = &formula.target else { continue };
        let carriers = terms
            .iter()
            .filter(|term| match &term.kind {
                TermKind::Level(level) => systems
                    .get(level.system)
                    .is_some_and(|system| matches!(system.kind, Kind::Layers(_) | Kind::Radial(_))),
                TermKind::Known(_) => false,
            })
            .count();
        let known = terms.iter().any(|term| matches!(term.kind, TermKind::Known(_)));
        if carriers >= 2 && known {
            out.push(Note {
                code: "gap-added".to_owned(),
                text: format!(
                    "`{}` adds a known term to levels whose edges come from materials; their sum already \
                     holds the gap",
                    formula.name
                ),
            });
        }
    }
    out
}
