//! Proof that a Hamiltonian written in operators looks the same on both sides of
//! the operating point.
//!
//! In: the Hamiltonian's tree, with `control = at + d`. Sought: a signed
//! transformation of the parts, with or without reversal of time, under which
//! every product changes by the sign `(-1)^(power of d)`. Each elementary operator
//! changes sign or not according to a few bits per part, so a product's sign is
//! the sum of its bits modulo 2, and the search is one linear system over the
//! field of two elements. Nothing is compared numerically: the only arithmetic
//! is the collecting of equal products, and a coefficient counts as zero when it
//! is exactly zero.
//!
//! Not here: what follows for the levels.

mod forms;

use forms::{Form, Key, NUMBER, Search};

use crate::expr::Tree;
use crate::spec::{PartKind, Parts};

impl Search<'_> {
    /// A solution of all equations, bits as true or false; `None` if there is none.
    fn solve(&self, without_reversal: bool) -> Option<Vec<bool>> {
        let unknowns = self.reversal + 1;
        let mut rows = self.equations.clone();
        if without_reversal {
            rows.push(self.form(&[self.reversal]));
        }
        let mut pivots: Vec<(usize, Form)> = Vec::new();
        for mut row in rows {
            for (bit, pivot) in &pivots {
                if row.has(*bit) {
                    row = row.plus(pivot);
                }
            }
            if let Some(bit) = (0..unknowns).find(|bit| row.has(*bit)) {
                for (_, pivot) in &mut pivots {
                    if pivot.has(bit) {
                        *pivot = pivot.plus(&row);
                    }
                }
                pivots.push((bit, row));
            } else if !row.is_zero() {
                return None;
            }
        }
        // Unknowns without a pivot are free and stay off.
        let mut out = vec![false; unknowns];
        for (bit, pivot) in &pivots {
            if let Some(slot) = out.get_mut(*bit) {
                *slot = pivot.known;
            }
        }
        Some(out)
    }

    /// The transformation in words.
    fn describe(&self, solution: &[bool]) -> String {
        let mut words = Vec::new();
        let on = |bit: usize| solution.get(bit).copied().unwrap_or(false);
        for (idx, (part, bits)) in self.system.parts.iter().zip(&self.bits).enumerate() {
            let name = &part.name;
            let flags: Vec<bool> = (0..bits.count).map(|bit| on(bits.first + bit)).collect();
            let text = match (part.kind, flags.as_slice()) {
                (PartKind::Spin(_), [true, true]) => format!("{name} turned by pi about z"),
                (PartKind::Spin(_), [false, true]) => format!("{name} turned by pi about x"),
                (PartKind::Spin(_), [true, false]) => format!("{name} turned by pi about y"),
                (PartKind::States(2), [true, true]) => format!("the sign of one state of {name}"),
                (PartKind::States(2), [false, true]) => format!("the two states of {name} exchanged"),
                (PartKind::States(2), [true, false]) => {
                    format!("the two states of {name} exchanged, one with its sign")
                }
                (PartKind::Rotor, [true, false]) => format!("(-1)^J of {name}"),
                (PartKind::Rotor, [false, true]) => format!("{name} mirrored, M to -M"),
                (PartKind::Rotor, [true, true]) => format!("(-1)^J of {name} and M to -M"),
                (PartKind::Oscillator, [true]) => format!("(-1)^n of {name}"),
                (PartKind::Interval { .. }, [true]) => format!("{name} mirrored about its middle"),
                (PartKind::Phase, [reflected, alternating]) if *reflected || *alternating => {
                    let centre = self.centres.get(idx).copied().unwrap_or(0.0);
                    let mut text = Vec::new();
                    if *reflected {
                        text.push(if centre == 0.0 {
                            format!("n to -n of {name}")
                        } else {
                            format!("n to {centre} - n of {name}")
                        });
                    }
                    if *alternating {
                        text.push(format!("(-1)^n of {name}"));
                    }
                    text.join(" and ")
                }
                (PartKind::States(_), flags) if flags.contains(&true) => format!("signs of states of {name}"),
                _ => continue,
            };
            words.push(text);
        }
        if on(self.reversal) {
            words.push("reversal of time".to_owned());
        }
        if words.is_empty() { "no change at all".to_owned() } else { words.join(", ") }
    }
}

