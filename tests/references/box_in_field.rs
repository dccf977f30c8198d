//! A particle between hard walls in a uniform field, as an interval.
//!
//! Source: G. Bastard, E. E. Mendez, L. L. Chang and L. Esaki, Phys. Rev. B 28, 3241
//! (1983), infinite-barrier limit for n = 1; the sum over states for general n is a
//! textbook result (formula from memory, recomputed at 60 digits for the
//! reference collection). Exact levels from the Airy determinant, DLMF chapter 9.

use super::solved::{close, level, parts, record, series};

/// In units of m q^2 F^2 L^4 / hbar^2.
fn second_order(n: f64) -> f64 {
    let p = std::f64::consts::PI * n;
    (p * p - 15.0) / (24.0 * p * p * p * p)
}

#[test]
fn every_level_shifts_by_the_closed_form() {
    let formulas: String = (1..=4).map(|n| level(&format!("n{n}"), n, "", "1", 4, 1e-4)).collect();
    let found = record(&parts(
        "",
        "w: interval -1/2 to 1/2",
        "w.p^2/2 + f*w.x",
        "",
        "symbol: f, unit: 1, within: [-3, 3]",
        &formulas,
    ));
    for n in 1..=4u32 {
        let name = format!("n{n}");
        let e = series(&found, &name);
        let n = f64::from(n);
        close(e[0], 0.5 * (std::f64::consts::PI * n).powi(2), 1e-11, 0.0, &name);
        close(e[2], second_order(n), 1e-9, 0.0, &name);
        assert_eq!((e[1], e[3]), (0.0, 0.0), "{name}");
    }
}

#[test]
fn levels_in_a_field_are_those_of_the_airy_determinant() {
    for (field, exact) in [(1.0, 4.932607855266544), (10.0, 4.717092628644326)] {
        let found = record(&parts(
            "",
            "w: interval -1/2 to 1/2",
            "w.p^2/2 + f*w.x",
            "",
            &format!("symbol: f, unit: 1, at: {field}, within: [{}, {}]", field - 0.5, field + 0.5),
            &level("ground", 1, "", "1", 2, 1e-4),
        ));
        close(series(&found, "ground")[0], exact, 1e-11, 0.0, "ground");
    }
}
