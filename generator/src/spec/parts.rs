//! Hamiltonians written in operators.

use super::raw::{self, OneOr, Scalar};
use super::scope::{Allowed, Bare, Scope};
use super::tree::short;
use super::units_of::unit;
use super::{Part, PartKind, Parts};
use crate::units::{EnergyKind, Unit};

/// Most states of one finite part.
const MOST_STATES: usize = 10_000;

/// Reach of a coordinate without walls that is looked at for kinks.
const REACH: f64 = 30.0;

pub fn parts(scope: &Scope<'_>, path: &str, raw: &raw::System) -> Option<Parts> {
    let mut parts = Vec::new();
    let mut good = true;
    for (name, value) in &raw.parts.0 {
        let path = format!("{path}.parts.{name}");
        let clash = scope.constants.contains_key(name)
            || scope.control.as_ref().is_some_and(|control| control.symbol == *name);
        if clash {
            scope.problem(
                crate::diagnostic::Diagnostic::new(
                    "name-clash",
                    format!("`{name}` names a part and a constant or the control"),
                )
                .at(Some(scope.key_place(&path)))
                .action("rename one of them"),
            );
        }
        good &= !clash && scope.symbol(&path, name, scope.key_place(&path));
        match part(scope, &path, name, value) {
            Some(part) => parts.push(part),
            None => good = false,
        }
    }
    if raw.parts.0.is_empty() {
        scope.problem(scope.wrong("empty-parts", &format!("{path}.parts"), "there is no part here"));
        return None;
    }
    if !good {
        return None;
    }
    let kinds: Vec<(String, PartKind)> = parts.iter().map(|part| (part.name.clone(), part.kind)).collect();
    let allowed = Allowed { control: true, position: false, parts: &kinds };
    let text_path = format!("{path}.hamiltonian");
    let text = raw.hamiltonian.as_ref()?;
    let resolved = scope.coherent(&text_path, text, allowed)?;
    let kind = match resolved.dimension {
        None => EnergyKind::Number,
        Some(dimension) => match EnergyKind::of(dimension) {
            Some(kind) => kind,
            None => {
                scope.problem(
                    scope
                        .wrong("dimension", &text_path, "a Hamiltonian is an energy in some form")
                        .found(dimension.describe())
                        .expected("an energy, a frequency, a wavenumber, a temperature or a pure number"),
                );
                return None;
            }
        },
    };
    let used = resolved.tree.parts();
    for (_, part) in parts.iter().enumerate().filter(|(index, _)| !used.contains(index)) {
        good = false;
        let path = format!("{path}.parts.{}", part.name);
        scope.problem(
            crate::diagnostic::Diagnostic::new(
                "unused-part",
                format!("the Hamiltonian never uses the part `{}`", part.name),
            )
            .at(Some(scope.key_place(&path)))
            .action("remove the part, or bring it into the Hamiltonian"),
        );
    }
    let reach = parts.iter().fold((-REACH, REACH), |reach, part| match part.kind {
        PartKind::Interval { from, to, .. } => (from, to),
        _ => reach,
    });
    good &= scope.unkinked(&text_path, &resolved.tree, reach);
    let mut conserved = Vec::new();
    for (name, text) in &raw.conserved.0 {
        let path = format!("{path}.conserved.{name}");
        let allowed = Allowed { control: false, position: false, parts: &kinds };
        good &= scope.name(&path, name, false, scope.key_place(&path));
        let Some(operator) = scope.coherent(&path, text, allowed) else {
            good = false;
            continue;
        };
        if let Some(dimension) = operator.dimension.filter(|dimension| !dimension.is_none()) {
            scope.problem(
                scope
                    .wrong("dimension", &path, "a conserved operator is a pure number")
                    .found(dimension.describe()),
            );
            good = false;
        }
        conserved.push((name.clone(), operator.tree, scope.place(&path)));
    }
    good.then(|| Parts {
        parts,
        hamiltonian: resolved.tree,
        unit: kind.coherent_unit(),
        place: scope.place(&text_path),
        conserved,
    })
}

