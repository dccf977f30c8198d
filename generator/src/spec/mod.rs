//! The spec: YAML text to typed, unit-checked data with the place of every
//! value.
//!
//! In: text, and a loader for the files it names. Out: a [`Spec`], in which
//! every quantity is a number in a stated unit and every expression a resolved
//! [`Tree`]. All messages about a spec come from here.
//!
//! Not here: solving; YAML types outside this folder.

mod constants;
mod document;
mod formulas;
mod layers;
mod materials;
mod matrix;
mod matrix_file;
mod operators;
mod outputs;
mod parts;
mod raw;
mod schema;
mod scope;
mod shape;
mod tree;
mod units_of;

#[cfg(test)]
mod tests;

pub use document::{Document, Files, Loaded, Loader, NoFiles, sha256};
pub use materials::SHIPPED as SHIPPED_MATERIALS;
pub use matrix_file::{Grid, read as read_matrix};
pub use schema::schema;

use nalgebra::DMatrix;

use crate::diagnostic::{Error, Place, Result};
use crate::expr::Tree;
use crate::model::C64;
use crate::outcome::{DigestedFile, Input, Note, ValueKind};
use crate::units::Unit;

/// A checked spec, constants resolved.
#[derive(Clone, Debug)]
pub struct Spec {
    /// Stem of every generated name.
    pub name: String,
    /// One line for people.
    pub summary: String,
    /// File name as given and digest of its bytes.
    pub file: DigestedFile,
    /// Other files that were read.
    pub sources: Vec<DigestedFile>,
    /// Every resolved scalar, sorted by path.
    pub inputs: Vec<Input>,
    /// The systems in the order of the spec.
    pub systems: Vec<System>,
    /// The control.
    pub control: Control,
    /// The formulas in the order of the spec.
    pub formulas: Vec<Formula>,
    /// Constants that become arguments.
    pub family: Vec<FamilyParameter>,
    /// The files wanted.
    pub outputs: Vec<Output>,
    /// Warnings that do not stop the run.
    pub warnings: Vec<Note>,
    /// The document that a family is resolved from again, point by point.
    pub document: Option<std::rc::Rc<Document>>,
}

impl Spec {
    /// The same spec at one point of its family's box, as a spec without a family;
    /// `point` in the order and the units of the family.
    ///
    /// # Errors
    /// Mistakes that only these numbers show, such as a layer of no thickness.
    pub fn at_point(&self, point: &[f64]) -> Result<Self> {
        let Some(document) = &self.document else {
            return Err(Error::internal("a family without its document"));
        };
        let overrides = self
            .family
            .iter()
            .zip(point)
            .map(|(parameter, &number)| {
                let factor = parameter.unit.factor_to(&parameter.written);
                let factor = factor.map_err(|fault| Error::spec(fault.diagnostic(None)))?;
                Ok((parameter.name.clone(), factor.apply(number)))
            })
            .collect::<Result<Vec<_>>>()?;
        let mut spec = document.resolve(&overrides)?;
        spec.family = Vec::new();
        spec.document = None;
        Ok(spec)
    }
}

/// The control.
#[derive(Clone, Debug)]
pub struct Control {
    /// Symbol.
    pub symbol: String,
    /// Unit.
    pub unit: Unit,
    /// Operating point, in `unit`.
    pub at: f64,
    /// Wanted interval, in `unit`.
    pub within: (f64, f64),
    /// Place of `within`.
    pub within_place: Place,
    /// Count width and step for `fixed`, in `unit`.
    pub count: Option<Count>,
}

/// A signed integer that counts steps.
#[derive(Clone, Debug)]
pub struct Count {
    /// 8, 16 or 32.
    pub bits: u32,
    /// One count, in the unit of its holder.
    pub step: f64,
    /// Place in the spec.
    pub place: Place,
}

/// One system.
#[derive(Clone, Debug)]
pub struct System {
    /// Name.
    pub name: String,
    /// Place of its name.
    pub place: Place,
    /// What it is.
    pub kind: Kind,
}

/// The system kinds.
#[derive(Clone, Debug)]
pub enum Kind {
    /// A carrier in a layer stack.
    Layers(Layers),
    /// The matrix itself.
    Matrix(Matrix),
    /// A Hamiltonian in operators.
    Parts(Parts),
    /// A carrier in concentric shells.
    Radial(Radial),
}

