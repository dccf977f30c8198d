//! Operators as sums of products whose sign under a transformation is a sum of
//! bits modulo 2.

use std::cell::Cell;
use std::collections::BTreeMap;

use crate::expr::{Function, PartOperator, Tree};
use crate::model::C64;
use crate::spec::{PartKind, Parts};
use crate::units::decimal;

/// Most products before the search gives up.
const MOST_PRODUCTS: usize = 1000;

/// Products formed in all before the search gives up, so that a huge Hamiltonian
/// costs no more than a fraction of a second.
const MOST_WORK: usize = 300_000;

/// Highest power that is multiplied out.
const HIGHEST_POWER: f64 = 16.0;

/// Stands for scalars in a word.
const SCALAR: usize = usize::MAX;

/// A sum of unknown bits, and a known one.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Form {
    bits: Vec<u64>,
    pub known: bool,
}

impl Form {
    pub fn plus(&self, other: &Self) -> Self {
        Self {
            bits: self.bits.iter().zip(&other.bits).map(|(a, b)| a ^ b).collect(),
            known: self.known ^ other.known,
        }
    }

    pub fn has(&self, bit: usize) -> bool {
        self.bits.get(bit / 64).is_some_and(|word| word >> (bit % 64) & 1 == 1)
    }

    pub fn is_zero(&self) -> bool {
        !self.known && self.bits.iter().all(|word| *word == 0)
    }
}

/// Power of d, then operators by part, each in its order; scalar functions last.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Default)]
pub(super) struct Key {
    pub power: u32,
    pub word: Vec<(usize, u32)>,
}

pub(super) type Polynomial = BTreeMap<Key, (C64, Form)>;

/// The unknown bits of one part.
#[derive(Clone, Copy, Debug)]
pub(super) struct Bits {
    pub first: usize,
    pub count: usize,
}

pub(super) struct Search<'a> {
    pub system: &'a Parts,
    at: f64,
    pub bits: Vec<Bits>,
    words: usize,
    /// Bit of time reversal.
    pub reversal: usize,
    /// Per part: charges are counted from half of this (phase), positions from this (interval).
    pub centres: Vec<f64>,
    pub equations: Vec<Form>,
    names: BTreeMap<String, u32>,
    work: Cell<usize>,
}

/// Codes of elementary operators in words.
const X: u32 = 0;
const Y: u32 = 1;
const Z: u32 = 2;
const P: u32 = 3;
pub(super) const NUMBER: u32 = 4;
const RAISE: u32 = 5;
const LOWER: u32 = 6;
const SQ: u32 = 7;
const COS: u32 = 8;
const COS2: u32 = 9;
const SIN: u32 = 10;
/// Pairs of states and functions are numbered from here on as they come.
const NAMED: u32 = 100;

/// A product in which powers of ten move the decimal point, so that `1e-9 * 4.5`
/// is the double that `4.5 nm` is in metres, and lengths cancel exactly.
fn times(a: C64, b: C64) -> C64 {
    if a.im == 0.0 && b.im == 0.0 { C64::new(decimal::product(a.re, b.re), 0.0) } else { a * b }
}

impl<'a> Search<'a> {
    pub(super) fn new(system: &'a Parts, at: f64) -> Self {
        let mut next = 0;
        let bits: Vec<Bits> = system
            .parts
            .iter()
            .map(|part| {
                let count = match part.kind {
                    PartKind::Spin(_) | PartKind::Rotor | PartKind::Phase | PartKind::States(2) => 2,
                    PartKind::Oscillator | PartKind::Interval { .. } => 1,
                    PartKind::States(count) => count,
                };
                let bits = Bits { first: next, count };
                next += count;
                bits
            })
            .collect();
        let centres = system
            .parts
            .iter()
            .map(|part| match part.kind {
                PartKind::Interval { from, to, .. } => 0.5 * (from + to),
                _ => 0.0,
            })
            .collect();
        Self {
            system,
            at,
            bits,
            words: next / 64 + 1,
            reversal: next,
            centres,
            equations: Vec::new(),
            names: BTreeMap::new(),
            work: Cell::new(0),
        }
    }

