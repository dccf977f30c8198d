//! Parts systems against closed forms and tables.

use std::collections::BTreeMap;

use super::*;
use crate::diagnostic::Place;
use crate::expr::{Environment, Expression, OperatorSymbol, Symbol};
use crate::pencil::spectrum;
use crate::spec::{Kind, Part, PartKind};
use crate::units::{EnergyKind, Fault, Unit};

/// A spec in miniature: parts, constants and the control by their texts.
pub(crate) struct Sketch {
    pub parts: Vec<(&'static str, PartKind, Option<usize>)>,
    pub constants: Vec<(&'static str, &'static str)>,
    pub control: (&'static str, &'static str),
    pub hamiltonian: &'static str,
    pub conserved: Vec<(&'static str, &'static str)>,
}

struct Names<'a>(&'a Sketch, BTreeMap<&'static str, crate::units::Value>);

impl Environment for Names<'_> {
    fn look_up(&self, name: &str) -> Option<Symbol> {
        if let Some(value) = self.1.get(name) {
            return Some(Symbol::Constant(*value));
        }
        if name == self.0.control.0 {
            return Some(Symbol::Control(Unit::parse(self.0.control.1).unwrap().value(1.0)));
        }
        let index = self.0.parts.iter().position(|(part, ..)| *part == name)?;
        Some(Symbol::Part { index, vector: self.0.parts[index].1.is_vector() })
    }

    fn operator(
        &self,
        part: usize,
        name: &str,
        arguments: &[usize],
    ) -> std::result::Result<OperatorSymbol, Fault> {
        self.0.parts[part].1.operator(name, arguments)
    }

    fn names(&self) -> Vec<String> {
        Vec::new()
    }
}

impl Sketch {
    fn place() -> Place {
        Place { file: "sketch".into(), start: 0, end: 0 }
    }

    fn names(&self) -> Names<'_> {
        let mut names = Names(self, BTreeMap::new());
        for (name, text) in &self.constants {
            names.1.insert(name, crate::units::Quantity::parse(text).unwrap().value());
        }
        names
    }

    /// True if the language takes all texts, the Hamiltonian being of some kind.
    fn resolves(&self) -> bool {
        let names = self.names();
        let resolved = |text: &str| Expression::parse(text).ok()?.resolve(&names).ok();
        resolved(self.hamiltonian).is_some_and(|one| one.dimension.and_then(EnergyKind::of).is_some())
            && self.conserved.iter().all(|(_, text)| resolved(text).is_some())
    }

    pub fn system(&self) -> System {
        let names = self.names();
        let resolve = |text: &str| Expression::parse(text).unwrap().resolve(&names).unwrap();
        let hamiltonian = resolve(self.hamiltonian);
        let unit = EnergyKind::of(hamiltonian.dimension.unwrap()).unwrap().coherent_unit();
        System {
            name: "sketch".into(),
            place: Self::place(),
            kind: Kind::Parts(Parts {
                parts: self
                    .parts
                    .iter()
                    .map(|(name, kind, size)| Part {
                        name: (*name).into(),
                        kind: *kind,
                        size: *size,
                        place: Self::place(),
                    })
                    .collect(),
                hamiltonian: hamiltonian.tree,
                unit,
                place: Self::place(),
                conserved: self
                    .conserved
                    .iter()
                    .map(|(name, text)| ((*name).into(), resolve(text).tree, Self::place()))
                    .collect(),
            }),
        }
    }

    pub fn build(&self, at: f64, level: usize, refinement: usize, block: &[(&str, f64)]) -> Result<Built> {
        let system = self.system();
        let Kind::Parts(parts) = &system.kind else { panic!() };
        let block: Vec<(String, f64)> = block.iter().map(|(name, value)| ((*name).into(), *value)).collect();
        build(&system, parts, &Request { at, reach: (at - 1.0, at + 1.0), level, block: &block, refinement })
    }

    pub fn levels(&self, at: f64, refinement: usize, block: &[(&str, f64)]) -> Vec<f64> {
        levels(&self.build(at, 1, refinement, block).unwrap(), at)
    }
}

