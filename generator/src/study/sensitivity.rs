//! How formulas move with the constants of their spec.
//!
//! Each constant that is written as a number is moved to both sides, at two steps; the
//! derivative is extrapolated from both (Richardson), and their difference says how
//! well it is known. Ends of a range are differenced at one step.
//!
//! Source: Richardson's extrapolation as in Abramowitz and Stegun, 25.3 and 25.4
//! (from memory).

use serde::Serialize;

use crate::outcome::{FormulaOutcome, Outcome};
use crate::pipeline;
use crate::spec::{Document, Spec};

/// Part of a constant by which it is moved.
const STEP: f64 = 1e-3;

/// One formula's derivatives with respect to one constant.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Sensitivity {
    /// Formula's name.
    pub formula: String,
    /// Constant's name.
    pub constant: String,
    /// Unit in which the constant is written.
    pub unit: String,
    /// Its number.
    pub value: f64,
    /// Derivatives of E0, a and b per unit of the constant.
    pub derivatives: [f64; 3],
    /// Estimated error of each.
    pub uncertainty: [f64; 3],
    /// Changes of E0, a and b for one per cent more of the constant.
    pub per_cent: [f64; 3],
    /// Derivatives of the lower and the upper end of the range; null where an end is the one
    /// that was asked for.
    pub range: [Option<f64>; 2],
}

/// Sensitivities of every formula to every constant that is written as a number, per formula
/// by falling change of E0 per cent.
///
/// A constant that may not be moved, since the spec is refused or not solved to one side of
/// it, is left out.
#[must_use]
pub fn sensitivities(document: &Document, spec: &Spec) -> Vec<Sensitivity> {
    if !spec.family.is_empty() {
        return Vec::new();
    }
    let mut out = Vec::new();
    for (name, value, unit) in document.numbers(spec) {
        let step = if value == 0.0 { STEP } else { STEP * value.abs() };
        let moved = |steps: f64| document.resolve(&[(name.clone(), value + steps * step)]);
        let (Ok(low), Ok(high), Ok(near), Ok(far)) = (moved(-1.0), moved(1.0), moved(-0.5), moved(0.5))
        else {
            continue;
        };
        let solved = [&low, &high, &near, &far].map(|one| pipeline::series(one).ok());
        let [Some(a), Some(b), Some(c), Some(d)] = solved else { continue };
        let series = [a, b, c, d];
        let ends: [Option<Outcome>; 2] = [pipeline::solve(&low).ok(), pipeline::solve(&high).ok()];
        for (idx, formula) in spec.formulas.iter().enumerate() {
            let at = |which: usize, power: usize| series[which].get(idx).map_or(f64::NAN, |one| one[power]);
            let mut derivatives = [0.0; 3];
            let mut uncertainty = [0.0; 3];
            for power in 0..3 {
                let wide = (at(1, power) - at(0, power)) / (2.0 * step);
                let narrow = (at(3, power) - at(2, power)) / step;
                derivatives[power] = (4.0 * narrow - wide) / 3.0;
                uncertainty[power] = (narrow - wide).abs();
            }
            if derivatives.iter().all(|one| *one == 0.0) {
                continue;
            }
            let end = |side: usize| -> Option<f64> {
                let limited = |one: &FormulaOutcome| one.valid.limited_by[side] != "within";
                let place = |one: &FormulaOutcome| if side == 0 { one.valid.from } else { one.valid.to };
                let [low, high] =
                    ends.each_ref().map(|one| one.as_ref().and_then(|one| one.formulas.get(idx)));
                let (low, high) = (low.filter(|one| limited(one))?, high.filter(|one| limited(one))?);
                Some((place(high) - place(low)) / (2.0 * step))
            };
            out.push(Sensitivity {
                formula: formula.name.clone(),
                constant: name.clone(),
                unit: unit.clone(),
                value,
                derivatives,
                uncertainty,
                per_cent: derivatives.map(|one| 0.01 * value.abs() * one),
                range: [end(0), end(1)],
            });
        }
    }
    let place = |one: &Sensitivity| spec.formulas.iter().position(|formula| formula.name == one.formula);
    out.sort_by(|a, b| place(a).cmp(&place(b)).then(b.per_cent[0].abs().total_cmp(&a.per_cent[0].abs())));
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::spec::NoFiles;

    /// Levels of a two-level matrix written as parts: E0 = -sqrt(d^2 + g^2), by hand.
    #[test]
    fn derivatives_of_a_pair_are_those_of_its_closed_form() {
        let text = "spec: 1\nname: pair\nsummary: s\nconstants: {d: 3, g: 4}\nsystems:\n  s:\n    kind: parts\n    parts: {q: states 2}\n    \
                    hamiltonian: d*(q.projector(1) - q.projector(2)) + g*q.couple(1, 2) + x*q.projector(1)\ncontrol: {symbol: x, unit: 1, within: [-1, 1]}\n\
                    formulas:\n  low:\n    unit: 1\n    sum: [{system: s, level: 1}]\n    tolerance: 0.1\n";
        let document = Document::parse("pair.yaml", text.as_bytes(), &NoFiles).unwrap();
        let spec = document.resolve(&[]).unwrap();
        let found = sensitivities(&document, &spec);
        let of = |name: &str| found.iter().find(|one| one.constant == name).unwrap();
        assert!((of("d").derivatives[0] + 0.6).abs() < 1e-9, "{:?}", of("d"));
        assert!((of("g").derivatives[0] + 0.8).abs() < 1e-9, "{:?}", of("g"));
        // a = (1 - d / sqrt(d^2 + g^2)) / 2, so da/dd = -g^2 / (2 (d^2 + g^2)^(3/2)).
        assert!((of("d").derivatives[1] + 16.0 / 250.0).abs() < 1e-9, "{:?}", of("d"));
        assert_eq!(found[0].constant, "g");
    }
}