/// Conditions at the outer faces.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ends {
    /// The envelope vanishes.
    Wall,
    /// The outer layers go on without end.
    Decay,
}

/// A profile over one layer.
#[derive(Clone, Debug, PartialEq)]
pub enum Profile {
    /// The same everywhere; may hold the control.
    Constant(Tree),
    /// Linear from one face to the other; may hold the control.
    Linear(Tree, Tree),
    /// A function of the position (nm, signed from the origin) and the control.
    Function(Tree),
}

/// One layer or shell. Edge in eV, mass in free-electron masses.
#[derive(Clone, Debug)]
pub struct Layer {
    /// Name for people.
    pub name: Option<String>,
    /// Thickness, nm.
    pub thickness: f64,
    /// Band edge.
    pub edge: Profile,
    /// Mass.
    pub mass: Profile,
    /// One monolayer, nm, where the material knows it.
    pub monolayer: Option<f64>,
    /// Place in the spec.
    pub place: Place,
}

/// A layer stack, repeats written out.
#[derive(Clone, Debug)]
pub struct Layers {
    /// Elementary charges.
    pub charge: f64,
    /// Field along +z, V/nm, of the control.
    pub field: Option<Tree>,
    /// Distance of the field's zero (and of z = 0) from the start of the stack, nm.
    pub origin: f64,
    /// True if the origin is the middle of the stack (by word or default).
    pub centred: bool,
    /// Ends.
    pub ends: Ends,
    /// Layers by rising z.
    pub stack: Vec<Layer>,
}

/// A matrix system: H = sum over k of h[k] control^k.
#[derive(Clone, Debug)]
pub struct Matrix {
    /// Unit of the elements.
    pub unit: Unit,
    /// The matrices as given; Hermitian within the language's bound, not yet symmetrised.
    pub h: Vec<DMatrix<C64>>,
    /// Places of the matrices.
    pub places: Vec<Place>,
}

/// One part of a product system.
#[derive(Clone, Debug, PartialEq)]
pub struct Part {
    /// Name.
    pub name: String,
    /// What it is.
    pub kind: PartKind,
    /// Fixed number of basis states, where given; a rotor counts values of J, each with all its M.
    pub size: Option<usize>,
    /// Place in the spec.
    pub place: Place,
}

/// The part kinds.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum PartKind {
    /// Twice the spin quantum number.
    Spin(usize),
    /// Linear rigid rotor.
    Rotor,
    /// Harmonic oscillator.
    Oscillator,
    /// Periodic coordinate.
    Phase,
    /// Coordinate between hard walls; ends in nm if `length`, else pure numbers.
    Interval {
        /// Lower wall.
        from: f64,
        /// Upper wall.
        to: f64,
        /// True if the coordinate is a length.
        length: bool,
    },
    /// Bare states.
    States(usize),
}

/// A Hamiltonian written in operators.
///
/// Matrices of the operators, and what their unit is worth in a tree
/// ([`PartKind::operator`] gives both):
///
/// - spins: `.x .y .z .raise .lower` in units of hbar, `.sq` in hbar^2, all worth 1;
/// - rotor, oscillator, phase, states, intervals of numbers: pure numbers, worth 1;
///   `.p` of an interval of numbers is -i d/dx;
/// - interval of lengths: `.x` in nm, worth 1 nm; `.p` is -i d/dx with x in nm,
///   worth hbar/nm. So `p^2/(2*m)` comes out in energy with `m` a mass, and a
///   tree holds `P` with the factor already folded in.
#[derive(Clone, Debug)]
pub struct Parts {
    /// The parts in the order of the spec.
    pub parts: Vec<Part>,
    /// The Hamiltonian; its value in `unit`, the control in the control's unit. No
    /// position stands in it.
    pub hamiltonian: Tree,
    /// Unit of the Hamiltonian's value: the coherent unit of its kind (eV, Hz, 1/m, K or
    /// 1), see [`EnergyKind::coherent_unit`](crate::units::EnergyKind::coherent_unit).
    pub unit: Unit,
    /// Place of the Hamiltonian's text.
    pub place: Place,
    /// Conserved operators: name, operator (a pure number, no control), place.
    pub conserved: Vec<(String, Tree, Place)>,
}

