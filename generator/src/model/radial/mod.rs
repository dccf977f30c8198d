//! A carrier in concentric shells: three dimensions, effective mass.
//!
//! In: the shells and a block. Out: a [`Built`] whose basis is radial elements times
//! spherical harmonics of one m: a channel per l. Without the field the channels
//! are apart; the field's potential, `-charge e field r cos(theta)`, couples l to l + 1
//! by
//!
//! ```text
//! <l + 1, m| cos(theta) |l, m> = sqrt(((l + 1)^2 - m^2) / ((2 l + 1)(2 l + 3)))
//! ```
//!
//! and is diagonal along the radius. Elements and channels are refined together.
//!
//! With open ends the field leaves no bound level; then the series alone is meant,
//! and [`Built::formal`] says so.
//!
//! Source: Bethe and Salpeter, *Quantum Mechanics of One- and Two-Electron Atoms*,
//! section 51 and appendix (matrix elements of cos theta), from memory.

mod block;
mod channel;
mod mesh;
mod shells;

use std::rc::Rc;

use block::Block;
use channel::Channels;
use mesh::{Mesh, Scale};
use shells::Shells;

use super::{AnyModel, Built, Numbers, Request};
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::pencil;
use crate::spec::{Ends, Layer, Profile, Radial, System};
use crate::units::Unit;
use crate::units::constants::{coulomb_ev_nm, kinetic_ev_nm2};

/// Degree of an element at refinement 0; each refinement adds two. As for layers.
const DEGREE: usize = 14;

/// Degree at refinement 0 behind open ends in a field, where corrections of every order
/// bring one or two more powers of the radius.
const OPEN_DEGREE: usize = 20;

/// Most entries of the band of one problem.
const MOST_ENTRIES: usize = 60_000_000;

/// Most channels beyond those that hold a level.
const MOST_CHANNELS: usize = 100;

/// A level of another l this near, in parts of its height above the lowest edge, makes l
/// no good quantum number.
const TOGETHER: f64 = 1e-9;

/// Levels of a block that are listed.
const LISTED: usize = 12;

/// The radial problem without a field.
struct Sphere {
    mesh: Mesh,
    channels: Channels,
    potential: shells::Potential,
}

impl Sphere {
    /// The highest l, from `from` on, that may have a level below an energy: at the operating
    /// point, and with the field's pull at full strength in every direction, for which
    /// the potential is lowered by its largest force times the radius.
    fn highest_channel(
        &self,
        radial: &Radial,
        request: &Request<'_>,
        from: usize,
        energy: f64,
        pulled: bool,
    ) -> Result<usize> {
        let force = strongest(radial, request);
        let mut top = self.channels.filled(from, energy)?.0.unwrap_or(from);
        if pulled {
            let lowered: Vec<f64> = self
                .potential
                .values(request.at)
                .iter()
                .zip(&self.mesh.radii)
                .map(|(value, radius)| value - force * radius)
                .collect();
            let channels = Channels::new(&self.mesh, &lowered);
            top = top.max(channels.filled(from, energy)?.0.unwrap_or(from));
        }
        Ok(top)
    }
}

