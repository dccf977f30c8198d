//! Levels of a banded matrix at a cost linear in its order.
//!
//! Method: `H - shift = L D L^H` inside the band, without pivoting. The number of
//! negative pivots is the number of levels below the shift (Sylvester's law of
//! inertia), which brackets a level by its number; inverse iteration and then
//! Rayleigh quotients find it, and the count certifies which one was found.
//!
//! Without pivoting the factors grow where a leading block is nearly singular;
//! then the shift is moved a little, further each time, and the factors are made
//! again; they say which shift they belong to.
//!
//! Source: Parlett, *The Symmetric Eigenvalue Problem* (1998), chapters 3 and 4
//! (from memory).

use std::rc::Rc;

use super::{Banded, Eigenpair, Scalar, State};
use crate::diagnostic::{Error, Result};

/// Growth of the factors above which the shift is moved.
const GROWTH: f64 = 1e7;

/// Where else a bracket is divided when the first shift was moved out of it.
const SPLITS: [f64; 4] = [0.5, 0.3, 0.7, 0.1];

/// Factors of `H - shift`.
#[derive(Clone, Debug)]
pub(super) struct BandFactor<T> {
    /// The shift that the factors belong to.
    shift: f64,
    width: usize,
    /// Rows of `L` below the unit diagonal, `width` entries each.
    lower: Vec<T>,
    pivots: Vec<f64>,
    envelope: Rc<Envelope>,
}

/// Where factors can differ from zero: elements that are full blocks on the
/// diagonal fill only a third of the work that their band would.
#[derive(Debug)]
struct Envelope {
    /// Per row, the first column.
    from: Vec<usize>,
    /// Per column, one past the last row.
    to: Vec<usize>,
}

impl Envelope {
    fn new<T: Scalar>(band: &Banded<T>) -> Self {
        let mut to: Vec<usize> = (1..=band.order).collect();
        for row in 0..band.order {
            let first = row.saturating_sub(band.width);
            let used = (first..row).find(|&column| !band.get(row, column).is_zero());
            if let Some(end) = used.and_then(|column| to.get_mut(column)) {
                *end = row + 1;
            }
        }
        // Elimination fills every row that an earlier column has reached.
        let mut reached = 0;
        for end in &mut to {
            reached = reached.max(*end);
            *end = reached;
        }
        let mut from: Vec<usize> = Vec::with_capacity(band.order);
        for (column, &end) in to.iter().enumerate() {
            from.resize(from.len().max(end), column);
        }
        Self { from, to }
    }
}

impl<T: Scalar> BandFactor<T> {
    /// Number of levels below the shift.
    pub(super) fn below(&self) -> usize {
        self.pivots.iter().filter(|&&d| d < 0.0).count()
    }

    /// Solves with the factors.
    pub(super) fn solve(&self, right: &State<T>) -> State<T> {
        let (n, w) = (self.pivots.len(), self.width);
        let mut x = right.clone();
        let values = x.as_mut_slice();
        for row in 1..n {
            let from = self.envelope.from[row];
            let factors = &self.lower[row * w + w - (row - from)..(row + 1) * w];
            let mut sum = values[row];
            for (l, v) in factors.iter().zip(&values[from..row]) {
                sum -= *l * *v;
            }
            values[row] = sum;
        }
        for (v, d) in values.iter_mut().zip(&self.pivots) {
            *v = v.unscale(*d);
        }
        for row in (1..n).rev() {
            let from = self.envelope.from[row];
            let factors = &self.lower[row * w + w - (row - from)..(row + 1) * w];
            let here = values[row];
            for (l, v) in factors.iter().zip(&mut values[from..row]) {
                *v -= l.conjugate() * here;
            }
        }
        x
    }
}

/// A bound of the norm of a band: the largest row sum of moduli.
fn norm<T: Scalar>(band: &Banded<T>) -> f64 {
    let mut sums = vec![0.0; band.order];
    for row in 0..band.order {
        for column in row.saturating_sub(band.width)..=row {
            let size = band.get(row, column).norm1();
            sums[row] += size;
            if column != row {
                sums[column] += size;
            }
        }
    }
    sums.into_iter().fold(0.0, f64::max)
}