/// Concentric shells.
#[derive(Clone, Debug)]
pub struct Radial {
    /// Elementary charges.
    pub charge: f64,
    /// Field along +z, V/nm, of the control.
    pub field: Option<Tree>,
    /// Ends.
    pub ends: Ends,
    /// Shells from the centre outwards.
    pub shells: Vec<Layer>,
    /// Charge at the centre, elementary charges, 0 for none.
    pub centre_charge: f64,
    /// Relative permittivity.
    pub permittivity: f64,
}

/// A reference to one level.
#[derive(Clone, Debug)]
pub struct LevelRef {
    /// Position of the system in the spec's list.
    pub system: usize,
    /// Number in its block, from 1.
    pub level: usize,
    /// Values of conserved operators that select the block.
    pub block: Vec<(String, f64)>,
    /// Place in the spec.
    pub place: Place,
}

/// One term of a sum.
#[derive(Clone, Debug)]
pub struct Term {
    /// Weight.
    pub times: f64,
    /// What is weighted.
    pub kind: TermKind,
}

/// What a term of a sum is.
#[derive(Clone, Debug)]
pub enum TermKind {
    /// A known function of the control, in the formula's unit (constants too).
    Known(Tree),
    /// A level.
    Level(LevelRef),
}

/// What a formula stands for.
#[derive(Clone, Debug)]
pub enum Target {
    /// A sum.
    Sum(Vec<Term>),
    /// A squared overlap.
    Overlap(LevelRef, LevelRef),
}

/// Wanted closed form.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum FormChoice {
    /// Polynomial.
    Polynomial,
    /// Mean and squared half gap, with the given partner if any.
    Paired,
    /// Whichever holds further.
    Auto,
}

/// Which coefficients.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum CoefficientChoice {
    /// The perturbation coefficients.
    Series,
    /// Best polynomial on an interval.
    Minimax,
}

/// One formula.
#[derive(Clone, Debug)]
pub struct Formula {
    /// Name.
    pub name: String,
    /// Place of its name.
    pub place: Place,
    /// Unit of the value.
    pub unit: Unit,
    /// What it stands for.
    pub target: Target,
    /// Wanted form.
    pub form: FormChoice,
    /// Partner level of a pair, where given.
    pub partner: Option<usize>,
    /// Highest power, 1 to 4.
    pub order: usize,
    /// Which coefficients.
    pub coefficients: CoefficientChoice,
    /// Level or change.
    pub value: ValueKind,
    /// Largest error allowed, in `unit`.
    pub tolerance: f64,
    /// Place of `tolerance`.
    pub tolerance_place: Place,
    /// Count width and step for `fixed`, in `unit`.
    pub count: Option<Count>,
}

/// A constant that becomes an argument.
#[derive(Clone, Debug)]
pub struct FamilyParameter {
    /// Constant's name.
    pub name: String,
    /// Unit of the argument.
    pub unit: Unit,
    /// Unit in which the constant is written.
    pub written: Unit,
    /// Lower end, in `unit`.
    pub from: f64,
    /// Upper end, in `unit`.
    pub to: f64,
    /// Place in the spec.
    pub place: Place,
}

/// Output languages.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Language {
    /// Rust.
    Rust,
    /// C99.
    C,
    /// Verilog-A.
    VerilogA,
    /// SPICE.
    Spice,
}

/// Number formats.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Number {
    /// Double precision.
    F64,
    /// Single precision.
    F32,
    /// Integers that count steps.
    Fixed,
}

/// One wanted output.
#[derive(Clone, Debug)]
pub struct Output {
    /// Language.
    pub language: Language,
    /// Number format; `None` for circuit languages.
    pub number: Option<Number>,
    /// Replaces the number's word in the stem.
    pub suffix: Option<String>,
    /// Widths and steps, for [`Number::Fixed`] alone.
    pub counts: Option<OutputCounts>,
    /// Place in the spec.
    pub place: Place,
}

/// Widths and steps of a fixed output.
#[derive(Clone, Debug)]
pub struct OutputCounts {
    /// Of the control, step in its unit.
    pub control: Count,
    /// Of each formula, step in its unit, in the order of the spec.
    pub values: Vec<Count>,
}