/// Builds the model of concentric shells.
///
/// # Errors
/// A block or level that the system does not have, a level that is not bound, l asked for
/// where it is not good, a potential or mass that is not finite, or a problem too large.
pub fn build(system: &System, radial: &Radial, request: &Request<'_>) -> Result<Built> {
    let block = Block::read(system, radial, request)?;
    let coupled = radial
        .field
        .as_ref()
        .is_some_and(|field| field.uses_control() || field.value(request.at, 0.0) != 0.0)
        && radial.charge != 0.0;
    let open = radial.ends == Ends::Decay;
    let formal = open && coupled;
    let at_field = field_at(radial, request.at);
    if formal && at_field != 0.0 {
        return Err(not_bound(
            system,
            request.level,
            "none, since the field pulls every level out",
            "move `at` to where the field is zero, or use `ends: wall`",
        ));
    }
    let (sphere, energy) = settled_sphere(system, radial, request, block, formal)?;
    let lowest_edge = sphere.potential.lowest_edge(request.at);
    let height = (energy - lowest_edge).abs();
    let apart = TOGETHER * height;

    let mut numbers: Option<Numbers> = None;
    let mut own_levels = Vec::new();
    let channels: Vec<usize> = match block.l {
        Some(l) if !coupled => vec![l],
        _ => {
            let from = block.m;
            let top = sphere.highest_channel(radial, request, from, energy + apart, !formal && coupled)?;
            // The series to fifth order reaches two channels further, its continuation four.
            // A level in a field is spread over several from the start.
            let more = if !coupled {
                0
            } else if formal {
                5
            } else if at_field == 0.0 {
                4 + request.refinement
            } else {
                6 + 2 * request.refinement
            };
            let needed = top.max(block.l.map_or(0, |l| l + 1));
            let own = block.l.unwrap_or(block.m) + MOST_CHANNELS;
            (from..=(needed.min(own.max(from)) + more)).collect()
        }
    };
    if let Some(l) = block.l {
        own_levels = sphere.channels.lowest(l, LISTED)?;
        if coupled {
            let numbering = Numbering {
                channels: sphere.channels.clone(),
                all: channels.clone(),
                l,
                m: block.m,
                apart,
                system: system.name.clone(),
            };
            numbering.number(request.level)?;
            numbers = Some(Rc::new(move |level| numbering.number(level)));
        }
    }
    let width = shells::width(&sphere.mesh, channels.len());
    let order = sphere.mesh.order() * channels.len();
    if order.saturating_mul(width + 1) > MOST_ENTRIES {
        return Err(too_large(system, order));
    }
    let levels = sphere.mesh.order() * if block.l.is_some() { 1 } else { channels.len() };
    if request.level > levels {
        return Err(Error::spec(
            Diagnostic::new(
                "no-such-level",
                format!("level {} of `{}` is out of reach", request.level, system.name),
            )
            .at(Some(system.place.clone())),
        ));
    }
    let labelled = block.l.is_some();
    let model =
        Shells::new(sphere.mesh, sphere.potential, radial, channels, block.m, request.at, 1e-12 * height);
    if !model.is_finite() {
        return Err(undefined(system));
    }
    Ok(Built {
        size: order,
        model: AnyModel::Real(Rc::new(model)),
        unit: Unit::parse("eV").map_err(|fault| Error::spec(fault.diagnostic(None)))?,
        refinable: true,
        notes: Vec::new(),
        numbers,
        levels: own_levels,
        labelled,
        formal,
    })
}

/// The field at a control value, V/nm.
fn field_at(radial: &Radial, control: f64) -> f64 {
    radial.field.as_ref().map_or(0.0, |field| field.value(control, 0.0))
}

/// The largest force of the field over the wanted interval, which reaches half as far as
/// exact levels may be asked for, eV/nm.
fn strongest(radial: &Radial, request: &Request<'_>) -> f64 {
    let half = |end: f64| request.at + 0.5 * (end - request.at);
    [half(request.reach.0), request.at, half(request.reach.1)]
        .map(|control| (radial.charge * field_at(radial, control)).abs())
        .into_iter()
        .filter(|x| x.is_finite())
        .fold(0.0, f64::max)
}

