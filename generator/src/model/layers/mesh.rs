//! Elements laid over a stack.

use std::rc::Rc;

use super::element::{Element, lobatto, open_end};
use crate::diagnostic::{Error, Result};
use crate::expr::Tree;
use crate::model::Request;
use crate::pencil::{Banded, State};
use crate::spec::{Ends, Layer, Layers, Profile};
use crate::units::constants::kinetic_ev_nm2;

/// Degree of an element at refinement 0; each refinement adds two. Empirical:
/// with phases up to [`PHASE`] per element this settles E0 and b to 1e-11.
const DEGREE: usize = 14;

/// Nodes of a half-infinite element at refinement 0, less one.
const OPEN_DEGREE: usize = 14;

/// Wave number times length, or decay times length, that one element takes.
const PHASE: f64 = 12.0;

/// One element on the stack.
pub struct Piece {
    /// Reference element.
    pub element: Rc<Element>,
    /// Position of its first node from the origin, nm; for an open end on the low
    /// side the node nearest to the stack comes first.
    start: f64,
    /// Positions run as `start + direction * jacobian * (node - first node)`.
    direction: f64,
    /// nm per unit of the reference coordinate.
    pub jacobian: f64,
    /// Global number of the first local node; local nodes count on upwards, or
    /// downwards for the low open end.
    first: usize,
    /// Edge over the layer.
    pub edge: Profile,
    mass: Profile,
    /// Position of the layer's low face and the layer's thickness, nm.
    layer: (f64, f64),
    /// Unknowns before the first and beyond the last node are walls.
    total: usize,
    walls: bool,
    /// Edge and mass are taken at this position, for open ends.
    frozen: Option<f64>,
}

impl Piece {
    /// Position of a local node from the origin, nm.
    pub fn position(&self, local: usize) -> f64 {
        let offset = self.element.nodes[local] - self.element.nodes[0];
        self.start + self.direction * self.jacobian * offset
    }

    /// Where edge, mass and the field's potential are taken for a local node.
    fn material_position(&self, local: usize) -> f64 {
        self.frozen.unwrap_or_else(|| self.position(local))
    }

    /// Share of the layer's thickness below a local node.
    pub fn share(&self, local: usize) -> f64 {
        ((self.material_position(local) - self.layer.0) / self.layer.1).clamp(0.0, 1.0)
    }

    /// Row of a local node; `None` on a wall.
    pub fn unknown(&self, local: usize) -> Option<usize> {
        let node = if self.direction > 0.0 { self.first + local } else { self.first.checked_sub(local)? };
        if !self.walls {
            return Some(node);
        }
        (node > 0 && node + 1 < self.total).then(|| node - 1)
    }

    fn profile(&self, profile: &Profile, local: usize, control: f64) -> f64 {
        match profile {
            Profile::Constant(tree) => tree.value(control, 0.0),
            Profile::Linear(from, to) => {
                let (from, to) = (from.value(control, 0.0), to.value(control, 0.0));
                from + (to - from) * self.share(local)
            }
            Profile::Function(tree) => tree.value(control, self.material_position(local)),
        }
    }

    /// Edge at a local node, eV.
    pub fn edge_value(&self, local: usize, control: f64) -> f64 {
        self.profile(&self.edge, local, control)
    }

    /// `hbar^2/(2 m)` at a local node, eV nm^2.
    fn stiffness(&self, local: usize) -> f64 {
        kinetic_ev_nm2() / self.profile(&self.mass, local, 0.0)
    }
}

/// All elements of a stack.
pub struct Mesh {
    /// Elements by rising position.
    pub pieces: Vec<Piece>,
    /// Position that the field's potential takes at each unknown, nm.
    pub positions: Vec<f64>,
    width: usize,
    faces: (f64, f64),
}

/// Decay constants beyond both faces, 1/nm.
pub type Decay = (f64, f64);

