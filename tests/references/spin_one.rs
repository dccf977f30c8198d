//! Spin 1 with an axial splitting in a transverse field.
//!
//! Source: M. W. Doherty et al., Phys. Rep. 528, 1 (2013), Hamiltonian and
//! constants; levels of the 3x3 matrix in closed form: D and (D -+ sqrt(D^2 + 4 b^2))/2.

use super::solved::{close, level, parts, record, samples, series};

#[test]
fn a_transverse_field_acts_in_second_order() {
    // Degenerate at zero field in first order; level 2 stays, level 3 goes up.
    let formulas = [
        level("lower", 1, "", "MHz", 4, 1e-3),
        level("middle", 2, "", "MHz", 4, 1e-3),
        level("upper", 3, "", "MHz", 4, 1e-3),
    ]
    .concat();
    let found = record(&parts(
        "D: 2.870 GHz, gamma: 28.03 GHz/T",
        "S: spin 1",
        "D*S.z^2 + gamma*B*S.x",
        "",
        "symbol: B, unit: mT, within: [-2, 2]",
        &formulas,
    ));
    let (d, gamma) = (2870.0, 28.03);
    let second = gamma * gamma / d;
    let fourth = second * second / d;
    for (name, start, sign) in [("lower", 0.0, -1.0), ("middle", d, 0.0), ("upper", d, 1.0)] {
        let e = series(&found, name);
        close(e[0], start, 1e-13, d, name);
        close(e[2], sign * second, 1e-10, second, name);
        close(e[4], -sign * fourth, 1e-8, fourth, name);
        close(e[1], 0.0, 1e-12, second, name);
        for [field, exact, _] in samples(&found, name) {
            let b = gamma * field;
            let root = (d * d + 4.0 * b * b).sqrt();
            let closed = if name == "middle" { d } else { 0.5 * (d + sign * root) };
            close(exact, closed, 1e-12, d, name);
        }
    }
}

/// A tilted field: E2 of the lowest level is that of its transverse part, and the
/// axial part splits the upper two in first order.
#[test]
fn a_tilted_field_splits_and_shifts() {
    let formulas = [
        level("lower", 1, "", "MHz", 2, 0.1),
        level("middle", 2, "", "MHz", 2, 0.1),
        level("upper", 3, "", "MHz", 2, 0.1),
    ]
    .concat();
    let found = record(&parts(
        "D: 2.870 GHz, gamma: 28.03 GHz/T",
        "S: spin 1",
        "D*S.z^2 + gamma*B*(0.6*S.x + 0.8*S.z)",
        "",
        "symbol: B, unit: mT, within: [-0.5, 0.5]",
        &formulas,
    ));
    let (d, gamma) = (2870.0, 28.03);
    let transverse = 0.36 * gamma * gamma / d;
    let lower = series(&found, "lower");
    close(lower[2], -transverse, 1e-10, 0.0, "lower");
    assert_eq!((lower[1], lower[3]), (0.0, 0.0));
    close(series(&found, "middle")[1], -0.8 * gamma, 1e-12, 0.0, "middle");
    close(series(&found, "upper")[1], 0.8 * gamma, 1e-12, 0.0, "upper");
    // Both upper levels share the second-order rise b^2/D of the pair equally.
    close(series(&found, "middle")[2], 0.5 * transverse, 1e-10, 0.0, "middle");
    close(series(&found, "upper")[2], 0.5 * transverse, 1e-10, 0.0, "upper");
}