/// Columns that are eliminated together.
const PANEL: usize = 4;

/// One attempt; the largest factor comes with it.
///
/// Outer products, [`PANEL`] columns at a time: each later element is read once per
/// panel, its subtractions stay in the order of the columns, and the innermost loop
/// runs over neighbours that do not wait for each other.
fn attempt<T: Scalar>(
    band: &Banded<T>,
    envelope: &Rc<Envelope>,
    shift: f64,
    floor: f64,
) -> (BandFactor<T>, f64) {
    let (n, w) = (band.order, band.width);
    let mut work = band.entries.clone();
    for diagonal in work.iter_mut().skip(w).step_by(w + 1) {
        *diagonal -= T::from_real(shift);
    }
    let mut lower = vec![T::zero(); n * w];
    let mut pivots: Vec<f64> = Vec::with_capacity(n);
    // Conjugated factors of the panel's columns, per row below its first.
    let mut factors: [Vec<T>; PANEL] = std::array::from_fn(|_| vec![T::zero(); w + PANEL]);
    let mut start = 0;
    while start < n {
        let panel = PANEL.min(n - start);
        let end = envelope.to[start + panel - 1];
        let mut inverses = [0.0; PANEL];
        // The rows of the panel itself, with its pivots.
        for row in start..start + panel {
            let below = row - start;
            let line = &work[row * (w + 1)..(row + 1) * (w + 1)];
            let own = &mut lower[row * w..(row + 1) * w];
            let elements = eliminate(below, below, (line, own), &inverses, &mut factors);
            let mut diagonal = line[w];
            for (before, factor) in elements[..below].iter().zip(&factors) {
                diagonal -= *before * factor[below];
            }
            let mut pivot = diagonal.real();
            // An exactly singular leading block: any tiny pivot of either sign is right.
            if pivot.abs() < floor {
                pivot = if pivot < 0.0 { -floor } else { floor };
            }
            pivots.push(pivot);
            inverses[below] = 1.0 / pivot;
        }
        let inner: [[T; PANEL]; PANEL] = std::array::from_fn(|k| std::array::from_fn(|c| factors[k][c]));
        for row in start + panel..end {
            let below = row - start;
            let line = &mut work[row * (w + 1)..(row + 1) * (w + 1)];
            let own = &mut lower[row * w..(row + 1) * w];
            let [e0, e1, e2, e3] = if panel == PANEL && below <= w {
                // What `eliminate` does, written out: this is where the time goes.
                let place = w - below;
                let (source, target) = (&line[place..place + PANEL], &mut own[place..place + PANEL]);
                let e0 = source[0];
                let e1 = source[1] - e0 * inner[0][1];
                let e2 = source[2] - e0 * inner[0][2] - e1 * inner[1][2];
                let e3 = source[3] - e0 * inner[0][3] - e1 * inner[1][3] - e2 * inner[2][3];
                let elements = [e0, e1, e2, e3];
                for k in 0..PANEL {
                    target[k] = elements[k].scale(inverses[k]);
                    factors[k][below] = target[k].conjugate();
                }
                elements
            } else {
                eliminate(below, panel, (line, own), &inverses, &mut factors)
            };
            let count = below + 1 - panel;
            let line = &mut line[w + 1 - count..][..count];
            let [f0, f1, f2, f3] = factors.each_ref().map(|factor| &factor[panel..][..count]);
            for k in 0..count {
                line[k] = line[k] - e0 * f0[k] - e1 * f1[k] - e2 * f2[k] - e3 * f3[k];
            }
        }
        start += panel;
    }
    let growth = lower.iter().map(|factor| factor.norm1()).fold(0.0, f64::max);
    (BandFactor { shift, width: w, lower, pivots, envelope: envelope.clone() }, growth)
}

