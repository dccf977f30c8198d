//! One level followed outwards by isolation discs.
//!
//! At control `x` the level is apart from its neighbours by `g`. With `s(r)`
//! the bound of what the Hamiltonian's change moves any level within distance
//! `r`, no neighbour can be met while `s(r) < g / 2`, for real or complex
//! control (Bauer and Fike, Numer. Math. 2, 137 (1960), for a Hermitian centre).
//! Inside the disc the level keeps its number and is analytic.
//!
//! Where one neighbour comes close, the isolation of both from the rest takes its
//! place: their mean and squared half gap are analytic in the larger disc. Where
//! three or more come close at once, or are degenerate at the operating point, the
//! branch is carried by overlap from sample to sample, and noted as such.

use super::crossing::{Crossing, crossing};
use super::exact::{Solved, defined, solve, solve_near, window};
use super::interpolant::{Interpolant, Kind, Piece, chebyshev_points, degree, ellipse};
use crate::diagnostic::{Error, Result};
use crate::model::HIGHEST_POWER;
use crate::pencil::{Scalar, State};
use crate::series::Level;

/// Most pieces on one side; beyond it the walk ends.
pub(super) const MOST_PIECES: usize = 300;
/// Highest degree of an interpolant of a level, and of a pair.
const HIGHEST_DEGREE: (usize, usize) = (26, 32);
/// Degree of a branch carried by overlap.
const BRANCH_DEGREE: usize = 24;
/// Part of a disc's radius that a piece covers.
pub(super) const COVER: f64 = 0.7;
/// A set of levels replaces a smaller one whose disc is less than this part of its own.
const WORTHWHILE: f64 = 0.25;
/// Part of the search below which the disc of a pair is given up for a larger set.
const NARROW: f64 = 1e-4;
/// Part of the search below which a disc ends the walk.
pub(super) const NARROWEST: f64 = 1e-9;
/// Largest number of levels carried as one set.
const LARGEST_SET: usize = 40;
/// Squared overlap by which a branch is recognised at the next sample.
const SAME: f64 = 0.9;
/// Part of the spread of a set below which its levels count as one.
const ONE: f64 = 1e-10;
/// Intervals in which a pair's gap is searched for its minima.
const SCAN: usize = 64;

/// Why a walk ended.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Stop {
    /// The asked reach was covered.
    Reached,
    /// Levels meet, with this distance of the nearest neighbour.
    Meeting(f64),
    /// The level came within the tolerance of the edge.
    Escape,
    /// The Hamiltonian has no value further out.
    Undefined,
}

/// One side of the operating point.
#[derive(Clone, Debug)]
pub(super) struct Side {
    /// Pieces, outwards.
    pub pieces: Vec<Piece>,
    /// Crossings stepped over, outwards.
    pub crossings: Vec<Crossing>,
    /// Outermost control value covered.
    pub end: f64,
    /// Numbers of the followed level there.
    pub last: (usize, usize),
    /// Why no further.
    pub stop: Stop,
}

impl Side {
    /// Nothing followed yet.
    pub fn empty(at: f64) -> Self {
        Self { pieces: Vec::new(), crossings: Vec::new(), end: at, last: (1, 1), stop: Stop::Reached }
    }

    /// The same side reflected by `image`.
    pub fn image(&self, image: &dyn Fn(f64) -> f64) -> Self {
        Self {
            pieces: self.pieces.iter().map(|piece| piece.image(image)).collect(),
            crossings: self
                .crossings
                .iter()
                .map(|one| Crossing {
                    x: image(one.x),
                    window: (image(one.window.0), image(one.window.1)),
                    ..*one
                })
                .collect(),
            end: image(self.end),
            last: self.last,
            stop: self.stop,
        }
    }

    /// The piece that holds `x`.
    fn piece(&self, x: f64) -> Option<&Piece> {
        self.pieces.iter().find(|piece| x >= piece.from.min(piece.to) && x <= piece.from.max(piece.to))
    }

    /// Change of the level from the operating point and the bound of its error.
    pub fn change(&self, x: f64) -> Option<(f64, f64)> {
        let piece = self.piece(x)?;
        Some(piece.value(x, self.numbers_on(piece, x).0))
    }

