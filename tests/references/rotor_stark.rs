//! Linear rotors in an electric field.
//!
//! Source: C. H. Townes and A. L. Schawlow, *Microwave Spectroscopy*, ch. 10;
//! the second-order formula and selected values also in *Encyclopedia of Physical
//! Science and Technology*, 3rd ed., p. 840 (two of its printed entries are wrong
//! and not used). Fourth orders were computed for the reference collection by
//! matrix perturbation at 40 digits.

use super::solved::{close, level, parts, record, series};

/// `E2 = (w^2/2) [J(J+1) - 3 M^2] / [J(J+1)(2J-1)(2J+3)]`, and `-w^2/6` for J = 0.
fn second_order(j: f64, m: f64) -> f64 {
    if j == 0.0 {
        return -1.0 / 6.0;
    }
    (j * (j + 1.0) - 3.0 * m * m) / (2.0 * j * (j + 1.0) * (2.0 * j - 1.0) * (2.0 * j + 3.0))
}

/// Every J, M up to J = 3 in units of the rotational constant, the odd orders
/// being exactly zero.
#[test]
fn every_level_shifts_by_the_second_order_formula() {
    let states: Vec<(u32, u32)> = (0..4).flat_map(|j| (0..=j).map(move |m| (j, m))).collect();
    let formulas: String = states
        .iter()
        .map(|(j, m)| {
            level(&format!("j{j}m{m}"), (j - m + 1) as usize, &format!(", where: {{m: {m}}}"), "1", 4, 1e-3)
        })
        .collect();
    let found = record(&parts(
        "",
        "R: rotor",
        "R.sq - w*R.cos",
        "m: R.z",
        "symbol: w, unit: 1, within: [-0.5, 0.5]",
        &formulas,
    ));
    for (j, m) in states {
        let name = format!("j{j}m{m}");
        let e = series(&found, &name);
        let (j, m) = (f64::from(j), f64::from(m));
        close(e[0], j * (j + 1.0), 1e-13, 1.0, &name);
        close(e[2], second_order(j, m), 1e-10, 1e-3, &name);
        assert_eq!((e[1], e[3]), (0.0, 0.0), "{name}");
    }
    for (name, fourth) in [("j0m0", 11.0 / 1080.0), ("j1m0", -73.0 / 7000.0), ("j1m1", 19.0 / 56000.0)] {
        close(series(&found, name)[4], fourth, 1e-9, 1e-3, name);
    }
}

/// Carbonyl sulfide: dipole 0.71521(20) D, rotational constant 6081.4925 MHz.
/// Source: J. S. Muenter, J. Chem. Phys. 48, 4544 (1968), the dipole; the constant from memory.
/// The measured dipole is itself a Stark measurement, so this checks units more than physics.
#[test]
fn carbonyl_sulfide_shifts_as_measured() {
    let formulas = [
        level("ground", 1, ", where: {m: 0}", "MHz", 2, 1e-3),
        level("first", 2, ", where: {m: 0}", "MHz", 2, 1e-3),
        level("side", 1, ", where: {m: 1}", "MHz", 2, 1e-3),
    ]
    .concat();
    let found = record(&parts(
        "B: 6081.492475 MHz, mu: 0.71521 D",
        "R: rotor",
        "h*B*R.sq - mu*E*R.cos",
        "m: R.z",
        "symbol: E, unit: V/cm, within: [-2000, 2000]",
        &formulas,
    ));
    for (name, shift) in [("ground", -3.5526487e-6), ("first", 2.1315892e-6), ("side", -1.0657946e-6)] {
        // The reference prints eight digits.
        close(series(&found, name)[2], shift, 3e-8, 0.0, name);
    }
    // (1 D)(1 V/cm)/h = 0.503411656754 MHz by the definitions of the SI.
    let w = 0.71521 * 0.503411656754;
    close(series(&found, "ground")[2], -w * w / (6.0 * 6081.492475), 1e-11, 0.0, "ground");
}
