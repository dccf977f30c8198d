//! The constants of a spec, in whatever order they are written.

use std::collections::{BTreeMap, VecDeque};

use super::raw::{Named, Scalar};
use super::scope::{Allowed, Constant, Scope};
use crate::expr::Expression;
use crate::units::{Dimension, PARTS, Quantity, Unit, Value, is_quantity};

/// Reads all constants into the scope; `overrides` replace numbers, in the unit
/// in which each constant is written.
pub fn read(scope: &mut Scope<'_>, constants: &Named<Scalar>, overrides: &[(String, f64)]) {
    let mut waiting: BTreeMap<&str, (usize, &Scalar)> = BTreeMap::new();
    let mut users: BTreeMap<&str, Vec<&str>> = BTreeMap::new();
    let mut parsed: BTreeMap<&str, Expression> = BTreeMap::new();
    let mut ready = VecDeque::new();
    let all: BTreeMap<&str, &Scalar> =
        constants.0.iter().map(|(name, scalar)| (name.as_str(), scalar)).collect();
    for (name, scalar) in &constants.0 {
        let path = format!("constants.{name}");
        if !scope.symbol(&path, name, scope.key_place(&path)) {
            continue;
        }
        if is_quantity(&scalar.0) {
            ready.push_back(name.as_str());
            continue;
        }
        match Expression::parse(&scalar.0) {
            Ok(expression) => {
                let mut needs: Vec<&str> = expression
                    .names()
                    .iter()
                    .filter_map(|(used, _)| all.get_key_value(*used).map(|(name, _)| *name))
                    .collect();
                needs.sort_unstable();
                needs.dedup();
                for need in &needs {
                    users.entry(need).or_default().push(name);
                }
                if needs.is_empty() {
                    ready.push_back(name);
                } else {
                    waiting.insert(name, (needs.len(), scalar));
                }
                parsed.insert(name, expression);
            }
            Err(fault) => scope.fault(&path, &scalar.0, fault),
        }
    }
    let mut failed: Vec<&str> = Vec::new();
    while let Some(name) = ready.pop_front() {
        if scope.full() {
            break;
        }
        let Some(scalar) = all.get(name) else { continue };
        let constant = one(scope, name, scalar);
        match constant {
            Some(mut constant) => {
                if let Some((_, number)) = overrides.iter().find(|(other, _)| other == name) {
                    let unit = constant.written.1.clone();
                    constant = Constant { value: unit.value(*number), written: (*number, unit) };
                }
                scope.input(
                    format!("constants.{name}"),
                    constant.written.0,
                    constant.written.1.symbol.clone(),
                );
                scope.constants.insert(name.to_owned(), constant);
            }
            None => failed.push(name),
        }
        for user in users.get(name).into_iter().flatten() {
            if let Some((count, _)) = waiting.get_mut(user) {
                *count -= 1;
                if *count == 0 {
                    waiting.remove(user);
                    if scope.constants.contains_key(name) {
                        ready.push_back(user);
                    }
                }
            }
        }
    }
    if failed.is_empty() && scope.problems() == 0 {
        // Whatever still waits, waits for itself in the end.
        for name in waiting.keys().take(20) {
            let path = format!("constants.{name}");
            scope.problem(
                scope
                    .wrong("cyclic-constants", &path, format!("`{name}` is defined through itself"))
                    .action("give one of the constants of this circle a number"),
            );
        }
    }
    for (name, number) in overrides {
        if !scope.constants.contains_key(name) && scope.problems() == 0 {
            scope.problem(
                crate::diagnostic::Diagnostic::new(
                    "unknown-constant",
                    format!("there is no constant `{name}`"),
                )
                .found(number.to_string()),
            );
        }
    }
}

fn one(scope: &Scope<'_>, name: &str, scalar: &Scalar) -> Option<Constant> {
    let path = format!("constants.{name}");
    if is_quantity(&scalar.0) {
        let quantity = match Quantity::parse(&scalar.0) {
            Ok(quantity) => quantity,
            Err(fault) => {
                scope.fault(&path, &scalar.0, fault);
                return None;
            }
        };
        let unit = quantity.unit.clone().unwrap_or_else(Unit::one);
        return Some(Constant { value: quantity.value(), written: (quantity.number(), unit) });
    }
    let resolved = scope.coherent(&path, scalar, Allowed::default())?;
    let Some(value) = resolved.value() else {
        scope.problem(scope.wrong("not-constant", &path, "only constants may stand here"));
        return None;
    };
    Some(Constant { value, written: written(value) })
}

/// A computed number in a unit that readers know.
fn written(value: Value) -> (f64, Unit) {
    let common = [
        (Dimension::LENGTH, "nm"),
        (Dimension::ENERGY, "eV"),
        (Dimension::FREQUENCY, "Hz"),
        (Dimension::FIELD, "V/m"),
    ];
    let unit = common
        .iter()
        .find(|(dimension, _)| *dimension == value.dimension)
        .and_then(|(_, symbol)| Unit::parse(symbol).ok())
        .or_else(|| base_units(value.dimension));
    match unit.and_then(|unit| value.in_unit(&unit).ok().map(|number| (number, unit))) {
        Some(written) => written,
        // Fractional powers have no unit in the language: the coherent number then.
        None => (
            value.number,
            Unit {
                symbol: value.dimension.describe(),
                dimension: value.dimension,
                mantissa: 1.0,
                exponent: 0,
            },
        ),
    }
}

fn base_units(dimension: Dimension) -> Option<Unit> {
    let mut parts = Vec::new();
    for (symbol, exponent) in ["m", "kg", "s", "A", "K", "mol", "cd"].iter().zip(dimension.0) {
        match (exponent % PARTS, exponent / PARTS) {
            (0, 0) => {}
            (0, 1) => parts.push((*symbol).to_owned()),
            (0, power) => parts.push(format!("{symbol}^{power}")),
            _ => return None,
        }
    }
    if parts.is_empty() { Some(Unit::one()) } else { Unit::parse(&parts.join("*")).ok() }
}
