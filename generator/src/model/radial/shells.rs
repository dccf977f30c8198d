//! The coupled channels as a [`Model`].

use super::mesh::Mesh;
use crate::expr::Tree;
use crate::model::layers::mesh::{add_weighted, at_position};
use crate::model::{HIGHEST_POWER, Model};
use crate::pencil::{Banded, Hermitian, State};
use crate::spec::{Ends, Profile, Radial};
use crate::units::constants::coulomb_ev_nm;

/// Part of a state outside its main channel above which it belongs to none.
const PURE: f64 = 1e-6;

/// What stands on the diagonal at each unknown: edges and the centre's charge.
pub struct Potential {
    /// Part that the control does not change, edges and centre, eV.
    fixed: Vec<f64>,
    /// The centre's part of it.
    centre: Vec<f64>,
    /// Part that the control changes.
    moving: Vec<Option<Tree>>,
}

impl Potential {
    /// Edges averaged at nodes that two elements share, as the quadrature has them.
    pub fn new(mesh: &Mesh, radial: &Radial, at: f64) -> Self {
        let order = mesh.order();
        let mut fixed = vec![0.0; order];
        let mut moving: Vec<Option<Tree>> = vec![None; order];
        mesh.visit(|row, weight, edge, radius, share| {
            let part = weight / mesh.overlap[row];
            match edge {
                Profile::Constant(tree) if tree.uses_control() => add_weighted(&mut moving[row], tree, part),
                Profile::Linear(from, to) if from.uses_control() || to.uses_control() => {
                    let mixed = from.clone().scaled(1.0 - share).plus(to.clone().scaled(share));
                    add_weighted(&mut moving[row], &mixed, part);
                }
                Profile::Function(tree) if tree.uses_control() => {
                    add_weighted(&mut moving[row], &at_position(tree, radius), part);
                }
                Profile::Constant(tree) => fixed[row] += part * tree.value(at, 0.0),
                Profile::Linear(from, to) => {
                    let (from, to) = (from.value(at, 0.0), to.value(at, 0.0));
                    fixed[row] += part * (from + (to - from) * share);
                }
                Profile::Function(tree) => fixed[row] += part * tree.value(at, radius),
            }
        });
        let strength = radial.charge * radial.centre_charge * coulomb_ev_nm() / radial.permittivity;
        let centre: Vec<f64> =
            mesh.radii.iter().map(|r| if strength == 0.0 { 0.0 } else { strength / r }).collect();
        Self { fixed, centre, moving }
    }

    /// Values at a control value, eV.
    pub fn values(&self, control: f64) -> Vec<f64> {
        self.edges(control).into_iter().zip(&self.centre).map(|(edge, centre)| edge + centre).collect()
    }

    fn edges(&self, control: f64) -> Vec<f64> {
        let value = |tree: &Tree| tree.value(control, 0.0);
        self.fixed.iter().zip(&self.moving).map(|(x, tree)| x + tree.as_ref().map_or(0.0, value)).collect()
    }

    /// The lowest edge, the centre's charge apart, eV.
    pub fn lowest_edge(&self, control: f64) -> f64 {
        self.edges(control).into_iter().fold(f64::INFINITY, f64::min)
    }

    /// The outermost edge, eV.
    fn outer_edge(&self, control: f64) -> f64 {
        self.edges(control).last().copied().unwrap_or(f64::INFINITY)
    }

    /// Coefficients of `d^power` about `control`, `power >= 1`.
    fn coefficient(&self, control: f64, power: usize) -> Vec<f64> {
        self.moving
            .iter()
            .map(|tree| tree.as_ref().map_or(0.0, |tree| tree.taylor(control, 0.0)[power]))
            .collect()
    }

    /// Change between two control values.
    fn change(&self, at: f64, control: f64) -> Vec<f64> {
        self.moving
            .iter()
            .map(|tree| tree.as_ref().map_or(0.0, |tree| tree.change(at, control, 0.0)))
            .collect()
    }

    fn moves(&self) -> bool {
        self.moving.iter().any(Option::is_some)
    }
}

/// Sub-diagonals of the coupled problem in the better of both orders of unknowns.
pub fn width(mesh: &Mesh, channels: usize) -> usize {
    if channels <= 1 { mesh.width() } else { mesh.order().min(mesh.width() * channels) }
}

/// The coupled channels.
pub struct Shells {
    mesh: Mesh,
    potential: Potential,
    kinetic: [Banded<f64>; 2],
    /// l of each channel.
    channels: Vec<usize>,
    /// `<l + 1| cos(theta) |l>` between a channel and the next.
    cosines: Vec<f64>,
    /// True if the unknowns of one channel stand together, else those of one radius.
    by_channel: bool,
    field: Option<Tree>,
    charge: f64,
    at: f64,
    expansion: Vec<Hermitian<f64>>,
    parity: Option<String>,
    open: bool,
    scale: f64,
}

