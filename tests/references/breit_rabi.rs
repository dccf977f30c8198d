//! Clock atoms in a magnetic field.
//!
//! Source: G. Breit and I. I. Rabi, Phys. Rev. 38, 2082 (1931), the closed form.
//! Constants: hydrogen line 1420405751.768 Hz (quoted with its source in the
//! reference collection), rubidium-87 6834682610.904324 Hz (BIPM CCTF 2004), caesium
//! 9192631770 Hz (SI); g-factors E. Arimondo, M. Inguscio and P. Violino, Rev. Mod. Phys. 49, 31
//! (1977), from memory, as printed by D. A. Steck.

use super::solved::{close, level, parts, record, samples, series};

/// Bohr magneton over h in Hz/T, both CODATA 2022 (h exact).
const MAGNETON: f64 = 9.2740100657e-24 / 6.62607015e-34;

struct Atom {
    name: &'static str,
    /// Twice the nuclear spin.
    twice: u32,
    splitting: f64,
    electron: f64,
    nucleus: f64,
    /// Published quadratic coefficient of the clock line, Hz/G^2, and its digits.
    quadratic: (f64, f64),
}

const ATOMS: [Atom; 3] = [
    Atom {
        name: "hydrogen",
        twice: 1,
        splitting: 1420405751.768,
        electron: 2.00228385,
        nucleus: -0.00304204,
        quadratic: (2773.004, 1e-6),
    },
    Atom {
        name: "rubidium",
        twice: 3,
        splitting: 6834682610.904324,
        electron: 2.00233113,
        nucleus: -0.0009951414,
        quadratic: (575.145986, 1e-8),
    },
    Atom {
        name: "caesium",
        twice: 7,
        splitting: 9192631770.0,
        electron: 2.00254032,
        nucleus: -0.00039885395,
        quadratic: (427.4533537, 1e-8),
    },
];

impl Atom {
    fn spin(&self) -> f64 {
        f64::from(self.twice) / 2.0
    }

    fn constants(&self) -> String {
        // A (I + 1/2) is the splitting at zero field.
        format!(
            "nu0: {} Hz, gS: {}, gI: {}, width: {}",
            self.splitting,
            self.electron,
            self.nucleus,
            self.spin() + 0.5
        )
    }

    /// Level of the block m, upper (+1) or lower (-1), in Hz.
    fn level(&self, field: f64, m: f64, sign: f64) -> f64 {
        let x = (self.electron - self.nucleus) * MAGNETON * field / self.splitting;
        let states = 2.0 * self.spin() + 1.0;
        let root = (1.0 + 4.0 * m * x / states + x * x).sqrt();
        -self.splitting / (2.0 * states)
            + self.nucleus * MAGNETON * m * field
            + 0.5 * sign * self.splitting * root
    }

    fn solved(&self, control: &str, formulas: &str) -> serde_json::Value {
        record(&parts(
            &self.constants(),
            &format!("S: spin 1/2, I: spin {}/2", self.twice),
            "h*nu0/width*dot(S, I) + muB*B*(gS*S.z + gI*I.z)",
            "m: S.z + I.z",
            control,
            formulas,
        ))
    }
}

/// The quadratic coefficient of the clock line, computed and published, with the next
/// term `-K^2/(2 nu0)`.
#[test]
fn clock_lines_have_their_published_quadratic_coefficients() {
    for atom in &ATOMS {
        let line = "  line:\n    unit: Hz\n    sum: [{system: s, level: 2, where: {m: 0}}, {system: s, level: 1, where: {m: 0}, times: -1}]\n    value: shift\n    order: 4\n    tolerance: 0.1 Hz\n";
        let found = atom.solved("symbol: B, unit: G, within: [-1, 1]", line);
        let e = series(&found, "line");
        let per_gauss = (atom.electron - atom.nucleus) * MAGNETON * 1e-4;
        let quadratic = per_gauss * per_gauss / (2.0 * atom.splitting);
        close(e[0], atom.splitting, 1e-14, 0.0, atom.name);
        close(e[2], quadratic, 1e-11, 0.0, atom.name);
        close(e[2], atom.quadratic.0, atom.quadratic.1, 0.0, atom.name);
        close(e[4], -quadratic * quadratic / (2.0 * atom.splitting), 1e-8, 0.0, atom.name);
        assert_eq!((e[1], e[3]), (0.0, 0.0), "{}", atom.name);
        assert_eq!(found["formulas"]["line"]["valid"]["limited_by"], serde_json::json!(["within", "within"]));
        for [field, exact, _] in samples(&found, "line") {
            // Tenths of a hertz on nine gigahertz; the shift itself is kept to its own digits.
            let x = per_gauss * field / atom.splitting;
            let shift = atom.splitting * x * x / (1.0 + (1.0 + x * x).sqrt());
            close(exact, shift, 1e-9, 1e-3, &format!("{} at {field} G", atom.name));
        }
    }
}

/// Every block's levels at many fields: 1,000 samples over all atoms and blocks.
#[test]
fn exact_levels_follow_the_closed_form_at_a_thousand_fields() {
    let mut compared = 0;
    for atom in &ATOMS {
        let top = atom.spin() + 0.5;
        let mut blocks = Vec::new();
        let mut m = -top;
        while m <= top {
            blocks.push(m);
            m += 1.0;
        }
        for centre in [0.003, 0.02, 0.1, 0.5] {
            let formulas: String = blocks
                .iter()
                .enumerate()
                .flat_map(|(idx, m)| {
                    let count = if m.abs() == top { 1 } else { 2 };
                    (1..=count).map(move |n| {
                        level(&format!("b{idx}n{n}"), n, &format!(", where: {{m: {m}}}"), "Hz", 4, 1e6)
                    })
                })
                .collect();
            let found = atom.solved(
                &format!("symbol: B, unit: T, at: {centre}, within: [{}, {}]", 0.9 * centre, 1.1 * centre),
                &formulas,
            );
            for (idx, &m) in blocks.iter().enumerate() {
                let stretched = m.abs() == top;
                for n in 1..=if stretched { 1 } else { 2 } {
                    let name = format!("b{idx}n{n}");
                    for [field, exact, _] in samples(&found, &name) {
                        let x = (atom.electron - atom.nucleus) * MAGNETON * field / atom.splitting;
                        // The stretched level is 1 + x or 1 - x without a root.
                        let closed = if stretched {
                            let states = 2.0 * atom.spin() + 1.0;
                            -atom.splitting / (2.0 * states)
                                + atom.nucleus * MAGNETON * m * field
                                + 0.5 * atom.splitting * (1.0 + m.signum() * x)
                        } else {
                            atom.level(field, m, if n == 1 { -1.0 } else { 1.0 })
                        };
                        close(
                            exact,
                            closed,
                            1e-13,
                            atom.splitting,
                            &format!("{} {name} at {field} T", atom.name),
                        );
                        compared += 1;
                    }
                }
            }
        }
    }
    assert!(compared >= 1000, "{compared}");
}
