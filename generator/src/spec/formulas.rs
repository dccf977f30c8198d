//! Formulas: what is wanted, in which form, how exactly.

use super::raw::{self, OneOr, Scalar};
use super::scope::{Bare, Scope};
use super::tree::short;
use super::{
    CoefficientChoice, Count, FormChoice, Formula, Kind, LevelRef, PartKind, System, Target, Term, TermKind,
};
use crate::expr::Tree;
use crate::outcome::ValueKind;
use crate::units::{EnergyKind, Unit, nearest};

/// Largest number of a level.
const HIGHEST_LEVEL: usize = 10_000;

/// One formula.
pub fn formula(
    scope: &Scope<'_>,
    systems: &[System],
    family: bool,
    name: &str,
    raw: &raw::Formula,
) -> Option<Formula> {
    let path = format!("formulas.{name}");
    let key = |key: &str| format!("{path}.{key}");
    let unit = scope.unit(&key("unit"), &raw.unit)?;
    let Some(kind) = EnergyKind::of(unit.dimension) else {
        scope.problem(
            scope
                .wrong("dimension", &key("unit"), "a level is not stated in this unit")
                .found(unit.dimension.describe())
                .expected("a unit of energy, frequency, wavenumber or temperature, or 1"),
        );
        return None;
    };
    let target = target(scope, systems, &path, raw, &unit, kind);
    let form = match &raw.form {
        None => Some(FormChoice::Polynomial),
        Some(word) => scope.word(
            &key("form"),
            word,
            &[
                ("polynomial", FormChoice::Polynomial),
                ("paired", FormChoice::Paired),
                ("auto", FormChoice::Auto),
            ],
        ),
    };
    let coefficients = match &raw.coefficients {
        None => Some(CoefficientChoice::Series),
        Some(word) => scope.word(
            &key("coefficients"),
            word,
            &[("series", CoefficientChoice::Series), ("minimax", CoefficientChoice::Minimax)],
        ),
    };
    let order = match &raw.order {
        None => Some(2),
        Some(scalar) => scope.whole(&key("order"), scalar, 1, 4),
    };
    let partner = match &raw.partner {
        None => Some(None),
        Some(scalar) => scope.whole(&key("partner"), scalar, 1, HIGHEST_LEVEL).map(Some),
    };
    let tolerance = scope.energy(&key("tolerance"), &raw.tolerance, &unit).filter(|tolerance| {
        let good = *tolerance > 0.0;
        if !good {
            scope.problem(
                scope
                    .wrong("not-positive", &key("tolerance"), "a tolerance must be positive")
                    .found(format!("{tolerance} {}", unit.symbol)),
            );
        }
        good
    });
    let (value, count) = value(scope, &key("value"), raw.value.as_ref(), &unit)?;
    let (target, form, coefficients) = (target?, form?, coefficients?);
    let refuse = |at: &str, message: &str, action: &str| {
        scope.problem(scope.wrong("contradiction", &key(at), message).action(action));
    };
    let partner = partner?;
    if partner.is_some() && form == FormChoice::Polynomial {
        refuse("partner", "a partner belongs to a pair", "add `form: paired`, or remove `partner`");
        return None;
    }
    if coefficients == CoefficientChoice::Minimax && form != FormChoice::Polynomial {
        refuse("coefficients", "`minimax` is for polynomials", "remove `coefficients`, or `form`");
        return None;
    }
    if coefficients == CoefficientChoice::Minimax && family {
        refuse("coefficients", "`minimax` does not go with a family", "remove `coefficients`, or `family`");
        return None;
    }
    match &target {
        Target::Overlap(..) if form != FormChoice::Polynomial => {
            refuse("form", "an overlap has no pair form", "remove `form`");
            return None;
        }
        Target::Sum(terms) if form == FormChoice::Paired => {
            let levels: Vec<&LevelRef> = terms
                .iter()
                .filter_map(|term| if let TermKind::Level(level) = &term.kind { Some(level) } else { None })
                .collect();
            if levels.is_empty() {
                refuse("form", "there is no level to pair", "remove `form`");
                return None;
            }
            if let Some(partner) = partner
                && levels.iter().any(|level| level.level == partner)
                && levels.len() == 1
            {
                refuse("partner", "a level is not its own partner", "name another level");
                return None;
            }
        }
        _ => {}
    }
    Some(Formula {
        name: name.to_owned(),
        place: scope.key_place(&path),
        unit,
        target,
        form,
        partner,
        order: order?,
        coefficients,
        value,
        tolerance: tolerance?,
        tolerance_place: scope.place(&key("tolerance")),
        count,
    })
}

