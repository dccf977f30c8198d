//! A carrier in a layer stack: one dimension, effective mass.
//!
//! In: the layers. Out: a [`Built`] on high-order elements whose ends lie on
//! every interface: Gauss-Lobatto elements inside, a half-infinite Laguerre
//! element beyond each open end. The overlap matrix is diagonal and scaled away,
//! so a potential is a diagonal matrix and the kinetic energy a narrow band.
//!
//! `H = -(hbar^2/2) d/dz (1/m) d/dz + edge - charge e field z`, z from the
//! origin, nm and eV. Cost is linear in the number of layers.
//!
//! Source of the method: the effective-mass equation with the flux-conserving
//! order of operators (BenDaniel and Duke, Phys. Rev. 152, 683 (1966), from memory).

pub(super) mod element;
pub(super) mod mesh;
mod mirror;

use std::rc::Rc;

use mesh::Mesh;

use super::{AnyModel, Built, HIGHEST_POWER, Model, Request};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::expr::Tree;
use crate::pencil::{self, Banded, Hermitian, State};
use crate::spec::{Ends, Layers, Profile, System};
use crate::units::Unit;

/// Most nodes of one stack; beyond it the memory of a run is refused.
const MOST_NODES: usize = 400_000;

/// Builds the model of a layer stack.
///
/// # Errors
/// A level that is not bound, a potential or mass that is not finite, or a
/// stack too large.
pub fn build(system: &System, layers: &Layers, request: &Request<'_>) -> Result<Built> {
    let mut decay = match layers.ends {
        Ends::Wall => None,
        Ends::Decay => Some(mesh::first_decay(layers, request.at)),
    };
    // The open elements are scaled to the level's own decay, which is known
    // only after a first solve; two rounds settle it.
    let rounds = if decay.is_some() { 3 } else { 1 };
    let mut model = None;
    for round in 0..rounds {
        let mesh = Mesh::new(layers, request, decay)?;
        if mesh.order() > MOST_NODES {
            return Err(too_large(system, mesh.order()));
        }
        let built = Stack::new(system, layers, mesh, request)?;
        if decay.is_some() && round + 1 < rounds {
            let count = bound_count(&built)?;
            let wanted = request.level.min(count).max(1);
            if count > 0 {
                let energy = pencil::eigenpair(built.expansion(0), wanted)?.energy;
                decay = Some(mesh::decay_at(layers, request.at, energy));
            }
        }
        model = Some(built);
    }
    let Some(mut model) = model else { return Err(Error::internal("a stack was built in no round")) };
    if layers.ends == Ends::Decay {
        let count = bound_count(&model)?;
        if request.level > count {
            return Err(Error::spec(
                Diagnostic::new(
                    "not-bound",
                    format!(
                        "level {} of `{}` is not bound at the operating point",
                        request.level, system.name
                    ),
                )
                .at(Some(system.place.clone()))
                .found(format!("level {}", request.level))
                .expected(format!(
                    "a level below both outer edges: {}",
                    if count == 1 { "1 is".to_string() } else { format!("{count} are") }
                ))
                .action("ask for a lower level, deepen the well, or use `ends: wall`"),
            ));
        }
    }
    if request.level > model.order() {
        return Err(Error::spec(
            Diagnostic::new(
                "no-such-level",
                format!("level {} of `{}` is out of reach", request.level, system.name),
            )
            .at(Some(system.place.clone())),
        ));
    }
    let energy = pencil::rough_energy(model.expansion(0), request.level)?;
    model.scale = 1e-12 * (energy - model.lowest_edge).abs();
    let size = model.order();
    Ok(Built {
        model: AnyModel::Real(Rc::new(model)),
        unit: Unit::parse("eV").map_err(|fault| Error::spec(fault.diagnostic(None)))?,
        refinable: true,
        size,
        notes: Vec::new(),
        numbers: None,
        levels: Vec::new(),
        labelled: false,
        formal: false,
    })
}

fn too_large(system: &System, nodes: usize) -> Error {
    Error::spec(
        Diagnostic::new("too-large", format!("`{}` needs {nodes} basis functions", system.name))
            .at(Some(system.place.clone()))
            .expected(format!("at most {MOST_NODES}"))
            .action("shorten the stack, or ask for a lower level"),
    )
}

