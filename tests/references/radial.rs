//! Concentric shells against hydrogen, spheres and the isotropic oscillator.
//!
//! Sources stand beside each check. Constants: CODATA 2022 (Mohr et al., Rev. Mod.
//! Phys. 97, 025002 (2025)). They are rounded, so the Bohr radius and the hartree of the table
//! agree with the exact ones of the model to 5e-13, a few times 1e-12 in high powers.

use shiftwright_tests::{close, number, record};

/// Atomic unit of the electric field, MV/cm.
const ATOMIC_FIELD: f64 = 5_142.206_751_12;

/// `hbar^2/(2 me)`, eV nm^2.
fn kinetic() -> f64 {
    let hbar = 6.626_070_15e-34 / (2.0 * std::f64::consts::PI);
    hbar * hbar / (2.0 * 9.109_383_713_9e-31) / 1.602_176_634e-19 * 1e18
}

/// A spec with one system `s` and one formula per term.
fn spec(system: &str, control: &str, unit: &str, terms: &[(&str, &str, &str)]) -> String {
    let mut text = format!(
        "spec: 1\nname: sphere\nsummary: Reference\nsystems:\n  s:\n    kind: radial\n{system}\ncontrol: {control}\nformulas:\n"
    );
    for (name, level, rest) in terms {
        text += &format!("  {name}:\n    unit: {unit}\n    sum: [{{system: s, {level}}}]\n    {rest}\n");
    }
    text
}

const HYDROGEN: &str = "    charge: -1
    field: F
    ends: decay
    centre_charge: 1
    shells:
      - {thickness: 0.5 nm, edge: 0 eV, mass: 1}";

fn series(record: &serde_json::Value, formula: &str, power: usize) -> f64 {
    number(record, &format!("formulas/{formula}/series/{power}"))
        * (0..power).fold(1.0, |product, _| product * ATOMIC_FIELD)
}

/// The ground state: -1/2 - 9/4 F^2 - 3555/64 F^4 - 2512779/512 F^6 (H. J. Silverstone,
/// Phys. Rev. A 18, 1853 (1978); fourth order already G. L. Sewell 1949; from memory, recomputed in
/// rational arithmetic). The range is where the next two orders reach half the tolerance.
#[test]
fn hydrogen_ground_state() {
    let control = "{symbol: F, unit: MV/cm, within: [-900, 900]}";
    let terms = [("ground", "level: 1, where: {l: 0, m: 0}", "tolerance: 0.01")];
    let found = record("radial-ground", &spec(HYDROGEN, control, "Eh", &terms));
    for (power, expected) in [(0, -0.5), (2, -2.25), (4, -3555.0 / 64.0)] {
        close(&format!("E{power}"), series(&found, "ground", power), expected, 3e-11);
    }
    assert_eq!(number(&found, "formulas/ground/series/1"), 0.0);
    assert_eq!(number(&found, "formulas/ground/series/3"), 0.0);
    let next = |f: f64| 3555.0 / 64.0 * f.powi(4) + 2_512_779.0 / 512.0 * f.powi(6);
    let (mut low, mut high) = (0.0, 1.0);
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if next(middle) < 0.005 { low = middle } else { high = middle }
    }
    close("range", number(&found, "formulas/ground/valid/to"), low * ATOMIC_FIELD, 2e-7);
    assert_eq!(found["formulas"]["ground"]["valid"]["limited_by"][1], "formal");
    assert_eq!(found["formulas"]["ground"]["samples"].as_array().map(Vec::len), Some(0));
}

/// Coefficients of the parabolic state with n1 - n2 = k (H. A. Bethe and E. E. Salpeter,
/// *Quantum Mechanics of One- and Two-Electron Atoms*, sections 51 and 52; third and fourth order
/// Silverstone as above; from memory, recomputed in rational arithmetic for n up to 5).
fn parabolic(n: f64, k: f64, m: f64) -> [f64; 5] {
    let (n2, k2, m2) = (n * n, k * k, m * m);
    [
        -0.5 / n2,
        1.5 * n * k,
        -n.powi(4) / 16.0 * (17.0 * n2 - 3.0 * k2 - 9.0 * m2 + 19.0),
        3.0 / 32.0 * n.powi(7) * k * (23.0 * n2 - k2 + 11.0 * m2 + 39.0),
        -n.powi(10) / 1024.0
            * (5487.0 * n2 * n2 + 35_182.0 * n2 - 1134.0 * m2 * k2 + 1806.0 * n2 * k2 - 3402.0 * n2 * m2
                + 147.0 * k2 * k2
                - 549.0 * m2 * m2
                + 5754.0 * k2
                - 8622.0 * m2
                + 16_211.0),
    ]
}