fn value(
    scope: &Scope<'_>,
    path: &str,
    raw: Option<&OneOr<raw::Count>>,
    unit: &Unit,
) -> Option<(ValueKind, Option<Count>)> {
    let words = [("absolute", ValueKind::Absolute), ("shift", ValueKind::Shift)];
    match raw {
        None => Some((ValueKind::Absolute, None)),
        Some(OneOr::One(word)) => scope.word(path, word, &words).map(|value| (value, None)),
        Some(OneOr::More(raw)) => {
            let value = match &raw.of {
                None => ValueKind::Absolute,
                Some(word) => scope.word(&format!("{path}.of"), word, &words)?,
            };
            count(scope, path, &raw.bits, &raw.step, unit).map(|count| (value, Some(count)))
        }
    }
}

/// A signed integer that counts steps of a unit.
pub fn count(scope: &Scope<'_>, path: &str, bits: &Scalar, step: &Scalar, unit: &Unit) -> Option<Count> {
    let bits_path = format!("{path}.bits");
    let bits = scope.whole(&bits_path, bits, 8, 32).filter(|bits| {
        let good = matches!(bits, 8 | 16 | 32);
        if !good {
            scope.problem(
                scope
                    .wrong("width", &bits_path, "there are no integers of this width")
                    .found(bits.to_string())
                    .expected("8, 16 or 32"),
            );
        }
        good
    });
    let step_path = format!("{path}.step");
    let step = scope.energy(&step_path, step, unit).filter(|step| {
        let good = *step > 0.0;
        if !good {
            scope.problem(
                scope
                    .wrong("not-positive", &step_path, "a step must be positive")
                    .found(format!("{step} {}", unit.symbol)),
            );
        }
        good
    });
    let (bits, step) = (bits?, step?);
    Some(Count { bits: bits as u32, step, place: scope.place(&step_path) })
}

fn target(
    scope: &Scope<'_>,
    systems: &[System],
    path: &str,
    raw: &raw::Formula,
    unit: &Unit,
    kind: EnergyKind,
) -> Option<Target> {
    match (&raw.sum, &raw.overlap) {
        (Some(terms), None) => {
            if terms.is_empty() {
                scope.problem(scope.wrong("empty-sum", &format!("{path}.sum"), "the sum has no terms"));
                return None;
            }
            let mut out = Vec::new();
            let mut good = true;
            for (index, raw) in terms.iter().enumerate() {
                match term(scope, systems, &format!("{path}.sum[{index}]"), raw, unit, kind) {
                    Some(term) => out.push(term),
                    None => good = false,
                }
            }
            (good && one_origin(scope, systems, path, &out)).then_some(Target::Sum(out))
        }
        (None, Some(levels)) => overlap(scope, systems, path, levels, kind),
        (None, None) => {
            scope.problem(
                scope
                    .wrong("missing-key", path, "`sum` is missing here")
                    .action("add `sum: [{system: ..., level: 1}]`, or `overlap: [..., ...]`"),
            );
            None
        }
        (Some(_), Some(_)) => {
            scope.problem(
                scope
                    .wrong("contradiction", &format!("{path}.overlap"), "a formula is a sum or an overlap")
                    .action("remove one of the two"),
            );
            None
        }
    }
}

