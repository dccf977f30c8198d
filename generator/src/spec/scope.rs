//! Names, numbers and expressions of one spec, and the mistakes found so far.
//!
//! Every reader of a part of the spec gets a [`Scope`]; it returns `None` where
//! a value is wrong and leaves a located message, so that one run tells
//! several mistakes.

use std::cell::RefCell;
use std::collections::BTreeMap;
use std::ops::Range;

use super::PartKind;
use super::raw::Scalar;
use super::shape::first_line;
use super::tree::{Text, short};
use crate::diagnostic::{Diagnostic, Place};
use crate::expr::{Environment, Expression, OperatorSymbol, Resolved, Symbol, Tree, is_reserved, kinks};
use crate::outcome::Input;
use crate::units::{EnergyKind, Fault, Quantity, Unit, Value, energy_factor, is_quantity};

/// Longest name.
const LONGEST_NAME: usize = 40;

/// Most messages that are told at once.
const MOST: usize = 50;

/// A constant of the spec.
#[derive(Clone, Debug)]
pub struct Constant {
    /// In coherent units.
    pub value: Value,
    /// Number and unit for the reader: as written, or in SI base units.
    pub written: (f64, Unit),
}

/// The control as far as expressions need it.
#[derive(Clone, Debug)]
pub struct ControlSymbol {
    pub symbol: String,
    pub unit: Unit,
    pub within: (f64, f64),
}

/// How bare numbers are taken.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Bare {
    /// Only 0 has no unit.
    Refused,
    /// In the unit wanted.
    InUnit,
}

/// What may stand in an expression besides constants.
#[derive(Clone, Copy, Debug, Default)]
pub struct Allowed<'a> {
    pub control: bool,
    /// The position, in nm.
    pub position: bool,
    pub parts: &'a [(String, PartKind)],
}

pub struct Scope<'a> {
    pub text: &'a Text,
    pub constants: BTreeMap<String, Constant>,
    pub control: Option<ControlSymbol>,
    problems: RefCell<Vec<Diagnostic>>,
    inputs: RefCell<Vec<Input>>,
}

impl<'a> Scope<'a> {
    pub fn new(text: &'a Text) -> Self {
        Self {
            text,
            constants: BTreeMap::new(),
            control: None,
            problems: RefCell::default(),
            inputs: RefCell::default(),
        }
    }

    /// The mistakes, in order of their places, and the inputs by path.
    pub fn finish(self) -> (Vec<Diagnostic>, Vec<Input>) {
        let mut problems = self.problems.into_inner();
        problems.sort_by_key(|one| one.place.as_ref().map_or(0, |place| place.start));
        problems.dedup();
        let mut inputs = self.inputs.into_inner();
        inputs.sort_by(|a, b| a.path.cmp(&b.path));
        inputs.dedup_by(|a, b| a.path == b.path);
        (problems, inputs)
    }

    pub fn problem(&self, diagnostic: Diagnostic) {
        let mut list = self.problems.borrow_mut();
        if list.len() < MOST {
            list.push(diagnostic);
        }
    }

    /// True if no more messages are taken, so that looking for more is idle.
    pub fn full(&self) -> bool {
        self.problems() >= MOST
    }

    pub fn problems(&self) -> usize {
        self.problems.borrow().len()
    }

    pub fn input(&self, path: impl Into<String>, value: f64, unit: impl Into<String>) {
        self.inputs.borrow_mut().push(Input { path: path.into(), value, unit: unit.into() });
    }

    /// Place of the value at a path, or of the nearest holder that exists.
    pub fn place(&self, path: &str) -> Place {
        let mut path = path;
        loop {
            if let Some(node) = self.text.root.find(path) {
                return self.text.place(first_line(self.text, node));
            }
            match path.rfind(['.', '[']) {
                Some(end) => path = path.get(..end).unwrap_or(""),
                None => return self.text.place(self.text.offset..self.text.offset),
            }
        }
    }

    /// Place of the key at a path.
    pub fn key_place(&self, path: &str) -> Place {
        self.text.root.find_key(path).map_or_else(|| self.place(path), |span| self.text.place(span))
    }

    pub fn wrong(&self, code: &'static str, path: &str, message: impl Into<String>) -> Diagnostic {
        Diagnostic::new(code, message).at(Some(self.place(path)))
    }