/// The linear effect: levels of one n are degenerate and counted by slope within m.
#[test]
fn hydrogen_excited_states() {
    let control = "{symbol: F, unit: MV/cm, within: [-0.5, 0.5]}";
    let rest = "tolerance: 1e-3";
    let terms = [
        ("n2_down", "level: 2, where: {m: 0}", rest),
        ("n2_up", "level: 3, where: {m: 0}", rest),
        ("n2_flat", "level: 1, where: {l: 1, m: -1}", rest),
        ("n3_down", "level: 4, where: {m: 0}", rest),
        ("n3_flat", "level: 5, where: {m: 0}", rest),
        ("n3_side", "level: 3, where: {m: 1}", rest),
    ];
    let found = record("radial-excited", &spec(HYDROGEN, control, "Eh", &terms));
    let expected = [(2., -1., 0.), (2., 1., 0.), (2., 0., 1.), (3., -2., 0.), (3., 0., 0.), (3., 1., 1.)];
    for ((name, ..), (n, k, m)) in terms.iter().zip(expected) {
        for (power, value) in parabolic(n, k, m).into_iter().enumerate() {
            let what = format!("{name} E{power}");
            if value == 0.0 {
                assert_eq!(series(&found, name, power), 0.0, "{what}");
            } else {
                close(&what, series(&found, name, power), value, 1e-10);
            }
        }
    }
}

/// Levels without a field: -Z^2/(2 n^2) whatever l, in effective atomic units (Bethe and
/// Salpeter, section 2).
#[test]
fn a_donor_has_effective_hydrogen_levels() {
    let system = "    charge: -1
    ends: decay
    centre_charge: 1
    permittivity: 12.9
    shells:
      - {thickness: 1 nm, edge: 0 eV, mass: 0.067}";
    let rest = "tolerance: 1 ueV";
    let terms = [
        ("s2", "level: 2, where: {l: 0, m: 0}", rest),
        ("p2", "level: 1, where: {l: 1, m: 1}", rest),
        ("d4", "level: 2, where: {l: 2, m: 0}", rest),
    ];
    let control = "{symbol: F, unit: kV/cm, within: [-1, 1]}";
    let found = record("radial-donor", &spec(system, control, "Eh", &terms));
    for ((name, ..), n) in terms.iter().zip([2.0, 2.0, 4.0]) {
        let expected = -0.5 * 0.067 / (12.9 * 12.9 * n * n);
        close(name, number(&found, &format!("formulas/{name}/series/0")), expected, 1e-11);
    }
}

/// An impenetrable sphere: zeros of the spherical Bessel functions (M. Abramowitz and I. A.
/// Stegun, *Handbook of Mathematical Functions*, table 10.6; more digits by mpmath).
#[test]
fn an_impenetrable_sphere_has_bessel_levels() {
    let system = "    shells:\n      - {thickness: 4 nm, edge: 0 eV, mass: 0.067}";
    let zeros = [
        (0, 1, std::f64::consts::PI),
        (0, 2, 2.0 * std::f64::consts::PI),
        (1, 1, 4.493_409_457_909_064),
        (1, 2, 7.725_251_836_937_707),
        (2, 1, 5.763_459_196_894_55),
        (2, 2, 9.095_011_330_476_355),
        (3, 1, 6.987_932_000_500_52),
        (3, 2, 10.417_118_547_379_365),
    ];
    let named: Vec<(String, String)> = zeros
        .iter()
        .map(|(l, n, _)| (format!("l{l}_n{n}"), format!("level: {n}, where: {{l: {l}, m: 0}}")))
        .collect();
    let terms: Vec<_> = named.iter().map(|(a, b)| (a.as_str(), b.as_str(), "tolerance: 1 ueV")).collect();
    let control = "{symbol: F, unit: kV/cm, within: [-1, 1]}";
    let found = record("radial-sphere", &spec(system, control, "eV", &terms));
    for ((name, _), (_, _, zero)) in named.iter().zip(zeros) {
        let expected = kinetic() / 0.067 * (zero / 4.0) * (zero / 4.0);
        close(name, number(&found, &format!("formulas/{name}/series/0")), expected, 1e-12);
    }
}