    /// The followed level at `x` by a solve of its own: its numbers, and its change from the operating point.
    pub fn exact<T: Scalar>(&self, level: &Level<T>, x: f64) -> Result<((usize, usize), f64)> {
        let numbers = match self.piece(x) {
            None => self.last,
            Some(Piece { kind: Kind::Branch(value, set), .. }) => {
                let (there, solved) = (value.value(x), solve(level, x, set.1)?);
                let mut best = (f64::INFINITY, (set.0, set.0), 0.0);
                for number in set.0..=set.1 {
                    let change = solved.change(level, x, (number, number))?;
                    if (change - there).abs() < best.0 {
                        best = ((change - there).abs(), (number, number), change);
                    }
                }
                return Ok((best.1, best.2));
            }
            Some(piece) => self.numbers_on(piece, x),
        };
        let guess = if numbers.0 == numbers.1 { vec![level.state.clone()] } else { Vec::new() };
        Ok((numbers, solve_near(level, x, numbers, &guess, None)?.change(level, x, numbers)?))
    }

    fn numbers_on(&self, piece: &Piece, x: f64) -> (usize, usize) {
        let between = |one: f64| (one - piece.from).abs() < (x - piece.from).abs();
        let mut numbers = piece.numbers;
        if let Kind::Pair { .. } = piece.kind {
            for one in &self.crossings {
                let inside = (one.x - piece.from) * (piece.to - piece.from) >= 0.0 && between(one.x);
                if inside && one.numbers.0 == numbers.0 {
                    numbers = (one.numbers.1, one.numbers.1);
                }
            }
        }
        numbers
    }

    /// Where the part that is known by samples alone begins.
    pub fn sampled_from(&self) -> Option<f64> {
        self.pieces.iter().find(|piece| matches!(piece.kind, Kind::Branch(..))).map(|piece| piece.from)
    }
}

/// Largest `r` with `sum rates[k] r^(k+1) <= goal`, from below.
pub(super) fn radius(rates: &[f64; HIGHEST_POWER], goal: f64, cap: f64) -> f64 {
    let moved = |r: f64| moved(rates, r);
    if moved(cap) <= goal {
        return cap;
    }
    let (mut low, mut high) = (0.0, cap);
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if moved(middle) <= goal { low = middle } else { high = middle }
    }
    low
}

fn moved(rates: &[f64; HIGHEST_POWER], r: f64) -> f64 {
    rates.iter().rev().fold(0.0, |sum, rate| (sum + rate) * r)
}

/// How a level is followed.
#[derive(Clone, Copy, Debug)]
pub(super) struct Task<'a> {
    /// Where to.
    pub reach: f64,
    /// End of the wanted interval, nearer than `reach`.
    pub wanted: f64,
    /// Error that an interpolant may have, model units.
    pub accuracy: f64,
    /// The tolerance in model units: the walk ends where the level is this near to the
    /// escape edge, and crosses over only gaps of up to twice this.
    pub margin: f64,
    /// Closest approaches at which the walk stays on its level.
    pub stays: &'a [f64],
}

struct Walk<'a, T: Scalar> {
    level: &'a Level<T>,
    task: Task<'a>,
    at: f64,
    span: f64,
    outwards: f64,
    side: Side,
    numbers: (usize, usize),
    /// State of the branch at the end of the last piece.
    state: State<T>,
    /// Last two gaps of the pair that the last piece ended in.
    falling: Option<(usize, f64)>,
}

/// Follows `level` from its operating point.
///
/// # Errors
/// Those of the eigenvalue solves.
pub(super) fn walk<T: Scalar>(level: &Level<T>, task: Task<'_>) -> Result<Side> {
    let at = level.model.at();
    let mut walk = Walk {
        level,
        task,
        at,
        span: (task.reach - at).abs(),
        outwards: if task.reach >= at { 1.0 } else { -1.0 },
        side: Side {
            pieces: Vec::new(),
            crossings: Vec::new(),
            end: at,
            last: (level.number, level.number),
            stop: Stop::Reached,
        },
        numbers: (level.number, level.number),
        state: level.state.clone(),
        falling: None,
    };
    while walk.side.stop == Stop::Reached && (walk.side.end - at).abs() < walk.span {
        if walk.side.pieces.len() >= MOST_PIECES {
            walk.side.stop = Stop::Meeting(f64::NAN);
            break;
        }
        walk.step()?;
    }
    walk.side.last = walk.numbers;
    Ok(walk.side)
}