impl Shells {
    /// Puts the channels together; `scale` is the degeneracy scale, eV.
    pub fn new(
        mesh: Mesh,
        potential: Potential,
        radial: &Radial,
        channels: Vec<usize>,
        m: usize,
        at: f64,
        scale: f64,
    ) -> Self {
        let m = (m * m) as f64;
        let cosines = channels
            .iter()
            .map(|&l| {
                let l = l as f64;
                (((l + 1.0) * (l + 1.0) - m) / ((2.0 * l + 1.0) * (2.0 * l + 3.0))).sqrt()
            })
            .collect();
        let mut model = Self {
            kinetic: mesh.kinetic(),
            by_channel: mesh.order() <= mesh.width() * channels.len(),
            parity: parity(&potential, radial, at),
            open: radial.ends == Ends::Decay,
            field: radial.field.clone(),
            charge: radial.charge,
            mesh,
            potential,
            channels,
            cosines,
            at,
            expansion: Vec::new(),
            scale,
        };
        model.expansion = (0..=HIGHEST_POWER)
            .map(|power| if power == 0 { model.hamiltonian(at) } else { model.coefficient(at, power) })
            .collect();
        model
    }

    /// True if every element of the expansion is finite.
    pub fn is_finite(&self) -> bool {
        self.expansion.iter().all(|h| match h {
            Hermitian::Zero(_) => true,
            Hermitian::Diagonal(entries) => entries.iter().all(|x| x.is_finite()),
            Hermitian::Banded(band) => band.entries.iter().all(|x| x.is_finite()),
            Hermitian::Dense(matrix) => matrix.iter().all(|x| x.is_finite()),
        })
    }

    fn index(&self, channel: usize, radial: usize) -> usize {
        if self.by_channel {
            channel * self.mesh.order() + radial
        } else {
            radial * self.channels.len() + channel
        }
    }

    /// Distance between the unknowns of two neighbouring channels at one radius.
    fn step(&self) -> usize {
        if self.by_channel { self.mesh.order() } else { 1 }
    }

    /// Adds a diagonal and, for a force (eV/nm), the coupling.
    fn fill(&self, band: &mut Banded<f64>, diagonal: &[f64], force: f64) {
        for channel in 0..self.channels.len() {
            for (radial, value) in diagonal.iter().enumerate() {
                let here = self.index(channel, radial);
                band.add(here, here, *value);
                if force != 0.0 && channel + 1 < self.channels.len() {
                    let there = self.index(channel + 1, radial);
                    band.add(there, here, force * self.mesh.radii[radial] * self.cosines[channel]);
                }
            }
        }
    }

    /// A matrix of edges and field alone.
    fn potential_matrix(&self, diagonal: &[f64], force: f64) -> Hermitian<f64> {
        let flat = diagonal.iter().all(|&x| x == 0.0);
        if flat && force == 0.0 {
            return Hermitian::Zero(self.order());
        }
        if force == 0.0 {
            let mut entries = vec![0.0; self.order()];
            for channel in 0..self.channels.len() {
                for (radial, value) in diagonal.iter().enumerate() {
                    entries[self.index(channel, radial)] = *value;
                }
            }
            return Hermitian::Diagonal(entries);
        }
        let mut band = Banded::zeros(self.order(), self.step());
        self.fill(&mut band, diagonal, force);
        Hermitian::Banded(band)
    }

    /// Force of the field on the carrier along +z, turned into the factor of z: eV/nm.
    fn force(&self, field: f64) -> f64 {
        if self.channels.len() > 1 { -self.charge * field } else { 0.0 }
    }

    fn field_coefficient(&self, control: f64, power: usize) -> f64 {
        self.field.as_ref().map_or(0.0, |tree| tree.taylor(control, 0.0)[power])
    }

    fn coefficient(&self, control: f64, power: usize) -> Hermitian<f64> {
        let force = self.force(self.field_coefficient(control, power));
        self.potential_matrix(&self.potential.coefficient(control, power), force)
    }

    /// The part of a state in one channel, values of `u` at the unknowns.
    fn part(&self, state: &State<f64>, channel: usize) -> Vec<f64> {
        (0..self.mesh.order())
            .map(|radial| state[self.index(channel, radial)] / self.mesh.overlap[radial].sqrt())
            .collect()
    }

    fn weight(&self, state: &State<f64>, channel: usize) -> f64 {
        (0..self.mesh.order()).fold(0.0, |sum, radial| {
            let x = state[self.index(channel, radial)];
            sum + x * x
        })
    }
}

