//! Elements laid along the radius.
//!
//! The unknown is `u = r R`, which vanishes at the centre. In it the kinetic
//! energy is a sum of squares,
//!
//! ```text
//! (hbar^2/2) int (1/m) [ (u' - u/r)^2 + l (l + 1) (u/r)^2 ] dr
//! ```
//!
//! whose natural conditions at a step of the mass are the right ones: `R` and
//! `(1/m) dR/dr` continuous. Both brackets are polynomials on an element, the one at
//! the centre included, so the quadrature at the nodes is exact for them.
//!
//! Source: Zienkiewicz and Taylor, *The Finite Element Method*, for weak forms
//! and their natural conditions (from memory); the form in `u` follows by inserting `R = u/r`.

use std::rc::Rc;

use crate::model::layers::element::{Element, lobatto, open_end};
use crate::pencil::Banded;
use crate::spec::{Layer, Profile};
use crate::units::constants::kinetic_ev_nm2;

/// Wave number times length, or decay times length, that one element takes.
const PHASE: f64 = 9.0;

/// Decay lengths from the centre within which finite elements are laid, so that
/// terms in 1/r are smooth on the half-infinite one.
const OUTER: f64 = 8.0;

/// What a mesh must resolve.
#[derive(Clone, Copy, Debug)]
pub struct Scale {
    /// Degree of the elements.
    pub degree: usize,
    /// Kinetic energy above the edges that occurs, eV.
    pub energy: f64,
    /// Strength of the centre's potential times radius, modulus, eV nm.
    pub coulomb: f64,
    /// Slope of the field's potential, eV/nm.
    pub slope: f64,
    /// Decay constant beyond the shells, 1/nm; `None` for a wall.
    pub decay: Option<f64>,
}

/// One element.
struct Piece {
    element: Rc<Element>,
    /// Radius of its first node, nm.
    start: f64,
    /// nm per unit of the reference coordinate.
    jacobian: f64,
    /// Number of its first node from the centre.
    first: usize,
    /// Number of the shell whose edge and mass it has.
    shell: usize,
    /// Edge and mass are those at this radius, beyond the listed shells.
    frozen: Option<f64>,
}

impl Piece {
    fn radius(&self, local: usize) -> f64 {
        self.start + self.jacobian * (self.element.nodes[local] - self.element.nodes[0])
    }

    /// Slope of cardinal function `column` at node `row`, 1/nm.
    fn derivative(&self, row: usize, column: usize) -> f64 {
        self.element.derivative[row * self.element.len() + column] / self.jacobian
    }

    /// `u' - u/r` and `u/r` at node `row` for cardinal function `column`.
    fn brackets(&self, row: usize, column: usize) -> [f64; 2] {
        let radius = self.radius(row);
        let slope = self.derivative(row, column);
        if radius == 0.0 {
            // u vanishes there, so u/r is its slope.
            return [0.0, slope];
        }
        let ratio = if row == column { 1.0 / radius } else { 0.0 };
        [slope - ratio, ratio]
    }
}

/// All elements from the centre outwards.
pub struct Mesh {
    pieces: Vec<Piece>,
    shells: Vec<Layer>,
    /// Radii of the inner faces, nm.
    faces: Vec<f64>,
    /// Radius of each unknown, nm.
    pub radii: Vec<f64>,
    /// Diagonal overlap at each unknown.
    pub overlap: Vec<f64>,
    width: usize,
}