/// The elements of one row in the first `count` columns of a panel once the columns
/// before each are taken out; their factors go into the row of `L` and into `factors`.
/// `below`: rows below the first of the panel.
fn eliminate<T: Scalar>(
    below: usize,
    count: usize,
    (line, own): (&[T], &mut [T]),
    inverses: &[f64; PANEL],
    factors: &mut [Vec<T>; PANEL],
) -> [T; PANEL] {
    let w = own.len();
    let mut elements = [T::zero(); PANEL];
    for column in 0..count {
        if below - column > w {
            factors[column][below] = T::zero();
            continue;
        }
        let place = w + column - below;
        let mut element = line[place];
        for (before, factor) in elements[..column].iter().zip(factors.iter()) {
            element -= *before * factor[column];
        }
        let factor = element.scale(inverses[column]);
        own[place] = factor;
        elements[column] = element;
        factors[column][below] = factor.conjugate();
    }
    elements
}

/// A band with what every factorisation of it needs.
pub(super) struct Pencil<'a, T> {
    band: &'a Banded<T>,
    norm: f64,
    envelope: Rc<Envelope>,
}

impl<'a, T: Scalar> Pencil<'a, T> {
    /// Looks the matrix over.
    ///
    /// # Errors
    /// If an element is not finite.
    pub(super) fn new(band: &'a Banded<T>) -> Result<Self> {
        let norm = norm(band);
        if !norm.is_finite() {
            return Err(Error::internal("a matrix element is not finite"));
        }
        Ok(Self { band, norm, envelope: Rc::new(Envelope::new(band)) })
    }

    /// Factors of `H - shift`.
    pub(super) fn factor(&self, shift: f64) -> BandFactor<T> {
        let unit = f64::EPSILON * self.norm.max(f64::MIN_POSITIVE);
        let floor = 1e-3 * unit;
        let mut best = attempt(self.band, &self.envelope, shift, floor);
        let mut nudge = unit;
        for _ in 0..14 {
            if best.1 <= GROWTH {
                break;
            }
            let next = attempt(self.band, &self.envelope, shift + nudge, floor);
            if next.1 < best.1 {
                best = next;
            }
            nudge *= -4.0;
        }
        best.0
    }

    fn apply(&self, x: &State<T>) -> State<T> {
        let (n, w) = (self.band.order, self.band.width);
        let mut out = State::zeros(n);
        let (source, target) = (x.as_slice(), out.as_mut_slice());
        for row in 0..n {
            let from = self.envelope.from[row];
            let entries = &self.band.entries[row * (w + 1) + w - (row - from)..(row + 1) * (w + 1)];
            let here = source[row];
            let mut sum = T::zero();
            for ((element, there), slot) in
                entries[..row - from].iter().zip(&source[from..row]).zip(&mut target[from..row])
            {
                sum += *element * *there;
                *slot += element.conjugate() * here;
            }
            target[row] += sum + entries[row - from] * here;
        }
        out
    }

    /// Rayleigh quotient and the norm of the residual.
    fn quotient(&self, x: &State<T>) -> (f64, f64) {
        let image = self.apply(x);
        let energy = x.dotc(&image).real();
        let mut rest = image;
        rest.axpy(-T::from_real(energy), x, T::one());
        (energy, rest.norm())
    }

    /// Polishes a state by Rayleigh-quotient iteration; ends when the residual
    /// no longer falls. `others` are kept out.
    fn polish(&self, mut x: State<T>, others: &[Eigenpair<T>]) -> Option<(f64, f64, State<T>)> {
        let clean = |x: &mut State<T>| {
            for other in others {
                let amount = other.state.dotc(x);
                x.axpy(-amount, &other.state, T::one());
            }
            let size = x.norm();
            if size > 0.0 && size.is_finite() {
                x.unscale_mut(size);
                true
            } else {
                false
            }
        };
        if !clean(&mut x) {
            return None;
        }
        let (mut energy, mut residual) = self.quotient(&x);
        let fine = 64.0 * f64::EPSILON * self.norm;
        let mut factor: Option<BandFactor<T>> = None;
        for _ in 0..16 {
            if residual <= 2.0 * f64::EPSILON * energy.abs() {
                break;
            }
            // Near convergence the last shift is as good as a new one.
            let used = match factor.take().filter(|_| residual <= fine) {
                Some(kept) => kept,
                None => self.factor(energy),
            };
            let mut next = used.solve(&x);
            factor = Some(used);
            if !clean(&mut next) {
                break;
            }
            let (e, r) = self.quotient(&next);
            // Far from a level the residual may rise for a step; near one, a
            // residual that no longer falls is rounding.
            if !r.is_finite() || (residual <= fine && r >= residual) {
                break;
            }
            let settled = residual <= fine && r > 0.3 * residual;
            (x, energy, residual) = (next, e, r);
            if settled {
                break;
            }
        }
        if residual > 1e3 * fine {
            return None;
        }
        Some((energy, residual, x))
    }

