//! From a system of the spec to Hermitian matrices.
//!
//! In: one [`spec::System`](crate::spec::System), the operating point and the
//! wanted interval of the control, one block of the conserved operators, and a
//! refinement. Out: a [`Model`], which gives the expansion about the operating
//! point and the unexpanded Hamiltonian at any control value, both in an
//! orthonormal basis (a diagonal overlap is scaled away before).
//!
//! One file per system kind. After this stage no unit, expression or name of
//! the spec is left.
//!
//! Not here: levels, series, formulas.

pub mod layers;
pub mod matrix;
pub mod parts;
pub mod radial;

use std::rc::Rc;

use nalgebra::Complex;

use crate::diagnostic::Result;
use crate::pencil::{Hermitian, Scalar, State};

/// Highest power of the control that the expansion holds.
pub const HIGHEST_POWER: usize = 4;

/// Complex double precision.
pub type C64 = Complex<f64>;

/// One block of one system at one refinement.
///
/// Energies are in the model's own unit ([`Built::unit`]), the control in the
/// control's unit.
pub trait Model<T: Scalar> {
    /// Number of basis states.
    fn order(&self) -> usize;

    /// The operating point.
    fn at(&self) -> f64;

    /// `H_power` of `H(at + d) = H_0 + d H_1 + d^2 H_2 + ...`, by
    /// differentiation of the given expressions; `power` up to
    /// [`HIGHEST_POWER`].
    fn expansion(&self, power: usize) -> &Hermitian<T>;

    /// The unexpanded Hamiltonian.
    fn hamiltonian(&self, control: f64) -> Hermitian<T>;

    /// `H(control) - H(at)`, formed term by term so that a small change keeps
    /// its digits.
    fn change(&self, control: f64) -> Hermitian<T>;

    /// `dH/dcontrol`.
    fn slope(&self, control: f64) -> Hermitian<T>;

    /// Half the spread of the coefficient of `d^power` (`power` from 1, first
    /// entry) of the Hamiltonian expanded about `control`, an upper bound:
    /// within distance `r`, real or complex, no level moves by more than
    /// `sum_power rate[power - 1] r^power` against the common mean. Exact for
    /// a control that enters as a polynomial up to [`HIGHEST_POWER`].
    fn rates(&self, control: f64) -> [f64; HIGHEST_POWER];

    /// The energy of a normalised state, the Rayleigh quotient of
    /// `hamiltonian(control)`, in the most accurate form that the model has.
    fn energy(&self, control: f64, state: &State<T>) -> f64 {
        let hamiltonian = self.hamiltonian(control);
        hamiltonian.element(state, state).real() / state.norm_squared()
    }

    /// Why `P H(at + d) P = H(at - d)` for a parity `P`, proved from the given
    /// numbers to the last bit: a sentence for the reader. `None` if no such
    /// parity was found. `P` keeps the block; it may reverse time. So the levels of
    /// the block, as a set, are even in `d`, and so is each that is not degenerate at
    /// the operating point; of degenerate ones nothing follows singly.
    fn parity(&self) -> Option<String> {
        None
    }

    /// Where a level stops being bound: the lower of the two outer edges at
    /// this control value, for open ends.
    fn escape_edge(&self, _control: f64) -> Option<f64> {
        None
    }

    /// The factor of modulus 1 by which a state is multiplied so that its first
    /// lobe is positive; `None` where the sign of a state means nothing and
    /// only moduli are reported.
    fn phase(&self, _state: &State<T>) -> Option<T> {
        None
    }

    /// Largest |number| below which two levels count as degenerate: 1e-12 of the
    /// scale that the spec language names for this kind.
    fn degeneracy_scale(&self) -> f64;

    /// The angular momentum l of a state of shells at the operating point, where it has
    /// one; `None` for every other kind.
    fn channel(&self, _state: &State<T>) -> Option<usize> {
        None
    }

    /// The envelope at a position (layers: z in nm from the origin; normalised
    /// so that its square integrates to 1), for overlaps and pictures. `None`
    /// where there is no position.
    fn envelope(&self, _state: &State<T>, _position: f64) -> Option<T> {
        None
    }

    /// `(position, weight)` of a quadrature that integrates products of two
    /// envelopes of this model, layers only.
    fn quadrature(&self) -> Option<Vec<(f64, f64)>> {
        None
    }
}

/// A model whose matrix elements are real or complex.
#[derive(Clone)]
pub enum AnyModel {
    /// Real symmetric.
    Real(Rc<dyn Model<f64>>),
    /// Complex Hermitian.
    Complex(Rc<dyn Model<C64>>),
}

/// From the number of a level in its block to its number in the model.
pub type Numbers = Rc<dyn Fn(usize) -> Result<usize>>;

/// A model with what the rest of the run must know of it.
#[derive(Clone)]
pub struct Built {
    /// The matrices.
    pub model: AnyModel,
    /// Unit of the model's energies.
    pub unit: crate::units::Unit,
    /// True if a further refinement exists: a discretised coordinate or an
    /// infinite basis. False for a finite system, which has no discretisation
    /// error.
    pub refinable: bool,
    /// Number of basis states, for the record.
    pub size: usize,
    /// Remarks for the record, for example that a bound holds for the truncated basis.
    pub notes: Vec<crate::outcome::Note>,
    /// The number in the model of a level of the block, where the model holds more than
    /// the block.
    pub numbers: Option<Numbers>,
    /// The first levels of the block, where the model holds more; else empty.
    pub levels: Vec<f64>,
    /// True if levels are counted by l, so that every state is named by its own l.
    pub labelled: bool,
    /// True if the level is bound at the operating point alone, so that the series is all
    /// that there is.
    pub formal: bool,
}

impl Built {
    /// The number in the model of a level of the block.
    ///
    /// # Errors
    /// A level that its block does not tell from those of others, or a solve that fails.
    pub fn number(&self, level: usize) -> Result<usize> {
        self.numbers.as_ref().map_or(Ok(level), |numbers| numbers(level))
    }
}

/// What a model is built for.
#[derive(Clone, Debug)]
pub struct Request<'a> {
    /// Operating point, in the control's unit.
    pub at: f64,
    /// Interval on which exact levels will be asked for (it may reach beyond the wanted
    /// interval, where the first failure is searched).
    pub reach: (f64, f64),
    /// Highest level that will be asked for, counted in the block.
    pub level: usize,
    /// Values of conserved operators that select the block.
    pub block: &'a [(String, f64)],
    /// 0 for the first try; each step resolves more.
    pub refinement: usize,
}

/// Builds the model of a system for one block at one refinement.
///
/// # Errors
/// A level or block that the system does not have, an expression that is not
/// finite where it is needed, or a problem too large.
pub fn build(system: &crate::spec::System, request: &Request<'_>) -> Result<Built> {
    use crate::spec::Kind;
    match &system.kind {
        Kind::Layers(layers) => layers::build(system, layers, request),
        Kind::Matrix(matrix) => matrix::build(system, matrix, request),
        Kind::Parts(parts) => parts::build(system, parts, request),
        Kind::Radial(shells) => radial::build(system, shells, request),
    }
}
