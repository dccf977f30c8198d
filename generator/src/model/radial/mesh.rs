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

/// Degrees that an element without phase has less than a full one; empirical.
const LEAST: usize = 7;

/// Samples of the wave number over one shell, by which it is divided.
const SAMPLES: usize = 400;

/// Decay, in powers of e, beyond which nothing of a level is left to resolve.
const GONE: f64 = 32.0;

/// Density of elements there, against the usual one.
const SPARSE: f64 = 0.05;

/// What a mesh must resolve.
pub struct Scale<'a> {
    /// Degree of an element that takes the whole [`PHASE`]; one that takes less has less.
    pub degree: usize,
    /// Wave number at a radius of a shell (nm, number of the shell), 1/nm, and the rate at which
    /// the level decays there, 0 where it moves freely, 1/nm.
    pub wave: &'a dyn Fn(usize, f64) -> (f64, f64),
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
    /// Lays elements over the shells and, for open ends, beyond them.
    pub fn new(shells: &[Layer], scale: &Scale<'_>) -> Self {
        let mut pieces: Vec<Piece> = Vec::new();
        let mut faces = Vec::with_capacity(shells.len());
        let mut node = 0;
        let last = shells.len().saturating_sub(1);
        let total: f64 = shells.iter().map(|shell| shell.thickness).sum();
        let far = scale.decay.map_or(total, |decay| (OUTER / decay).max(total));
        let mut spans: Vec<(f64, f64, usize)> = Vec::with_capacity(shells.len() + 1);
        let mut start = 0.0;
        for (idx, shell) in shells.iter().enumerate() {
            spans.push((start, start + shell.thickness, idx));
            start += shell.thickness;
        }
        if far > start {
            spans.push((start, far, last));
        }
        let phases = Phases::new(&spans, scale.wave);
        let mut lay = |span: usize, frozen: Option<f64>, node: &mut usize| {
            let (ends, phase) = phases.cuts(span);
            // The element at the centre holds r^(l + 1) as well.
            let less = if span == 0 { LEAST.min(2) } else { LEAST };
            let fewer = libm::floor(less as f64 * (1.0 - phase / PHASE).max(0.0));
            let degree = scale.degree.saturating_sub(fewer as usize).max(4);
            let inside = lobatto(degree);
            let shell = spans.get(span).map_or(last, |one| one.2);
            for pair in ends.windows(2) {
                pieces.push(Piece {
                    element: inside.clone(),
                    start: pair[0],
                    jacobian: 0.5 * (pair[1] - pair[0]),
                    first: *node,
                    shell,
                    frozen,
                });
                *node += degree;
            }
        };
        let mut start = 0.0;
        for (idx, shell) in shells.iter().enumerate() {
            faces.push(start);
            lay(idx, None, &mut node);
            start += shell.thickness;
        }
        if let Some(decay) = scale.decay {
            if far > start {
                lay(shells.len(), Some(start), &mut node);
            }
            let element = open_end(scale.degree);
            let count = element.len();
            pieces.push(Piece {
                element,
                start: far,
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

/// The phase that elements must follow, sampled evenly in the square root of the radius,
/// in which it is smooth up to a charge at the centre.
struct Phases {
    /// Inner and outer radius of each span.
    spans: Vec<(f64, f64)>,
    /// Phase from the inner end of the span to each sample's outer end.
    sums: Vec<Vec<f64>>,
}

impl Phases {
    fn new(spans: &[(f64, f64, usize)], wave: &dyn Fn(usize, f64) -> (f64, f64)) -> Self {
        // Per sample, the phase over it and the decay over it.
        let mut all: Vec<(f64, f64)> = Vec::with_capacity(SAMPLES * spans.len());
        for &(from, to, shell) in spans {
            let (low, high) = (from.sqrt(), to.sqrt());
            let step = (high - low) / SAMPLES as f64;
            for k in 0..SAMPLES {
                let s = low + (k as f64 + 0.5) * step;
                let (wave, decay) = wave(shell, s * s);
                all.push((wave * 2.0 * s * step, decay * 2.0 * s * step));
            }
        }
        // Decay since the last place where the level moves freely, from both sides.
        let gone = |order: &mut dyn Iterator<Item = usize>| {
            let mut out = vec![0.0; all.len()];
            let mut sum = f64::INFINITY;
            for idx in order {
                sum = if all[idx].1 > 0.0 { sum + all[idx].1 } else { 0.0 };
                out[idx] = sum;
            }
            out
        };
        let outwards = gone(&mut (0..all.len()));
        let inwards = gone(&mut (0..all.len()).rev());
        let sums = (0..spans.len())
            .map(|span| {
                let mut sum = 0.0;
                (span * SAMPLES..(span + 1) * SAMPLES)
                    .map(|idx| {
                        let sparse = outwards[idx].min(inwards[idx]) > GONE;
                        sum += if sparse { SPARSE * all[idx].0 } else { all[idx].0 };
                        sum
                    })
                    .collect()
            })
            .collect();
        Self { spans: spans.iter().map(|&(from, to, _)| (from, to)).collect(), sums }
    }

    /// Ends of elements over a span, each with the same part of its phase, and that part.
    fn cuts(&self, span: usize) -> (Vec<f64>, f64) {
        let (Some(&(from, to)), Some(sums)) = (self.spans.get(span), self.sums.get(span)) else {
            return (Vec::new(), 0.0);
        };
        let whole = sums.last().copied().unwrap_or(0.0);
        let count = libm::ceil(whole / PHASE);
        let count = if count.is_finite() { (count as usize).clamp(1, 100_000) } else { 1 };
        let (low, high) = (from.sqrt(), to.sqrt());
        let step = (high - low) / SAMPLES as f64;
        let mut out = Vec::with_capacity(count + 1);
        out.push(from);
        for k in 1..count {
            let wanted = whole * k as f64 / count as f64;
            let idx = sums.partition_point(|&sum| sum < wanted).min(SAMPLES - 1);
            let before = if idx == 0 { 0.0 } else { sums[idx - 1] };
            let part = if sums[idx] > before { (wanted - before) / (sums[idx] - before) } else { 0.5 };
            let s = low + (idx as f64 + part) * step;
            out.push(s * s);
        }
        out.push(to);
        (out, whole / count as f64)
    }
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
        let scale = Scale { degree: 24, wave: &|_, _| (7.0, 0.0), decay: None };
        let shells = [shell(0.7, 0.5), shell(1.3, 0.5)];
        let mesh = Mesh::new(&shells, &scale);
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
        // A charge at the centre: wave number sqrt(c/r), phase 2 sqrt(c r).
        let phases = Phases::new(&[(0.0, 50.0, 0), (50.0, 60.0, 0)], &|_, r| ((25.0 / r).sqrt(), 0.0));
        let (ends, _) = phases.cuts(0);
        assert!(ends.len() > 3 && ends.first() == Some(&0.0) && ends.last() == Some(&50.0));
        let step = 10.0 * ends[1].sqrt();
        assert!(step <= PHASE);
        for pair in ends.windows(2) {
            assert!((10.0 * (pair[1].sqrt() - pair[0].sqrt()) - step).abs() < 1e-9);
        }
    }

    #[test]
    fn nothing_is_resolved_where_the_level_is_gone() {
        let wave = |_: usize, r: f64| if r < 5.0 { (2.0, 0.0) } else { (2.0, 2.0) };
        let phases = Phases::new(&[(0.0, 100.0, 0)], &wave);
        let (ends, _) = phases.cuts(0);
        assert!(ends.iter().filter(|&&r| r > 5.0 + 0.5 * GONE + 1.0).count() <= 2, "{ends:?}");
        assert!(ends.iter().filter(|&&r| r < 5.0 + 0.5 * GONE).count() > 4, "{ends:?}");
    }
}
