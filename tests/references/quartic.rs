//! The quartic oscillator.
//!
//! Source: C. M. Bender and T. T. Wu, Phys. Rev. 184, 1231 (1969), coefficients
//! from memory and recomputed with exact fractions for the reference collection;
//! general first and second orders also in L. D. Landau and E. M. Lifshitz, *Quantum
//! Mechanics*, section 38.

use super::solved::{close, level, parts, record, series};

#[test]
fn the_series_is_that_of_bender_and_wu() {
    let rows: [[f64; 5]; 3] = [
        [0.5, 0.75, -21.0 / 8.0, 333.0 / 16.0, -30885.0 / 128.0],
        [1.5, 3.75, -165.0 / 8.0, 3915.0 / 16.0, -520485.0 / 128.0],
        [2.5, 39.0 / 4.0, -615.0 / 8.0, 20079.0 / 16.0, -3576255.0 / 128.0],
    ];
    let formulas: String = (0..3).map(|n| level(&format!("n{n}"), n + 1, "", "1", 4, 1e-3)).collect();
    let found = record(&parts(
        "",
        "q: oscillator",
        "q.p^2/2 + q.x^2/2 + g*q.x^4",
        "",
        "symbol: g, unit: 1, within: [0, 0.01]",
        &formulas,
    ));
    for (n, row) in rows.iter().enumerate() {
        let e = series(&found, &format!("n{n}"));
        for (power, exact) in row.iter().enumerate() {
            close(e[power], *exact, if power < 3 { 1e-10 } else { 1e-8 }, 0.0, &format!("n{n} E{power}"));
        }
    }
}

/// A harmonic level in a field shifts by exactly `-F^2/2`, so nothing limits the range.
/// Source: Landau and Lifshitz, *Quantum Mechanics* (harmonic oscillator in a uniform field).
#[test]
fn a_harmonic_level_in_a_field_has_no_remainder() {
    let found = record(&parts(
        "",
        "q: oscillator",
        "q.number + 1/2 - F*q.x",
        "",
        "symbol: F, unit: 1, within: [-1, 1]",
        &[level("ground", 1, "", "1", 2, 1e-9), level("third", 4, "", "1", 2, 1e-9)].concat(),
    ));
    for (name, free) in [("ground", 0.5), ("third", 3.5)] {
        let e = series(&found, name);
        close(e[0], free, 1e-13, 0.0, name);
        close(e[2], -0.5, 1e-11, 0.0, name);
        assert!(e[4].abs() < 1e-10 && e[1] == 0.0 && e[3] == 0.0, "{name} {e:?}");
        let valid = &found["formulas"][name]["valid"];
        assert_eq!(valid["limited_by"], serde_json::json!(["within", "within"]), "{name}");
    }
}
