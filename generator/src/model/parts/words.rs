//! A Hamiltonian's tree as a sum of products: coefficient times one word of
//! operators per part.
//!
//! Operators of different parts commute, so each product keeps one ordered word
//! per part. What holds no control and only one part stays a whole
//! ([`Atom::Local`]) and is formed as a matrix later; only brackets that mix parts,
//! momenta at walls, or the control, are multiplied out.

use std::collections::BTreeMap;

use crate::diagnostic::{Diagnostic, Error, Result};
use crate::expr::{PartOperator, Tree};
use crate::spec::{PartKind, Parts};

/// Most products that a Hamiltonian may multiply out to.
const MOST_PRODUCTS: usize = 4096;

/// One factor of a word.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Atom {
    /// A control-free expression of one part's operators.
    Local(Tree),
    /// A function of one part's coordinate and the control.
    Function(Tree),
}

/// `number * scalar^power * ... * word * word ...`; scalars and atoms by their
/// number in the [`Expander`]'s tables, so that large expressions are held once.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Product {
    pub number: f64,
    /// The control's share: scalars with their powers, ascending.
    pub scalars: Vec<(usize, u32)>,
    /// Words by part.
    pub words: BTreeMap<usize, Vec<usize>>,
}

impl Product {
    fn number(number: f64) -> Self {
        Self { number, scalars: Vec::new(), words: BTreeMap::new() }
    }

    fn times(&self, other: &Self) -> Self {
        let mut powers: BTreeMap<usize, u32> = self.scalars.iter().copied().collect();
        for (scalar, power) in &other.scalars {
            *powers.entry(*scalar).or_default() += power;
        }
        let mut words = self.words.clone();
        for (part, word) in &other.words {
            words.entry(*part).or_default().extend(word);
        }
        Self { number: self.number * other.number, scalars: powers.into_iter().collect(), words }
    }
}

/// What two products share that add up.
type Key = (Vec<(usize, u32)>, BTreeMap<usize, Vec<usize>>);

/// A sum of products, like ones added up, in order of first appearance.
#[derive(Clone, Debug, Default)]
pub(super) struct Sum {
    pub products: Vec<Product>,
    places: BTreeMap<Key, usize>,
}

impl Sum {
    fn one(product: Product) -> Self {
        let mut out = Self::default();
        out.add(product);
        out
    }

    fn add(&mut self, product: Product) {
        if product.number == 0.0 {
            return;
        }
        let next = self.products.len();
        let place = *self.places.entry((product.scalars.clone(), product.words.clone())).or_insert(next);
        match self.products.get_mut(place) {
            Some(like) => like.number += product.number,
            None => self.products.push(product),
        }
    }

    fn plus(mut self, other: Self, factor: f64) -> Self {
        for mut product in other.products {
            product.number *= factor;
            self.add(product);
        }
        self
    }
}

/// Multiplies out trees of one system.
#[derive(Clone)]
pub(super) struct Expander<'a> {
    system: &'a Parts,
    scalars: Vec<Tree>,
    atoms: Vec<Atom>,
    known: BTreeMap<String, usize>,
}

impl<'a> Expander<'a> {
    pub fn new(system: &'a Parts) -> Self {
        Self { system, scalars: Vec::new(), atoms: Vec::new(), known: BTreeMap::new() }
    }

    /// The terms of the Hamiltonian as written: the operands of its outermost sums.
    pub fn written_terms(tree: &Tree) -> Vec<Tree> {
        match tree {
            Tree::Add(a, b) => [Self::written_terms(a), Self::written_terms(b)].concat(),
            Tree::Subtract(a, b) => {
                let mut out = Self::written_terms(a);
                out.extend(Self::written_terms(b).into_iter().map(Tree::negated));
                out
            }
            Tree::Negative(inner) => Self::written_terms(inner).into_iter().map(Tree::negated).collect(),
            other => vec![other.clone()],
        }
    }

    /// The function of the control that these scalars make; `None` for 1.
    pub fn coefficient(&self, scalars: &[(usize, u32)]) -> Option<Tree> {
        scalars
            .iter()
            .filter_map(|(scalar, power)| {
                Some(self.scalars.get(*scalar)?.clone().raised(Tree::Number(f64::from(*power))))
            })
            .reduce(Tree::times)
    }

    /// The factors of a word.
    pub fn word(&self, word: &[usize]) -> Vec<&Atom> {
        word.iter().filter_map(|atom| self.atoms.get(*atom)).collect()
    }

    fn scalar(&mut self, tree: &Tree) -> Product {
        let (number, rest) = tree.clone().into_factor();
        let mut out = Product::number(number);
        if let Some(rest) = rest {
            let next = self.scalars.len();
            let place = *self.known.entry(format!("scalar {rest:?}")).or_insert(next);
            if place == next {
                self.scalars.push(rest);
            }
            out.scalars.push((place, 1));
        }
        out
    }

    fn atom(&mut self, part: usize, atom: Atom) -> Product {
        let next = self.atoms.len();
        let place = *self.known.entry(format!("atom {atom:?}")).or_insert(next);
        if place == next {
            self.atoms.push(atom);
        }
        Product { words: BTreeMap::from([(part, vec![place])]), ..Product::number(1.0) }
    }