    /// `(H - energy) x = right` outside `space`; the factors are those near `energy`.
    pub(super) fn reduced(
        &self,
        factor: &BandFactor<T>,
        energy: f64,
        space: &[State<T>],
        right: &State<T>,
    ) -> State<T> {
        let project = |state: &mut State<T>| {
            for member in space {
                let amount = member.dotc(state);
                state.axpy(-amount, member, T::one());
            }
        };
        let mut rest = right.clone();
        project(&mut rest);
        let size = rest.norm();
        let mut out = State::zeros(right.len());
        let mut last = f64::INFINITY;
        for _ in 0..6 {
            let mut step = factor.solve(&rest);
            project(&mut step);
            let candidate = &out + &step;
            let mut left = right.clone();
            let mut image = self.apply(&candidate);
            image.axpy(-T::from_real(energy), &candidate, T::one());
            left -= image;
            project(&mut left);
            let now = left.norm();
            if !now.is_finite() || now >= last {
                break;
            }
            (out, rest) = (candidate, left);
            let settled = now > 0.1 * last || now <= f64::EPSILON * size;
            last = now;
            if settled {
                break;
            }
        }
        project(&mut out);
        out
    }

    /// A start that has a part along every state.
    fn start(&self, seed: usize) -> State<T> {
        let mut word = 0x9E37_79B9_7F4A_7C15_u64.wrapping_mul(seed as u64 + 1);
        State::from_fn(self.band.order, |_, _| {
            word ^= word << 13;
            word ^= word >> 7;
            word ^= word << 17;
            T::from_real(
                0.5 + (word >> 11) as f64 / (1_u64 << 53) as f64 * if word & 1 == 0 { 1.0 } else { -1.0 },
            )
        })
    }
}

/// Shifts whose counts are known, by which levels are bracketed.
pub(super) struct Ladder<'a, T> {
    pencil: Pencil<'a, T>,
    /// Ascending shifts with the number of levels below each.
    rungs: Vec<(f64, usize)>,
}

impl<'a, T: Scalar> Ladder<'a, T> {
    /// A ladder from below all levels to above them.
    ///
    /// # Errors
    /// If an element is not finite.
    pub(super) fn new(band: &'a Banded<T>) -> Result<Self> {
        let pencil = Pencil::new(band)?;
        let outside = pencil.norm * (1.0 + 1e-9) + f64::MIN_POSITIVE;
        // The lowest diagonal element bounds the lowest level from above, and gives
        // the first rungs the scale of the low levels.
        let rungs = vec![(-outside, 0), (outside, band.order)];
        Ok(Self { pencil, rungs })
    }

    pub(super) fn count(&mut self, shift: f64) -> usize {
        let factor = self.pencil.factor(shift);
        let (shift, below) = (factor.shift, factor.below());
        let place = self.rungs.partition_point(|rung| rung.0 < shift);
        // Rounding must not break the order of the ladder.
        let low = place.checked_sub(1).and_then(|idx| self.rungs.get(idx)).map_or(0, |rung| rung.1);
        let high = self.rungs.get(place).map_or(self.pencil.band.order, |rung| rung.1);
        let below = below.clamp(low, high.max(low));
        self.rungs.insert(place, (shift, below));
        below
    }