fn overlap(
    scope: &Scope<'_>,
    systems: &[System],
    path: &str,
    levels: &[raw::Term],
    kind: EnergyKind,
) -> Option<Target> {
    let key = format!("{path}.overlap");
    if kind != EnergyKind::Number {
        scope.problem(
            scope
                .wrong("dimension", &format!("{path}.unit"), "an overlap is a pure number")
                .expected("`unit: 1`"),
        );
        return None;
    }
    let [one, other] = levels else {
        scope.problem(
            scope
                .wrong("overlap", &key, "an overlap is of two levels")
                .found(format!("{} levels", levels.len())),
        );
        return None;
    };
    let one = level(scope, systems, &format!("{key}[0]"), one);
    let other = level(scope, systems, &format!("{key}[1]"), other);
    let (one, other) = (one?, other?);
    for (index, level) in [&one, &other].into_iter().enumerate() {
        if !matches!(systems.get(level.system).map(|system| &system.kind), Some(Kind::Layers(_))) {
            scope.problem(
                scope
                    .wrong(
                        "overlap",
                        &format!("{key}[{index}]"),
                        "only levels of layer stacks have envelopes",
                    )
                    .expected("a system of `kind: layers`"),
            );
            return None;
        }
    }
    Some(Target::Overlap(one, other))
}

fn term(
    scope: &Scope<'_>,
    systems: &[System],
    path: &str,
    raw: &raw::Term,
    unit: &Unit,
    kind: EnergyKind,
) -> Option<Term> {
    let times = match &raw.times {
        None => 1.0,
        Some(scalar) => scope.number(&format!("{path}.times"), scalar, &Unit::one(), Bare::InUnit)?,
    };
    let level_key = raw.system.is_some() || raw.level.is_some() || !raw.block.0.is_empty();
    let kind = match (&raw.constant, &raw.expression, level_key) {
        (Some(constant), None, false) => {
            let path = format!("{path}.constant");
            let known = scope.constants.get(&constant.0);
            let Some(known) = known else {
                let names: Vec<&str> = scope.constants.keys().map(String::as_str).collect();
                let fault = scope
                    .wrong("unknown-name", &path, "there is no such constant")
                    .found(format!("`{}`", short(&constant.0)));
                scope.problem(match nearest(&constant.0, names.iter().copied()) {
                    Some(near) => fault.action(format!("write `{near}`, if that is meant")),
                    None => fault.action("define it under `constants`, or write `expression: ...`"),
                });
                return None;
            };
            let number = if known.value.number == 0.0 && known.value.dimension.is_none() {
                Ok(0.0)
            } else {
                known.value.in_energy_unit(unit)
            };
            match number {
                Ok(number) => {
                    scope.input(path, known.written.0, known.written.1.symbol.clone());
                    TermKind::Known(Tree::Number(number))
                }
                Err(fault) => {
                    scope.fault(&path, &constant.0, fault);
                    return None;
                }
            }
        }
        (None, Some(expression), false) => {
            TermKind::Known(scope.energy_tree(&format!("{path}.expression"), expression, unit)?)
        }
        (None, None, true) => {
            let level = level(scope, systems, path, raw)?;
            let own = systems.get(level.system).map(|system| match &system.kind {
                Kind::Matrix(matrix) => matrix.unit.dimension,
                Kind::Parts(parts) => parts.unit.dimension,
                Kind::Layers(_) | Kind::Radial(_) => crate::units::Dimension::ENERGY,
            })?;
            if own.is_none() != (kind == EnergyKind::Number) {
                let formula = path.rsplit_once(".sum").map_or(path, |(head, _)| head);
                scope.problem(
                    scope
                        .wrong("dimension", &format!("{formula}.unit"), "the level is of another kind")
                        .found(unit.dimension.describe())
                        .expected(own.describe()),
                );
                return None;
            }
            TermKind::Level(level)
        }
        _ => {
            scope.problem(
                scope
                    .wrong("term", path, "a term is one of three")
                    .expected("`{system: , level: }`, `{constant: name}` or `{expression: ...}`"),
            );
            return None;
        }
    };
    Some(Term { times, kind })
}

