//! A superconducting charge box, `4 EC (n - ng)^2 - EJ cos phi`.
//!
//! Source: J. Koch et al., Phys. Rev. A 76, 042319 (2007), eq. (2.2): levels are
//! Mathieu characteristic values; two-level numbers from Y. Makhlin, G. Schoen and
//! A. Shnirman, Rev. Mod. Phys. 73, 357 (2001); exact values by charge-basis
//! diagonalisation and scipy in the reference collection.

use super::solved::{close, parts, record, samples, series};

fn formula(name: &str, level: usize, form: &str) -> String {
    format!(
        "  {name}:\n    unit: 1\n    sum: [{{system: s, level: {level}}}]\n    form: {form}\n    order: 2\n    tolerance: 1e-3\n"
    )
}

fn solved(josephson: f64) -> serde_json::Value {
    let formulas = [formula("single", 1, "polynomial"), formula("pair", 1, "paired")].concat();
    record(&parts(
        &format!("EC: 1, EJ: {josephson}"),
        "n: phase",
        "4*EC*(n.number - ng)^2 - EJ*n.cos",
        "",
        "symbol: ng, unit: 1, at: 0.5, within: [0.01, 0.99]",
        &formulas,
    ))
}

/// Curvatures at half charge and levels there, from scripts/charge_box.py (mpmath, 40
/// digits). The two-level model alone gives 8 EC - 32 EC^2/EJ = -312 and -56 for the curvature.
#[test]
fn the_curvature_at_half_charge_is_that_of_the_charge_basis() {
    for (josephson, curvature, energy) in [
        (0.1, -312.063_105_305_29, 0.949_689_448_964_034_8),
        (0.5, -56.325_746_615_753_5, 0.742_428_825_986_629_7),
    ] {
        let found = solved(josephson);
        let e = series(&found, "single");
        close(2.0 * e[2], curvature, 1e-10, 0.0, "curvature");
        close(e[0], energy, 1e-12, 0.0, "level");
        assert_eq!((e[1], e[3]), (0.0, 0.0), "the box is even about half charge");
    }
}

/// At an avoided crossing the pair form holds at least ten times further than the
/// polynomial; measured ratios of the reference collection: 45 and 15.
#[test]
fn a_pair_holds_ten_times_further_than_a_polynomial() {
    for josephson in [0.1, 0.5] {
        let found = solved(josephson);
        let width = |name: &str| {
            let valid = &found["formulas"][name]["valid"];
            valid["to"].as_f64().unwrap() - valid["from"].as_f64().unwrap()
        };
        let ratio = width("pair") / width("single");
        assert!(ratio >= 10.0, "EJ {josephson}: {ratio}");
    }
}

/// Exact levels at the samples: in a charge basis of 61 states, by inverse iteration
/// written out here on the tridiagonal matrix.
#[test]
fn exact_levels_are_those_of_the_charge_basis() {
    let found = solved(0.5);
    for [ng, exact, _] in samples(&found, "pair") {
        // Number of levels below x by the signs of the pivots; then bisection.
        let below = |x: f64| {
            let (mut pivot, mut count) = (1.0f64, 0);
            for n in -30..=30 {
                let diagonal = 4.0 * (f64::from(n) - ng).powi(2) - x;
                pivot = diagonal - if n == -30 { 0.0 } else { 0.0625 / pivot };
                count += i32::from(pivot < 0.0);
            }
            count
        };
        let (mut low, mut high) = (-1.0, 2.0);
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if below(middle) >= 1 { high = middle } else { low = middle }
        }
        close(exact, low, 1e-11, 1.0, &format!("ng {ng}"));
    }
}
