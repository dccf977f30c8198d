//! Hamiltonians written in operators of several parts.
//!
//! In: the parts, the Hamiltonian's tree and the conserved operators. Out: a
//! [`Built`] whose Hamiltonian is a sum of functions of the control times fixed
//! matrices, in the block that the request selects.
//!
//! Method: the tree is multiplied out into products of one word of operators per
//! part ([`words`]); each word becomes a matrix in an enlarged basis and is then
//! cut ([`local`]); products of parts are laid out over the product states
//! ([`space`]), or over those that diagonal conserved operators select ([`block`]).
//! A diagonal change of phases makes the matrices real where it can ([`real`]).
//! Infinite bases grow with the refinement; finite systems have no error of
//! discretisation.
//!
//! Not here: levels, series.

mod block;
mod gauss;
mod local;
mod order;
mod real;
#[cfg(test)]
mod references;
mod size;
mod space;
mod sparse;
mod symmetry;
mod terms;
#[cfg(test)]
pub(crate) mod tests;
mod words;

use std::rc::Rc;

use block::Conserved;
use local::Local;
use space::{Group, Space};
use sparse::{Sparse, modulus};
use terms::{Term, Terms};
use words::{Expander, Product};

use super::{AnyModel, Built, Request};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::expr::Tree;
use crate::outcome::Note;
use crate::spec::{Parts, System};

/// Most basis states of one block.
pub const MOST_STATES: usize = 4096;

/// Most product states before conserved operators select a block.
const MOST_PRODUCT_STATES: usize = 1 << 20;

/// Product states up to which commutators are checked over the whole space.
const CHECKED_WHOLE: usize = 2 * MOST_STATES;

/// States above the level wanted, below which a basis is enlarged at once.
const SPARE: usize = 6;

/// Difference of mirrored elements that counts as rounding, relative to the
/// largest element.
const HERMITIAN: f64 = 1e-12;

/// Builds the model of one block.
///
/// # Errors
/// A part that is never used, a Hamiltonian that is not Hermitian or not analytic
/// at the operating point, a conserved operator that does not commute, a block
/// value that is no eigenvalue, a level beyond the number of states, or a problem
/// beyond the limits, all placed in the spec.
pub fn build(system: &System, parts: &Parts, request: &Request<'_>) -> Result<Built> {
    let used = parts.hamiltonian.parts();
    if let Some((_, part)) = parts.parts.iter().enumerate().find(|(idx, _)| !used.contains(idx)) {
        return Err(Error::spec(
            Diagnostic::new("unused-part", format!("the Hamiltonian never uses the part `{}`", part.name))
                .at(Some(part.place.clone()))
                .action("take the part out, or write its operators into `hamiltonian`"),
        ));
    }
    let problem = Problem::new(system, parts, request)?;
    let infinite = size::is_infinite(parts);
    let mut refinement = request.refinement;
    loop {
        let attempt = problem.attempt(refinement)?;
        let short = match &attempt {
            Attempt::Built(built) => built.size < request.level.saturating_add(SPARE),
            Attempt::NoSuchValue(_) => true,
        };
        let next = refinement + 1;
        if infinite && short && next < request.refinement + 16 && problem.product_states(next).is_some() {
            refinement = next;
            continue;
        }
        return match attempt {
            Attempt::NoSuchValue(error) => Err(error),
            Attempt::Built(built) if built.size < request.level => Err(Error::spec(
                Diagnostic::new("no-such-level", format!("`{}` has no level {}", system.name, request.level))
                    .found(format!("level {}", request.level))
                    .expected(format!("a level from 1 to {}, the number of states here", built.size)),
            )),
            Attempt::Built(built) => Ok(*built),
        };
    }
}

/// What one size of the bases gave.
enum Attempt {
    Built(Box<Built>),
    NoSuchValue(Error),
}

/// What stays the same while bases grow.
struct Problem<'a> {
    system: &'a System,
    parts: &'a Parts,
    request: &'a Request<'a>,
    /// Written terms, multiplied out.
    terms: Vec<Vec<Product>>,
    /// Conserved operators, multiplied out.
    conserved: Vec<Vec<Product>>,
    expander: Expander<'a>,
    demands: size::Demands,
    centres: Vec<i64>,
    trees: Vec<Tree>,
}

impl<'a> Problem<'a> {
    fn new(system: &'a System, parts: &'a Parts, request: &'a Request<'a>) -> Result<Self> {
        let mut expander = Expander::new(parts);
        let trees = Expander::written_terms(&parts.hamiltonian);
        let terms =
            trees.iter().map(|tree| Ok(expander.expand(tree)?.products)).collect::<Result<Vec<_>>>()?;
        let conserved = parts
            .conserved
            .iter()
            .map(|(_, tree, _)| Ok(expander.expand(tree)?.products))
            .collect::<Result<Vec<_>>>()?;
        let demands = size::Demands::of(parts, &expander, &terms, &conserved);
        let centres = symmetry::charge_centres(parts, request.at);
        Ok(Self { system, parts, request, terms, conserved, expander, demands, centres, trees })
    }