/// The mesh fit for the level that is asked for, and that level's energy (without the field).
fn settled_sphere(
    system: &System,
    radial: &Radial,
    request: &Request<'_>,
    block: Block,
    formal: bool,
) -> Result<(Sphere, f64)> {
    let at = request.at;
    let total: f64 = radial.shells.iter().map(|shell| shell.thickness).sum();
    let ends = |profile: &Profile, layer: &Layer, start: f64| match profile {
        Profile::Constant(tree) => [tree.value(at, 0.0); 2],
        Profile::Linear(from, to) => [from.value(at, 0.0), to.value(at, 0.0)],
        Profile::Function(tree) => [tree.value(at, start), tree.value(at, start + layer.thickness)],
    };
    let (mut edges, mut masses, mut lightest) = (Vec::new(), Vec::new(), f64::INFINITY);
    let (mut low, mut high, mut outer, mut outer_mass) = (f64::INFINITY, f64::NEG_INFINITY, f64::NAN, 1.0);
    let mut start = 0.0;
    for shell in &radial.shells {
        let edge = ends(&shell.edge, shell, start);
        let mass = ends(&shell.mass, shell, start);
        if !edge.iter().all(|x| x.is_finite()) || !mass.iter().all(|x| x.is_finite() && *x > 0.0) {
            return Err(undefined(system));
        }
        edges.push(edge[0].min(edge[1]));
        masses.push(mass[0].max(mass[1]));
        lightest = lightest.min(mass[0]).min(mass[1]);
        low = low.min(edge[0]).min(edge[1]);
        high = high.max(edge[0]).max(edge[1]);
        (outer, outer_mass) = (edge[1], mass[1]);
        start += shell.thickness;
    }
    if radial.shells.is_empty() || total.is_nan() || total <= 0.0 {
        return Err(Error::internal("an empty list of shells reached the model"));
    }
    let number = request.level.max(1) as f64;
    let strength = radial.charge * radial.centre_charge * coulomb_ev_nm() / radial.permittivity;
    let slope = strongest(radial, request);
    // Zero n of the spherical Bessel functions of order l, and number n among all l >= m,
    // roughly and from above.
    let turns = match block.l {
        Some(l) => std::f64::consts::PI * number + 1.6 * l as f64 + 1.0,
        None => 3.0 * number.sqrt() + block.m as f64 + std::f64::consts::PI,
    };
    let boxed = kinetic_ev_nm2() / lightest * (turns / total) * (turns / total);
    let open = radial.ends == Ends::Decay;
    let mut decay = open.then(|| {
        let stiffness = kinetic_ev_nm2() / outer_mass;
        let well = (0.5 * (outer - low).max(0.0) / stiffness).sqrt();
        // Level n of a point charge decays with n in the denominator.
        let principal = match block.l {
            Some(l) => number + l as f64,
            None => number.sqrt() + block.m as f64 + 0.5,
        };
        let charge = (-strength).max(0.0) / (2.0 * stiffness * principal);
        well.max(charge).max(1e-3 / total)
    });
    let degree = if formal { OPEN_DEGREE } else { DEGREE } + 2 * request.refinement;
    let rounds = if open { 4 } else { 2 };
    let mut known = None;
    for round in 0..rounds {
        let stiffness = |shell: usize| kinetic_ev_nm2() / masses.get(shell).copied().unwrap_or(1.0);
        let edge = |shell: usize, radius: f64| match radial.shells.get(shell).map(|one| &one.edge) {
            Some(Profile::Function(tree)) => tree.value(at, radius.min(total)),
            _ => edges.get(shell).copied().unwrap_or(low),
        };
        let floor = decay.map_or(0.5 * boxed, |decay| 0.5 * kinetic_ev_nm2() / outer_mass * decay * decay);
        let wave = |shell: usize, radius: f64| {
            let potential = edge(shell, radius) + strength / radius;
            let pull = if open { 0.0 } else { slope * radius };
            // Before any level is known, everything up to the highest edge is resolved.
            let (energy, flat) = match known {
                Some(energy) => (energy, 0.0),
                None if open => (low, high - low),
                None => (low + boxed, high - low),
            };
            let depth = (energy - potential).abs().max((potential - pull - energy).abs()).max(floor) + flat;
            let barrier = if known.is_some() { (potential - pull - energy).max(0.0) } else { 0.0 };
            // A shell that varies may do so faster than the level.
            let rough = radial.shells.get(shell).is_some_and(|one| {
                matches!(one.edge, Profile::Function(_)) || matches!(one.mass, Profile::Function(_))
            });
            let finer = if rough { 1.5 } else { 1.0 };
            (finer * (depth / stiffness(shell)).sqrt(), (barrier / stiffness(shell)).sqrt())
        };
        let mesh = Mesh::new(&radial.shells, &Scale { degree, wave: &wave, decay });
        if mesh.order().saturating_mul(mesh.width() + 1) > MOST_ENTRIES {
            return Err(too_large(system, mesh.order()));
        }
        let potential = shells::Potential::new(&mesh, radial, at);
        let channels = Channels::new(&mesh, &potential.values(at));
        if potential.values(at).iter().any(|x| !x.is_finite()) {
            return Err(undefined(system));
        }
        let (wanted, bound) = match (block.l, open) {
            (_, false) => (request.level, usize::MAX),
            (Some(l), true) => {
                let bound = channels.below(l, outer)?;
                (request.level.min(bound), bound)
            }
            (None, true) => {
                let bound = channels.filled(block.m, outer)?.1;
                (request.level.min(bound), bound)
            }
        };
        let energy = match block.l {
            _ if wanted == 0 => outer,
            Some(l) if wanted > channels.order() => {
                return Err(too_large(system, channels.order() * (l + 1)));
            }
            Some(l) => pencil::eigenpair(&channels.hamiltonian(l), wanted)?.energy,
            None => channels.among_all(block.m, wanted)?,
        };
        if round + 1 == rounds {
            if request.level > bound {
                let expected = if bound == 1 { "1 is".to_owned() } else { format!("{bound} are") };
                return Err(not_bound(
                    system,
                    request.level,
                    &expected,
                    "ask for a lower level, deepen the shells, or use `ends: wall`",
                ));
            }
            return Ok((Sphere { mesh, channels, potential }, energy));
        }
        known = Some(energy);
        if wanted > 0 && open {
            let depth = (outer - energy).max(1e-9 * (outer - low).abs()).max(f64::MIN_POSITIVE);
            decay = Some((depth * outer_mass / kinetic_ev_nm2()).sqrt().max(1e-3 / total));
        }
    }
    Err(Error::internal("a sphere was built in no round"))
}

