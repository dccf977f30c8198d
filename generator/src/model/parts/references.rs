//! Second orders and exact levels of parts systems against closed forms, by a plain
//! sum over all states of the model.

use super::tests::{Sketch, levels};
use super::*;
use crate::pencil::spectrum;
use crate::spec::PartKind;

/// E0, E1 and E2 of a level that is not degenerate, by the sum over states.
fn second_order(built: &Built, level: usize) -> [f64; 3] {
    let AnyModel::Real(model) = &built.model else { panic!("a real model") };
    let pairs = spectrum(model.expansion(0)).unwrap();
    let own = &pairs[level - 1];
    let first = model.expansion(1).element(&own.state, &own.state);
    let direct = model.expansion(2).element(&own.state, &own.state);
    let sum: f64 = pairs
        .iter()
        .filter(|pair| pair.number != own.number)
        .map(|pair| {
            let coupling = model.expansion(1).element(&pair.state, &own.state);
            coupling * coupling / (own.energy - pair.energy)
        })
        .sum();
    [own.energy, first, direct + sum]
}

fn sketch(part: (&'static str, PartKind), control: &'static str, hamiltonian: &'static str) -> Sketch {
    Sketch {
        parts: vec![(part.0, part.1, None)],
        constants: vec![],
        control: (control, "1"),
        hamiltonian,
        conserved: vec![],
    }
}

#[track_caller]
fn close(found: f64, reference: f64, relative: f64) {
    assert!((found - reference).abs() <= relative * reference.abs(), "{found:e}, reference {reference:e}");
}

/// `(w^2/2) [J(J+1) - 3 M^2] / [J(J+1)(2J-1)(2J+3)]`, and `-w^2/6` for J = 0.
/// Source: C. H. Townes and A. L. Schawlow, *Microwave Spectroscopy*, ch. 10; also *Encyclopedia of
/// Physical Science and Technology*, 3rd ed., p. 840.
#[test]
fn rotors_shift_by_the_second_order_stark_formula() {
    let rotor =
        Sketch { conserved: vec![("m", "J.z")], ..sketch(("J", PartKind::Rotor), "w", "J.sq - w*J.cos") };
    for j in 0..5u32 {
        for m in 0..=j {
            let built = rotor.build(0.0, 5, 0, &[("m", f64::from(m))]).unwrap();
            let [energy, first, second] = second_order(&built, (j - m + 1) as usize);
            let (j, m) = (f64::from(j), f64::from(m));
            let exact = if j == 0.0 {
                -1.0 / 6.0
            } else {
                (j * (j + 1.0) - 3.0 * m * m) / (2.0 * j * (j + 1.0) * (2.0 * j - 1.0) * (2.0 * j + 3.0))
            };
            assert!((energy - j * (j + 1.0)).abs() < 1e-12 && first.abs() < 1e-14);
            assert!((second - exact).abs() < 1e-12 * exact.abs().max(0.1), "{j} {m} {second} {exact}");
        }
    }
}

/// First and second coefficient of `lambda + gamma^2` of the spheroidal equation.
/// Source: DLMF 30.2.1, 30.3.8 and 30.3.9.
#[test]
fn squared_cosines_give_the_spheroidal_series() {
    let rotor =
        Sketch { conserved: vec![("m", "J.z")], ..sketch(("J", PartKind::Rotor), "g", "J.sq + g*J.cos2") };
    for m in 0..4u32 {
        for n in m..m + 4 {
            let built = rotor.build(0.0, 5, 0, &[("m", f64::from(m))]).unwrap();
            let found = second_order(&built, (n - m + 1) as usize);
            let (n, m) = (f64::from(n), f64::from(m));
            let cube = |x: f64| x * x * x;
            let first =
                -0.5 * (1.0 + (2.0 * m - 1.0) * (2.0 * m + 1.0) / ((2.0 * n - 1.0) * (2.0 * n + 3.0)));
            let below = (n - m - 1.0) * (n - m) * (n + m - 1.0) * (n + m)
                / ((2.0 * n - 3.0) * cube(2.0 * n - 1.0) * (2.0 * n + 1.0));
            let above = (n - m + 1.0) * (n - m + 2.0) * (n + m + 1.0) * (n + m + 2.0)
                / ((2.0 * n + 1.0) * cube(2.0 * n + 3.0) * (2.0 * n + 5.0));
            close(found[1], 1.0 + first, 1e-12);
            assert!((found[2] - 0.5 * (below - above)).abs() < 1e-13, "{n} {m}");
        }
    }
}

/// `(pi^2 n^2 - 15)/(24 pi^4 n^4)` in units of m q^2 F^2 L^4/hbar^2.
/// Source: G. Bastard et al., Phys. Rev. B 28, 3241 (1983), infinite-barrier limit, for n = 1;
/// general n is a textbook sum (from memory, recomputed at 60 digits for the reference collection).
#[test]
fn box_levels_shift_by_the_closed_form() {
    let kind = PartKind::Interval { from: -0.5, to: 0.5, length: false };
    let walls = sketch(("w", kind), "f", "w.p^2/2 + f*w.x");
    for n in 1..=4usize {
        let built = walls.build(0.0, n, 1, &[]).unwrap();
        let [energy, _, second] = second_order(&built, n);
        let p = std::f64::consts::PI * n as f64;
        close(energy, 0.5 * p * p, 1e-12);
        close(second, (p * p - 15.0) / (24.0 * p * p * p * p), 1e-11);
    }
    // In a field: the Airy determinant (DLMF chapter 9) at f = 1 and 10, reference collection.
    for (field, exact) in [(1.0, 4.932_607_855_266_544), (10.0, 4.717_092_628_644_326)] {
        close(walls.levels(field, 1, &[])[0], exact, 1e-12);
    }
}

/// `3/4 (2n^2+2n+1)` and `-(34n^3+51n^2+59n+21)/8`.
/// Source: L. D. Landau and E. M. Lifshitz, *Quantum Mechanics*, section 38; C. M. Bender and T. T. Wu,
/// Phys. Rev. 184, 1231 (1969); from memory, recomputed with exact fractions.
#[test]
fn quartic_oscillators_have_their_first_two_orders() {
    let quartic = sketch(("q", PartKind::Oscillator), "g", "q.p^2/2 + q.x^2/2 + g*q.x^4");
    for level in 1..=4usize {
        let found = second_order(&quartic.build(0.0, level, 0, &[]).unwrap(), level);
        let n = (level - 1) as f64;
        close(found[0], n + 0.5, 1e-13);
        close(found[1], 0.75 * (2.0 * n * n + 2.0 * n + 1.0), 1e-13);
        close(found[2], -(34.0 * n * n * n + 51.0 * n * n + 59.0 * n + 21.0) / 8.0, 1e-12);
    }
}

/// Mathieu's a_0 and, with charges in steps of one, a_2m and b_2m at q = 1.5, by continued
/// fractions evaluated here at the level itself: the remainder must vanish.
/// Source: DLMF 28.4.5 and 28.4.7, the recurrences of the coefficients.
#[test]
fn a_cosine_on_a_circle_fulfils_mathieus_recurrence() {
    let q = 1.5;
    let circle = sketch(("z", PartKind::Phase), "q", "4*z.number^2 + 2*q*z.cos");
    let found = circle.levels(q, 1, &[]);
    // Even states: a A0 = q A2; (a - 4) A2 = q (A4 + 2 A0). Odd: (a - 4) B2 = q B4.
    let fraction = |a: f64| (2..60).rev().fold(0.0, |below, m| q / (a - 4.0 * f64::from(m * m) - q * below));
    let even = |a: f64| a - 2.0 * q * q / (a - 4.0 - q * fraction(a));
    let odd = |a: f64| a - 4.0 - q * fraction(a);
    for (idx, level) in found.iter().take(5).enumerate() {
        let (remainder, slope) = if idx % 2 == 0 {
            (even(*level), (even(level + 1e-6) - even(level - 1e-6)) / 2e-6)
        } else {
            (odd(*level), (odd(level + 1e-6) - odd(level - 1e-6)) / 2e-6)
        };
        assert!((remainder / slope).abs() < 1e-11, "{idx} {level} {remainder}");
    }
}

/// Curvature of the lowest level at half charge, by charge-basis diagonalisation with mpmath at 40
/// digits (tests/references/scripts/charge_box.py); two states alone give 8 EC - 32 EC^2/EJ.
#[test]
fn the_charge_box_has_its_curvature() {
    for (hamiltonian, curvature, energy) in [
        ("4*(n.number - g)^2 - 0.1*n.cos", -312.063_105_305_290, 0.949_689_448_964_034_8),
        ("4*(n.number - g)^2 - 0.5*n.cos", -56.325_746_615_753_5, 0.742_428_825_986_629_7),
    ] {
        let built = sketch(("n", PartKind::Phase), "g", hamiltonian).build(0.5, 1, 0, &[]).unwrap();
        let found = second_order(&built, 1);
        close(found[0], energy, 1e-12);
        close(2.0 * found[2], curvature, 1e-11);
    }
}

/// Levels of hydrogen, rubidium-87 and caesium at 1,000 fields each, every block.
/// Source: G. Breit and I. I. Rabi, Phys. Rev. 38, 2082 (1931); constants as the reference
/// collection quotes them (lines: SI and BIPM; g-factors: E. Arimondo et al., Rev. Mod. Phys. 49, 31 (1977), from memory).
#[test]
fn clock_atoms_follow_breit_and_rabi_at_a_thousand_fields() {
    // muB/h in Hz/T from CODATA 2022 with h exact; h in eV s.
    let magneton = 9.2740100657e-24 / 6.62607015e-34;
    let planck = 6.62607015e-34 / 1.602176634e-19;
    for (twice, nu0, electron, nucleus, constants) in [
        (
            1usize,
            1_420_405_751.768,
            2.00228385,
            -0.00304204,
            [("nu0", "1420405751.768 Hz"), ("gS", "2.00228385"), ("gI", "-0.00304204"), ("width", "1")],
        ),
        (
            3,
            6_834_682_610.904_324,
            2.00233113,
            -0.0009951414,
            [("nu0", "6834682610.904324 Hz"), ("gS", "2.00233113"), ("gI", "-0.0009951414"), ("width", "2")],
        ),
        (
            7,
            9_192_631_770.0,
            2.00254032,
            -0.00039885395,
            [("nu0", "9192631770 Hz"), ("gS", "2.00254032"), ("gI", "-0.00039885395"), ("width", "4")],
        ),
    ] {
        let atom = Sketch {
            parts: vec![("S", PartKind::Spin(1), None), ("I", PartKind::Spin(twice), None)],
            constants: constants.to_vec(),
            control: ("B", "T"),
            hamiltonian: "h*nu0/width*dot(S, I) + muB*B*(gS*S.z + gI*I.z)",
            conserved: vec![("m", "S.z + I.z")],
        };
        let states = twice as f64 + 1.0;
        let top = states / 2.0;
        let mut m = -top;
        while m <= top {
            let built = atom.build(0.0, 1, 0, &[("m", m)]).unwrap();
            for step in 0..1000 {
                // Evenly in the square of the field, so that weak fields are dense.
                let field = f64::from(step * step) * 1e-6;
                let x = (electron - nucleus) * magneton * field / nu0;
                let centre = -nu0 / (2.0 * states) + nucleus * magneton * m * field;
                let exact = if m.abs() == top {
                    vec![centre + 0.5 * nu0 * (1.0 + m.signum() * x)]
                } else {
                    let root = libm::sqrt(1.0 + 4.0 * m * x / states + x * x);
                    vec![centre - 0.5 * nu0 * root, centre + 0.5 * nu0 * root]
                };
                let found = levels(&built, field);
                assert_eq!(found.len(), exact.len());
                for (found, exact) in found.iter().zip(exact) {
                    assert!(
                        (found / planck - exact).abs() < 2e-14 * nu0 * (1.0 + x),
                        "{twice} {m} {field} {} {exact}",
                        found / planck
                    );
                }
            }
            m += 1.0;
        }
    }
}

/// `D Sz^2 + b (s Sx + c Sz)`: the transverse part moves the lowest level by `-s^2/D` in
/// second order; an axial field only splits the upper pair.
/// Source: M. W. Doherty et al., Phys. Rep. 528, 1 (2013), the Hamiltonian.
#[test]
fn a_spin_one_follows_axial_and_tilted_fields() {
    let spin = |hamiltonian| sketch(("S", PartKind::Spin(2)), "b", hamiltonian);
    let tilted = spin("2.87*S.z^2 + b*(0.6*S.x + 0.8*S.z)").build(0.0, 1, 0, &[]).unwrap();
    close(second_order(&tilted, 1)[2], -0.36 / 2.87, 1e-14);
    let axial = spin("2.87*S.z^2 + b*S.z").levels(0.5, 0, &[]);
    for (found, exact) in axial.iter().zip([0.0, 2.37, 3.37]) {
        assert!((found - exact).abs() < 1e-15);
    }
}