fn part(scope: &Scope<'_>, path: &str, name: &str, raw: &OneOr<raw::Named<raw::Size>>) -> Option<Part> {
    let (words, size) = match raw {
        OneOr::One(words) => (words.0.clone(), None),
        OneOr::More(sized) => match sized.0.as_slice() {
            [(words, size)] => {
                let path = format!("{path}.{words}.size");
                (words.clone(), Some(scope.whole(&path, &size.size, 1, MOST_STATES)?))
            }
            _ => {
                scope.problem(
                    scope
                        .wrong("wrong-form", path, "a part is of one kind")
                        .expected("`{rotor: {size: 12}}`"),
                );
                return None;
            }
        },
    };
    let kind = kind(scope, path, &words)?;
    if size.is_some() && matches!(kind, PartKind::Spin(_) | PartKind::States(_)) {
        scope.problem(
            scope
                .wrong("size", path, "the size of this part is fixed by its kind")
                .action(format!("write `{name}: {}`", short(&words))),
        );
        return None;
    }
    Some(Part { name: name.to_owned(), kind, size, place: scope.place(path) })
}

fn kind(scope: &Scope<'_>, path: &str, words: &str) -> Option<PartKind> {
    let unknown = || {
        let head = words.split_whitespace().next().unwrap_or("");
        let known = ["spin", "rotor", "oscillator", "phase", "interval", "states"];
        let fault = scope
            .wrong("unknown-part", path, "there is no such kind of part")
            .found(format!("`{}`", short(words)))
            .expected("spin j, rotor, oscillator, phase, interval A to B, or states n");
        scope.problem(match crate::units::nearest(head, known) {
            Some(near) if near != head => fault.action(format!("write `{near}`, if that is meant")),
            _ => fault,
        });
        None
    };
    let trimmed = words.trim();
    let (head, rest) = trimmed.split_once(char::is_whitespace).unwrap_or((trimmed, ""));
    let rest = rest.trim();
    match (head, rest) {
        ("rotor", "") => Some(PartKind::Rotor),
        ("oscillator", "") => Some(PartKind::Oscillator),
        ("phase", "") => Some(PartKind::Phase),
        ("spin", rest) => {
            let twice = match rest.split_once('/') {
                Some((top, "2")) => top.trim().parse::<usize>().ok(),
                Some(_) => None,
                None => rest
                    .parse::<f64>()
                    .ok()
                    .map(|j| 2.0 * j)
                    .filter(|twice| {
                        *twice >= 1.0 && *twice < MOST_STATES as f64 && libm::floor(*twice) == *twice
                    })
                    .map(|twice| twice as usize),
            };
            match twice.filter(|twice| (1..MOST_STATES).contains(twice)) {
                Some(twice) => {
                    scope.input(path, twice as f64 / 2.0, "1");
                    Some(PartKind::Spin(twice))
                }
                None => unknown(),
            }
        }
        ("states", rest) => match rest.parse::<usize>().ok().filter(|n| (1..=MOST_STATES).contains(n)) {
            Some(count) => {
                scope.input(path, count as f64, "1");
                Some(PartKind::States(count))
            }
            None => unknown(),
        },
        ("interval", rest) => match rest.split_once(" to ") {
            Some((from, to)) => interval(scope, path, from.trim(), to.trim()),
            None => unknown(),
        },
        _ => unknown(),
    }
}

fn interval(scope: &Scope<'_>, path: &str, from: &str, to: &str) -> Option<PartKind> {
    // Lengths or numbers: the first end that is not 0 decides.
    let length = [from, to].iter().any(|text| {
        if crate::units::is_quantity(text) {
            crate::units::Quantity::parse(text).is_ok_and(|quantity| !quantity.is_bare())
        } else {
            crate::expr::Expression::parse(text).is_ok_and(|expression| {
                expression
                    .names()
                    .iter()
                    .any(|(name, _)| scope.constants.get(*name).is_some_and(|c| !c.value.dimension.is_none()))
            })
        }
    });
    let unit = if length { unit("nm")? } else { Unit::one() };
    let end = |key: &str, text: &str| {
        scope.number(&format!("{path}.{key}"), &Scalar(text.to_owned()), &unit, Bare::Refused)
    };
    let (from, to) = (end("from", from)?, end("to", to)?);
    if from < to {
        return Some(PartKind::Interval { from, to, length });
    }
    scope.problem(
        scope
            .wrong("empty-interval", path, "the interval is empty")
            .found(format!("{from} to {to} {}", unit.symbol))
            .expected("its lower end first"),
    );
    None
}
