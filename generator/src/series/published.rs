//! Series of whole systems, built from operators, against published ones.

use super::{Level, level};
use crate::model::parts::tests::Sketch;
use crate::model::{AnyModel, Built};
use crate::spec::PartKind;

fn solved(built: &Built, number: usize) -> Level<f64> {
    let AnyModel::Real(model) = &built.model else { panic!("a real model") };
    level(model, number).unwrap()
}

#[track_caller]
fn close(found: f64, reference: f64, relative: f64) {
    assert!((found - reference).abs() <= relative * reference.abs(), "{found:e}, reference {reference:e}");
}

/// Stark series of the linear rotor to fourth order, J = 0 and 1: -1/6 and 11/1080; 1/10 and -73/7000
/// (M = 0); -1/20 and 19/56000 (M = 1). Source: Townes and Schawlow, *Microwave
/// Spectroscopy*, ch. 10 (second order); fourth order by exact rational perturbation theory. Here
/// all M in one block, so J = 1 is a degenerate set that splits at second order.
#[test]
fn rotor_levels_split_at_second_order() {
    let rotor = Sketch {
        parts: vec![("J", PartKind::Rotor, None)],
        constants: vec![],
        control: ("w", "1"),
        hamiltonian: "J.sq - w*J.cos",
        conserved: vec![],
    };
    let built = rotor.build(0.0, 4, 0, &[]).unwrap();
    let expected = [
        (0.0, -1.0 / 6.0, 11.0 / 1080.0),
        (2.0, -1.0 / 20.0, 19.0 / 56_000.0),
        (2.0, -1.0 / 20.0, 19.0 / 56_000.0),
        (2.0, 1.0 / 10.0, -73.0 / 7000.0),
    ];
    for (idx, (energy, second, fourth)) in expected.into_iter().enumerate() {
        let level = solved(&built, idx + 1);
        assert!((level.energies[0] - energy).abs() < 1e-12);
        close(level.energies[2], second, 1e-12);
        close(level.energies[4], fourth, 1e-11);
        assert!(level.energies[1].abs() < 1e-13 && level.energies[3].abs() < 1e-13);
        assert_eq!(level.notes.iter().any(|note| note.code == "degenerate"), idx == 1 || idx == 2);
        assert!(level.zero[1].is_some() && level.energies[1] == 0.0);
    }
}

/// The clock line of a spin 1/2 with a spin 7/2 rises by `((gS - gI) muB B)^2 / (2 h nu)`, and falls
/// at fourth order by `((gS - gI) muB B)^4 / (8 (h nu)^3)`. Source: Breit and Rabi, Phys. Rev. 38, 2082
/// (1931), their closed form expanded; constants CODATA 2022.
#[test]
fn the_clock_line_follows_breit_and_rabi() {
    let clock = Sketch {
        parts: vec![("S", PartKind::Spin(1), None), ("I", PartKind::Spin(7), None)],
        constants: vec![("A", "2.2981579425 GHz"), ("gS", "2.00254032"), ("gI", "-0.00039885395")],
        control: ("B", "mT"),
        hamiltonian: "h*A*dot(S, I) + muB*B*(gS*S.z + gI*I.z)",
        conserved: vec![("m", "S.z + I.z")],
    };
    let built = clock.build(0.0, 2, 0, &[("m", 0.0)]).unwrap();
    let (low, high) = (solved(&built, 1), solved(&built, 2));
    let (planck, magneton) = (6.626_070_15e-34, 9.274_010_065_7e-24);
    let gap = high.energies[0] - low.energies[0];
    let energy_unit = 4.0 * 2.298_157_942_5e9 * planck / gap;
    let step = (2.002_540_32 + 0.000_398_853_95) * magneton * 1e-3 / energy_unit;
    close(high.energies[2] - low.energies[2], step * step / (2.0 * gap), 1e-12);
    let fourth = -step * step * step * step / (8.0 * gap * gap * gap);
    close(high.energies[4] - low.energies[4], fourth, 1e-11);
    assert!(high.zero[1].is_some() && high.zero[3].is_some());
}

/// A charge in a harmonic trap: the shift is `-x^2/2` exactly, nothing at higher order; the trap's
/// energy is 1. Completing the square.
#[test]
fn a_harmonic_trap_shifts_at_second_order_only() {
    let trap = Sketch {
        parts: vec![("n", PartKind::Oscillator, None)],
        constants: vec![],
        control: ("x", "1"),
        hamiltonian: "n.number + 1/2 - x*n.x",
        conserved: vec![],
    };
    let built = trap.build(0.0, 3, 0, &[]).unwrap();
    for number in 1..=3 {
        let level = solved(&built, number);
        close(level.energies[2], -0.5, 1e-12);
        assert!(level.energies[4].abs() <= level.uncertainty[4]);
        assert!(level.uncertainty[4] < 1e-11);
        assert_eq!(level.energies[3], 0.0);
    }
}
