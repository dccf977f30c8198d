//! A periodic coordinate with a cosine: Mathieu's characteristic values.
//!
//! Source: DLMF 28.6.1-28.6.7, seen at dlmf.nist.gov/28.6. Levels of
//! `-d^2/dz^2 + 2 q cos 2z` on 2 pi periodic functions; m and -m are degenerate and
//! a_m, b_m part at order m.

use super::solved::{close, level, parts, record, series};

#[test]
fn degenerate_pairs_part_at_their_order() {
    // Just above q = 0 in ascending order: a0; b1, a1; b2, a2; b3, a3; b4.
    let rows: [(&str, [f64; 5]); 7] = [
        ("a0", [0.0, 0.0, -0.5, 0.0, 7.0 / 128.0]),
        ("b1", [1.0, -1.0, -0.125, 1.0 / 64.0, -1.0 / 1536.0]),
        ("a1", [1.0, 1.0, -0.125, -1.0 / 64.0, -1.0 / 1536.0]),
        ("b2", [4.0, 0.0, -1.0 / 12.0, 0.0, 5.0 / 13824.0]),
        ("a2", [4.0, 0.0, 5.0 / 12.0, 0.0, -763.0 / 13824.0]),
        ("b3", [9.0, 0.0, 1.0 / 16.0, -1.0 / 64.0, 13.0 / 20480.0]),
        ("a3", [9.0, 0.0, 1.0 / 16.0, 1.0 / 64.0, 13.0 / 20480.0]),
    ];
    let formulas: String =
        rows.iter().enumerate().map(|(idx, (name, _))| level(name, idx + 1, "", "1", 4, 1e-3)).collect();
    let found = record(&parts(
        "",
        "p: phase",
        "p.number^2 + 2*q*(2*p.cos^2 - 1)",
        "",
        "symbol: q, unit: 1, within: [-0.3, 0.3]",
        &formulas,
    ));
    for (name, exact) in rows {
        let e = series(&found, name);
        for (power, exact) in exact.iter().enumerate() {
            close(e[power], *exact, 2e-9, 1e-3, &format!("{name} E{power}"));
        }
    }
}

/// `a0(q)` where the series no longer helps: a0(1) and a0(5) from a table.
/// Source: Abramowitz and Stegun, table 20.1 (-5.80004602 at q = 5); more digits from the
/// reference collection, where a matrix at 20 digits and scipy.special.mathieu_a agree.
#[test]
fn exact_levels_are_characteristic_values() {
    for (at, exact) in [(1.0, -0.455_138_604_107_413_5), (5.0, -5.800_046_020_851_508)] {
        let found = record(&parts(
            "",
            "p: phase",
            "4*p.number^2 + 2*q*p.cos",
            "",
            &format!("symbol: q, unit: 1, at: {at}, within: [{}, {}]", at - 0.5, at + 0.5),
            &level("a0", 1, "", "1", 4, 1e-2),
        ));
        close(series(&found, "a0")[0], exact, 1e-12, 1.0, "a0");
    }
}