    fn extents(&self, refinement: usize) -> Vec<local::Extent> {
        size::extents(self.parts, &self.demands, &self.centres, self.request.level, refinement)
    }

    /// Number of product states at a refinement, if it is within the limit.
    fn product_states(&self, refinement: usize) -> Option<usize> {
        size::product_states(self.parts, &self.extents(refinement))
            .filter(|&total| total <= MOST_PRODUCT_STATES)
    }

    fn too_large(&self, found: &str) -> Error {
        Error::spec(
            Diagnostic::new("too-large", format!("the basis of `{}` is too large", self.system.name))
                .at(Some(self.system.place.clone()))
                .found(found)
                .expected(format!("at most {MOST_STATES} states in one block"))
                .action("use fewer or smaller parts, fix smaller bases with `size`, or split the problem with `conserved` and `where`"),
        )
    }

    fn attempt(&self, refinement: usize) -> Result<Attempt> {
        let total = self.product_states(refinement).ok_or_else(|| {
            let sizes = self.extents(refinement);
            let sizes = self
                .parts
                .parts
                .iter()
                .zip(sizes)
                .map(|(part, extent)| size::describe(part, &extent))
                .collect::<Vec<_>>();
            self.too_large(&sizes.join(", "))
        })?;
        if total > MOST_STATES && self.request.block.is_empty() {
            return Err(self.too_large(&format!("{total} product states")));
        }
        let locals = self
            .parts
            .parts
            .iter()
            .zip(self.extents(refinement))
            .map(|(part, extent)| Local::new(part.kind, extent))
            .collect();
        let space = Space::new(locals).ok_or_else(|| self.too_large("too many product states to count"))?;
        let all: Vec<usize> = (0..total).collect();
        let conserved = self.conserved_operators(&space, &all)?;
        let states = match self.selected(&conserved, &all) {
            Ok(states) => states,
            Err(error) => return Ok(Attempt::NoSuchValue(error)),
        };
        if states.len() > MOST_STATES {
            return Err(self.too_large(&format!("{} states in the block", states.len())));
        }
        let whole = total <= CHECKED_WHOLE;
        let checked = if whole { &all } else { &states };
        let mut groups: Vec<Group> = Vec::new();
        for (idx, products) in self.terms.iter().enumerate() {
            let term = self.checked_term(&space, &conserved, idx, products, checked)?;
            for mut group in term {
                if whole && states.len() < total {
                    group.matrix = restricted(&group.matrix, &states, total);
                }
                match groups.iter_mut().find(|known| known.coefficient == group.coefficient) {
                    Some(known) => known.matrix = known.matrix.plus(&group.matrix),
                    None => groups.push(group),
                }
            }
        }
        let names: Vec<&str> = self.parts.parts.iter().map(|part| part.name.as_str()).collect();
        for group in &mut groups {
            self.make_hermitian(group, &|state| {
                states.get(state).map_or(String::new(), |&state| space.describe(state, &names))
            })?;
        }
        let mut groups = match self.rotated(&conserved, groups, &states, total)? {
            Ok(groups) => groups,
            Err(error) => return Ok(Attempt::NoSuchValue(error)),
        };
        let order = groups.first().map_or(states.len(), |group| group.matrix.order());
        if order == 0 {
            return Err(Error::internal("a block without states"));
        }
        order::narrow(&mut groups);
        Ok(Attempt::Built(Box::new(self.built(&conserved, groups, order, total, refinement)?)))
    }