/// Levels below the lower outer edge at the operating point.
fn bound_count(model: &Stack) -> Result<usize> {
    let edge = model.escape_edge(model.at).unwrap_or(f64::INFINITY);
    Ok(pencil::factor(model.expansion(0), edge)?.below())
}

/// The assembled stack.
struct Stack {
    mesh: Mesh,
    at: f64,
    /// Square roots of the diagonal overlap at the unknowns.
    roots: Vec<f64>,
    kinetic: Banded<f64>,
    /// Per unknown, the edge where it does not depend on the control.
    fixed_edge: Vec<f64>,
    /// Per unknown, the edge tree where it does.
    moving_edge: Vec<Option<Tree>>,
    field: Option<Tree>,
    charge: f64,
    expansion: Vec<Hermitian<f64>>,
    parity: Option<String>,
    open: bool,
    lowest_edge: f64,
    scale: f64,
}

impl Stack {
    fn new(system: &System, layers: &Layers, mesh: Mesh, request: &Request<'_>) -> Result<Self> {
        let order = mesh.order();
        let mut overlap = vec![0.0; order];
        let mut weighted = vec![0.0; order];
        let mut moving: Vec<Option<Tree>> = vec![None; order];
        for piece in &mesh.pieces {
            for (local, &weight) in piece.element.weights.iter().enumerate() {
                let Some(row) = piece.unknown(local) else { continue };
                let mass_weight = weight * piece.jacobian;
                overlap[row] += mass_weight;
                match &piece.edge {
                    Profile::Constant(tree) if tree.uses_control() => {
                        mesh::add_weighted(&mut moving[row], tree, mass_weight);
                    }
                    Profile::Linear(from, to) if from.uses_control() || to.uses_control() => {
                        let share = piece.share(local);
                        let mixed = from.clone().scaled(1.0 - share).plus(to.clone().scaled(share));
                        mesh::add_weighted(&mut moving[row], &mixed, mass_weight);
                    }
                    Profile::Function(tree) if tree.uses_control() => {
                        let here = mesh::at_position(tree, piece.position(local));
                        mesh::add_weighted(&mut moving[row], &here, mass_weight);
                    }
                    _ => weighted[row] += mass_weight * piece.edge_value(local, request.at),
                }
            }
        }
        // A node shared by two elements sees the weighted mean of both edges.
        let fixed_edge: Vec<f64> = (0..order).map(|row| weighted[row] / overlap[row]).collect();
        let moving_edge: Vec<Option<Tree>> = moving
            .into_iter()
            .enumerate()
            .map(|(row, tree)| tree.map(|tree| tree.scaled(1.0 / overlap[row])))
            .collect();
        let roots: Vec<f64> = overlap.iter().map(|&s| s.sqrt()).collect();
        let kinetic = mesh.kinetic(&roots)?;
        let lowest_edge = fixed_edge
            .iter()
            .zip(&moving_edge)
            .map(|(&fixed, tree)| fixed + tree.as_ref().map_or(0.0, |t| t.value(request.at, 0.0)))
            .fold(f64::INFINITY, f64::min);
        let mut stack = Self {
            mesh,
            at: request.at,
            roots,
            kinetic,
            fixed_edge,
            moving_edge,
            field: layers.field.clone(),
            charge: layers.charge,
            expansion: Vec::new(),
            parity: mirror::proof(layers, request.at),
            open: layers.ends == Ends::Decay,
            lowest_edge,
            scale: 0.0,
        };
        stack.expansion = (0..=HIGHEST_POWER)
            .map(|power| {
                if power == 0 { stack.hamiltonian(request.at) } else { stack.coefficient(request.at, power) }
            })
            .collect();
        if !stack.expansion.iter().all(Hermitian::is_finite) {
            return Err(Error::spec(
                Diagnostic::new(
                    "undefined",
                    format!("edge, mass or field of `{}` is not finite", system.name),
                )
                .at(Some(system.place.clone()))
                .expected("finite values and a positive mass all over the stack, at the operating point"),
            ));
        }
        Ok(stack)
    }