/// Edge and inverse mass at both faces, and the potential there.
fn faces(layers: &Layers, at: f64) -> Option<[(f64, f64); 2]> {
    let field = layers.field.as_ref().map_or(0.0, |tree| tree.value(at, 0.0));
    let total: f64 = layers.stack.iter().map(|layer| layer.thickness).sum();
    let value = |profile: &Profile, upper: bool, z: f64| match profile {
        Profile::Constant(tree) => tree.value(at, 0.0),
        Profile::Linear(from, to) => if upper { to } else { from }.value(at, 0.0),
        Profile::Function(tree) => tree.value(at, z),
    };
    let side = |layer: &Layer, upper: bool| {
        let z = if upper { total - layers.origin } else { -layers.origin };
        (value(&layer.edge, upper, z) - layers.charge * field * z, value(&layer.mass, upper, z))
    };
    Some([side(layers.stack.first()?, false), side(layers.stack.last()?, true)])
}

/// Decay constants of a level of this energy.
pub fn decay_at(layers: &Layers, at: f64, energy: f64) -> Decay {
    let Some(sides) = faces(layers, at) else { return (1.0, 1.0) };
    let one = |(edge, mass): (f64, f64)| ((edge - energy).max(1e-6) * mass / kinetic_ev_nm2()).sqrt();
    (one(sides[0]), one(sides[1]))
}

/// A first guess, before any level is known: half the depth below the edge.
pub fn first_decay(layers: &Layers, at: f64) -> Decay {
    let Some(sides) = faces(layers, at) else { return (1.0, 1.0) };
    let low = layers
        .stack
        .iter()
        .map(|layer| match &layer.edge {
            Profile::Constant(tree) => tree.value(at, 0.0),
            Profile::Linear(from, to) => from.value(at, 0.0).min(to.value(at, 0.0)),
            Profile::Function(tree) => tree.value(at, 0.0),
        })
        .fold(f64::INFINITY, f64::min);
    decay_at(layers, at, 0.5 * (low + sides[0].0.min(sides[1].0)))
}

/// A tree with its position fixed.
pub fn at_position(tree: &Tree, position: f64) -> Tree {
    match tree {
        Tree::Position => Tree::Number(position),
        Tree::Number(_) | Tree::Control | Tree::Operator { .. } | Tree::Dot(..) => tree.clone(),
        Tree::Negative(a) => at_position(a, position).negated(),
        Tree::Add(a, b) => at_position(a, position).plus(at_position(b, position)),
        Tree::Subtract(a, b) => at_position(a, position).minus(at_position(b, position)),
        Tree::Multiply(a, b) => at_position(a, position).times(at_position(b, position)),
        Tree::Divide(a, b) => at_position(a, position).over(at_position(b, position)),
        Tree::Power(a, b) => at_position(a, position).raised(at_position(b, position)),
        Tree::Call(function, arguments) => {
            Tree::Call(*function, arguments.iter().map(|one| at_position(one, position)).collect())
        }
    }
}

/// Adds a weighted tree to a slot.
pub fn add_weighted(slot: &mut Option<Tree>, tree: &Tree, weight: f64) {
    let part = tree.clone().scaled(weight);
    *slot = Some(match slot.take() {
        Some(sum) => sum.plus(part),
        None => part,
    });
}