pub(crate) fn levels(built: &Built, control: f64) -> Vec<f64> {
    match &built.model {
        AnyModel::Real(model) => {
            spectrum(&model.hamiltonian(control)).unwrap().iter().map(|pair| pair.energy).collect()
        }
        AnyModel::Complex(model) => {
            spectrum(&model.hamiltonian(control)).unwrap().iter().map(|pair| pair.energy).collect()
        }
    }
}

fn parity(built: &Built) -> Option<String> {
    match &built.model {
        AnyModel::Real(model) => model.parity(),
        AnyModel::Complex(model) => model.parity(),
    }
}

fn is_real(built: &Built) -> bool {
    matches!(built.model, AnyModel::Real(_))
}

fn code(result: Result<Built>) -> &'static str {
    match result {
        Ok(_) => "built",
        Err(error) => error.diagnostics()[0].code,
    }
}

fn clock() -> Sketch {
    Sketch {
        parts: vec![("S", PartKind::Spin(1), None), ("I", PartKind::Spin(7), None)],
        constants: vec![("A", "2.2981579425 GHz"), ("gS", "2.00254032"), ("gI", "-0.00039885395")],
        control: ("B", "mT"),
        hamiltonian: "h*A*dot(S, I) + muB*B*(gS*S.z + gI*I.z)",
        conserved: vec![("m", "S.z + I.z")],
    }
}

/// Levels of one spin 1/2 and a nuclear spin in closed form.
/// Source: G. Breit and I. I. Rabi, Phys. Rev. 38, 2082 (1931); here with the
/// caesium constants that the reference collection lists (g-factors from memory).
#[test]
fn a_clock_atom_follows_breit_and_rabi() {
    let magneton_over_h = 1.399_624_491_71e10;
    let (a, gs, gi) = (2.2981579425e9, 2.00254032, -0.00039885395);
    let planck_ev = 6.62607015e-34 / 1.602176634e-19;
    let nu0 = a * 4.0;
    for field_mt in [0.0, 0.3, 20.0, 500.0] {
        let field = field_mt * 1e-3;
        let x = (gs - gi) * magneton_over_h * field / nu0;
        for m in [-3.0, 0.0, 2.0] {
            let root = libm::sqrt(1.0 + 4.0 * m * x / 8.0 + x * x);
            let centre = -nu0 / 16.0 + gi * magneton_over_h * m * field;
            let found = clock().build(0.0, 1, 0, &[("m", m)]).unwrap();
            assert_eq!(found.size, 2);
            for (level, sign) in levels(&found, field_mt).iter().zip([-1.0, 1.0]) {
                let exact = centre + sign * nu0 / 2.0 * root;
                // The Bohr magneton over h is printed to 3e-11.
                assert!((level / planck_ev - exact).abs() < 1e-10 * nu0 * (1.0 + x), "{m} {field_mt}");
            }
        }
    }
    assert_eq!(clock().levels(0.0, 0, &[]).len(), 16);
}

#[test]
fn a_block_that_does_not_exist_lists_those_that_do() {
    let error = clock().build(0.0, 1, 0, &[("m", 0.5)]).err().unwrap();
    let diagnostic = &error.diagnostics()[0];
    assert_eq!(diagnostic.code, "no-such-block");
    assert_eq!(diagnostic.expected.as_deref(), Some("one of -4, -3, -2, -1, 0, 1, 2, 3, 4"));
    assert_eq!(code(clock().build(0.0, 3, 0, &[("m", 0.0)])), "no-such-level");
}

/// Only the clock block keeps itself under the turn that reverses the field.
#[test]
fn the_clock_line_is_even_and_its_neighbours_are_not() {
    assert!(parity(&clock().build(0.0, 1, 0, &[("m", 0.0)]).unwrap()).is_some());
    assert!(parity(&clock().build(0.0, 1, 0, &[("m", 1.0)]).unwrap()).is_none());
    assert!(parity(&clock().build(1.0, 1, 0, &[("m", 0.0)]).unwrap()).is_none());
}