    /// Potential at each unknown, eV.
    fn potential(&self, control: f64) -> Vec<f64> {
        let field = self.field.as_ref().map_or(0.0, |tree| tree.value(control, 0.0));
        (0..self.order())
            .map(|row| {
                let moving = self.moving_edge[row].as_ref().map_or(0.0, |tree| tree.value(control, 0.0));
                self.fixed_edge[row] + moving - self.charge * field * self.mesh.positions[row]
            })
            .collect()
    }

    /// Diagonal coefficient of `d^power` of the potential about `control`, `power >= 1`.
    fn coefficient(&self, control: f64, power: usize) -> Hermitian<f64> {
        let field = self.field.as_ref().map_or(0.0, |tree| tree.taylor(control, 0.0)[power]);
        let entries: Vec<f64> = (0..self.order())
            .map(|row| {
                let moving =
                    self.moving_edge[row].as_ref().map_or(0.0, |tree| tree.taylor(control, 0.0)[power]);
                moving - self.charge * field * self.mesh.positions[row]
            })
            .collect();
        diagonal(entries)
    }
}

fn diagonal(entries: Vec<f64>) -> Hermitian<f64> {
    if entries.iter().all(|&x| x == 0.0) {
        Hermitian::Zero(entries.len())
    } else {
        Hermitian::Diagonal(entries)
    }
}

impl Model<f64> for Stack {
    fn order(&self) -> usize {
        self.mesh.order()
    }

    fn at(&self) -> f64 {
        self.at
    }

    fn expansion(&self, power: usize) -> &Hermitian<f64> {
        &self.expansion[power]
    }

    fn hamiltonian(&self, control: f64) -> Hermitian<f64> {
        let mut band = self.kinetic.clone();
        for (row, potential) in self.potential(control).into_iter().enumerate() {
            band.add(row, row, potential);
        }
        Hermitian::Banded(band)
    }

    fn change(&self, control: f64) -> Hermitian<f64> {
        let field = self.field.as_ref().map_or(0.0, |tree| tree.change(self.at, control, 0.0));
        diagonal(
            (0..self.order())
                .map(|row| {
                    let moving =
                        self.moving_edge[row].as_ref().map_or(0.0, |tree| tree.change(self.at, control, 0.0));
                    moving - self.charge * field * self.mesh.positions[row]
                })
                .collect(),
        )
    }

    fn slope(&self, control: f64) -> Hermitian<f64> {
        self.coefficient(control, 1)
    }

    fn rates(&self, control: f64) -> [f64; HIGHEST_POWER] {
        std::array::from_fn(|idx| self.coefficient(control, idx + 1).half_spread())
    }

    fn energy(&self, control: f64, state: &State<f64>) -> f64 {
        let values: Vec<f64> = state.iter().zip(&self.roots).map(|(x, root)| x / root).collect();
        let kinetic = self.mesh.kinetic_energy(&values);
        let potential: f64 = self.potential(control).iter().zip(state.iter()).map(|(v, x)| v * x * x).sum();
        (kinetic + potential) / state.norm_squared()
    }

    fn parity(&self) -> Option<String> {
        self.parity.clone()
    }

    fn escape_edge(&self, control: f64) -> Option<f64> {
        self.open.then(|| {
            let potential = self.potential(control);
            let ends = [potential.first(), potential.last()];
            ends.into_iter().flatten().copied().fold(f64::INFINITY, f64::min)
        })
    }

    fn phase(&self, state: &State<f64>) -> Option<f64> {
        let values: Vec<f64> = state.iter().zip(&self.roots).map(|(x, root)| x / root).collect();
        let largest = values.iter().fold(0.0_f64, |most, x| most.max(x.abs()));
        let first = values.iter().find(|x| x.abs() > 1e-3 * largest)?;
        Some(if *first < 0.0 { -1.0 } else { 1.0 })
    }

    fn degeneracy_scale(&self) -> f64 {
        self.scale
    }

    fn envelope(&self, state: &State<f64>, position: f64) -> Option<f64> {
        Some(self.mesh.envelope(&self.roots, state, position))
    }

    fn quadrature(&self) -> Option<Vec<(f64, f64)>> {
        Some(self.mesh.quadrature())
    }
}