    /// The closest known bracket of a level: shifts below and above it with their counts.
    fn bracket(&self, number: usize) -> ((f64, usize), (f64, usize)) {
        let place = self.rungs.partition_point(|rung| rung.1 < number);
        let low = place
            .checked_sub(1)
            .and_then(|idx| self.rungs.get(idx))
            .copied()
            .unwrap_or((-self.pencil.norm, 0));
        let high = self.rungs.get(place).copied().unwrap_or((self.pencil.norm, self.pencil.band.order));
        (low, high)
    }

    /// A shift inside a bracket: geometric while it spans decades, so that low
    /// levels of a matrix with a huge norm are reached in few steps.
    fn inside(low: f64, high: f64) -> f64 {
        if low > 0.0 && high > 8.0 * low {
            (low * high).sqrt()
        } else if high < 0.0 && low < 8.0 * high {
            -(low * high).sqrt()
        } else if low <= 0.0 && high > 1e3 * low.abs().max(f64::MIN_POSITIVE) {
            // From zero upwards the scale is unknown: a large step down.
            if low == 0.0 { high * 1e-3 } else { 0.0 }
        } else if high == 0.0 && low < 0.0 {
            low * 1e-3
        } else {
            0.5 * (low + high)
        }
    }

    /// The level with this number; `found` are the ones below it in the same narrow
    /// cluster, which the new state is kept orthogonal to.
    ///
    /// # Errors
    /// If no state can be found, which only a matrix that is not finite explains.
    pub(super) fn level(&mut self, number: usize, found: &[Eigenpair<T>]) -> Result<Eigenpair<T>> {
        let narrow = 4.0 * f64::EPSILON * self.pencil.norm;
        let mut tries = 0;
        let mut last = (f64::NAN, f64::NAN);
        let mut idle = 0_usize;
        for step in 0..400 {
            let (low, high) = self.bracket(number);
            let alone = high.1 == low.1 + 1;
            let width = high.0 - low.0;
            let near = alone && (step > 60 || width < 0.3 * low.0.abs().max(high.0.abs()) || tries > 0);
            // Where every shift inside is moved out again, a level sits on the spot.
            idle = if last == (low.0, high.0) { idle + 1 } else { 0 };
            let stuck = width <= narrow || idle > SPLITS.len();
            last = (low.0, high.0);
            if near || stuck {
                let middle = 0.5 * (low.0 + high.0);
                let factor = self.pencil.factor(middle);
                let mut x = self.pencil.start(number);
                for _ in 0..3 {
                    x = factor.solve(&x);
                    for other in found {
                        let amount = other.state.dotc(&x);
                        x.axpy(-amount, &other.state, T::one());
                    }
                    let size = x.norm();
                    if !(size.is_finite() && size > 0.0) {
                        return Err(Error::internal("an inverse iteration left no state"));
                    }
                    x.unscale_mut(size);
                }
                let cluster: Vec<Eigenpair<T>> = found
                    .iter()
                    .filter(|other| (other.energy - middle).abs() <= 100.0 * narrow.max(width))
                    .cloned()
                    .collect();
                if let Some((energy, residual, state)) = self.pencil.polish(x, &cluster) {
                    let slack = residual.max(narrow);
                    if stuck || (energy > low.0 - slack && energy < high.0 + slack) {
                        return Ok(Eigenpair { number, energy, state });
                    }
                }
                tries += 1;
            }
            let shift = match idle.checked_sub(1).and_then(|idx| SPLITS.get(idx)) {
                Some(split) => low.0 + split * width,
                None => Self::inside(low.0, high.0),
            };
            if shift > low.0 && shift < high.0 {
                self.count(shift);
            }
        }
        Err(Error::internal("a level could not be bracketed"))
    }

    /// The energy of a level to within a tenth of its size or of the matrix's
    /// rounding, by counts alone.
    pub(super) fn rough(&mut self, number: usize) -> f64 {
        for _ in 0..60 {
            let (low, high) = self.bracket(number);
            let width = high.0 - low.0;
            let shift = Self::inside(low.0, high.0);
            let done = width <= 0.1 * low.0.abs().max(high.0.abs()) || shift <= low.0 || shift >= high.0;
            if done {
                break;
            }
            self.count(shift);
        }
        let (low, high) = self.bracket(number);
        0.5 * (low.0 + high.0)
    }