fn rotor() -> Sketch {
    Sketch {
        parts: vec![("J", PartKind::Rotor, None)],
        constants: vec![],
        control: ("w", "1"),
        hamiltonian: "J.sq - w*J.cos",
        conserved: vec![("m", "J.z")],
    }
}

/// Second and fourth order of a linear rotor in a field.
/// Source: C. H. Townes and A. L. Schawlow, *Microwave Spectroscopy*, ch. 10, from
/// memory; fourth orders as in the reference collection (matrix perturbation at 40 digits).
#[test]
fn a_rotor_follows_its_stark_series() {
    let w = 0.01;
    for (m, level, free, second, fourth) in [
        (0.0, 0, 0.0, -1.0 / 6.0, 11.0 / 1080.0),
        (0.0, 1, 2.0, 1.0 / 10.0, -73.0 / 7000.0),
        (1.0, 0, 2.0, -1.0 / 20.0, 19.0 / 56000.0),
        (0.0, 2, 6.0, 1.0 / 42.0, 0.0),
    ] {
        let found = levels(&rotor().build(0.0, level + 1, 0, &[("m", m)]).unwrap(), w)[level];
        let series = free + second * w * w + fourth * w * w * w * w;
        assert!((found - series).abs() < 3e-11, "{m} {level} {found} {series}");
    }
    let built = rotor().build(0.0, 1, 0, &[("m", 30.0)]).unwrap();
    assert!((levels(&built, 0.0)[0] - 930.0).abs() < 1e-9 && built.refinable);
    assert!(parity(&built).unwrap().contains("(-1)^J"));
    let whole = rotor().levels(0.0, 0, &[]);
    assert!((whole[1] - 2.0).abs() < 1e-12 && (whole[3] - 2.0).abs() < 1e-12);
}

/// `L^2 + W cos^2 theta`: the spheroidal eigenvalue with gamma^2 = W, raised by W.
/// Source: DLMF 30.2.1, 30.3.8; at gamma^2 = 1: -0.6809999449 (reference collection).
#[test]
fn a_rotor_with_a_squared_cosine_is_spheroidal() {
    let sketch = Sketch { hamiltonian: "J.sq + w*J.cos2", ..rotor() };
    let found = sketch.levels(1.0, 0, &[("m", 0.0)]);
    assert!((found[0] - 1.0 + 0.680_999_944_9).abs() < 1e-10, "{}", found[0]);
}

/// `n^2 + 2 q cos(2 phi)`, with one phase whose charge counts in twos: Mathieu's
/// a_0(5) = -5.8000460208515084191 and a_0(1) = -0.45513860410741354823.
/// Source: DLMF 28.2, values of the reference collection (Abramowitz and Stegun, table 20.1).
#[test]
fn a_phase_with_a_cosine_has_mathieu_levels() {
    let sketch = Sketch {
        parts: vec![("p", PartKind::Phase, None)],
        constants: vec![],
        control: ("q", "1"),
        hamiltonian: "4*p.number^2 + 2*q*p.cos",
        conserved: vec![],
    };
    assert!((sketch.levels(5.0, 0, &[])[0] + 5.800_046_020_851_508).abs() < 1e-12);
    assert!((sketch.levels(1.0, 0, &[])[0] + 0.455_138_604_107_413_5).abs() < 1e-12);
    let built = sketch.build(0.0, 1, 0, &[]).unwrap();
    assert!(parity(&built).unwrap().contains("(-1)^n"));
    assert!(is_real(&built));
    // sin in place of cos is the same problem, imaginary elements and all.
    let turned = Sketch { hamiltonian: "4*p.number^2 + 2*q*p.sin", ..sketch };
    let built = turned.build(5.0, 1, 0, &[]).unwrap();
    assert!(is_real(&built));
    assert!((levels(&built, 5.0)[0] + 5.800_046_020_851_508).abs() < 1e-12);
}