/// Twice the charge about which a phase's Hamiltonian is centred at the operating
/// point, for every part (0 for other kinds): minus the coefficient of the number
/// over that of its square.
pub(super) fn charge_centres(system: &Parts, at: f64) -> Vec<i64> {
    let mut search = Search::new(system, at);
    let polynomial = search.polynomial(&system.hamiltonian);
    let coefficient = |part: usize, count: usize| {
        let key = Key { power: 0, word: vec![(part, NUMBER); count] };
        polynomial.as_ref().and_then(|polynomial| polynomial.get(&key)).map_or(0.0, |(value, _)| value.re)
    };
    system
        .parts
        .iter()
        .enumerate()
        .map(|(part, one)| {
            let (linear, square) = (coefficient(part, 1), coefficient(part, 2));
            let twice = libm::round(-linear / square);
            if one.kind == PartKind::Phase && twice.abs() < 1e6 { twice as i64 } else { 0 }
        })
        .collect()
}

/// Why the Hamiltonian at `at + d` and at `at - d` are the same up to a signed
/// transformation that leaves the block as it is: a sentence, or `None` if none was
/// found.
///
/// - `centres`: from [`charge_centres`];
/// - `block`: operators whose value selects the block, with that value.
pub(super) fn parity(system: &Parts, at: f64, centres: &[i64], block: &[(&Tree, f64)]) -> Option<String> {
    let mut search = Search::new(system, at);
    for (slot, (part, centre)) in search.centres.iter_mut().zip(system.parts.iter().zip(centres)) {
        if part.kind == PartKind::Phase {
            *slot = *centre as f64;
        }
    }
    for (idx, (part, centre)) in system.parts.iter().zip(centres).enumerate() {
        // A range of charges that the spec fixes may lie askew about the centre.
        if part.kind == PartKind::Phase
            && part.size.is_some_and(|size| (size % 2 == 0) != (centre % 2 != 0))
            && let Some(bits) = search.bits.get(idx)
        {
            let reflected = search.form(&[bits.first]);
            search.equations.push(reflected);
        }
    }
    let polynomial = search.polynomial(&system.hamiltonian)?;
    search.demand(&polynomial);
    for (operator, value) in block {
        let polynomial = search.polynomial(operator)?;
        if *value == 0.0 {
            // The block of value 0 stays itself where the operator as a whole changes sign.
            let form = search.uniform(&polynomial);
            let _ = form;
            if polynomial.values().any(|(value, _)| value.im != 0.0) {
                let reversal = search.form(&[search.reversal]);
                search.equations.push(reversal);
            }
        } else {
            search.demand(&polynomial);
        }
    }
    let solution = search.solve(true).or_else(|| search.solve(false))?;
    Some(format!(
        "the Hamiltonian is the same on both sides of the operating point, under {}",
        search.describe(&solution)
    ))
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use crate::model::AnyModel;
    use crate::model::parts::tests::{Sketch, levels};
    use crate::spec::PartKind;

    const PARTS: [(&str, PartKind, Option<usize>); 5] = [
        ("S", PartKind::Spin(1), None),
        ("I", PartKind::Spin(2), None),
        ("q", PartKind::Oscillator, Some(3)),
        ("s", PartKind::States(2), None),
        ("u", PartKind::States(3), None),
    ];

    const COEFFICIENTS: [&str; 7] = ["1", "d", "d^2", "cos(d)", "sin(d)", "d/(1 + d^2)", "(1 + d)"];

    const OPERATORS: [&str; 16] = [
        "S.x",
        "S.y",
        "S.z",
        "dot(S, I)",
        "I.x",
        "I.z^2",
        "(I.x*I.y + I.y*I.x)",
        "(S.raise*I.lower + S.lower*I.raise)",
        "q.x",
        "q.p",
        "q.x^2",
        "s.couple(1, 2)",
        "(s.projector(1) - s.projector(2))",
        "s.projector(2)",
        "u.couple(1, 3)",
        "u.couple(2, 3)",
    ];

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(400))]

        /// Where a parity is claimed, the levels on both sides of the operating point are
        /// the same; the diagonalisation knows nothing of the proof.
        #[test]
        fn a_claimed_parity_holds_for_the_levels(
            terms in prop::collection::vec((0usize..7, 0usize..16, prop::option::of(8usize..16), 1u32..9), 1..5),
        ) {
            let text = terms
                .iter()
                .map(|(c, a, b, n)| {
                    let second = b.filter(|b| *a < 8 && OPERATORS[*b] != OPERATORS[*a]).map_or("1", |b| OPERATORS[b]);
                    format!("0.{n}*{}*{}*{second}", COEFFICIENTS[*c], OPERATORS[*a])
                })
                .collect::<Vec<_>>()
                .join(" + ");
            let parts: Vec<_> = PARTS
                .into_iter()
                .filter(|(name, ..)| text.contains(&format!("{name}.")) || (text.contains("dot") && "SI".contains(name)))
                .collect();
            let sketch = Sketch {
                parts,
                constants: vec![],
                control: ("d", "1"),
                hamiltonian: Box::leak(text.clone().into_boxed_str()),
                conserved: vec![],
            };
            let built = sketch.build(0.0, 1, 0, &[]).unwrap();
            let claimed = match &built.model {
                AnyModel::Real(model) => model.parity(),
                AnyModel::Complex(model) => model.parity(),
            };
            if let Some(reason) = claimed {
                for (above, below) in levels(&built, 0.37).iter().zip(levels(&built, -0.37)) {
                    prop_assert!((above - below).abs() < 1e-12, "{text}: {reason}");
                }
            }
        }
    }

    /// The search finds what exists: transformations that need every kind of bit.
    #[test]
    fn known_parities_are_found() {
        for (hamiltonian, word) in [
            ("d*S.x + S.z", "about z"),
            ("d*S.z + S.x", "about x"),
            ("d*S.x*q.x + q.number + S.x", "of q"),
            ("d*s.couple(1, 2) + s.projector(1)", "sign of one state"),
            ("sin(d*q.x) + q.number", "(-1)^n"),
            ("d^2*S.z + d^4*S.x", "no change"),
            ("exp(d^2)*S.z + 1/(2 + cos(d))*S.x", "no change"),
        ] {
            let parts =
                PARTS.into_iter().filter(|(name, ..)| hamiltonian.contains(&format!("{name}."))).collect();
            let sketch =
                Sketch { parts, constants: vec![], control: ("d", "1"), hamiltonian, conserved: vec![] };
            let built = sketch.build(0.0, 1, 0, &[]).unwrap();
            let AnyModel::Real(model) = &built.model else { panic!("{hamiltonian}") };
            let found = model.parity().unwrap_or_default();
            assert!(found.contains(word), "{hamiltonian}: {found}");
        }
    }

    #[test]
    fn nearly_symmetric_is_not_symmetric() {
        for hamiltonian in ["d*S.x + S.z + 1e-15*S.x", "(1e-16 + d)*S.z + S.x", "exp(d)*S.z"] {
            let sketch = Sketch {
                parts: vec![PARTS[0]],
                constants: vec![],
                control: ("d", "1"),
                hamiltonian,
                conserved: vec![],
            };
            let AnyModel::Real(model) = sketch.build(0.0, 1, 0, &[]).unwrap().model else { panic!() };
            assert_eq!(model.parity(), None, "{hamiltonian}");
        }
    }
}