/// How the levels of one l are numbered among those of all channels.
struct Numbering {
    channels: Channels,
    all: Vec<usize>,
    l: usize,
    m: usize,
    apart: f64,
    system: String,
}

impl Numbering {
    fn number(&self, level: usize) -> Result<usize> {
        if level == 0 || level > self.channels.order() {
            return Err(Error::spec(Diagnostic::new("no-such-level", format!("there is no level {level}"))));
        }
        let energy = pencil::eigenpair(&self.channels.hamiltonian(self.l), level)?.energy;
        let mut number = level;
        for &other in self.all.iter().filter(|&&other| other != self.l) {
            let below = self.channels.below(other, energy - self.apart)?;
            if self.channels.below(other, energy + self.apart)? != below {
                let text = format!("l is no good quantum number for level {level} of `{}`", self.system);
                return Err(Error::spec(
                    Diagnostic::new("not-conserved", text)
                        .found(format!(
                            "a level of l = {other} at the energy of level {level} of l = {}",
                            self.l
                        ))
                        .expected("no other level there that the field could mix in")
                        .action(format!("count within `where: {{m: {}}}`", self.m)),
                ));
            }
            number += below;
        }
        Ok(number)
    }
}

fn undefined(system: &System) -> Error {
    Error::spec(
        Diagnostic::new("undefined", format!("edge, mass or field of `{}` is not finite", system.name))
            .at(Some(system.place.clone()))
            .expected("finite values and a positive mass in all shells, at the operating point"),
    )
}

fn not_bound(system: &System, level: usize, bound: &str, action: &'static str) -> Error {
    Error::spec(
        Diagnostic::new(
            "not-bound",
            format!("level {level} of `{}` is not bound at the operating point", system.name),
        )
        .at(Some(system.place.clone()))
        .found(format!("level {level}"))
        .expected(format!("a level below the outer edge: {bound}"))
        .action(action),
    )
}

fn too_large(system: &System, order: usize) -> Error {
    Error::spec(
        Diagnostic::new("too-large", format!("`{}` needs {order} basis functions", system.name))
            .at(Some(system.place.clone()))
            .expected(format!("a band of at most {MOST_ENTRIES} entries"))
            .action("ask for a lower level, or make the shells smaller"),
    )
}