impl<T: Scalar> Walk<'_, T> {
    /// One piece more, or the reason why there is none.
    fn step(&mut self) -> Result<()> {
        let here = self.side.end;
        let rates = self.level.model.rates(here);
        if rates.iter().any(|rate| !rate.is_finite()) || !defined(self.level, here) {
            self.side.stop = Stop::Undefined;
            return Ok(());
        }
        let degenerate = here == self.at && self.level.set.len() > 1;
        let first = if degenerate {
            let low = self.level.set.iter().copied().min().unwrap_or(self.numbers.0);
            (low, self.level.set.iter().copied().max().unwrap_or(low))
        } else {
            self.numbers
        };
        let mut solved = solve(self.level, here, first.1 + 2)?;
        // Far beyond the reach nothing is gained, and an infinite radius has no ellipse.
        let disc = |gap: f64| radius(&rates, 0.5 * gap, 4.0 * self.span);
        let gap = solved.isolation(first);
        let own = disc(gap);
        let alone = first.0 == first.1;
        let open = |r: f64, gap: f64| gap - 2.0 * moved(&rates, COVER * r) > 2.0 * self.task.margin;
        if !degenerate && (!alone || open(own, gap) || !gap.is_finite()) {
            // The pair is worth its second function only if it reaches much further.
            let pair = if alone { disc(solved.isolation(paired(&solved, first))) } else { 0.0 };
            if own >= WORTHWHILE * pair || own >= WORTHWHILE * self.span {
                if own < NARROWEST * self.span {
                    self.side.stop = Stop::Meeting(gap);
                    return Ok(());
                }
                return self.single(here, own, gap, &solved);
            }
        }
        let set = if alone { paired(&solved, first) } else { first };
        if set.1 == set.0 + 1 {
            let gap = solved.isolation(set);
            let r = disc(gap);
            if r >= NARROW * self.span {
                return self.pair(here, r, gap, set.0, degenerate, &solved);
            }
        }
        let mut set = set;
        while set.1 - set.0 < LARGEST_SET {
            solved = solve(self.level, here, set.1 + 2)?;
            let gap = solved.isolation(set);
            let r = disc(gap);
            if r >= NARROW.sqrt() * self.span {
                return self.branch(here, r, set);
            }
            set = paired(&solved, set);
        }
        self.side.stop = Stop::Meeting(gap);
        Ok(())
    }

    /// Where a piece in a disc of radius `r` ends.
    fn outer(&self, here: f64, r: f64) -> f64 {
        let step = COVER * r;
        let to = if step >= (self.task.reach - here).abs() {
            self.task.reach
        } else {
            here + self.outwards * step
        };
        let passes =
            (self.task.wanted - here) * self.outwards > 0.0 && (to - self.task.wanted) * self.outwards > 0.0;
        if defined(self.level, to) {
            return to;
        }
        // What is wanted may end exactly where the Hamiltonian does.
        if passes && defined(self.level, self.task.wanted) {
            return self.task.wanted;
        }
        let (mut inside, mut outside) = (here, to);
        for _ in 0..50 {
            let middle = 0.5 * (inside + outside);
            if defined(self.level, middle) { inside = middle } else { outside = middle }
        }
        inside
    }

    /// Solves for a set of levels at the nodes of a piece, from their states where it begins;
    /// `None`, and the walk ends, where the Hamiltonian has no value.
    fn nodes(
        &mut self,
        (from, to): (f64, f64),
        degree: usize,
        set: (usize, usize),
        start: Option<&Solved<T>>,
    ) -> Result<Option<Nodes<T>>> {
        let nodes = chebyshev_points(from, to, degree);
        if (to - from).abs() < NARROWEST * self.span || nodes.iter().any(|&x| !defined(self.level, x)) {
            self.side.stop = Stop::Undefined;
            return Ok(None);
        }
        let mut last: Option<(f64, Vec<State<T>>)> = None;
        let mut guesses = start.map_or(Ok(Vec::new()), |start| start.states(set))?;
        let here = self.level.model.change(from);
        let mut solved = Vec::with_capacity(nodes.len());
        for (&x, &next) in nodes.iter().zip(nodes.iter().skip(1).chain([&to])) {
            let alone = start.and_then(|start| window(self.level, (&here, start), x, set));
            let one = solve_near(self.level, x, set, &guesses, alone)?;
            let states = one.states(set)?;
            guesses = match &last {
                Some((before, old)) if alone.is_some() => {
                    let step = (next - x) / (x - before);
                    states.iter().zip(old).map(|(new, old)| extrapolated(old, new, step)).collect()
                }
                _ => states.clone(),
            };
            last = Some((x, states));
            solved.push(one);
        }
        Ok(Some((nodes, solved)))
    }

    /// A piece on which the level is alone.
    fn single(&mut self, here: f64, r: f64, gap: f64, solved: &Solved<T>) -> Result<()> {
        let to = self.outer(here, r);
        let rho = ellipse((to - here).abs(), r);
        let size = if gap.is_finite() { 0.5 * gap } else { 0.0 };
        let (degree, bound) = degree(size, rho, self.task.accuracy, HIGHEST_DEGREE.0);
        let numbers = self.numbers;
        let Some((nodes, solved)) = self.nodes((here, to), degree, numbers, Some(solved))? else {
            return Ok(());
        };
        let mut values = Vec::with_capacity(nodes.len());
        let mut spread = 0.0_f64;
        for (&x, one) in nodes.iter().zip(&solved) {
            values.push(one.change(self.level, x, numbers)?);
            spread = spread.max(one.get(numbers.1)?.energy - one.get(numbers.0)?.energy);
        }
        if let Some(last) = solved.last() {
            self.state = last.get(numbers.0)?.state.clone();
        }
        self.falling = None;
        let kind = Kind::Level(Interpolant { nodes, values, bound: bound + spread });
        self.push(Piece { from: here, to, numbers, kind });
        Ok(())
    }

    /// A piece on which the level and a neighbour are apart from the rest.
    fn pair(
        &mut self,
        here: f64,
        r: f64,
        gap: f64,
        low: usize,
        degenerate: bool,
        solved: &Solved<T>,
    ) -> Result<()> {
        let set = (low, low + 1);
        let to = self.outer(here, r);
        let rho = ellipse((to - here).abs(), r);
        let size = if gap.is_finite() { 0.5 * gap } else { 0.0 };
        let half = if degenerate {
            size / r
        } else {
            0.5 * (solved.get(low + 1)?.energy - solved.get(low)?.energy) + size
        };
        let goal = 0.1 * self.task.accuracy * self.task.margin;
        let goal = if degenerate { goal / (r * r) } else { goal };
        let (square_degree, square_bound) = degree(half * half, rho, goal, HIGHEST_DEGREE.1);
        let (mean_degree, _) = degree(size, rho, self.task.accuracy, HIGHEST_DEGREE.1);
        let degree = square_degree.max(mean_degree);
        let mean_bound = 4.0 * size / (rho - 1.0) * libm::pow(rho, -(degree as f64));
        let Some((nodes, solved)) = self.nodes((here, to), degree, set, Some(solved))? else {
            return Ok(());
        };
        let pivot = degenerate.then_some(self.at);
        let (mut mean, mut square) = (Vec::with_capacity(nodes.len()), Vec::with_capacity(nodes.len()));
        for (&x, one) in nodes.iter().zip(&solved) {
            let (a, b) =
                (one.change(self.level, x, (low, low))?, one.change(self.level, x, (low + 1, low + 1))?);
            if degenerate && x == self.at {
                mean.push(0.0);
                square.push(self.opening(low)?);
                continue;
            }
            mean.push(0.5 * (a + b));
            let half = 0.5 * (one.get(low + 1)?.energy - one.get(low)?.energy);
            let scale = pivot.map_or(1.0, |pivot| x - pivot);
            square.push(half * half / (scale * scale));
        }
        if degenerate && let Some(next) = solved.get(1) {
            let inside = |number: usize| -> Result<f64> {
                Ok(next.get(number)?.state.dotc(&self.level.state).modulus_squared())
            };
            let (lower, upper) = (inside(low)?, inside(low + 1)?);
            if lower.max(upper) < SAME {
                // Degenerate for good, or told apart only far out: carried by overlap.
                return self.branch(here, r, (low, low + 1));
            }
            let number = if upper > lower { low + 1 } else { low };
            self.numbers = (number, number);
        }
        let mut numbers = self.numbers;
        let mean = Interpolant { nodes: nodes.clone(), values: mean, bound: mean_bound };
        let square = Interpolant { nodes, values: square, bound: square_bound };
        let gap_at = |x: f64| 2.0 * Piece::half_gap(&square, pivot, x).0;
        let grid = (to - here) / SCAN as f64;
        let gaps: Vec<f64> = (0..=SCAN).map(|k| gap_at(here + grid * k as f64)).collect();
        let widest = gaps.iter().copied().fold(0.0, f64::max);
        let spacing = if gap.is_finite() { size.max(widest) } else { widest };
        let carried = self.falling.filter(|&(other, _)| other == low).map(|(_, gap)| gap);
        for (k, &now) in gaps.iter().enumerate() {
            let before = if k == 0 { carried } else { gaps.get(k - 1).copied() };
            let (Some(before), Some(&after)) = (before, gaps.get(k + 1)) else {
                continue;
            };
            let near = now.min(before).min(after);
            // A crossing between two points of the grid shows no small gap itself.
            let least = near - (before - now).abs().max((after - now).abs());
            if now > before || now > after || least > 2.0 * self.task.margin {
                continue;
            }
            let x = here + grid * k as f64;
            let found = crossing(
                self.level,
                (self.numbers.0, low),
                (x, 1.01 * grid.abs()),
                spacing,
                2.0 * self.task.margin,
            )?;
            let known = |x: f64| {
                let close = |other: f64| (other - x).abs() <= 1e-9 * self.span;
                self.task.stays.iter().any(|&other| close(other))
                    || self.side.crossings.iter().any(|other| close(other.x))
            };
            if let Some(found) = found
                && (found.x - self.at) * self.outwards > 0.0
                && (found.x - to) * self.outwards <= 0.0
                && !known(found.x)
            {
                self.numbers = (found.numbers.1, found.numbers.1);
                if (found.x - here) * self.outwards < 0.0 {
                    numbers = self.numbers;
                }
                self.side.crossings.push(found);
            }
        }
        self.falling = match gaps.as_slice() {
            [.., before, last] if last <= before => Some((low, *before)),
            _ => None,
        };
        let number = self.numbers.0;
        if let Some(last) = solved.last() {
            self.state = last.get(number)?.state.clone();
        }
        let kind = Kind::Pair { low, mean, square, pivot };
        self.push(Piece { from: here, to, numbers, kind });
        Ok(())
    }

    /// Squared half of the difference of slopes with which a degenerate pair opens.
    fn opening(&self, low: usize) -> Result<f64> {
        let [a, b] = self.level.set_states.as_slice() else {
            return Err(Error::internal(format!("the degenerate pair at level {low} has not two states")));
        };
        let slope = self.level.model.expansion(1);
        let half = 0.5 * (slope.element(a, a).real() - slope.element(b, b).real());
        Ok(half * half)
    }

    /// A piece on which the branch is carried through a set of levels by overlap.
    fn branch(&mut self, here: f64, r: f64, set: (usize, usize)) -> Result<()> {
        let mut to = self.outer(here, 0.5 * r);
        while (to - here).abs() > NARROWEST * self.span {
            let Some((nodes, solved)) = self.nodes((here, to), BRANCH_DEGREE, set, None)? else {
                return Ok(());
            };
            if let Some((values, numbers, state)) = self.carry(&nodes, &solved, set, here == self.at)? {
                let mut kept = Interpolant { nodes, values, bound: 0.0 };
                let tail = kept.tail();
                // The tail of a smooth branch stops falling at the rounding of the solves.
                if tail <= 1e3 * self.task.accuracy {
                    kept.bound = 4.0 * tail;
                    let from = self.numbers;
                    self.numbers = numbers;
                    self.state = state;
                    self.falling = None;
                    self.push(Piece { from: here, to, numbers: from, kind: Kind::Branch(kept, set) });
                    return Ok(());
                }
            }
            to = here + 0.5 * (to - here);
        }
        self.side.stop = Stop::Meeting(0.0);
        Ok(())
    }

    /// The branch at each node, the numbers and the state at the last; `None` if it gets lost.
    #[allow(clippy::type_complexity)] // three things of one pass, used once
    fn carry(
        &self,
        nodes: &[f64],
        solved: &[Solved<T>],
        set: (usize, usize),
        fresh: bool,
    ) -> Result<Option<(Vec<f64>, (usize, usize), State<T>)>> {
        let mut state = self.state.clone();
        let mut numbers = self.numbers;
        let mut values = Vec::with_capacity(nodes.len());
        for (&x, one) in nodes.iter().zip(solved) {
            if fresh && x == self.at {
                values.push(0.0);
                continue;
            }
            let spread = one.get(set.1)?.energy - one.get(set.0)?.energy;
            let same = ONE * spread.max(self.level.model.degeneracy_scale());
            let mut best: Option<(f64, (usize, usize), State<T>)> = None;
            let mut low = set.0;
            while low <= set.1 {
                let mut high = low;
                while high < set.1 && one.get(high + 1)?.energy - one.get(high)?.energy <= same {
                    high += 1;
                }
                let mut projected = State::zeros(state.len());
                for number in low..=high {
                    let member = &one.get(number)?.state;
                    projected.axpy(member.dotc(&state), member, T::one());
                }
                let weight = projected.norm_squared() / state.norm_squared();
                if best.as_ref().is_none_or(|found| weight > found.0) {
                    best = Some((weight, (low, high), projected));
                }
                low = high + 1;
            }
            let Some((weight, found, projected)) = best.filter(|found| found.0 > SAME) else {
                return Ok(None);
            };
            let _ = weight;
            values.push(one.change(self.level, x, found)?);
            numbers = found;
            state = projected.unscale(projected.norm());
        }
        Ok(Some((values, numbers, state)))
    }

    /// Takes a piece, cut where the level escapes.
    fn push(&mut self, mut piece: Piece) {
        self.side.end = piece.to;
        let (level, side, margin) = (self.level, &self.side, self.task.margin);
        let room = |x: f64| {
            let shift = piece.value(x, side.numbers_on(&piece, x).0).0;
            level.model.escape_edge(x).map(|edge| edge - level.energies[0] - shift - margin)
        };
        let bound = |x: f64| room(x).is_none_or(|room| room > 0.0);
        let beyond = chebyshev_points(piece.from, piece.to, SCAN).into_iter().find(|&x| !bound(x));
        if let Some(beyond) = beyond {
            let (mut inside, mut outside) = (piece.from, beyond);
            for _ in 0..100 {
                let middle = 0.5 * (inside + outside);
                if bound(middle) { inside = middle } else { outside = middle }
            }
            piece.to = inside;
            self.side.end = inside;
            self.side.stop = Stop::Escape;
        }
        self.side.pieces.push(piece);
    }
}

/// A guess `step` beyond `new`, in units of its distance from `old`; phases are arbitrary.
fn extrapolated<T: Scalar>(old: &State<T>, new: &State<T>, step: f64) -> State<T> {
    let overlap = old.dotc(new);
    let size = overlap.modulus();
    let mut guess = new.scale(1.0 + step);
    if size > 0.0 {
        guess.axpy(-overlap.unscale(size).scale(step), old, T::one());
        guess
    } else {
        new.clone()
    }
}

type Nodes<T> = (Vec<f64>, Vec<Solved<T>>);

/// The set with its nearest neighbour.
fn paired<T: Scalar>(solved: &Solved<T>, (low, high): (usize, usize)) -> (usize, usize) {
    let (below, above) = solved.apart((low, high));
    if below.is_finite() && below <= above {
        (low - 1, high)
    } else if above.is_finite() {
        (low, high + 1)
    } else {
        (low, high)
    }
}