    pub(super) fn none(&self) -> Form {
        Form { bits: vec![0; self.words], known: false }
    }

    pub(super) fn form(&self, bits: &[usize]) -> Form {
        let mut out = self.none();
        for bit in bits {
            if let Some(word) = out.bits.get_mut(bit / 64) {
                *word ^= 1 << (bit % 64);
            }
        }
        out
    }

    fn constant(&self, value: C64) -> Polynomial {
        let mut out = Polynomial::new();
        if value != C64::new(0.0, 0.0) {
            out.insert(Key::default(), (value, self.none()));
        }
        out
    }

    fn atom(&self, part: usize, code: u32, coefficient: C64, form: Form) -> Polynomial {
        BTreeMap::from([(Key { power: 0, word: vec![(part, code)] }, (coefficient, form))])
    }

    fn sum(&self, mut a: Polynomial, b: Polynomial, factor: f64) -> Option<Polynomial> {
        self.work.set(self.work.get().saturating_add(b.len()));
        if self.work.get() > MOST_WORK {
            return None;
        }
        for (key, (value, form)) in b {
            let entry = a.entry(key).or_insert((C64::new(0.0, 0.0), form));
            entry.0 += times(value, C64::new(factor, 0.0));
        }
        a.retain(|_, (value, _)| *value != C64::new(0.0, 0.0));
        (a.len() <= MOST_PRODUCTS).then_some(a)
    }

    fn product(&self, a: &Polynomial, b: &Polynomial) -> Option<Polynomial> {
        let work = self.work.get().saturating_add(a.len().saturating_mul(b.len()));
        self.work.set(work);
        if work > MOST_WORK {
            return None;
        }
        let mut out = Polynomial::new();
        for (left, (x, f)) in a {
            for (right, (y, g)) in b {
                let mut word = [left.word.clone(), right.word.clone()].concat();
                // Stable, so the order inside each part stays; scalar functions commute among themselves too.
                word.sort_by_key(|(part, code)| (*part, if *part == SCALAR { *code } else { 0 }));
                let key = Key { power: left.power + right.power, word };
                let entry = out.entry(key).or_insert((C64::new(0.0, 0.0), f.plus(g)));
                entry.0 += times(*x, *y);
            }
        }
        out.retain(|_, (value, _)| *value != C64::new(0.0, 0.0));
        (out.len() <= MOST_PRODUCTS).then_some(out)
    }