impl Mesh {
    /// Lays elements over the shells and, for open ends, beyond them. `edges` and
    /// `masses` are the lowest edge (eV) and heaviest mass of each shell.
    pub fn new(shells: &[Layer], edges: &[f64], masses: &[f64], scale: &Scale) -> Self {
        let inside = lobatto(scale.degree);
        let low = edges.iter().copied().fold(f64::INFINITY, f64::min);
        let mut pieces: Vec<Piece> = Vec::new();
        let mut faces = Vec::with_capacity(shells.len());
        let mut node = 0;
        let mut start = 0.0;
        let mut lay = |from: f64, to: f64, shell: usize, frozen: Option<f64>, node: &mut usize| {
            let varying = shells.get(shell).is_some_and(|layer| {
                matches!(layer.edge, Profile::Function(_)) || matches!(layer.mass, Profile::Function(_))
            });
            let edge = edges.get(shell).copied().unwrap_or(low);
            let depth = scale.energy.min((edge - low).abs().max(0.6 * scale.energy))
                + 0.25 * scale.slope * (to - from);
            let stiffness = kinetic_ev_nm2() / masses.get(shell).copied().unwrap_or(1.0);
            let wave = (depth.max(0.0) / stiffness).sqrt();
            let centre = (scale.coulomb / stiffness).sqrt();
            let ends = cuts(from, to, wave, centre, if varying { 2.0 } else { 1.0 });
            for pair in ends.windows(2) {
                pieces.push(Piece {
                    element: inside.clone(),
                    start: pair[0],
                    jacobian: 0.5 * (pair[1] - pair[0]),
                    first: *node,
                    shell,
                    frozen,
                });
                *node += scale.degree;
            }
        };
        for (idx, shell) in shells.iter().enumerate() {
            faces.push(start);
            lay(start, start + shell.thickness, idx, None, &mut node);
            start += shell.thickness;
        }
        if let Some(decay) = scale.decay {
            let last = shells.len().saturating_sub(1);
            let far = OUTER / decay;
            if far > start {
                lay(start, far, last, Some(start), &mut node);
            }
            let element = open_end(scale.degree);
            let count = element.len();
            pieces.push(Piece {
                element,
                start: far.max(start),
                jacobian: 0.5 / decay,
                first: node,
                shell: last,
                frozen: Some(start),
            });
            node += count - 1;
        }
        // The centre is no unknown, nor is a wall.
        let order = if scale.decay.is_some() { node } else { node.saturating_sub(1) };
        let mut mesh = Self {
            width: pieces.iter().map(|piece| piece.element.len() - 1).max().unwrap_or(0),
            pieces,
            shells: shells.to_vec(),
            faces,
            radii: vec![0.0; order],
            overlap: vec![0.0; order],
        };
        for piece in &mesh.pieces {
            for (local, weight) in piece.element.weights.iter().enumerate() {
                if let Some(row) = (piece.first + local).checked_sub(1).filter(|row| *row < order) {
                    mesh.radii[row] = piece.radius(local);
                    mesh.overlap[row] += weight * piece.jacobian;
                }
            }
        }
        mesh
    }

    /// Number of unknowns.
    pub fn order(&self) -> usize {
        self.radii.len()
    }

    /// Sub-diagonals of a radial matrix.
    pub fn width(&self) -> usize {
        self.width.min(self.order().saturating_sub(1))
    }

    /// The outermost radius, nm.
    pub fn radius(&self) -> f64 {
        self.pieces.last().map_or(0.0, |piece| piece.radius(piece.element.len() - 1))
    }

    fn unknown(&self, piece: &Piece, local: usize) -> Option<usize> {
        (piece.first + local).checked_sub(1).filter(|row| *row < self.order())
    }

    /// Where edge and mass are taken, and the share of the shell's thickness inside it.
    fn material(&self, piece: &Piece, local: usize) -> (f64, f64) {
        let radius = piece.frozen.unwrap_or_else(|| piece.radius(local));
        let (Some(face), Some(shell)) = (self.faces.get(piece.shell), self.shells.get(piece.shell)) else {
            return (radius, 0.0);
        };
        (radius, ((radius - face) / shell.thickness).clamp(0.0, 1.0))
    }

    /// `hbar^2/(2 m)` at a node, eV nm^2.
    fn stiffness(&self, piece: &Piece, local: usize) -> f64 {
        let (radius, share) = self.material(piece, local);
        let mass = self.shells.get(piece.shell).map_or(f64::NAN, |shell| match &shell.mass {
            Profile::Constant(tree) => tree.value(0.0, 0.0),
            Profile::Linear(from, to) => {
                let (from, to) = (from.value(0.0, 0.0), to.value(0.0, 0.0));
                from + (to - from) * share
            }
            Profile::Function(tree) => tree.value(0.0, radius),
        });
        kinetic_ev_nm2() / mass
    }

    /// Calls with unknown, quadrature weight (nm), edge profile, radius and share of
    /// the shell for every node of every element.
    pub fn visit(&self, mut with: impl FnMut(usize, f64, &Profile, f64, f64)) {
        for piece in &self.pieces {
            let Some(shell) = self.shells.get(piece.shell) else { continue };
            for (local, weight) in piece.element.weights.iter().enumerate() {
                if let Some(row) = self.unknown(piece, local) {
                    let (radius, share) = self.material(piece, local);
                    with(row, weight * piece.jacobian, &shell.edge, radius, share);
                }
            }
        }
    }

    /// The kinetic energy of l = 0, and the factor of `l (l + 1)`, both in the basis
    /// scaled by the square roots of the overlap.
    pub fn kinetic(&self) -> [Banded<f64>; 2] {
        let mut out = [Banded::zeros(self.order(), self.width()), Banded::zeros(self.order(), self.width())];
        for piece in &self.pieces {
            let count = piece.element.len();
            let factors: Vec<f64> = (0..count)
                .map(|k| piece.element.weights[k] * piece.jacobian * self.stiffness(piece, k))
                .collect();
            for i in 0..count {
                let Some(row) = self.unknown(piece, i) else { continue };
                for j in 0..=i {
                    let Some(column) = self.unknown(piece, j) else { continue };
                    let mut sums = [0.0; 2];
                    for (k, factor) in factors.iter().enumerate() {
                        let (a, b) = (piece.brackets(k, i), piece.brackets(k, j));
                        sums[0] += factor * a[0] * b[0];
                        sums[1] += factor * a[1] * b[1];
                    }
                    let root = (self.overlap[row] * self.overlap[column]).sqrt();
                    for (band, sum) in out.iter_mut().zip(sums) {
                        band.add(row, column, sum / root);
                    }
                }
            }
        }
        out
    }

