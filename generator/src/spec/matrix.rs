//! Matrices written in the spec or in files.

use nalgebra::DMatrix;

use super::matrix_file::{self, Grid};
use super::raw::{self, Entry};
use super::scope::{Bare, Scope};
use super::{Files, Matrix};
use crate::diagnostic::Place;
use crate::model::C64;
use crate::units::Unit;

/// Largest order.
const LARGEST: usize = 4_096;

/// Hermitian within this share of the norm.
const HERMITIAN: f64 = 1e-12;

pub fn matrix(scope: &Scope<'_>, files: &Files, path: &str, raw: &raw::System) -> Option<Matrix> {
    let unit = scope.unit(&format!("{path}.unit"), raw.unit.as_ref()?)?;
    if crate::units::EnergyKind::of(unit.dimension).is_none() {
        scope.problem(
            scope
                .wrong("dimension", &format!("{path}.unit"), "a Hamiltonian is an energy in some form")
                .found(unit.dimension.describe())
                .expected("a unit of energy, frequency, wavenumber or temperature, or 1"),
        );
        return None;
    }
    let mut h: Vec<DMatrix<C64>> = Vec::new();
    let mut places: Vec<Place> = Vec::new();
    let mut good = true;
    let highest = raw.matrices().iter().rposition(Option::is_some).unwrap_or(0);
    for (power, matrix) in raw.matrices().into_iter().enumerate().take(highest + 1) {
        let path = format!("{path}.h{power}");
        let Some(matrix) = matrix else {
            // A power that is not written is zero.
            let order = h.first().map_or(0, DMatrix::nrows);
            h.push(DMatrix::zeros(order, order));
            places.push(scope.key_place(&path));
            continue;
        };
        let grid = match matrix {
            raw::Matrix::Rows(rows) => inline(scope, &path, rows, &element_unit(scope, &unit, power)),
            raw::Matrix::File(name) => file(scope, files, &path, &name.0),
        };
        // What follows is measured by the first matrix, so the first mistake ends it.
        let grid = grid?;
        let place = match matrix {
            raw::Matrix::Rows(_) => scope.key_place(&path),
            raw::Matrix::File(_) => scope.place(&format!("{path}.file")),
        };
        let checked = square(scope, &path, grid, h.first().map(DMatrix::nrows))?;
        good &= hermitian(scope, &path, &checked, &unit);
        h.push(checked);
        places.push(place);
    }
    good.then_some(Matrix { unit, h, places })
}

/// Unit of the elements of one power of the control.
fn element_unit(scope: &Scope<'_>, unit: &Unit, power: usize) -> Unit {
    match (&scope.control, power) {
        (Some(control), 1..) => {
            let mut dimension = unit.dimension;
            let (mut mantissa, mut exponent) = (unit.mantissa, unit.exponent);
            for _ in 0..power {
                dimension = dimension.over(control.unit.dimension).unwrap_or(dimension);
                mantissa /= control.unit.mantissa;
                exponent -= control.unit.exponent;
            }
            let symbol = format!("{}/({})^{power}", unit.symbol, control.unit.symbol);
            Unit { symbol, dimension, mantissa, exponent }
        }
        _ => unit.clone(),
    }
}

fn inline(scope: &Scope<'_>, path: &str, rows: &[Vec<Entry>], unit: &Unit) -> Option<Grid> {
    let mut out = Vec::new();
    let mut good = true;
    for (i, row) in rows.iter().enumerate() {
        let mut line = Vec::new();
        for (j, entry) in row.iter().enumerate() {
            let path = format!("{path}[{i}][{j}]");
            let number = |path: &str, scalar| scope.number(path, scalar, unit, Bare::InUnit);
            let value = match entry {
                Entry::One(scalar) => number(&path, scalar).map(|re| C64::new(re, 0.0)),
                Entry::List(list) => match list.as_slice() {
                    [re, im] => number(&format!("{path}[0]"), re)
                        .zip(number(&format!("{path}[1]"), im))
                        .map(|(re, im)| C64::new(re, im)),
                    _ => {
                        scope.problem(
                            scope
                                .wrong("wrong-form", &path, "a complex entry has two numbers")
                                .expected("`[re, im]`"),
                        );
                        None
                    }
                },
            };
            good &= value.is_some();
            line.extend(value);
        }
        out.push(line);
    }
    good.then_some(Grid { rows: out })
}

fn file(scope: &Scope<'_>, files: &Files, path: &str, name: &str) -> Option<Grid> {
    let Some(file) = files.get(name) else {
        scope.problem(scope.wrong("no-file", &format!("{path}.file"), "this file was not read"));
        return None;
    };
    match matrix_file::read(&file.shown, &file.bytes, name, LARGEST) {
        Ok(grid) => Some(grid),
        Err(error) => {
            error.diagnostics().iter().for_each(|one| scope.problem(one.clone()));
            None
        }
    }
}

fn square(scope: &Scope<'_>, path: &str, grid: Grid, order: Option<usize>) -> Option<DMatrix<C64>> {
    let count = grid.rows.len();
    let wrong = grid.rows.iter().find(|row| row.len() != count);
    let fault = if count == 0 {
        scope.wrong("not-square", path, "the matrix is empty")
    } else if count > LARGEST {
        scope
            .wrong("too-large", path, "the matrix is too large")
            .found(format!("order {count}"))
            .expected(format!("at most {LARGEST}"))
    } else if let Some(row) = wrong {
        scope
            .wrong("not-square", path, "the matrix is not square")
            .found(format!("{count} rows, one of them with {} entries", row.len()))
    } else if order.is_some_and(|order| order != count) {
        scope
            .wrong("order", path, "the matrices differ in order")
            .found(format!("order {count}"))
            .expected(format!("order {}, as `h0`", order.unwrap_or(0)))
    } else {
        return Some(DMatrix::from_row_iterator(count, count, grid.rows.into_iter().flatten()));
    };
    scope.problem(fault);
    None
}

fn hermitian(scope: &Scope<'_>, path: &str, matrix: &DMatrix<C64>, unit: &Unit) -> bool {
    // The largest element sets the scale of the sum, so that nothing overflows.
    let largest = matrix.iter().fold(0.0_f64, |most, x| most.max(x.re.abs()).max(x.im.abs()));
    if largest == 0.0 {
        return true;
    }
    let sum: f64 = matrix.iter().map(|x| (x / largest).norm_sqr()).sum();
    let limit = HERMITIAN * largest * sum.sqrt();
    let order = matrix.nrows();
    let mut worst = (0.0, 0, 0);
    for j in 0..order {
        for i in 0..=j {
            let (a, b) = (matrix[(i, j)], matrix[(j, i)].conj());
            let difference = (a.re - b.re).abs().max((a.im - b.im).abs());
            if difference > worst.0 {
                worst = (difference, i, j);
            }
        }
    }
    let (difference, i, j) = worst;
    if difference <= limit {
        return true;
    }
    let shown = |x: C64| format!("{}{:+}i", x.re, x.im);
    scope.problem(
        scope
            .wrong("not-hermitian", path, "the matrix is not Hermitian")
            .found(format!(
                "row {}, column {} is {}, row {}, column {} is {} ({})",
                i + 1,
                j + 1,
                shown(matrix[(i, j)]),
                j + 1,
                i + 1,
                shown(matrix[(j, i)]),
                unit.symbol
            ))
            .expected("each element the complex conjugate of its mirror image, within 1e-12 of the norm"),
    );
    false
}
