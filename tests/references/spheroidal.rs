//! A rotor with the square of the cosine: spheroidal eigenvalues.
//!
//! Source: DLMF 30.2.1 and 30.3.8-30.3.9, seen at dlmf.nist.gov/30.3. The rotor
//! `L^2 + g cos^2` has the level `lambda(gamma^2 = g) + g`.

use super::solved::{close, level, parts, record, series};

/// `l2` and `l4` of DLMF 30.3.8-30.3.9.
fn coefficients(n: f64, m: f64) -> (f64, f64) {
    let first = -0.5 * (1.0 + (2.0 * m - 1.0) * (2.0 * m + 1.0) / ((2.0 * n - 1.0) * (2.0 * n + 3.0)));
    let below = (n - m - 1.0) * (n - m) * (n + m - 1.0) * (n + m)
        / ((2.0 * n - 3.0) * (2.0 * n - 1.0).powi(3) * (2.0 * n + 1.0));
    let above = (n - m + 1.0) * (n - m + 2.0) * (n + m + 1.0) * (n + m + 2.0)
        / ((2.0 * n + 1.0) * (2.0 * n + 3.0).powi(3) * (2.0 * n + 5.0));
    (first, 0.5 * (below - above))
}

#[test]
fn a_squared_cosine_gives_the_spheroidal_series() {
    let states: Vec<(u32, u32)> = (0..4).flat_map(|m| (m..m + 4).map(move |n| (n, m))).collect();
    let formulas: String = states
        .iter()
        .map(|(n, m)| {
            level(&format!("n{n}m{m}"), (n - m + 1) as usize, &format!(", where: {{m: {m}}}"), "1", 2, 1e-3)
        })
        .collect();
    let found = record(&parts(
        "",
        "R: rotor",
        "R.sq + g*R.cos2",
        "m: R.z",
        "symbol: g, unit: 1, within: [-0.5, 0.5]",
        &formulas,
    ));
    for (n, m) in states {
        let name = format!("n{n}m{m}");
        let e = series(&found, &name);
        let (first, second) = coefficients(f64::from(n), f64::from(m));
        close(e[0], f64::from(n * (n + 1)), 1e-13, 1.0, &name);
        close(e[1], 1.0 + first, 1e-11, 0.1, &name);
        close(e[2], second, 1e-10, 1e-3, &name);
    }
    // The third coefficient of the lowest level is 4/8505 (reference collection, 40 digits).
    close(series(&found, "n0m0")[3], 4.0 / 8505.0, 1e-9, 0.0, "n0m0");
}