    /// Kinetic energy of the radial function `u` with these values at the unknowns: a
    /// sum of squares, which loses no digits.
    pub fn kinetic_energy(&self, l: usize, values: &[f64]) -> f64 {
        let centrifugal = (l * (l + 1)) as f64;
        let mut energy = 0.0;
        for piece in &self.pieces {
            let count = piece.element.len();
            let local: Vec<f64> = (0..count)
                .map(|idx| self.unknown(piece, idx).and_then(|row| values.get(row)).copied().unwrap_or(0.0))
                .collect();
            for k in 0..count {
                let (mut slope, mut ratio) = (0.0, 0.0);
                for (j, value) in local.iter().enumerate() {
                    let [a, b] = piece.brackets(k, j);
                    slope += a * value;
                    ratio += b * value;
                }
                let factor = piece.element.weights[k] * piece.jacobian * self.stiffness(piece, k);
                energy += factor * (slope * slope + centrifugal * ratio * ratio);
            }
        }
        energy
    }
}

/// Ends of elements between two radii, each with the same part of the phase
/// `wave r + 2 centre sqrt(r)`, `finer` times the usual number.
fn cuts(from: f64, to: f64, wave: f64, centre: f64, finer: f64) -> Vec<f64> {
    let phase = |r: f64| wave * r + 2.0 * centre * r.sqrt();
    let (low, high) = (phase(from), phase(to));
    let count = libm::ceil(finer * (high - low) / PHASE);
    let count = if count.is_finite() { (count as usize).clamp(1, 100_000) } else { 1 };
    let mut out = Vec::with_capacity(count + 1);
    out.push(from);
    for k in 1..count {
        let wanted = low + (high - low) * k as f64 / count as f64;
        // wave s^2 + 2 centre s = wanted, s = sqrt(r), in the form without cancellation.
        let s = wanted / (centre + (centre * centre + wave * wanted).sqrt());
        out.push(s * s);
    }
    out.push(to);
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::expr::Tree;
    use crate::pencil::{Hermitian, lowest};

    fn shell(thickness: f64, mass: f64) -> Layer {
        Layer {
            name: None,
            thickness,
            edge: Profile::Constant(Tree::Number(0.0)),
            mass: Profile::Constant(Tree::Number(mass)),
            monolayer: None,
            place: crate::diagnostic::Place { file: String::new(), start: 0, end: 0 },
        }
    }

    /// Zeros of the spherical Bessel functions j0, j1, j2, j5: Abramowitz and
    /// Stegun, table 10.6 (5 decimals); those of j0 are multiples of pi.
    #[test]
    fn an_impenetrable_sphere_has_bessel_zeros() {
        let radius = 2.0;
        let scale = Scale { degree: 24, energy: 30.0, coulomb: 0.0, slope: 0.0, decay: None };
        let shells = [shell(0.7, 0.5), shell(1.3, 0.5)];
        let mesh = Mesh::new(&shells, &[0.0, 0.0], &[0.5, 0.5], &scale);
        let [base, turning] = mesh.kinetic();
        for (l, zeros) in [
            (0, [std::f64::consts::PI, 2.0 * std::f64::consts::PI]),
            (1, [4.493_409_457_909_06, 7.725_251_836_937_71]),
            (2, [5.763_459_196_894_55, 9.095_011_330_476_36]),
            (5, [9.355_812_111_042_74, 12.966_530_172_774_3]),
        ] {
            let mut band = base.clone();
            for (entry, extra) in band.entries.iter_mut().zip(&turning.entries) {
                *entry += (l * (l + 1)) as f64 * extra;
            }
            let found = lowest(&Hermitian::Banded(band), 2).unwrap();
            for (pair, zero) in found.iter().zip(zeros) {
                let expected = kinetic_ev_nm2() / 0.5 * (zero / radius) * (zero / radius);
                assert!((pair.energy / expected - 1.0).abs() < 1e-11, "l = {l}: {} {expected}", pair.energy);
                let values: Vec<f64> =
                    pair.state.iter().zip(&mesh.overlap).map(|(x, s)| x / s.sqrt()).collect();
                assert!((mesh.kinetic_energy(l, &values) / expected - 1.0).abs() < 1e-12);
            }
        }
    }

    #[test]
    fn cuts_share_the_phase_evenly() {
        let ends = cuts(0.0, 50.0, 0.3, 1.7, 1.0);
        let phase = |r: f64| 0.3 * r + 3.4 * r.sqrt();
        let step = phase(ends[1]) - phase(ends[0]);
        assert!(ends.len() > 3 && step <= PHASE);
        for pair in ends.windows(2) {
            assert!((phase(pair[1]) - phase(pair[0]) - step).abs() < 1e-11);
        }
    }
}
