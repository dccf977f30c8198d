//! A model that is a sum of functions of the control times fixed matrices.

use std::cell::OnceCell;

use crate::expr::Tree;
use crate::model::{HIGHEST_POWER, Model};
use crate::pencil::{self, Banded, Hermitian, Scalar};

/// Share of the scale below which two levels are one.
const DEGENERATE: f64 = 1e-12;

/// Levels that set the scale of an infinite basis.
const LISTED: usize = 12;

/// One matrix with its function of the control.
#[derive(Clone, Debug)]
pub(super) struct Term<T> {
    /// `None` for 1.
    pub coefficient: Option<Tree>,
    /// Rows of (column, element), both triangles, exactly Hermitian.
    pub rows: Vec<Vec<(usize, T)>>,
}

/// What is known of one term's matrix.
struct Shape {
    width: usize,
    /// Diagonal and the sum of the other moduli, by rows.
    discs: Vec<(f64, f64)>,
}

/// The model.
pub(super) struct Terms<T: Scalar> {
    at: f64,
    order: usize,
    terms: Vec<Term<T>>,
    shapes: Vec<Shape>,
    expansion: Vec<Hermitian<T>>,
    infinite: bool,
    parity: Option<String>,
    scale: OnceCell<f64>,
}

impl<T: Scalar> Terms<T> {
    pub fn new(at: f64, order: usize, terms: Vec<Term<T>>, infinite: bool, parity: Option<String>) -> Self {
        let shapes = terms
            .iter()
            .map(|term| {
                let mut width = 0;
                let discs = term
                    .rows
                    .iter()
                    .enumerate()
                    .map(|(row, list)| {
                        let (mut centre, mut radius) = (0.0, 0.0);
                        for &(column, x) in list {
                            width = width.max(row.abs_diff(column));
                            if column == row {
                                centre += x.real();
                            } else {
                                radius += x.modulus();
                            }
                        }
                        (centre, radius)
                    })
                    .collect();
                Shape { width, discs }
            })
            .collect();
        let mut out = Self {
            at,
            order,
            terms,
            shapes,
            expansion: Vec::new(),
            infinite,
            parity,
            scale: OnceCell::new(),
        };
        let series = out.series(at);
        out.expansion = (0..=HIGHEST_POWER)
            .map(|power| out.combined(&series.iter().map(|one| one[power]).collect::<Vec<_>>()))
            .collect();
        out
    }

    /// Taylor coefficients of every function of the control.
    fn series(&self, control: f64) -> Vec<[f64; HIGHEST_POWER + 1]> {
        self.terms
            .iter()
            .map(|term| match &term.coefficient {
                None => [1.0, 0.0, 0.0, 0.0, 0.0],
                Some(tree) => tree.taylor(control, f64::NAN),
            })
            .collect()
    }

    /// The sum of all matrices with these weights.
    fn combined(&self, weights: &[f64]) -> Hermitian<T> {
        let used = || self.terms.iter().zip(&self.shapes).zip(weights).filter(|(_, weight)| **weight != 0.0);
        if used().next().is_none() {
            return Hermitian::Zero(self.order);
        }
        let width = used().map(|((_, shape), _)| shape.width).max().unwrap_or(0);
        if width == 0 {
            let mut entries = vec![0.0; self.order];
            for ((term, _), &weight) in used() {
                for (entry, row) in entries.iter_mut().zip(&term.rows) {
                    for (_, x) in row {
                        *entry += weight * x.real();
                    }
                }
            }
            return Hermitian::Diagonal(entries);
        }
        // A band pays where it is narrow; wider ones fill up in the factorisation anyway.
        if width <= 2 || width * 6 <= self.order {
            let mut band = Banded::zeros(self.order, width);
            for ((term, _), &weight) in used() {
                for (row, list) in term.rows.iter().enumerate() {
                    for &(column, x) in list.iter().filter(|(column, _)| *column <= row) {
                        band.add(row, column, x.scale(weight));
                    }
                }
            }
            return Hermitian::Banded(band);
        }
        let mut dense = nalgebra::DMatrix::zeros(self.order, self.order);
        for ((term, _), &weight) in used() {
            for (row, list) in term.rows.iter().enumerate() {
                for &(column, x) in list {
                    dense[(row, column)] += x.scale(weight);
                }
            }
        }
        Hermitian::Dense(dense)
    }

    fn weights(&self, of: impl Fn(&Tree) -> f64, constant: f64) -> Vec<f64> {
        self.terms.iter().map(|term| term.coefficient.as_ref().map_or(constant, &of)).collect()
    }
}

impl<T: Scalar> Model<T> for Terms<T> {
    fn order(&self) -> usize {
        self.order
    }

    fn at(&self) -> f64 {
        self.at
    }

    fn expansion(&self, power: usize) -> &Hermitian<T> {
        &self.expansion[power.min(HIGHEST_POWER)]
    }

    fn hamiltonian(&self, control: f64) -> Hermitian<T> {
        self.combined(&self.weights(|tree| tree.value(control, f64::NAN), 1.0))
    }

    fn change(&self, control: f64) -> Hermitian<T> {
        self.combined(&self.weights(|tree| tree.change(self.at, control, f64::NAN), 0.0))
    }

    fn slope(&self, control: f64) -> Hermitian<T> {
        self.combined(&self.weights(|tree| tree.taylor(control, f64::NAN)[1], 0.0))
    }

    /// Gershgorin discs of the sum, each radius the sum of the terms' radii.
    fn rates(&self, control: f64) -> [f64; HIGHEST_POWER] {
        let series = self.series(control);
        std::array::from_fn(|idx| {
            let (mut lowest, mut highest) = (f64::INFINITY, f64::NEG_INFINITY);
            for row in 0..self.order {
                let (mut centre, mut radius) = (0.0, 0.0);
                for (shape, weights) in self.shapes.iter().zip(&series) {
                    let weight = weights[idx + 1];
                    let (x, r) = shape.discs.get(row).copied().unwrap_or((0.0, 0.0));
                    centre += weight * x;
                    radius += weight.abs() * r;
                }
                lowest = lowest.min(centre - radius);
                highest = highest.max(centre + radius);
            }
            if highest >= lowest { 0.5 * (highest - lowest) } else { 0.0 }
        })
    }

    fn parity(&self) -> Option<String> {
        self.parity.clone()
    }

    fn degeneracy_scale(&self) -> f64 {
        *self.scale.get_or_init(|| {
            let (low, high) = self.expansion[0].bounds();
            let mut spread = high - low;
            if self.infinite
                && let Ok(levels) = pencil::lowest(&self.expansion[0], LISTED)
                && let (Some(first), Some(last)) = (levels.first(), levels.last())
                && last.energy > first.energy
            {
                spread = last.energy - first.energy;
            }
            // Equal levels count as degenerate even where H0 has no spread at all.
            (DEGENERATE * spread).max(f64::MIN_POSITIVE)
        })
    }
}