    /// A mistake inside a scalar, at its own stretch where the file shows the
    /// same text.
    pub fn fault(&self, path: &str, scalar: &str, fault: Fault) {
        let place = self.inside(path, scalar, &fault.span).unwrap_or_else(|| self.place(path));
        let mut diagnostic = fault.diagnostic(Some(place));
        diagnostic.message = cut(&diagnostic.message);
        diagnostic.found = diagnostic.found.map(|text| cut(&text));
        diagnostic.action = diagnostic.action.map(|text| cut(&text));
        self.problem(diagnostic);
    }

    fn inside(&self, path: &str, scalar: &str, span: &Range<usize>) -> Option<Place> {
        let node = self.text.root.find(path)?;
        let shown = self.text.text.get(
            node.span.start.checked_sub(self.text.offset)?..node.span.end.checked_sub(self.text.offset)?,
        )?;
        let at = shown.find(scalar).filter(|_| !scalar.is_empty())?;
        (span.end <= scalar.len() && span.end > span.start)
            .then(|| self.text.place(node.span.start + at + span.start..node.span.start + at + span.end))
    }

    fn caught<T>(&self, path: &str, scalar: &str, result: std::result::Result<T, Fault>) -> Option<T> {
        result.map_err(|fault| self.fault(path, scalar, fault)).ok()
    }

    /// A unit.
    pub fn unit(&self, path: &str, scalar: &Scalar) -> Option<Unit> {
        self.caught(path, &scalar.0, Unit::parse(&scalar.0))
    }

    /// A name that follows the rules, at a key if `key`.
    pub fn name(&self, path: &str, name: &str, lower: bool, place: Place) -> bool {
        let first = name.chars().next().is_some_and(|c| c.is_ascii_alphabetic());
        let rest = name.chars().all(|c| c.is_ascii_alphanumeric() || c == '_');
        let case = !lower || !name.chars().any(|c| c.is_ascii_uppercase());
        let length = name.len() <= LONGEST_NAME;
        if first && rest && case && length {
            return true;
        }
        let letters = if lower { "lower-case letters" } else { "letters" };
        self.problem(
            Diagnostic::new("bad-name", format!("`{}` cannot be a name", short(name)))
                .at(Some(place))
                .found(if length { "another form".to_owned() } else { format!("{} characters", name.len()) })
                .expected(format!("a letter, then {letters}, digits and `_`, at most {LONGEST_NAME} in all"))
                .action(format!("rename it (`{}`)", short(path))),
        );
        false
    }

    /// A name that expressions use: also refuses what is built in.
    pub fn symbol(&self, path: &str, name: &str, place: Place) -> bool {
        if !self.name(path, name, false, place.clone()) {
            return false;
        }
        if is_reserved(name) {
            self.problem(
                Diagnostic::new("reserved-name", format!("`{name}` is a built-in name"))
                    .at(Some(place))
                    .action("choose another name"),
            );
            return false;
        }
        true
    }

    /// One of a few words.
    pub fn word<T: Copy>(&self, path: &str, scalar: &Scalar, words: &[(&str, T)]) -> Option<T> {
        if let Some((_, value)) = words.iter().find(|(word, _)| *word == scalar.0) {
            return Some(*value);
        }
        let names: Vec<&str> = words.iter().map(|(word, _)| *word).collect();
        let fault = self
            .wrong("unknown-word", path, "this word has no meaning here")
            .found(format!("`{}`", short(&scalar.0)))
            .expected(format!("one of {}", names.join(", ")));
        self.problem(match crate::units::nearest(&scalar.0, names.iter().copied()) {
            Some(near) => fault.action(format!("write `{near}`, if that is meant")),
            None => fault,
        });
        None
    }

    /// A whole number between two limits.
    pub fn whole(&self, path: &str, scalar: &Scalar, from: usize, to: usize) -> Option<usize> {
        let number = crate::units::read_number(scalar.0.trim())
            .filter(|(value, length)| *length == scalar.0.trim().len() && value.is_finite())
            .map(|(value, _)| value);
        let whole = number
            .filter(|value| libm::floor(*value) == *value && *value >= from as f64 && *value <= to as f64);
        if let Some(value) = whole {
            self.input(path, value, "1");
            return Some(value as usize);
        }
        self.problem(
            self.wrong("not-whole", path, "a whole number is expected here")
                .found(format!("`{}`", short(&scalar.0)))
                .expected(format!("a whole number from {from} to {to}")),
        );
        None
    }

    /// A number in `unit`, without control or position.
    pub fn number(&self, path: &str, scalar: &Scalar, unit: &Unit, bare: Bare) -> Option<f64> {
        self.constant_number(path, scalar, unit, bare, false)
    }