/// A charge box at the middle between two charges, and a hundred charges away.
/// Source: J. Koch et al., Phys. Rev. A 76, 042319 (2007), eq. (2.2): at half charge the lowest
/// level is EC a_1(-EJ/(2 EC)) or b_1; DLMF 28.6.2: a_1(q) = 1 + q - q^2/8 - q^3/64 - ...
#[test]
fn a_charge_box_is_centred_on_its_charge() {
    let sketch = Sketch {
        parts: vec![("b", PartKind::Phase, None)],
        constants: vec![("EC", "1"), ("EJ", "0.1")],
        control: ("ng", "1"),
        hamiltonian: "4*EC*(b.number - ng)^2 - EJ*b.cos",
        conserved: vec![],
    };
    let q = -0.05;
    let exact = 1.0 + q - q * q / 8.0 - q * q * q / 64.0 - q * q * q * q / 1536.0
        + 11.0 * q * q * q * q * q / 36864.0;
    for at in [0.5, 100.5, -3.5] {
        let built = sketch.build(at, 1, 0, &[]).unwrap();
        assert!((levels(&built, at)[0] - exact).abs() < 1e-10, "{at}");
        assert!(parity(&built).unwrap().contains("- n of b"), "{at}");
    }
    assert!(parity(&sketch.build(0.3, 1, 0, &[]).unwrap()).is_none());
}

/// Levels of the quartic oscillator at g = 0.1.
/// Source: widely tabulated; recomputed with two bases in the reference collection.
#[test]
fn a_quartic_oscillator_has_its_levels() {
    let sketch = Sketch {
        parts: vec![("q", PartKind::Oscillator, None)],
        constants: vec![],
        control: ("g", "1"),
        hamiltonian: "q.p^2/2 + q.x^2/2 + g*q.x^4",
        conserved: vec![],
    };
    let exact = [0.559_146_327_183_5, 1.769_502_643_949, 3.138_624_308_498];
    for refinement in [2, 3] {
        let built = sketch.build(0.1, 3, refinement, &[]).unwrap();
        assert!(is_real(&built));
        for (found, exact) in levels(&built, 0.1).iter().zip(exact) {
            assert!((found - exact).abs() < 2e-12, "{found} {exact}");
        }
    }
    // The same through a function of x, formed at quadrature nodes.
    let function = Sketch { hamiltonian: "q.p^2/2 + sqrt(q.x^4)/2 + g*abs(q.x^4)", ..sketch };
    let found = function.build(0.1, 1, 2, &[]).unwrap();
    assert!((levels(&found, 0.1)[0] - exact[0]).abs() < 2e-12);
}

/// A function that holds both coordinate and control: the oscillator whose
/// potential `exp(-F x)` has the exact shift of its own expansion, checked against
/// `q.x` alone to second order, `E2 = -1/2` for `H = p^2/2 + x^2/2 - F x`.
/// Source: L. D. Landau and E. M. Lifshitz, *Quantum Mechanics* (harmonic oscillator in a uniform field).
#[test]
fn functions_of_coordinate_and_control_expand_in_the_control() {
    let sketch = Sketch {
        parts: vec![("q", PartKind::Oscillator, None)],
        constants: vec![],
        control: ("F", "1"),
        hamiltonian: "q.p^2/2 + q.x^2/2 + ln(exp(-F*q.x))",
        conserved: vec![],
    };
    let built = sketch.build(0.0, 1, 0, &[]).unwrap();
    assert!((levels(&built, 0.3)[0] - 0.5 + 0.045).abs() < 1e-12);
    let AnyModel::Real(model) = &built.model else { panic!() };
    let first = model.expansion(1).to_dense();
    assert!((first[(0, 1)] + libm::sqrt(0.5)).abs() < 1e-13);
    assert!(model.expansion(2).to_dense().amax() < 1e-12);
}