    fn operator(&mut self, part: usize, operator: PartOperator) -> Option<Polynomial> {
        let kind = self.system.parts.get(part)?.kind;
        let Bits { first, count } = *self.bits.get(part)?;
        let (one, i) = (C64::new(1.0, 0.0), C64::new(0.0, 1.0));
        let t = self.reversal;
        let spin = |search: &Self, operator: PartOperator| {
            // Reversal turns a true spin round; two bare states it only conjugates.
            let turned = matches!(kind, PartKind::Spin(_));
            let (code, mut bits, odd) = match operator {
                PartOperator::X => (X, vec![first], turned),
                PartOperator::Y => (Y, vec![first + 1], true),
                _ => (Z, vec![first, first + 1], turned),
            };
            if odd {
                bits.push(t);
            }
            search.atom(part, code, one, search.form(&bits))
        };
        let shifted = |search: &Self, a: Polynomial, b: Polynomial, factor: C64| {
            search.sum(a, b.into_iter().map(|(key, (x, f))| (key, (x * factor, f))).collect(), 1.0)
        };
        let plain =
            |search: &Self, code: u32, bits: &[usize]| search.atom(part, code, one, search.form(bits));
        match (kind, operator) {
            (PartKind::Spin(_), PartOperator::X | PartOperator::Y | PartOperator::Z) => {
                Some(spin(self, operator))
            }
            (PartKind::Spin(_), PartOperator::Raise | PartOperator::Lower) => {
                let factor = if operator == PartOperator::Raise { i } else { -i };
                shifted(self, spin(self, PartOperator::X), spin(self, PartOperator::Y), factor)
            }
            (PartKind::States(2), _) => {
                let half = self.constant(C64::new(0.5, 0.0));
                let (pair, a, b) = match operator {
                    PartOperator::Projector(a) => (false, a, a),
                    PartOperator::Jump(a, b) => (false, a, b),
                    PartOperator::Couple(a, b) => (true, a, b),
                    _ => return None,
                };
                let out = if a == b {
                    shifted(self, half, spin(self, PartOperator::Z), if a == 1 { one } else { -one })?
                } else if pair {
                    return self.sum(Polynomial::new(), spin(self, PartOperator::X), 2.0);
                } else {
                    let factor = if a == 1 { i } else { -i };
                    shifted(self, spin(self, PartOperator::X), spin(self, PartOperator::Y), factor)?
                };
                if pair { self.sum(Polynomial::new(), out, 2.0) } else { Some(out) }
            }
            (PartKind::States(_), _) => {
                let (a, b) = match operator {
                    PartOperator::Projector(a) => (a, a),
                    PartOperator::Jump(a, b) | PartOperator::Couple(a, b) => (a, b),
                    _ => return None,
                };
                let bits = if a == b { vec![] } else { vec![first + a - 1, first + b - 1] };
                if a == 0 || b == 0 || a > count || b > count {
                    return None;
                }
                let code = self.named(format!("{operator:?}"));
                Some(plain(self, code, &bits))
            }
            (PartKind::Rotor, PartOperator::Cos) => Some(plain(self, COS, &[first])),
            (PartKind::Rotor, PartOperator::Cos2) => Some(plain(self, COS2, &[])),
            (PartKind::Rotor, PartOperator::Z) => Some(plain(self, Z, &[first + 1, t])),
            (PartKind::Rotor | PartKind::Spin(_), PartOperator::Sq) => Some(plain(self, SQ, &[])),
            (PartKind::Oscillator, PartOperator::X) => Some(plain(self, X, &[first])),
            (PartKind::Oscillator, PartOperator::P) => Some(plain(self, P, &[first, t])),
            (PartKind::Oscillator, PartOperator::Raise) => Some(plain(self, RAISE, &[first])),
            (PartKind::Oscillator, PartOperator::Lower) => Some(plain(self, LOWER, &[first])),
            (PartKind::Oscillator, PartOperator::Number) => Some(plain(self, NUMBER, &[])),
            (PartKind::Phase, PartOperator::Cos) => Some(plain(self, COS, &[first + 1])),
            (PartKind::Phase, PartOperator::Sin) => Some(plain(self, SIN, &[first, first + 1, t])),
            (PartKind::Phase, PartOperator::Number) => {
                let centre = self.constant(C64::new(0.5 * self.centres.get(part)?, 0.0));
                self.sum(plain(self, NUMBER, &[first]), centre, 1.0)
            }
            (PartKind::Interval { .. }, PartOperator::X) => {
                let centre = self.constant(C64::new(*self.centres.get(part)?, 0.0));
                self.sum(plain(self, X, &[first]), centre, 1.0)
            }
            (PartKind::Interval { .. }, PartOperator::P) => Some(plain(self, P, &[first, t])),
            _ => None,
        }
    }

    fn named(&mut self, name: String) -> u32 {
        let next = NAMED + self.names.len() as u32;
        *self.names.entry(name).or_insert(next)
    }

    /// The common form of all products, demanded by equations; 0 for nothing at all.
    pub(super) fn uniform(&mut self, polynomial: &Polynomial) -> Form {
        let mut first: Option<Form> = None;
        for (key, (_, form)) in polynomial {
            let mut form = form.clone();
            form.known ^= key.power % 2 == 1;
            match &first {
                None => first = Some(form),
                Some(first) => self.equations.push(first.plus(&form)),
            }
        }
        first.unwrap_or_else(|| self.none())
    }

    /// An opaque real factor made of `trees`, with its form.
    fn opaque(&mut self, tree: &Tree, form: Form) -> Polynomial {
        let part = tree.parts().first().copied().unwrap_or(SCALAR);
        let code = self.named(format!("{tree:?}"));
        self.atom(part, code, C64::new(1.0, 0.0), form)
    }