    /// The lowest `count` levels: all at once by Lanczos iteration on the inverse
    /// where that is certified, else one by one.
    ///
    /// # Errors
    /// As [`Ladder::level`].
    pub(super) fn lowest(&mut self, count: usize) -> Result<Vec<Eigenpair<T>>> {
        let count = count.min(self.pencil.band.order);
        if let Some(found) = self.lanczos(count) {
            return Ok(found);
        }
        let mut found: Vec<Eigenpair<T>> = Vec::with_capacity(count);
        for number in 1..=count {
            // Only near neighbours can contaminate a state.
            let from = found.len().saturating_sub(8);
            let pair = self.level(number, &found[from..])?;
            found.push(pair);
        }
        Ok(found)
    }

    /// Lanczos iteration on `(H - shift)^(-1)`, the shift a little below all levels,
    /// with full orthogonalisation; every state is polished, and the count of levels
    /// below the last one certifies that none was missed. `None` where it was not.
    fn lanczos(&mut self, count: usize) -> Option<Vec<Eigenpair<T>>> {
        let order = self.pencil.band.order;
        let steps = (2 * count + 16).min(order);
        self.rough(1);
        let shift = self.bracket(1).0.0;
        let factor = self.pencil.factor(shift);
        if factor.below() > 0 {
            return None;
        }
        let mut basis: Vec<State<T>> = Vec::with_capacity(steps);
        let mut next = self.pencil.start(1);
        next.unscale_mut(next.norm());
        let (mut diagonal, mut beside) = (Vec::with_capacity(steps), Vec::with_capacity(steps));
        for _ in 0..steps {
            let mut image = factor.solve(&next);
            diagonal.push(next.dotc(&image).real());
            basis.push(next);
            // Twice is enough.
            for _ in 0..2 {
                for member in &basis {
                    let amount = member.dotc(&image);
                    image.axpy(-amount, member, T::one());
                }
            }
            let size = image.norm();
            if !size.is_finite() {
                return None;
            }
            if size <= 1e-14 * diagonal[0].abs() {
                break;
            }
            beside.push(size);
            image.unscale_mut(size);
            next = image;
        }
        let size = basis.len();
        let small = nalgebra::DMatrix::from_fn(size, size, |row, column| match row.abs_diff(column) {
            0 => diagonal[row],
            1 => beside[row.min(column)],
            _ => 0.0,
        });
        let eigen = nalgebra::SymmetricEigen::try_new(small, f64::EPSILON, 100 * size)?;
        let mut ranks: Vec<usize> = (0..size).collect();
        ranks.sort_by(|&a, &b| eigen.eigenvalues[b].total_cmp(&eigen.eigenvalues[a]));
        let mut found: Vec<Eigenpair<T>> = Vec::with_capacity(count);
        for &rank in ranks.iter().take(count) {
            let mut state = State::zeros(order);
            for (member, &part) in basis.iter().zip(eigen.eigenvectors.column(rank).iter()) {
                state.axpy(T::from_real(part), member, T::one());
            }
            let (energy, _, state) = self.pencil.polish(state, &[])?;
            found.push(Eigenpair { number: found.len() + 1, energy, state });
        }
        if found.len() < count {
            return None;
        }
        found.sort_by(|a, b| a.energy.total_cmp(&b.energy));
        let narrow = 4.0 * f64::EPSILON * self.pencil.norm;
        for (idx, pair) in found.iter_mut().enumerate() {
            pair.number = idx + 1;
        }
        // Twice the same level, or states that polishing threw together, are no proof.
        let apart = found.windows(2).all(|two| {
            two[1].energy - two[0].energy > 100.0 * narrow && two[0].state.dotc(&two[1].state).norm1() < 1e-8
        });
        let last = found.last()?.energy;
        let certified =
            apart && self.count(last + 2.0 * narrow) == count && self.count(last - 2.0 * narrow) + 1 == count;
        certified.then_some(found)
    }

