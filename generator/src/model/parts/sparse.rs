//! Sparse complex matrices: rows of (column, element), columns ascending.
//!
//! Elements that are exactly zero are never stored. Sums run in the order of the
//! rows, so one input gives one set of bits.

use crate::model::C64;

/// A square sparse matrix.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Sparse {
    pub rows: Vec<Vec<(usize, C64)>>,
}

/// True for an element that is stored.
fn stored(x: C64) -> bool {
    x.re != 0.0 || x.im != 0.0
}

/// Adds up sparse rows, given in any order.
pub(super) struct RowSum {
    sums: Vec<C64>,
    touched: Vec<usize>,
    marked: Vec<bool>,
}

impl RowSum {
    pub fn new(order: usize) -> Self {
        Self { sums: vec![C64::new(0.0, 0.0); order], touched: Vec::new(), marked: vec![false; order] }
    }

    pub fn add(&mut self, column: usize, element: C64) {
        if let (Some(sum), Some(mark)) = (self.sums.get_mut(column), self.marked.get_mut(column)) {
            if !*mark {
                *mark = true;
                self.touched.push(column);
            }
            *sum += element;
        }
    }

    /// The row so far; ready for the next one afterwards.
    pub fn take(&mut self) -> Vec<(usize, C64)> {
        self.touched.sort_unstable();
        let mut row = Vec::with_capacity(self.touched.len());
        for &column in &self.touched {
            if let (Some(sum), Some(mark)) = (self.sums.get_mut(column), self.marked.get_mut(column)) {
                if stored(*sum) {
                    row.push((column, *sum));
                }
                *sum = C64::new(0.0, 0.0);
                *mark = false;
            }
        }
        self.touched.clear();
        row
    }
}

impl Sparse {
    pub fn zero(order: usize) -> Self {
        Self { rows: vec![Vec::new(); order] }
    }

    /// From its elements; zeros are dropped.
    pub fn from_fn(order: usize, element: impl Fn(usize, usize) -> C64) -> Self {
        let rows = (0..order)
            .map(|row| {
                (0..order).map(|column| (column, element(row, column))).filter(|(_, x)| stored(*x)).collect()
            })
            .collect();
        Self { rows }
    }

    /// From a real diagonal.
    pub fn diagonal(entries: impl IntoIterator<Item = f64>) -> Self {
        let rows = entries
            .into_iter()
            .enumerate()
            .map(|(idx, x)| if x == 0.0 { Vec::new() } else { vec![(idx, C64::new(x, 0.0))] })
            .collect();
        Self { rows }
    }

    pub fn identity(order: usize) -> Self {
        Self::diagonal(std::iter::repeat_n(1.0, order))
    }

    pub fn order(&self) -> usize {
        self.rows.len()
    }

    pub fn scaled(&self, factor: C64) -> Self {
        let rows = self
            .rows
            .iter()
            .map(|row| {
                row.iter().map(|&(column, x)| (column, x * factor)).filter(|(_, x)| stored(*x)).collect()
            })
            .collect();
        Self { rows }
    }

    pub fn plus(&self, other: &Self) -> Self {
        let mut sum = RowSum::new(self.order());
        let rows = self
            .rows
            .iter()
            .zip(&other.rows)
            .map(|(a, b)| {
                a.iter().chain(b).for_each(|&(column, x)| sum.add(column, x));
                sum.take()
            })
            .collect();
        Self { rows }
    }

    pub fn times(&self, other: &Self) -> Self {
        let mut sum = RowSum::new(self.order());
        let rows = self
            .rows
            .iter()
            .map(|row| {
                for &(middle, x) in row {
                    for &(column, y) in other.rows.get(middle).map_or(&[][..], Vec::as_slice) {
                        sum.add(column, x * y);
                    }
                }
                sum.take()
            })
            .collect();
        Self { rows }
    }

    pub fn adjoint(&self) -> Self {
        let mut rows = vec![Vec::new(); self.order()];
        for (row, list) in self.rows.iter().enumerate() {
            for &(column, x) in list {
                if let Some(target) = rows.get_mut(column) {
                    target.push((row, x.conj()));
                }
            }
        }
        Self { rows }
    }

    pub fn get(&self, row: usize, column: usize) -> C64 {
        self.rows
            .get(row)
            .and_then(|list| list.binary_search_by_key(&column, |&(c, _)| c).ok().and_then(|at| list.get(at)))
            .map_or(C64::new(0.0, 0.0), |&(_, x)| x)
    }

    /// All elements as (row, column, element).
    pub fn elements(&self) -> impl Iterator<Item = (usize, usize, C64)> + '_ {
        self.rows
            .iter()
            .enumerate()
            .flat_map(|(row, list)| list.iter().map(move |&(column, x)| (row, column, x)))
    }

    /// Largest modulus of an element.
    pub fn largest(&self) -> f64 {
        self.elements().map(|(_, _, x)| modulus(x)).fold(0.0, f64::max)
    }

    /// Rows and columns from `start` on, `order` of them.
    pub fn cut(&self, start: usize, order: usize) -> Self {
        let rows = self
            .rows
            .iter()
            .skip(start)
            .take(order)
            .map(|row| {
                row.iter()
                    .filter(|(column, _)| (start..start + order).contains(column))
                    .map(|&(column, x)| (column - start, x))
                    .collect()
            })
            .collect();
        Self { rows }
    }
}

/// Modulus, without the system's hypot.
pub(super) fn modulus(x: C64) -> f64 {
    libm::hypot(x.re, x.im)
}