    /// The same, where any kind in which energies are stated will do.
    pub fn energy(&self, path: &str, scalar: &Scalar, unit: &Unit) -> Option<f64> {
        self.constant_number(path, scalar, unit, Bare::InUnit, EnergyKind::of(unit.dimension).is_some())
    }

    fn constant_number(
        &self,
        path: &str,
        scalar: &Scalar,
        unit: &Unit,
        bare: Bare,
        energy: bool,
    ) -> Option<f64> {
        let text = scalar.0.as_str();
        if is_quantity(text) {
            return self.quantity(path, text, unit, bare, energy);
        }
        let expression = self.caught(path, text, Expression::parse(text))?;
        let resolved = self.resolve(path, text, &expression, Allowed::default())?;
        self.settled(path, text, &expression, &resolved, unit, bare, energy)
    }

    fn quantity(&self, path: &str, text: &str, unit: &Unit, bare: Bare, energy: bool) -> Option<f64> {
        let quantity = self.caught(path, text, Quantity::parse(text))?;
        let number = quantity.number();
        if quantity.is_bare() && bare == Bare::Refused && number != 0.0 && !unit.dimension.is_none() {
            self.problem(
                self.wrong("unit-missing", path, "the unit is missing")
                    .found(format!("`{}`", short(text)))
                    .expected(format!(
                        "{}, such as `{} {}`",
                        unit.dimension.describe(),
                        short(text),
                        unit.symbol
                    )),
            );
            return None;
        }
        let result = if energy { quantity.in_energy_unit(unit) } else { quantity.in_unit(unit) };
        let value = match result {
            Ok(value) => value,
            Err(mut fault) => {
                fault.span = 0..text.len();
                self.fault(path, text, fault);
                return None;
            }
        };
        let shown = quantity.unit.as_ref().map_or(shown_unit(unit), |own| own.symbol.as_str());
        self.input(path, number, shown);
        Some(value)
    }

    #[allow(clippy::too_many_arguments, reason = "one value with all that is wanted of it")]
    fn settled(
        &self,
        path: &str,
        text: &str,
        expression: &Expression,
        resolved: &Resolved,
        unit: &Unit,
        bare: Bare,
        energy: bool,
    ) -> Option<f64> {
        let Some(value) = resolved.value() else {
            self.problem(
                self.wrong("not-constant", path, "only constants may stand here")
                    .found(format!("`{}`", short(text)))
                    .action("the control may stand in fields, edges and Hamiltonians"),
            );
            return None;
        };
        let number = if value.dimension.is_none() && (bare == Bare::InUnit || value.number == 0.0) {
            value.number
        } else {
            let result = if energy { value.in_energy_unit(unit) } else { value.in_unit(unit) };
            match result {
                Ok(number) => number,
                Err(mut fault) => {
                    fault.span = 0..text.len();
                    self.fault(path, text, fault);
                    return None;
                }
            }
        };
        match expression.as_name().and_then(|name| self.constants.get(name)) {
            Some(constant) => self.input(path, constant.written.0, constant.written.1.symbol.clone()),
            None => self.input(path, number, shown_unit(unit)),
        }
        Some(number)
    }

    fn resolve(
        &self,
        path: &str,
        text: &str,
        expression: &Expression,
        allowed: Allowed<'_>,
    ) -> Option<Resolved> {
        let names = Names { scope: self, allowed };
        self.caught(path, text, expression.resolve(&names))
    }

    /// An expression in coherent units.
    pub fn coherent(&self, path: &str, scalar: &Scalar, allowed: Allowed<'_>) -> Option<Resolved> {
        let expression = self.caught(path, &scalar.0, Expression::parse(&scalar.0))?;
        self.resolve(path, &scalar.0, &expression, allowed)
    }

    /// An expression with its result in `unit`, a quantity too.
    pub fn tree(
        &self,
        path: &str,
        scalar: &Scalar,
        unit: &Unit,
        bare: Bare,
        allowed: Allowed<'_>,
    ) -> Option<Tree> {
        let text = scalar.0.as_str();
        if is_quantity(text) {
            return self.quantity(path, text, unit, bare, false).map(Tree::Number);
        }
        let expression = self.caught(path, text, Expression::parse(text))?;
        let resolved = self.resolve(path, text, &expression, allowed)?;
        if resolved.value().is_some() {
            return self.settled(path, text, &expression, &resolved, unit, bare, false).map(Tree::Number);
        }
        let pure = resolved.dimension.is_none_or(|dimension| dimension.is_none());
        let tree = if pure && bare == Bare::InUnit {
            resolved.tree
        } else {
            self.caught(path, text, resolved.in_unit(unit))?
        };
        self.unkinked(path, &tree, (0.0, 0.0)).then_some(tree)
    }