    pub(super) fn polynomial(&mut self, tree: &Tree) -> Option<Polynomial> {
        match tree {
            Tree::Number(value) => Some(self.constant(C64::new(*value, 0.0))),
            Tree::Control => {
                let mut out = self.constant(C64::new(self.at, 0.0));
                out.insert(Key { power: 1, word: Vec::new() }, (C64::new(1.0, 0.0), self.none()));
                Some(out)
            }
            Tree::Position => None,
            Tree::Operator { part, operator } => self.operator(*part, *operator),
            Tree::Dot(a, b) => {
                let mut out = Polynomial::new();
                for operator in [PartOperator::X, PartOperator::Y, PartOperator::Z] {
                    let (left, right) = (self.operator(*a, operator)?, self.operator(*b, operator)?);
                    out = self.sum(out, self.product(&left, &right)?, 1.0)?;
                }
                Some(out)
            }
            Tree::Negative(inner) => {
                let inner = self.polynomial(inner)?;
                self.sum(Polynomial::new(), inner, -1.0)
            }
            Tree::Add(a, b) => {
                let (a, b) = (self.polynomial(a)?, self.polynomial(b)?);
                self.sum(a, b, 1.0)
            }
            Tree::Subtract(a, b) => {
                let (a, b) = (self.polynomial(a)?, self.polynomial(b)?);
                self.sum(a, b, -1.0)
            }
            Tree::Multiply(a, b) => {
                let (a, b) = (self.polynomial(a)?, self.polynomial(b)?);
                self.product(&a, &b)
            }
            Tree::Divide(a, b) => {
                let above = self.polynomial(a)?;
                if let Some(value) = b.as_number() {
                    let inverse = decimal::quotient(1.0, value);
                    return self.sum(Polynomial::new(), above, inverse);
                }
                let below = self.polynomial(b)?;
                let form = self.uniform(&below);
                let inverse = self.opaque(&Tree::Number(1.0).over((**b).clone()), form);
                self.product(&above, &inverse)
            }
            Tree::Power(base, exponent) => {
                let below = self.polynomial(base)?;
                match exponent.as_number() {
                    Some(n) if libm::floor(n) == n && (0.0..=HIGHEST_POWER).contains(&n) => {
                        let mut out = self.constant(C64::new(1.0, 0.0));
                        for _ in 0..n as usize {
                            out = self.product(&out, &below)?;
                        }
                        Some(out)
                    }
                    Some(n) if libm::floor(n) == n => {
                        let form = self.uniform(&below);
                        let odd = libm::fmod(n, 2.0) != 0.0;
                        let form = if odd { form } else { self.none() };
                        Some(self.opaque(tree, form))
                    }
                    _ => {
                        let exponent = self.polynomial(exponent)?;
                        for side in [&below, &exponent] {
                            let form = self.uniform(side);
                            self.equations.push(form);
                        }
                        let none = self.none();
                        Some(self.opaque(tree, none))
                    }
                }
            }
            Tree::Call(function, arguments) => {
                let mut form = self.none();
                for argument in arguments {
                    let inner = self.polynomial(argument)?;
                    let of = self.uniform(&inner);
                    match function {
                        Function::Sin | Function::Tan | Function::Sinh | Function::Tanh => form = of,
                        Function::Cos | Function::Cosh | Function::Abs => {}
                        _ => self.equations.push(of),
                    }
                }
                Some(self.opaque(tree, form))
            }
        }
    }

    /// Demands that every product keeps its sign, the power of d counted in.
    pub(super) fn demand(&mut self, polynomial: &Polynomial) {
        for (key, (value, form)) in polynomial {
            let mut form = form.clone();
            form.known ^= key.power % 2 == 1;
            let reversal = self.form(&[self.reversal]);
            if value.im != 0.0 {
                form = form.plus(&reversal);
                if value.re != 0.0 {
                    // A complex coefficient survives no reversal.
                    self.equations.push(reversal);
                }
            }
            self.equations.push(form);
        }
    }
}