fn level(scope: &Scope<'_>, systems: &[System], path: &str, raw: &raw::Term) -> Option<LevelRef> {
    let (Some(name), Some(number)) = (&raw.system, &raw.level) else {
        let missing = if raw.system.is_none() { "system" } else { "level" };
        scope.problem(scope.wrong("missing-key", path, format!("`{missing}` is missing here")));
        return None;
    };
    let Some(index) = systems.iter().position(|system| system.name == name.0) else {
        let names: Vec<&str> = systems.iter().map(|system| system.name.as_str()).collect();
        let fault = scope
            .wrong("unknown-system", &format!("{path}.system"), "there is no such system")
            .found(format!("`{}`", short(&name.0)))
            .expected(format!("one of {}", names.join(", ")));
        scope.problem(match nearest(&name.0, names.iter().copied()) {
            Some(near) => fault.action(format!("write `{near}`, if that is meant")),
            None => fault,
        });
        return None;
    };
    let system = systems.get(index)?;
    let most = states(&system.kind).unwrap_or(HIGHEST_LEVEL).min(HIGHEST_LEVEL);
    let level = scope.whole(&format!("{path}.level"), number, 1, most)?;
    let known: Vec<&str> = match &system.kind {
        Kind::Layers(_) | Kind::Matrix(_) => Vec::new(),
        Kind::Parts(parts) => parts.conserved.iter().map(|(name, ..)| name.as_str()).collect(),
        Kind::Radial(_) => vec!["l", "m"],
    };
    let mut block = Vec::new();
    for (name, value) in &raw.block.0 {
        let path = format!("{path}.where.{name}");
        if !known.contains(&name.as_str()) {
            let fault = crate::diagnostic::Diagnostic::new(
                "unknown-conserved",
                format!("`{}` is not conserved in `{}`", short(name), system.name),
            )
            .at(Some(scope.key_place(&path)));
            scope.problem(if known.is_empty() {
                fault.action("remove `where`, or name the operator under `conserved`")
            } else {
                fault.expected(format!("one of {}", known.join(", ")))
            });
            return None;
        }
        let number = scope.number(&path, value, &Unit::one(), Bare::InUnit)?;
        if matches!(system.kind, Kind::Radial(_))
            && (libm::floor(number) != number || (name == "l" && number < 0.0))
        {
            scope.problem(
                scope
                    .wrong("not-whole", &path, "this value cannot occur")
                    .found(number.to_string())
                    .expected("a whole number; `l` from 0"),
            );
            return None;
        }
        block.push((name.clone(), number));
    }
    Some(LevelRef { system: index, level, block, place: scope.place(path) })
}

/// Number of states of a finite system.
fn states(kind: &Kind) -> Option<usize> {
    match kind {
        Kind::Matrix(matrix) => matrix.h.first().map(nalgebra::DMatrix::nrows),
        Kind::Parts(parts) => parts.parts.iter().try_fold(1_usize, |product, part| {
            let size = match part.kind {
                PartKind::Spin(twice) => twice + 1,
                PartKind::States(count) => count,
                _ => return None,
            };
            Some(product.saturating_mul(size))
        }),
        Kind::Layers(_) | Kind::Radial(_) => None,
    }
}

/// Stacks of different length in one sum must say where their field is zero.
fn one_origin(scope: &Scope<'_>, systems: &[System], path: &str, terms: &[Term]) -> bool {
    let mut first: Option<(f64, &str)> = None;
    for term in terms {
        let TermKind::Level(level) = &term.kind else { continue };
        let Some(system) = systems.get(level.system) else { continue };
        let Kind::Layers(layers) = &system.kind else { continue };
        if layers.field.is_none() {
            continue;
        }
        let length: f64 = layers.stack.iter().map(|layer| layer.thickness).sum();
        match first {
            None => first = Some((length, &system.name)),
            Some((other, name)) if (length - other).abs() > 1e-9 * length.max(other) => {
                let written = |name: &str| scope.text.root.find(&format!("systems.{name}.origin")).is_some();
                if written(name) && written(&system.name) {
                    continue;
                }
                scope.problem(
                    scope
                        .wrong("origin", &format!("{path}.sum"), "the stacks of this sum differ in length")
                        .found(format!("`{name}` {other} nm, `{}` {length} nm", system.name))
                        .action("write `origin: start` or a length in each, so that both mean one point"),
                );
                return false;
            }
            Some(_) => {}
        }
    }
    true
}