    /// An expression of the control in an energy unit of any kind.
    pub fn energy_tree(&self, path: &str, scalar: &Scalar, unit: &Unit) -> Option<Tree> {
        let text = scalar.0.as_str();
        if is_quantity(text) {
            return self.quantity(path, text, unit, Bare::Refused, true).map(Tree::Number);
        }
        let expression = self.caught(path, text, Expression::parse(text))?;
        let allowed = Allowed { control: true, ..Allowed::default() };
        let resolved = self.resolve(path, text, &expression, allowed)?;
        if resolved.value().is_some() {
            return self
                .settled(path, text, &expression, &resolved, unit, Bare::Refused, true)
                .map(Tree::Number);
        }
        let kind = resolved.dimension.and_then(EnergyKind::of);
        let tree = match kind {
            Some(kind) if kind.dimension() != unit.dimension => {
                let factor = match energy_factor(&kind.coherent_unit(), unit) {
                    Ok(factor) => factor.value(),
                    Err(mut fault) => {
                        fault.span = 0..text.len();
                        self.fault(path, text, fault);
                        return None;
                    }
                };
                resolved.tree.scaled(factor)
            }
            _ => self.caught(path, text, resolved.in_unit(unit))?,
        };
        self.unkinked(path, &tree, (0.0, 0.0)).then_some(tree)
    }

    /// Refuses kinks of the control inside `within`.
    pub fn unkinked(&self, path: &str, tree: &Tree, position: (f64, f64)) -> bool {
        let Some(control) = &self.control else { return true };
        let found = kinks(tree, control.within, position);
        let Some(kink) = found.iter().find(|kink| kink.of_control) else { return true };
        self.problem(
            self.wrong("kink", path, format!("`{}` has its kink inside `within`", kink.function.word()))
                .found(format!(
                    "a kink near {} = {:.6} {}",
                    control.symbol, kink.control, control.unit.symbol
                ))
                .action("narrow `within` to one side of it, or write a smooth expression"),
        );
        false
    }
}

/// The unit by which a reader knows a bare number.
fn shown_unit(unit: &Unit) -> &str {
    if matches!(unit.symbol.as_str(), "me" | "e") { "1" } else { unit.symbol.as_str() }
}

fn cut(text: &str) -> String {
    if text.chars().nth(400).is_some() {
        text.chars().take(400).chain("...".chars()).collect()
    } else {
        text.to_owned()
    }
}

/// The names that one expression sees.
struct Names<'a> {
    scope: &'a Scope<'a>,
    allowed: Allowed<'a>,
}

impl Environment for Names<'_> {
    fn look_up(&self, name: &str) -> Option<Symbol> {
        if let Some(constant) = self.scope.constants.get(name) {
            return Some(Symbol::Constant(constant.value));
        }
        if let Some(index) = self.allowed.parts.iter().position(|(part, _)| part == name) {
            let vector = self.allowed.parts.get(index).is_some_and(|(_, kind)| kind.is_vector());
            return Some(Symbol::Part { index, vector });
        }
        if let Some(control) = self.scope.control.as_ref().filter(|control| control.symbol == name) {
            return Some(if self.allowed.control {
                Symbol::Control(control.unit.value(1.0))
            } else {
                Symbol::Forbidden("the control may stand in fields, edges and Hamiltonians only".to_owned())
            });
        }
        if name == "z" {
            return Some(match Unit::parse("nm") {
                Ok(nanometre) if self.allowed.position => Symbol::Position(nanometre.value(1.0)),
                _ => Symbol::Forbidden(
                    "`z` may stand in edges and masses of layers and shells only".to_owned(),
                ),
            });
        }
        None
    }

    fn operator(
        &self,
        part: usize,
        name: &str,
        arguments: &[usize],
    ) -> std::result::Result<OperatorSymbol, Fault> {
        match self.allowed.parts.get(part) {
            Some((_, kind)) => kind.operator(name, arguments),
            None => Err(Fault::new("unknown-operator", 0..0, format!("`{name}` is no operator here"))),
        }
    }

    fn names(&self) -> Vec<String> {
        let mut out: Vec<String> = self.scope.constants.keys().cloned().collect();
        out.extend(self.allowed.parts.iter().map(|(name, _)| name.clone()));
        if self.allowed.control {
            out.extend(self.scope.control.iter().map(|control| control.symbol.clone()));
        }
        out
    }
}