/// A particle between hard walls, and the same in a field.
/// Source: exact levels; in a field f = 10 the level 4.717092628644326 (hbar = m = L = 1) from
/// the Airy determinant, reference collection.
#[test]
fn an_interval_is_a_box() {
    let sketch = Sketch {
        parts: vec![("w", PartKind::Interval { from: 0.0, to: 9.0, length: true }, None)],
        constants: vec![("m", "0.0665"), ("middle", "4.5 nm")],
        control: ("F", "kV/cm"),
        hamiltonian: "w.p^2/(2*m*me) + e*F*(w.x - middle)",
        conserved: vec![],
    };
    let built = sketch.build(0.0, 2, 0, &[]).unwrap();
    // hbar^2/(2 me) = Eh a0^2/2 in eV nm^2, CODATA 2022.
    let kinetic = 27.211386245981 * 0.0529177210544 * 0.0529177210544 / 2.0 / 0.0665;
    let unit = std::f64::consts::PI * std::f64::consts::PI * kinetic / 81.0;
    let free = levels(&built, 0.0);
    assert!((free[0] / unit - 1.0).abs() < 1e-9 && (free[1] / unit - 4.0).abs() < 1e-8);
    assert!(parity(&built).unwrap().contains("mirrored"));
    assert!(is_real(&built));
    // f = m q F L^3 / hbar^2 = 10, energies in hbar^2/(m L^2) = 2 kinetic / L^2.
    let scale = 2.0 * kinetic / 81.0;
    let field = 10.0 * scale / 9.0 / 1e-4;
    assert!((levels(&built, field)[0] / scale - 4.717_092_628_644_326).abs() < 1e-8);
}

/// A mass that varies along the interval, and an odd power of the momentum.
#[test]
fn products_of_momenta_keep_their_order() {
    let sketch = |hamiltonian: &'static str| Sketch {
        parts: vec![("w", PartKind::Interval { from: -1.0, to: 1.0, length: false }, None)],
        constants: vec![],
        control: ("F", "1"),
        hamiltonian,
        conserved: vec![],
    };
    // p (1 - x^2) p has Legendre's operator, but with walls at the singular ends the ground level is
    // that of polynomials vanishing there; only its being Hermitian and positive is checked.
    let built = sketch("w.p*(2 - w.x^2)*w.p + F*w.x").build(0.0, 1, 0, &[]).unwrap();
    let found = levels(&built, 0.0)[0];
    // Between the box levels of the smallest and the largest inverse mass, 1 and 2.
    let box_level = std::f64::consts::FRAC_PI_2 * std::f64::consts::FRAC_PI_2;
    assert!(found > box_level && found < 2.0 * box_level);
    // The fourth power has the squares of the levels of the second.
    let fourth = sketch("w.p^4 + F*w.x").levels(0.0, 0, &[]);
    assert!((fourth[0] / (box_level * box_level) - 1.0).abs() < 1e-7, "{}", fourth[0]);
    assert_eq!(code(sketch("w.p^3 + F*w.x").build(0.0, 1, 0, &[])), "not-hermitian");
    assert_eq!(code(sketch("w.x*w.p + F*w.x").build(0.0, 1, 0, &[])), "not-hermitian");
    assert_eq!(code(sketch("w.x*w.p + w.p*w.x + F*w.x").build(0.0, 1, 0, &[])), "built");
}

/// Spin 1 with axial and transverse field: exact levels (D -+ sqrt(D^2 + 4 b^2))/2 and D.
/// Source: M. W. Doherty et al., Phys. Rep. 528, 1 (2013), the Hamiltonian; levels of the 3x3 matrix by hand.
#[test]
fn a_spin_in_a_transverse_field_has_its_levels() {
    let sketch = Sketch {
        parts: vec![("S", PartKind::Spin(2), None)],
        constants: vec![("D", "2.87 GHz")],
        control: ("b", "GHz"),
        hamiltonian: "D*S.z^2 + b*S.y",
        conserved: vec![],
    };
    let built = sketch.build(0.0, 1, 0, &[]).unwrap();
    assert!(is_real(&built), "S.y alone is real after a change of phases");
    let root = libm::sqrt(2.87e9f64 * 2.87e9 + 4.0);
    let found = levels(&built, 1e-9);
    assert!((found[0] - (2.87e9 - root) / 2.0).abs() < 1e-5 && (found[1] - 2.87e9).abs() < 1e-5);
    assert!(parity(&built).is_some());
    let tilted = Sketch { hamiltonian: "D*S.z^2 + b*(S.x + S.y + S.z)", ..sketch };
    let built = tilted.build(0.0, 1, 0, &[]).unwrap();
    assert!(parity(&built).unwrap().contains("reversal of time"));
    assert!(!is_real(&built));
}

