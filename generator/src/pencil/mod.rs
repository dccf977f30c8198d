//! Linear algebra of one Hermitian problem: eigenpairs by number or near a
//! value, inertia counts, and reduced-resolvent solves.
//!
//! Generalised problems `H c = E S c` reach this module in ordinary form: a
//! model with a diagonal overlap scales by `S^(-1/2)` before it hands over.
//!
//! One thread, fixed order of operations, no fused multiply-add: one input
//! gives one set of bits on every machine.
//!
//! Not here: where matrices come from, and what a level means.

mod banded;
mod hermitian;
mod solve;

pub use hermitian::{Banded, Hermitian};
pub use solve::{
    Eigenpair, Factor, Resolvent, alone, eigenpair, eigenpair_near, factor, isolated, lowest, reduced_solve,
    rough_energy, spectrum, within,
};

use nalgebra::{Complex, ComplexField};

/// Field of the matrix elements: real or complex double precision.
pub trait Scalar: ComplexField<RealField = f64> + Copy {}

impl Scalar for f64 {}
impl Scalar for Complex<f64> {}

/// A state: its components in an orthonormal basis.
pub type State<T> = nalgebra::DVector<T>;