/// Second order of the ground state of an impenetrable sphere of radius R,
/// `-(4 pi^2 + 3)/(48 pi^4) (e F)^2 R^4 / (hbar^2/2m)`. Derived here: with `u = sin(k r)`, `k R = pi`,
/// the first-order function is `-sin(k r)/(4 k^2 r) + (R^2 - r^2) cos(k r)/(4 k)` times cos theta;
/// summing 39 states of l = 1 by mpmath gives the same to 13 digits.
#[test]
fn polarizability_of_an_impenetrable_sphere() {
    let system = "    charge: -1
    field: F
    shells:
      - {thickness: 2.5 nm, edge: 0 eV, mass: 0.11}
      - {thickness: 3.5 nm, edge: 0 eV, mass: 0.11}";
    let terms = [("ground", "level: 1, where: {l: 0, m: 0}", "tolerance: 1 meV")];
    let control = "{symbol: F, unit: V/um, within: [-10, 10]}";
    let found = record("radial-polarizability", &spec(system, control, "eV", &terms));
    let pi2 = std::f64::consts::PI * std::f64::consts::PI;
    let expected = -(4.0 * pi2 + 3.0) / (48.0 * pi2 * pi2) * 6.0_f64.powi(4) / (kinetic() / 0.11) * 1e-6;
    close("E2", number(&found, "formulas/ground/series/2"), expected, 1e-10);
    let part = &found["formulas"]["ground"]["contributions"][0];
    assert_eq!((part["level"].as_u64(), part["where"]["l"].as_f64()), (Some(1), Some(1.0)), "{part}");
    // The first term of that sum: 0.00907434845000998 of 0.00908505586111259.
    close("share", number(part, "share"), 0.009_074_348_450_009_976 / 0.009_085_055_861_112_585, 1e-9);
}

/// Level 1 of l = 0 or 1 in a sphere of radius 3 nm, mass 0.067, in a matrix of mass 0.15: the
/// logarithmic derivative of the radial function times 1/m is continuous (D. J. BenDaniel and C. B.
/// Duke, Phys. Rev. 152, 683 (1966)), between j_l(k r) inside and the modified spherical Bessel function
/// outside (L. D. Landau and E. M. Lifshitz, *Quantum Mechanics*, section 33; from memory). Edges and
/// answer in eV.
fn finite_sphere(l: usize, floor: f64, edge: f64) -> f64 {
    let (radius, inside, outside) = (3.0, 0.067, 0.15);
    // (R'/R)/m inside minus outside; falls with energy below the first pole.
    let mismatch = |energy: f64| {
        let k = ((energy - floor) * inside / kinetic()).sqrt();
        let q = ((edge - energy) * outside / kinetic()).sqrt();
        let (x, y) = (k * radius, q * radius);
        let (inner, outer) = if l == 0 {
            (k / x.tan() - 1.0 / radius, -q - 1.0 / radius)
        } else {
            // j1 = sin x/x^2 - cos x/x, k1 = exp(-y) (1/y + 1/y^2).
            let j = x.sin() / (x * x) - x.cos() / x;
            let slope = x.sin() / x - 2.0 * j / x;
            let decay = -(y * y + 2.0 * y + 2.0) / (y * (y + 1.0));
            (k * slope / j, q * decay)
        };
        inner / inside - outer / outside
    };
    let pole = [std::f64::consts::PI, 4.493_409_457_909_064][l] / radius;
    let (mut low, mut high) = (floor + 1e-6, (floor + kinetic() / inside * pole * pole).min(edge) - 1e-9);
    assert!(mismatch(low) > 0.0 && mismatch(high) < 0.0);
    for _ in 0..100 {
        let middle = 0.5 * (low + high);
        if mismatch(middle) > 0.0 { low = middle } else { high = middle }
    }
    low
}

#[test]
fn a_finite_sphere_with_a_mass_step() {
    let system = "    ends: decay
    shells:
      - {thickness: 3 nm, edge: 0 eV, mass: 0.067}
      - {thickness: 1 nm, edge: 0.6 eV, mass: 0.15}";
    let rest = "tolerance: 1 ueV";
    let terms = [("s", "level: 1, where: {l: 0, m: 0}", rest), ("p", "level: 1, where: {l: 1, m: 0}", rest)];
    let control = "{symbol: F, unit: kV/cm, within: [-1, 1]}";
    let found = record("radial-finite", &spec(system, control, "eV", &terms));
    for (l, name) in ["s", "p"].iter().enumerate() {
        let expected = finite_sphere(l, 0.0, 0.6);
        close(name, number(&found, &format!("formulas/{name}/series/0")), expected, 1e-11);
    }
}