/// A two-state crossing: exact levels -+ sqrt(F^2 + 1/4).
#[test]
fn two_bare_states_avoid_each_other() {
    let sketch = Sketch {
        parts: vec![("s", PartKind::States(2), None)],
        constants: vec![("V", "0.5")],
        control: ("F", "1"),
        hamiltonian: "F*(s.projector(1) - s.projector(2)) + V*s.couple(1, 2)",
        conserved: vec![],
    };
    let built = sketch.build(0.0, 1, 0, &[]).unwrap();
    assert!((levels(&built, 1.2)[0] + 1.3).abs() < 1e-15);
    assert!(parity(&built).unwrap().contains("exchanged"));
    assert!(!built.refinable);
    let crooked = Sketch { hamiltonian: "F*s.jump(1, 2) + V*s.couple(1, 2)", ..sketch };
    let error = crooked.build(0.0, 1, 0, &[]).err().unwrap();
    let found = error.diagnostics()[0].found.clone().unwrap();
    assert!(found.contains("<s: state 1| H |s: state 2>"), "{found}");
}

/// A spin coupled to an oscillator: excitation number is conserved, and each block
/// is two states with the splitting 2 g sqrt(n) at resonance.
/// Source: E. T. Jaynes and F. W. Cummings, Proc. IEEE 51, 89 (1963).
#[test]
fn an_exchanged_excitation_splits_its_block() {
    let sketch = Sketch {
        parts: vec![("S", PartKind::Spin(1), None), ("a", PartKind::Oscillator, None)],
        constants: vec![("g", "0.01")],
        control: ("w", "1"),
        hamiltonian: "w*S.z + a.number + g*(a.raise*S.lower + a.lower*S.raise)",
        conserved: vec![("n", "a.number + S.z")],
    };
    for n in [3.0, 12.0] {
        let found = levels(&sketch.build(1.0, 1, 0, &[("n", n - 0.5)]).unwrap(), 1.0);
        assert_eq!(found.len(), 2);
        assert!((found[1] - found[0] - 0.02 * libm::sqrt(n)).abs() < 1e-13);
    }
    let crooked = Sketch { conserved: vec![("n", "a.number")], ..sketch };
    assert_eq!(code(crooked.build(1.0, 1, 0, &[])), "not-conserved");
}

/// The total spin of two spins 1/2 is conserved though not diagonal: singlet -3/4,
/// triplet 1/4.
#[test]
fn a_conserved_operator_need_not_be_diagonal() {
    let sketch = Sketch {
        parts: vec![("a", PartKind::Spin(1), None), ("b", PartKind::Spin(1), None)],
        constants: vec![],
        control: ("J", "1"),
        hamiltonian: "J*dot(a, b) + 0.1*(a.z + b.z)",
        conserved: vec![("s", "a.sq + b.sq + 2*dot(a, b)"), ("m", "a.z + b.z")],
    };
    let found = |block: &[(&str, f64)]| sketch.levels(1.0, 0, block);
    assert!((found(&[("s", 0.0)])[0] + 0.75).abs() < 1e-14);
    assert_eq!(found(&[("s", 2.0)]).len(), 3);
    assert!((found(&[("s", 2.0), ("m", 0.0)])[0] - 0.25).abs() < 1e-14);
    let error = sketch.build(1.0, 1, 0, &[("s", 0.75)]).err().unwrap();
    assert_eq!(error.diagnostics()[0].expected.as_deref(), Some("one of 0, 2"));
}