impl Mesh {
    /// Lays elements over a stack, fine enough for the level asked for.
    ///
    /// # Errors
    /// An empty stack, which the spec stage refuses before.
    pub fn new(layers: &Layers, request: &Request<'_>, decay: Option<Decay>) -> Result<Self> {
        let total: f64 = layers.stack.iter().map(|layer| layer.thickness).sum();
        if layers.stack.is_empty() || total.is_nan() || total <= 0.0 {
            return Err(Error::internal("an empty stack reached the model"));
        }
        let degree = DEGREE + 2 * request.refinement;
        let inside = lobatto(degree);
        let mut pieces: Vec<Piece> = Vec::new();
        let walls = layers.ends == Ends::Wall;
        let open = decay.map(|_| open_end(OPEN_DEGREE + 2 * request.refinement));
        let scale = Scale::new(layers, request);
        let mut node = 0;
        if let (Some(open), Some((low, _))) = (&open, decay) {
            // Counted downwards from the face, so the face is its highest node.
            let last = open.len() - 1;
            let layer = &layers.stack[0];
            pieces.push(Piece {
                element: open.clone(),
                start: -layers.origin,
                direction: -1.0,
                jacobian: 0.5 / low,
                first: last,
                edge: layer.edge.clone(),
                mass: layer.mass.clone(),
                layer: (-layers.origin, layer.thickness),
                total: 0,
                walls,
                frozen: Some(-layers.origin),
            });
            node = last;
        }
        let mut start = -layers.origin;
        for layer in &layers.stack {
            let count = scale.elements(layer, start);
            for k in 0..count {
                let from = start + layer.thickness * k as f64 / count as f64;
                pieces.push(Piece {
                    element: inside.clone(),
                    start: from,
                    direction: 1.0,
                    jacobian: 0.5 * layer.thickness / count as f64,
                    first: node,
                    edge: layer.edge.clone(),
                    mass: layer.mass.clone(),
                    layer: (start, layer.thickness),
                    total: 0,
                    walls,
                    frozen: None,
                });
                node += degree;
            }
            start += layer.thickness;
        }
        let face = total - layers.origin;
        if let (Some(open), Some((_, high)), Some(layer)) = (&open, decay, layers.stack.last()) {
            pieces.push(Piece {
                element: open.clone(),
                start: face,
                direction: 1.0,
                jacobian: 0.5 / high,
                first: node,
                edge: layer.edge.clone(),
                mass: layer.mass.clone(),
                layer: (face - layer.thickness, layer.thickness),
                total: 0,
                walls,
                frozen: Some(face),
            });
            node += open.len() - 1;
        }
        let all = node + 1;
        pieces.iter_mut().for_each(|piece| piece.total = all);
        let order = if walls { all - 2 } else { all };
        let mut positions = vec![0.0; order];
        for piece in &pieces {
            for local in 0..piece.element.len() {
                if let Some(row) = piece.unknown(local) {
                    positions[row] = piece.material_position(local);
                }
            }
        }
        let width = pieces
            .iter()
            .map(|piece| piece.element.len() - 1)
            .max()
            .unwrap_or(0)
            .min(order.saturating_sub(1));
        Ok(Self { pieces, positions, width, faces: (-layers.origin, face) })
    }

    /// Number of unknowns.
    pub fn order(&self) -> usize {
        self.positions.len()
    }

    /// The kinetic energy in the scaled basis.
    ///
    /// # Errors
    /// If a mass is not positive.
    pub fn kinetic(&self, roots: &[f64]) -> Result<Banded<f64>> {
        let mut band = Banded::zeros(self.order(), self.width);
        for piece in &self.pieces {
            let n = piece.element.len();
            let rows: Vec<Option<usize>> = (0..n).map(|local| piece.unknown(local)).collect();
            let factors: Vec<f64> =
                (0..n).map(|k| piece.element.weights[k] * piece.stiffness(k) / piece.jacobian).collect();
            let slopes = &piece.element.derivative;
            for (i, row) in rows.iter().enumerate() {
                let Some(row) = *row else { continue };
                for (j, column) in rows.iter().enumerate() {
                    let Some(column) = *column else { continue };
                    if column <= row {
                        let sum: f64 = factors
                            .iter()
                            .enumerate()
                            .map(|(k, f)| f * slopes[k * n + i] * slopes[k * n + j])
                            .sum();
                        band.add(row, column, sum / (roots[row] * roots[column]));
                    }
                }
            }
        }
        Ok(band)
    }

    /// Kinetic energy of an envelope given by its values at the unknowns: a sum
    /// of squares, which loses no digits.
    pub fn kinetic_energy(&self, values: &[f64]) -> f64 {
        let mut energy = 0.0;
        for piece in &self.pieces {
            let n = piece.element.len();
            let local: Vec<f64> = (0..n)
                .map(|idx| piece.unknown(idx).and_then(|row| values.get(row)).copied().unwrap_or(0.0))
                .collect();
            for k in 0..n {
                let slope: f64 = (0..n).map(|j| piece.element.derivative[k * n + j] * local[j]).sum();
                energy += piece.element.weights[k] * piece.stiffness(k) / piece.jacobian * slope * slope;
            }
        }
        energy
    }

    /// The envelope at a position from the origin; 0 beyond a wall.
    pub fn envelope(&self, roots: &[f64], state: &State<f64>, position: f64) -> f64 {
        for piece in &self.pieces {
            let n = piece.element.len();
            let x = piece.direction * (position - piece.start) / piece.jacobian + piece.element.nodes[0];
            let last = if piece.element.open { f64::INFINITY } else { piece.element.nodes[n - 1] };
            if x >= piece.element.nodes[0] && x <= last {
                let values: Vec<f64> =
                    (0..n).map(|k| piece.unknown(k).map_or(0.0, |row| state[row] / roots[row])).collect();
                return piece.element.value(&values, x);
            }
        }
        // Rounding may put a face a hair outside all elements.
        let _ = self.faces;
        0.0
    }