    /// The level that a warm start leads to, with its number certified by counts
    /// on both sides; `None` if the start led astray.
    pub(super) fn near(&mut self, guess: &State<T>) -> Option<Eigenpair<T>> {
        let (energy, residual, state) = self.pencil.polish(guess.clone(), &[])?;
        if state.dotc(guess).modulus_squared() < 0.5 * guess.norm_squared() {
            return None;
        }
        let narrow = 4.0 * f64::EPSILON * self.pencil.norm;
        let slack = (4.0 * residual).max(2.0 * narrow);
        let below = self.count(energy - slack);
        let above = self.count(energy + slack);
        (above == below + 1).then_some(Eigenpair { number: above, energy, state })
    }

    /// The levels that warm starts lead to, where `window` is known to hold just as
    /// many levels as there are starts, numbered from `first`; `None` if a start led astray.
    pub(super) fn within(
        &mut self,
        first: usize,
        guesses: &[State<T>],
        window: (f64, f64),
    ) -> Option<Vec<Eigenpair<T>>> {
        let narrow = 4.0 * f64::EPSILON * self.pencil.norm;
        let mut found = Vec::with_capacity(guesses.len());
        for guess in guesses {
            let (energy, residual, state) = self.pencil.polish(guess.clone(), &[])?;
            let slack = (4.0 * residual).max(2.0 * narrow);
            if !(energy - slack > window.0 && energy + slack < window.1) {
                return None;
            }
            found.push(Eigenpair { number: first, energy, state });
        }
        found.sort_by(|a, b| a.energy.total_cmp(&b.energy));
        for (idx, pair) in found.iter_mut().enumerate() {
            pair.number = first + idx;
        }
        let apart = found.windows(2).all(|two| two[1].energy - two[0].energy > 100.0 * narrow);
        apart.then_some(found)
    }

    /// A lower bound of the distance from a level to its nearest neighbour, no better than
    /// a few counts give it; 0 if there is hardly any.
    pub(super) fn apart(&mut self, pair: &Eigenpair<T>) -> f64 {
        let narrow = 8.0 * f64::EPSILON * self.pencil.norm;
        let mut g = pair.energy.abs();
        while g > narrow {
            let alone = (pair.number == 1 || self.count(pair.energy - g) == pair.number - 1)
                && (pair.number == self.pencil.band.order || self.count(pair.energy + g) == pair.number);
            if alone {
                return g;
            }
            g *= 0.25;
        }
        0.0
    }