    /// Multiplies a tree out.
    ///
    /// # Errors
    /// If there are more products than the program takes.
    pub fn expand(&mut self, tree: &Tree) -> Result<Sum> {
        if !tree.uses_operator() {
            return Ok(Sum::one(self.scalar(tree)));
        }
        let parts = tree.parts();
        if let [part] = parts.as_slice()
            && !tree.uses_control()
            && !self.has_wall_momentum(*part, tree)
        {
            let (number, rest) = tree.clone().into_factor();
            return Ok(Sum::one(match rest {
                None => Product::number(number),
                Some(rest) => Product { number, ..self.atom(*part, Atom::Local(rest)) },
            }));
        }
        match tree {
            Tree::Operator { part, .. } => Ok(Sum::one(self.atom(*part, Atom::Local(tree.clone())))),
            Tree::Dot(a, b) => {
                let mut out = Sum::default();
                for operator in [PartOperator::X, PartOperator::Y, PartOperator::Z] {
                    let left = self.atom(*a, Atom::Local(Tree::Operator { part: *a, operator }));
                    let right = self.atom(*b, Atom::Local(Tree::Operator { part: *b, operator }));
                    out.add(left.times(&right));
                }
                Ok(out)
            }
            Tree::Negative(inner) => Ok(Sum::default().plus(self.expand(inner)?, -1.0)),
            Tree::Add(a, b) => Ok(self.expand(a)?.plus(self.expand(b)?, 1.0)),
            Tree::Subtract(a, b) => Ok(self.expand(a)?.plus(self.expand(b)?, -1.0)),
            Tree::Multiply(a, b) => {
                let (a, b) = (self.expand(a)?, self.expand(b)?);
                self.multiplied(&a, &b)
            }
            Tree::Divide(a, b) => {
                let inverse = Sum::one(self.scalar(&Tree::Number(1.0).over((**b).clone())));
                let above = self.expand(a)?;
                self.multiplied(&above, &inverse)
            }
            Tree::Power(base, exponent) => {
                let base = self.expand(base)?;
                let mut out = Sum::one(Product::number(1.0));
                for _ in 0..exponent.as_number().unwrap_or(0.0) as usize {
                    out = self.multiplied(&out, &base)?;
                }
                Ok(out)
            }
            Tree::Call(..) => match parts.first() {
                Some(part) => Ok(Sum::one(self.atom(*part, Atom::Function(tree.coordinate_as_position())))),
                None => Err(Error::internal("a function of operators without a part")),
            },
            Tree::Number(_) | Tree::Control | Tree::Position => Ok(Sum::one(self.scalar(tree))),
        }
    }

    fn multiplied(&self, a: &Sum, b: &Sum) -> Result<Sum> {
        let mut out = Sum::default();
        if a.products.len().saturating_mul(b.products.len()) > 4 * MOST_PRODUCTS {
            return Err(self.too_many());
        }
        for left in &a.products {
            for right in &b.products {
                out.add(left.times(right));
            }
        }
        if out.products.len() > MOST_PRODUCTS { Err(self.too_many()) } else { Ok(out) }
    }

    fn too_many(&self) -> Error {
        Error::spec(
            Diagnostic::new("too-large", "the Hamiltonian multiplies out to too many products")
                .at(Some(self.system.place.clone()))
                .expected(format!("at most {MOST_PRODUCTS}"))
                .action("use lower powers of sums that mix parts"),
        )
    }

    fn has_wall_momentum(&self, part: usize, tree: &Tree) -> bool {
        self.system.parts.get(part).is_some_and(|part| matches!(part.kind, PartKind::Interval { .. }))
            && tree.uses(&mut |node| matches!(node, Tree::Operator { operator: PartOperator::P, .. }))
    }
}

/// How many steps of a part's basis a word can go.
pub(super) fn reach(word: &[&Atom]) -> usize {
    word.iter()
        .map(|atom| match atom {
            Atom::Local(tree) => tree_reach(tree),
            Atom::Function(_) => 4,
        })
        .sum()
}

fn tree_reach(tree: &Tree) -> usize {
    match tree {
        Tree::Operator { operator, .. } => match operator {
            PartOperator::Number | PartOperator::Sq | PartOperator::Z => 0,
            PartOperator::Cos2 => 2,
            _ => 1,
        },
        Tree::Negative(inner) | Tree::Divide(inner, _) => tree_reach(inner),
        Tree::Add(a, b) | Tree::Subtract(a, b) => tree_reach(a).max(tree_reach(b)),
        Tree::Multiply(a, b) => tree_reach(a) + tree_reach(b),
        Tree::Power(base, exponent) => tree_reach(base) * exponent.as_number().unwrap_or(0.0) as usize,
        // A function reaches everywhere; its own error is that of the quadrature.
        Tree::Call(..) => 4,
        Tree::Number(_) | Tree::Control | Tree::Position | Tree::Dot(..) => 0,
    }
}

/// True if a word takes a function of the coordinate.
pub(super) fn has_function(word: &[&Atom]) -> bool {
    word.iter().any(|atom| match atom {
        Atom::Local(tree) => tree.uses(&mut |node| matches!(node, Tree::Call(..)) && node.uses_operator()),
        Atom::Function(_) => true,
    })
}