#[test]
fn a_part_that_is_never_used_is_refused() {
    let mut sketch = clock();
    sketch.parts.push(("K", PartKind::Spin(1), None));
    assert_eq!(code(sketch.build(0.0, 1, 0, &[])), "unused-part");
}

#[test]
fn too_large_a_space_is_refused_before_it_is_made() {
    let sketch = Sketch {
        parts: vec![("a", PartKind::Spin(100), None), ("b", PartKind::Spin(100), None)],
        constants: vec![],
        control: ("J", "1"),
        hamiltonian: "J*dot(a, b) + a.z^2 + b.z^2",
        conserved: vec![("m", "a.z + b.z")],
    };
    assert_eq!(code(sketch.build(0.0, 1, 0, &[])), "too-large");
    assert_eq!(sketch.build(0.0, 1, 0, &[("m", 0.0)]).unwrap().size, 101);
}

/// The expansion, the change and the slope are those of the Hamiltonian itself.
#[test]
fn expansion_and_change_agree_with_the_hamiltonian() {
    let sketch = Sketch {
        parts: vec![("S", PartKind::Spin(3), None)],
        constants: vec![("D", "1.5")],
        control: ("b", "1"),
        hamiltonian: "D*S.z^2 + sin(b)*S.x + b^3*S.z + exp(b)*dot(S, S)",
        conserved: vec![],
    };
    let built = sketch.build(0.4, 1, 0, &[]).unwrap();
    let AnyModel::Real(model) = &built.model else { panic!() };
    let d = 1e-2;
    let mut sum = nalgebra::DMatrix::<f64>::zeros(4, 4);
    for power in 0..=4 {
        sum += model.expansion(power).to_dense() * libm::pow(d, power as f64);
    }
    let exact = model.hamiltonian(0.4 + d).to_dense();
    assert!((&sum - &exact).amax() < 1e-10);
    let change = model.change(0.4 + d).to_dense();
    assert!((change - (exact - model.hamiltonian(0.4).to_dense())).amax() < 1e-14);
    assert!((model.slope(0.4).to_dense() - model.expansion(1).to_dense()).amax() < 1e-15);
    // No level may move faster than the rates say.
    let rates = model.rates(0.4);
    let moved = levels(&built, 0.4 + d)[0] - levels(&built, 0.4)[0];
    let mean = model.change(0.4 + d).to_dense().trace() / 4.0;
    assert!((moved - mean).abs() <= 2.0 * (rates[0] * d + rates[1] * d * d + rates[2] * d * d * d + 1e-9));
}