/// The same sphere with its floor moved by the control: exact levels are bound up to the outer edge,
/// and what lies above it is never taken for a level.
#[test]
fn a_floor_that_the_control_moves() {
    let system = "    ends: decay
    shells:
      - {thickness: 3 nm, edge: one*B/unit, mass: 0.067}
      - {thickness: 1 nm, edge: 0.6 eV, mass: 0.15}";
    let rest = "order: 4\n    tolerance: 5 meV";
    let terms = [("s", "level: 1, where: {l: 0, m: 0}", rest), ("p", "level: 1, where: {l: 1, m: 1}", rest)];
    let control = "{symbol: B, unit: V, within: [-0.3, 0.58]}";
    let text = spec(system, control, "eV", &terms)
        .replace("systems:", "constants: {one: 1 eV, unit: 1 V}\nsystems:");
    let found = record("radial-floor", &text);
    for (l, (name, why)) in [("s", "remainder"), ("p", "escape")].into_iter().enumerate() {
        let formula = &found["formulas"][name];
        assert_eq!(formula["valid"]["limited_by"][1], why, "{name}");
        for sample in formula["samples"].as_array().expect("samples") {
            let expected = finite_sphere(l, number(sample, "control"), 0.6);
            close(name, number(sample, "exact"), expected, 1e-11);
        }
    }
    // The level of l = 1 comes within the tolerance of the outer edge.
    let end = number(&found, "formulas/p/valid/to");
    close("escape", finite_sphere(1, end, 0.6), 0.6 - 0.005, 1e-7);
}

/// A uniform field moves an isotropic oscillator and lowers every level by
/// `(e F)^2/(2 m omega^2)`, exactly; so about any operating point the series ends at second order
/// (L. D. Landau and E. M. Lifshitz, *Quantum Mechanics*, section 33; completing the square). The wall
/// stands six and a half oscillator lengths out, where 1e-18 of the ground state is left.
#[test]
fn an_isotropic_oscillator_moves_as_a_whole() {
    // hbar omega = 50 meV: stiffness m omega^2 = (hbar omega)^2 / (2 kinetic/mass).
    let (quantum, mass) = (0.05, 0.1);
    let stiffness = quantum * quantum / (2.0 * kinetic() / mass);
    let length = (2.0 * kinetic() / mass / quantum).sqrt();
    let system = format!(
        "    charge: -1\n    field: F\n    shells:\n      - {{thickness: {} nm, edge: half*z^2, mass: {mass}}}",
        6.5 * length
    );
    let terms = [
        ("ground", "level: 1, where: {m: 0}", "tolerance: 0.01 meV"),
        ("side", "level: 1, where: {m: 1}", "tolerance: 0.01 meV"),
    ];
    for at in [0.0, 40.0] {
        let control = format!("{{symbol: F, unit: kV/cm, at: {at}, within: [{}, {}]}}", at - 10.0, at + 10.0);
        let text = spec(&system, &control, "meV", &terms)
            .replace("systems:", &format!("constants: {{half: {:e} eV/nm^2}}\nsystems:", 0.5 * stiffness));
        let found = record(&format!("radial-oscillator-{at}"), &text);
        let second = -1e3 * 1e-8 / (2.0 * stiffness);
        for (name, quanta) in [("ground", 1.5), ("side", 2.5)] {
            let get = |power: usize| number(&found, &format!("formulas/{name}/series/{power}"));
            close("E0", get(0), 1e3 * quanta * quantum + second * at * at, 1e-11);
            close("E2", get(2), second, 1e-10);
            if at == 0.0 {
                assert_eq!(get(1), 0.0);
            } else {
                close("E1", get(1), 2.0 * second * at, 1e-10);
            }
            assert!(get(4).abs() < 1e-6 * second.abs() / 100.0, "{}", get(4));
            // Exact levels by coupled channels agree with the same closed form.
            for sample in found["formulas"][name]["samples"].as_array().expect("samples") {
                let field = number(sample, "control");
                let exact = 1e3 * quanta * quantum + second * field * field;
                close("exact level", number(sample, "exact"), exact, 1e-10);
            }
        }
    }
}