    /// Nodes with their weights, element ends included (walls too).
    pub fn quadrature(&self) -> Vec<(f64, f64)> {
        let mut out: Vec<(f64, f64)> = Vec::new();
        for piece in &self.pieces {
            for (local, weight) in piece.element.weights.iter().enumerate() {
                out.push((piece.position(local), weight * piece.jacobian));
            }
        }
        out.sort_by(|a, b| a.0.total_cmp(&b.0));
        let mut merged: Vec<(f64, f64)> = Vec::with_capacity(out.len());
        for (position, weight) in out {
            match merged.last_mut() {
                Some(last) if (position - last.0).abs() < 1e-9 => last.1 += weight,
                _ => merged.push((position, weight)),
            }
        }
        merged
    }
}

/// How finely a stack must be resolved.
struct Scale {
    /// Kinetic energy above the lowest edge that a level may have, eV.
    energy: f64,
    at: f64,
    low: f64,
    /// Largest slope of the field's potential over the reach, eV/nm.
    slope: f64,
}

impl Scale {
    fn new(layers: &Layers, request: &Request<'_>) -> Self {
        let at = request.at;
        let edges = |layer: &Layer| match &layer.edge {
            Profile::Constant(tree) => [tree.value(at, 0.0); 2],
            Profile::Linear(from, to) => [from.value(at, 0.0), to.value(at, 0.0)],
            Profile::Function(tree) => [tree.value(at, 0.0); 2],
        };
        let all = || layers.stack.iter().flat_map(edges).filter(|x| x.is_finite());
        let (low, high) = all().fold((f64::INFINITY, f64::NEG_INFINITY), |(a, b), x| (a.min(x), b.max(x)));
        let total: f64 = layers.stack.iter().map(|layer| layer.thickness).sum();
        let mass = layers
            .stack
            .iter()
            .map(|layer| mass_of(layer, at))
            .filter(|m| m.is_finite() && *m > 0.0)
            .fold(f64::INFINITY, f64::min);
        // Level n of a hard-walled box as long as the stack: no level of the
        // stack lies higher above its highest edge.
        let n = request.level.max(1) as f64 + 1.0;
        let wave = std::f64::consts::PI * n / total;
        let boxed = if mass.is_finite() { kinetic_ev_nm2() / mass * wave * wave } else { 0.0 };
        let slope = layers.field.as_ref().map_or(0.0, |tree| {
            [request.reach.0, at, request.reach.1]
                .into_iter()
                .map(|control| (layers.charge * tree.value(control, 0.0)).abs())
                .filter(|x| x.is_finite())
                .fold(0.0, f64::max)
        });
        Self { energy: (high - low).max(0.0) + boxed, at, low, slope }
    }

    /// Elements for one layer.
    fn elements(&self, layer: &Layer, _start: f64) -> usize {
        let mass = mass_of(layer, self.at);
        let edge = match &layer.edge {
            Profile::Constant(tree) => tree.value(self.at, 0.0),
            _ => self.low,
        };
        // Either the carrier moves (below its energy) or it decays (above).
        let depth = self.energy.min((edge - self.low).abs().max(0.6 * self.energy))
            + 0.25 * self.slope * layer.thickness;
        let wave = (depth.max(0.0) * mass / kinetic_ev_nm2()).sqrt();
        let varying =
            if matches!(layer.edge, Profile::Function(_)) || matches!(layer.mass, Profile::Function(_)) {
                2.0
            } else {
                1.0
            };
        let count = libm::ceil(varying * wave * layer.thickness / PHASE);
        if count.is_finite() { (count as usize).clamp(1, 100_000) } else { 1 }
    }
}

fn mass_of(layer: &Layer, at: f64) -> f64 {
    match &layer.mass {
        Profile::Constant(tree) => tree.value(at, 0.0),
        Profile::Linear(from, to) => from.value(at, 0.0).max(to.value(at, 0.0)),
        Profile::Function(tree) => tree.value(at, 0.0),
    }
}