    /// A lower bound, within a fifth, of the distance from a level to its nearest
    /// neighbour; `hint` is where the search starts.
    pub(super) fn gap(&mut self, pair: &Eigenpair<T>, hint: f64) -> f64 {
        let order = self.pencil.band.order;
        let alone = |g: f64, this: &mut Self| {
            (pair.number == 1 || this.count(pair.energy - g) == pair.number - 1)
                && (pair.number == order || this.count(pair.energy + g) == pair.number)
        };
        if order == 1 {
            return f64::INFINITY;
        }
        let narrow = 8.0 * f64::EPSILON * self.pencil.norm;
        let mut g =
            if hint.is_finite() && hint > narrow { hint } else { pair.energy.abs().max(1e3 * narrow) };
        let (mut good, mut bad) = (0.0, f64::INFINITY);
        for _ in 0..60 {
            if alone(g, self) {
                good = g;
            } else {
                bad = g;
            }
            if bad <= narrow {
                return 0.0;
            }
            if good > 0.0 && bad <= 1.2 * good {
                break;
            }
            g = if bad.is_infinite() {
                2.0 * good
            } else if good == 0.0 {
                0.3 * bad
            } else {
                0.5 * (good + bad)
            };
            if g > 2.0 * self.pencil.norm {
                break;
            }
        }
        good
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;
    use crate::pencil::{Hermitian, spectrum};

    fn toeplitz(n: usize) -> Banded<f64> {
        let mut band = Banded::zeros(n, 1);
        for row in 0..n {
            band.add(row, row, 2.0);
            if row > 0 {
                band.add(row, row - 1, -1.0);
            }
        }
        band
    }

    /// Levels of the second-difference matrix, 2 - 2 cos(k pi/(n + 1)): a
    /// textbook closed form (common practice, no source).
    #[test]
    fn second_differences_have_their_closed_form_levels() {
        let n = 200;
        let band = toeplitz(n);
        let found = Ladder::new(&band).unwrap().lowest(20).unwrap();
        for pair in &found {
            let turn = std::f64::consts::PI * pair.number as f64 / (n as f64 + 1.0);
            assert!((pair.energy - (2.0 - 2.0 * turn.cos())).abs() < 1e-14, "{}", pair.number);
        }
        let high = Ladder::new(&band).unwrap().level(150, &[]).unwrap();
        let turn = std::f64::consts::PI * 150.0 / (n as f64 + 1.0);
        assert!((high.energy - (2.0 - 2.0 * turn.cos())).abs() < 1e-14);
        let gap = Ladder::new(&band).unwrap().gap(&found[3], 1e-9);
        let exact = found[3].energy - found[2].energy;
        assert!(gap <= exact && gap > 0.8 * exact, "{gap} {exact}");
    }

    /// Two copies of one chain: every level twice.
    #[test]
    fn doubled_levels_are_found_twice_with_orthogonal_states() {
        let n = 40;
        let one = toeplitz(n);
        let mut band = Banded::zeros(2 * n, 2);
        for row in 0..n {
            for copy in 0..2 {
                band.add(2 * row + copy, 2 * row + copy, one.get(row, row));
                if row > 0 {
                    band.add(2 * row + copy, 2 * (row - 1) + copy, one.get(row, row - 1));
                }
            }
        }
        let found = Ladder::new(&band).unwrap().lowest(6).unwrap();
        for (idx, pair) in found.iter().enumerate() {
            let turn = std::f64::consts::PI * (idx / 2 + 1) as f64 / (n as f64 + 1.0);
            assert!((pair.energy - (2.0 - 2.0 * turn.cos())).abs() < 1e-13, "{idx}: {}", pair.energy);
            for other in &found[..idx] {
                assert!(pair.state.dot(&other.state).abs() < 1e-9, "{idx} {}", other.number);
            }
        }
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(64))]

        #[test]
        fn random_bands_agree_with_full_diagonalisation(
            entries in proptest::collection::vec(-1.0f64..1.0, 30 * 5),
            number in 1usize..30,
        ) {
            let mut band = Banded::zeros(30, 4);
            for row in 0..30usize {
                for column in row.saturating_sub(4)..=row {
                    band.add(row, column, entries[row * 5 + (row - column)]);
                }
            }
            let all = spectrum(&Hermitian::Dense(Hermitian::Banded(band.clone()).to_dense())).unwrap();
            let mut ladder = Ladder::new(&band).unwrap();
            let pair = ladder.level(number, &[]).unwrap();
            let exact = &all[number - 1];
            prop_assert!((pair.energy - exact.energy).abs() < 1e-12, "{number}: {:e} {:e} {:?}", pair.energy, exact.energy, ladder.rungs);
            // Below, all other levels are far enough for the states to agree.
            let apart = all.iter().filter(|o| o.number != number).map(|o| (o.energy - exact.energy).abs()).fold(9.0, f64::min);
            prop_assume!(apart > 1e-6);
            prop_assert!((pair.state.dot(&exact.state).abs() - 1.0).abs() < 1e-6);
            let right = State::from_fn(30, |row, _| ((row * 7 % 11) as f64) - 4.0);
            let factor = ladder.pencil.factor(pair.energy);
            let space = std::slice::from_ref(&pair.state);
            let solved = ladder.pencil.reduced(&factor, pair.energy, space, &right);
            let mut expected = State::zeros(30);
            for other in all.iter().filter(|o| o.number != number) {
                expected.axpy(other.state.dot(&right) / (other.energy - exact.energy), &other.state, 1.0);
            }
            prop_assert!((solved - &expected).norm() < 1e-8 * expected.norm() / apart.min(1.0));
        }
    }
}