/// Every limit refuses before it costs time or memory.
#[test]
fn hostile_sizes_are_refused() {
    let sketch = |parts: Vec<(&'static str, PartKind, Option<usize>)>, hamiltonian: &'static str| Sketch {
        parts,
        constants: vec![],
        control: ("F", "1"),
        hamiltonian,
        conserved: vec![],
    };
    let interval = PartKind::Interval { from: 0.0, to: 1.0, length: false };
    let well = sketch(vec![("w", interval, Some(5000))], "w.p^2 + F*w.x");
    assert_eq!(code(well.build(0.0, 1, 0, &[])), "too-large");
    let oscillator = sketch(vec![("q", PartKind::Oscillator, None)], "q.number + F*q.x");
    assert_eq!(code(oscillator.build(0.0, 10_000, 0, &[])), "too-large");
    let spin = sketch(vec![("S", PartKind::Spin(100_000_000), None)], "F*S.z");
    assert_eq!(code(spin.build(0.0, 1, 0, &[])), "too-large");
    let rotor = sketch(vec![("J", PartKind::Rotor, Some(usize::MAX))], "J.sq + F*J.cos");
    assert_eq!(code(rotor.build(0.0, 1, 0, &[])), "too-large");
    let product = sketch(
        vec![("S", PartKind::Spin(1), None), ("I", PartKind::Spin(1), None)],
        "(S.x + S.y*I.x + I.z*S.z + F*I.y)^14 + F*S.z",
    );
    assert_eq!(code(product.build(0.0, 1, 0, &[])), "too-large");
    let long = format!("(S.x + {})^64 + S.z", vec!["sin(F)"; 1200].join("*"));
    let long = sketch(vec![("S", PartKind::Spin(1), None)], Box::leak(long.into_boxed_str()));
    assert_eq!(code(long.build(0.5, 1, 0, &[])), "built");
}

mod hostile {
    use super::*;
    use proptest::prelude::*;

    const PARTS: [(&str, PartKind, Option<usize>); 7] = [
        ("S", PartKind::Spin(1), None),
        ("I", PartKind::Spin(2), None),
        ("R", PartKind::Rotor, Some(2)),
        ("q", PartKind::Oscillator, Some(3)),
        ("p", PartKind::Phase, Some(3)),
        ("w", PartKind::Interval { from: -1.0, to: 2.0, length: false }, Some(3)),
        ("s", PartKind::States(3), None),
    ];

    /// Any expression of the language, sensible or not.
    fn expressions() -> impl Strategy<Value = String> {
        let leaf = prop::sample::select(vec![
            "S.x",
            "S.y",
            "S.raise",
            "I.z",
            "dot(S, I)",
            "dot(I, I)",
            "R.cos",
            "R.cos2",
            "R.sq",
            "q.x",
            "q.p",
            "q.raise",
            "p.number",
            "p.sin",
            "p.cos",
            "w.x",
            "w.p",
            "s.jump(1, 2)",
            "s.couple(2, 3)",
            "d",
            "2",
            "0",
            "0.3",
            "sqrt(d)",
            "ln(q.x)",
            "exp(d*w.x)",
            "abs(q.x - d)",
            "1/(d - 0.5)",
        ])
        .prop_map(str::to_owned);
        leaf.prop_recursive(4, 24, 2, |inner| {
            prop_oneof![
                (inner.clone(), "[-+*]", inner.clone()).prop_map(|(a, op, b)| format!("({a}){op}({b})")),
                (inner.clone(), 0u32..4).prop_map(|(a, n)| format!("({a})^{n}")),
                inner.clone().prop_map(|a| format!("({a})/(1 + d^2)")),
                // A sum that is often Hermitian, so that later steps are reached.
                (inner.clone(), inner).prop_map(|(a, b)| format!("({a})*({b}) + ({b})*({a})")),
            ]
        })
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(300))]

        #[test]
        fn any_hamiltonian_is_built_or_refused(
            hamiltonian in expressions(),
            conserved in expressions(),
            value in prop::sample::select(vec![None, Some(0.0), Some(0.5), Some(2.0)]),
            at in prop::sample::select(vec![0.0, 0.5, -1.5]),
        ) {
            let used: Vec<_> = PARTS
                .into_iter()
                .filter(|(name, ..)| {
                    let text = format!("{hamiltonian} {conserved}");
                    text.contains(&format!("{name}.")) || (text.contains("dot") && "SI".contains(name))
                })
                .collect();
            let conserved: &'static str = Box::leak(conserved.into_boxed_str());
            let sketch = Sketch {
                parts: used,
                constants: vec![],
                control: ("d", "1"),
                hamiltonian: Box::leak(hamiltonian.clone().into_boxed_str()),
                conserved: if value.is_some() { vec![("c", conserved)] } else { vec![] },
            };
            // What the language itself refuses (a division by zero, say) is no case.
            prop_assume!(sketch.resolves());
            let block: Vec<(&str, f64)> = value.iter().map(|value| ("c", *value)).collect();
            if let Ok(built) = sketch.build(at, 1, 0, &block) {
                prop_assert_eq!(levels(&built, at).len(), built.size);
                prop_assert!(levels(&built, at).iter().all(|level| level.is_finite()));
            }
        }
    }
}