impl Model<f64> for Shells {
    fn order(&self) -> usize {
        self.mesh.order() * self.channels.len()
    }

    fn at(&self) -> f64 {
        self.at
    }

    fn expansion(&self, power: usize) -> &Hermitian<f64> {
        &self.expansion[power]
    }

    fn hamiltonian(&self, control: f64) -> Hermitian<f64> {
        let field = self.field.as_ref().map_or(0.0, |tree| tree.value(control, 0.0));
        let force = self.force(field);
        let stride = if self.by_channel { 1 } else { self.channels.len() };
        let inner = self.mesh.width() * stride;
        let width = if force == 0.0 { inner } else { inner.max(self.step()) };
        let mut band = Banded::zeros(self.order(), width.min(self.order().saturating_sub(1)));
        for (channel, &l) in self.channels.iter().enumerate() {
            let factor = (l * (l + 1)) as f64;
            for row in 0..self.mesh.order() {
                for column in row.saturating_sub(self.mesh.width())..=row {
                    let [base, turning] = [0, 1].map(|k: usize| self.kinetic[k].get(row, column));
                    let value = base + factor * turning;
                    band.add(self.index(channel, row), self.index(channel, column), value);
                }
            }
        }
        self.fill(&mut band, &self.potential.values(control), force);
        Hermitian::Banded(band)
    }

    fn change(&self, control: f64) -> Hermitian<f64> {
        let field = self.field.as_ref().map_or(0.0, |tree| tree.change(self.at, control, 0.0));
        self.potential_matrix(&self.potential.change(self.at, control), self.force(field))
    }

    fn slope(&self, control: f64) -> Hermitian<f64> {
        self.coefficient(control, 1)
    }

    fn rates(&self, control: f64) -> [f64; HIGHEST_POWER] {
        std::array::from_fn(|idx| {
            let edges = Hermitian::<f64>::Diagonal(self.potential.coefficient(control, idx + 1));
            // |cos| is at most 1, whatever the channels.
            let force = self.force(self.field_coefficient(control, idx + 1));
            edges.half_spread() + force.abs() * self.mesh.radius()
        })
    }

    fn energy(&self, control: f64, state: &State<f64>) -> f64 {
        let field = self.field.as_ref().map_or(0.0, |tree| tree.value(control, 0.0));
        let force = self.force(field);
        let potential = self.potential.values(control);
        let mut energy = 0.0;
        for (channel, &l) in self.channels.iter().enumerate() {
            energy += self.mesh.kinetic_energy(l, &self.part(state, channel));
            for (radial, value) in potential.iter().enumerate() {
                let x = state[self.index(channel, radial)];
                energy += value * x * x;
                if channel + 1 < self.channels.len() {
                    let next = state[self.index(channel + 1, radial)];
                    energy += 2.0 * force * self.mesh.radii[radial] * self.cosines[channel] * x * next;
                }
            }
        }
        energy / state.norm_squared()
    }

    fn parity(&self) -> Option<String> {
        self.parity.clone()
    }

    fn escape_edge(&self, control: f64) -> Option<f64> {
        self.open.then(|| self.potential.outer_edge(control))
    }

    fn phase(&self, state: &State<f64>) -> Option<f64> {
        let main = (0..self.channels.len())
            .max_by(|&a, &b| self.weight(state, a).total_cmp(&self.weight(state, b)))?;
        let values = self.part(state, main);
        let largest = values.iter().fold(0.0_f64, |most, x| most.max(x.abs()));
        let first = values.iter().find(|x| x.abs() > 1e-3 * largest)?;
        Some(if *first < 0.0 { -1.0 } else { 1.0 })
    }

    fn degeneracy_scale(&self) -> f64 {
        self.scale
    }

    fn channel(&self, state: &State<f64>) -> Option<usize> {
        let whole = state.norm_squared();
        (0..self.channels.len())
            .find(|&channel| self.weight(state, channel) > (1.0 - PURE) * whole)
            .and_then(|channel| self.channels.get(channel).copied())
    }
}

/// Why the levels are even in the offset, where that is proved: turning the sphere by half
/// a turn about an axis across the field reverses the field alone.
fn parity(potential: &Potential, radial: &Radial, at: f64) -> Option<String> {
    if potential.moves() {
        return None;
    }
    let Some(field) = radial.field.as_ref().filter(|_| radial.charge != 0.0) else {
        return Some("the control does not enter".into());
    };
    if field.degree()? > 4 {
        return None;
    }
    let taylor = field.taylor(at, 0.0);
    (taylor[0] == 0.0 && taylor[2] == 0.0 && taylor[4] == 0.0)
        .then(|| "the shells are their own mirror image and the field is odd in the offset".into())
}