    fn conserved_operators(&self, space: &Space, all: &[usize]) -> Result<Vec<Conserved<'a>>> {
        let mut out = Vec::new();
        for ((name, tree, place), products) in self.parts.conserved.iter().zip(&self.conserved) {
            let mut matrix = Sparse::zero(all.len());
            for group in space.assemble(&self.expander, products, all, &mut |_, _, _| {})? {
                matrix = matrix.plus(&group.matrix);
            }
            out.push(Conserved::new(name, tree, place, matrix)?);
        }
        Ok(out)
    }

    /// Product states with the wanted values of the diagonal conserved operators.
    fn selected(&self, conserved: &[Conserved<'_>], all: &[usize]) -> Result<Vec<usize>> {
        let mut states = all.to_vec();
        for (name, value) in self.request.block {
            let operator = conserved
                .iter()
                .find(|one| one.name == name)
                .ok_or_else(|| Error::internal("a block of an operator that is not conserved"))?;
            let Some(diagonal) = &operator.diagonal else { continue };
            let of = |state: usize| diagonal.get(state).copied().unwrap_or(f64::NAN);
            let kept: Vec<usize> =
                states.iter().copied().filter(|&state| block::same(of(state), *value)).collect();
            if kept.is_empty() {
                let values = block::distinct(states.iter().map(|&state| of(state)));
                return Err(operator.no_such_value(*value, &values, size::is_infinite(self.parts)));
            }
            states = kept;
        }
        Ok(states)
    }

    /// One written term's matrices, after the check that every conserved operator
    /// commutes with it.
    fn checked_term(
        &self,
        space: &Space,
        conserved: &[Conserved<'_>],
        idx: usize,
        products: &[Product],
        states: &[usize],
    ) -> Result<Vec<Group>> {
        let mut leaving = vec![0.0f64; conserved.len()];
        let step = |one: &Conserved<'_>, a: usize, b: usize| {
            one.diagonal.as_ref().map_or(0.0, |diagonal| {
                let of = |state: usize| diagonal.get(state).copied().unwrap_or(0.0);
                (of(a) - of(b)).abs()
            })
        };
        let groups = space.assemble(&self.expander, products, states, &mut |inside, outside, x| {
            for (most, one) in leaving.iter_mut().zip(conserved) {
                *most = most.max(modulus(x) * step(one, inside, outside));
            }
        })?;
        let largest = groups.iter().map(|group| group.matrix.largest()).fold(0.0, f64::max);
        for (position, one) in conserved.iter().enumerate() {
            let mut size = leaving.get(position).copied().unwrap_or(0.0);
            if one.diagonal.is_some() {
                for (row, column, x) in groups.iter().flat_map(|group| group.matrix.elements()) {
                    if let (Some(&a), Some(&b)) = (states.get(row), states.get(column)) {
                        size = size.max(modulus(x) * step(one, a, b));
                    }
                }
            } else if let Some(tree) = self.trees.get(idx) {
                let mut expander = self.expander.clone();
                let commutator =
                    one.tree.clone().times(tree.clone()).minus(tree.clone().times(one.tree.clone()));
                let products = expander.expand(&commutator)?.products;
                for group in space
                    .assemble(&expander, &products, states, &mut |_, _, x| size = size.max(modulus(x)))?
                {
                    size = size.max(group.matrix.largest());
                }
            }
            if size > block::COMMUTES * largest * one.matrix.largest().max(1.0) {
                return Err(one.does_not_commute(idx + 1, size));
            }
        }
        Ok(groups)
    }

    /// Checks that a matrix is Hermitian and takes the rounding out.
    fn make_hermitian(&self, group: &mut Group, describe: &dyn Fn(usize) -> String) -> Result<()> {
        let matrix = &group.matrix;
        let largest = matrix.largest();
        let mut worst = (0.0, 0, 0);
        for (row, column, x) in matrix.elements() {
            let difference = modulus(x - matrix.get(column, row).conj());
            if difference > worst.0 {
                worst = (difference, row, column);
            }
        }
        let (difference, row, column) = worst;
        // A NaN compares false, so it must be looked for.
        if !largest.is_finite() || matrix.elements().any(|(_, _, x)| !(x.re.is_finite() && x.im.is_finite()))
        {
            return Err(not_analytic(self.parts, self.request.at));
        }
        if difference > HERMITIAN * largest {
            let show = |x: super::C64| format!("{:.6e}{:+.6e}i", x.re, x.im);
            return Err(Error::spec(
                Diagnostic::new("not-hermitian", "the Hamiltonian is not Hermitian")
                    .at(Some(self.parts.place.clone()))
                    .found(format!(
                        "<{}| H |{}> = {}, but the mirrored element is {} ({} {})",
                        describe(row),
                        describe(column),
                        show(matrix.get(row, column)),
                        show(matrix.get(column, row)),
                        "the control's share taken out, in",
                        self.parts.unit.symbol
                    ))
                    .expected("elements that are each other's complex conjugates")
                    .action(
                        "add the adjoint: `x*p + p*x`, `raise` with `lower`, `jump(i, j)` with `jump(j, i)`",
                    ),
            ));
        }
        let half = super::C64::new(0.5, 0.0);
        group.matrix = matrix.plus(&matrix.adjoint()).scaled(half);
        Ok(())
    }

    /// The matrices in the eigenvectors of the conserved operators that are not
    /// diagonal, for the wanted values. The inner error is a value that is none.
    fn rotated(
        &self,
        conserved: &[Conserved<'_>],
        mut groups: Vec<Group>,
        states: &[usize],
        total: usize,
    ) -> Result<std::result::Result<Vec<Group>, Error>> {
        // The operators that still wait must follow every change of basis.
        let mut waiting: Vec<(&Conserved<'_>, f64, Sparse)> = self
            .request
            .block
            .iter()
            .filter_map(|(name, value)| {
                let one = conserved.iter().find(|one| one.name == name && one.diagonal.is_none())?;
                Some((one, *value, restricted(&one.matrix, states, total)))
            })
            .collect();
        waiting.reverse();
        while let Some((one, value, matrix)) = waiting.pop() {
            let pairs = block::eigenvectors(&matrix)?;
            let vectors: Vec<_> = pairs
                .iter()
                .filter(|(own, _)| block::same(*own, value))
                .map(|(_, vector)| vector.clone())
                .collect();
            if vectors.is_empty() {
                let values = block::distinct(pairs.iter().map(|(own, _)| *own));
                let infinite = size::is_infinite(self.parts);
                return Ok(Err(one.no_such_value(value, &values, infinite)));
            }
            let half = super::C64::new(0.5, 0.0);
            for group in &mut groups {
                let projected = block::projected(&group.matrix, &vectors);
                group.matrix = projected.plus(&projected.adjoint()).scaled(half);
            }
            for (_, _, other) in &mut waiting {
                *other = block::projected(other, &vectors);
            }
        }
        Ok(Ok(groups))
    }

    fn built(
        &self,
        conserved: &[Conserved<'_>],
        groups: Vec<Group>,
        order: usize,
        total: usize,
        refinement: usize,
    ) -> Result<Built> {
        let at = self.request.at;
        let infinite = size::is_infinite(self.parts);
        let block: Vec<(&Tree, f64)> = self
            .request
            .block
            .iter()
            .filter_map(|(name, value)| {
                conserved.iter().find(|one| one.name == name).map(|one| (one.tree, *value))
            })
            .collect();
        let parity = symmetry::parity(self.parts, at, &self.centres, &block);
        let analytic = groups.iter().all(|group| {
            group
                .coefficient
                .as_ref()
                .is_none_or(|tree| tree.taylor(at, f64::NAN).iter().all(|c| c.is_finite()))
        });
        if !analytic {
            return Err(not_analytic(self.parts, at));
        }
        let model = match real::real_terms(&groups) {
            Some(terms) => AnyModel::Real(Rc::new(Terms::new(at, order, terms, infinite, parity))),
            None => {
                let terms = groups
                    .into_iter()
                    .map(|group| Term { coefficient: group.coefficient, rows: group.matrix.rows })
                    .collect();
                AnyModel::Complex(Rc::new(Terms::new(at, order, terms, infinite, parity)))
            }
        };
        // The next size is worth a try if its block, grown like the product, fits.
        let refinable = infinite
            && self.product_states(refinement + 1).is_some_and(|next| {
                let block = order as f64 * (next as f64 / total as f64);
                block <= MOST_STATES as f64 && (!self.request.block.is_empty() || next <= MOST_STATES)
            });
        let mut notes = Vec::new();
        if infinite {
            notes.push(Note {
                code: "truncated".into(),
                text: format!(
                    "`{}` has an infinite basis; the bound on how fast its levels move is that of the {order} states kept",
                    self.system.name
                ),
            });
        }
        Ok(Built {
            model,
            unit: self.parts.unit.clone(),
            refinable,
            size: order,
            notes,
            numbers: None,
            levels: Vec::new(),
            labelled: false,
            formal: false,
        })
    }
}

/// Rows and columns of the listed states (ascending) out of `total`.
fn restricted(matrix: &Sparse, states: &[usize], total: usize) -> Sparse {
    let mut position = vec![usize::MAX; total];
    for (idx, &state) in states.iter().enumerate() {
        if let Some(slot) = position.get_mut(state) {
            *slot = idx;
        }
    }
    let rows = states
        .iter()
        .map(|&state| {
            matrix
                .rows
                .get(state)
                .map_or(&[][..], Vec::as_slice)
                .iter()
                .filter_map(|&(column, x)| {
                    position.get(column).filter(|&&idx| idx != usize::MAX).map(|&idx| (idx, x))
                })
                .collect()
        })
        .collect();
    Sparse { rows }
}

fn not_analytic(parts: &Parts, at: f64) -> Error {
    Error::spec(
        Diagnostic::new("not-analytic", "the Hamiltonian has no derivatives at the operating point")
            .at(Some(parts.place.clone()))
            .found(format!("at control value {at}"))
            .expected("an expression that is finite and smooth there")
            .action("move `at`, or look for a root, logarithm, quotient or kink that falls on it"),
    )
}
