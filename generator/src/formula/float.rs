//! A formula in binary floating point.

use shiftwright_runtime::{double, single};

use super::bound::{self, Binary, DOUBLE, SINGLE};
use super::{Formula, Numbers, OwnRange, empty};
use crate::diagnostic::{Diagnostic, Error, Place, Result};
use crate::form::Form;
use crate::outcome::{ControlOutcome, FormulaOutcome, Valid, ValueKind};

/// The closed form as the file evaluates it.
#[derive(Clone, Debug, PartialEq)]
pub enum FloatForm {
    /// Coefficients by rising power.
    Polynomial(Vec<f64>),
    /// Mean and squared half gap.
    Paired {
        /// Coefficients of the mean.
        mean: Vec<f64>,
        /// Coefficients of the squared half gap.
        half_gap_squared: Vec<f64>,
        /// True for plus.
        upper: bool,
    },
}

/// A formula in floating point.
#[derive(Clone, Debug, PartialEq)]
pub struct Float {
    /// Operating point.
    pub at: f64,
    /// Lower end of the range.
    pub from: f64,
    /// Upper end of the range.
    pub to: f64,
    /// Level at the operating point, formula's unit, a double in every format.
    pub e0: f64,
    /// The rounding bound in this format, rounded up.
    pub rounding: f64,
    /// The closed form.
    pub form: FloatForm,
    /// Stretches of the range for the inverses; singles are held as doubles.
    pub branches: double::Branches,
}

impl Float {
    /// The numbers of the record's entry.
    #[must_use]
    pub fn coefficients(&self) -> serde_json::Value {
        match &self.form {
            FloatForm::Polynomial(c) => serde_json::json!(c),
            FloatForm::Paired { mean, half_gap_squared, upper } => serde_json::json!({
                "mean": mean,
                "half_gap_squared": half_gap_squared,
                "sign": if *upper { 1 } else { -1 },
            }),
        }
    }

    /// Powers up to the highest that is not zero; 0 for a constant.
    #[must_use]
    pub fn degree(&self) -> usize {
        match &self.form {
            FloatForm::Polynomial(c) => c.iter().rposition(|c| *c != 0.0).unwrap_or(0),
            FloatForm::Paired { mean, .. } => mean.len().saturating_sub(1),
        }
    }

    /// True if the inverse needs a search rather than a closed form.
    #[must_use]
    pub fn searches(&self) -> bool {
        matches!(self.form, FloatForm::Paired { .. }) || self.degree() > 2 || self.degree() == 0
    }

    /// True if the file needs the square root.
    #[must_use]
    pub fn roots(&self) -> bool {
        matches!(self.form, FloatForm::Paired { .. }) || self.degree() == 2
    }
}

/// Double precision.
pub fn double(
    measured: &FormulaOutcome,
    control: &ControlOutcome,
    place: Option<&Place>,
    own_range: OwnRange<'_>,
) -> Result<Formula> {
    build(measured, control, place, own_range, DOUBLE)
}

/// Single precision.
pub fn single(
    measured: &FormulaOutcome,
    control: &ControlOutcome,
    place: Option<&Place>,
    own_range: OwnRange<'_>,
) -> Result<Formula> {
    build(measured, control, place, own_range, SINGLE)
}

fn build(
    measured: &FormulaOutcome,
    control: &ControlOutcome,
    place: Option<&Place>,
    own_range: OwnRange<'_>,
    binary: Binary,
) -> Result<Formula> {
    let wide = binary.digits == DOUBLE.digits;
    let held = |c: &f64| if wide { *c } else { f64::from(*c as f32) };
    let all = |list: &[f64]| list.iter().map(held).collect::<Vec<f64>>();
    let at = held(&control.at);
    let form = match &measured.form {
        Form::Polynomial { coefficients } => FloatForm::Polynomial(all(coefficients)),
        Form::Paired { mean, half_gap_squared, sign, .. } => {
            FloatForm::Paired { mean: all(mean), half_gap_squared: all(half_gap_squared), upper: *sign > 0.0 }
        }
    };
    let finite = match &form {
        FloatForm::Polynomial(c) => c.iter().all(|c| c.is_finite()),
        FloatForm::Paired { mean, half_gap_squared, .. } => {
            mean.iter().chain(half_gap_squared).all(|c| c.is_finite())
        }
    };
    let rounding = value_bound(binary, &measured.form, &form, control.at, at, &measured.valid);
    if !finite || !rounding.is_finite() || !(rounding < f64::from(f32::MAX) || wide) {
        return Err(Error::spec(
            Diagnostic::new("overflow", format!("`{}` is too large for the number format", measured.name))
                .at(place.cloned())
                .action("choose a larger unit for the formula or the control, or `number: f64`"),
        ));
    }
    if rounding >= measured.tolerance {
        return Err(too_coarse(measured, rounding, place, wide));
    }
    let mut valid = own_range(rounding)?;
    let (from, to) = inwards(&valid, wide);
    if !(from <= control.at && control.at <= to && from < to) {
        return Err(too_coarse(measured, rounding, place, wide));
    }
    (valid.from, valid.to) = (from, to);
    let in_format = if wide { rounding } else { single_up(rounding) };
    let branches = if wide {
        double::Formula { from, to, at, rounding: in_format, form: wide_form(&form) }.branches()
    } else {
        single_branches(&form, from, to, at, in_format)
    };
    let float = Float { at, from, to, e0: measured.series[0], rounding: in_format, form, branches };
    let inverse_rounding = inverse_bound(binary, &float, rounding);
    let numbers = if wide { Numbers::Double(float) } else { Numbers::Single(float) };
    Ok(Formula { measured: measured.clone(), valid, rounding, inverse_rounding, numbers })
}

/// Single-precision numbers as the runtime crate takes them.
fn single_branches(form: &FloatForm, from: f64, to: f64, at: f64, rounding: f64) -> double::Branches {
    let narrow = |list: &[f64]| list.iter().map(|c| *c as f32).collect::<Vec<f32>>();
    let widen = |b: single::Branch| double::Branch {
        low: f64::from(b.low),
        high: f64::from(b.high),
        rising: b.rising,
        through_at: b.through_at,
    };
    let branches = |form: single::Form<'_>| {
        single::Formula { from: from as f32, to: to as f32, at: at as f32, rounding: rounding as f32, form }
            .branches()
    };
    let found = match form {
        FloatForm::Polynomial(c) => branches(single::Form::Polynomial(&narrow(c))),
        FloatForm::Paired { mean, half_gap_squared, upper } => branches(single::Form::Paired {
            mean: &narrow(mean),
            half_gap_squared: &narrow(half_gap_squared),
            upper: *upper,
        }),
    };
    double::Branches { main: widen(found.main), below: found.below.map(widen), above: found.above.map(widen) }
}

fn wide_form(form: &FloatForm) -> double::Form<'_> {
    match form {
        FloatForm::Polynomial(c) => double::Form::Polynomial(c),
        FloatForm::Paired { mean, half_gap_squared, upper } => {
            double::Form::Paired { mean, half_gap_squared, upper: *upper }
        }
    }
}

/// The range's ends as the format holds them, inside the given ones.
fn inwards(valid: &Valid, wide: bool) -> (f64, f64) {
    if wide {
        return (valid.from, valid.to);
    }
    let (from, to) = (valid.from as f32, valid.to as f32);
    let from = if f64::from(from) < valid.from { from.next_up() } else { from };
    let to = if f64::from(to) > valid.to { to.next_down() } else { to };
    (f64::from(from), f64::from(to))
}

/// The smallest single that is not below `x`.
fn single_up(x: f64) -> f64 {
    let near = x as f32;
    f64::from(if f64::from(near) < x { near.next_up() } else { near })
}

/// Bound on |computed value - exact value of the record's formula| over the range.
fn value_bound(binary: Binary, exact: &Form, held: &FloatForm, at: f64, at_held: f64, valid: &Valid) -> f64 {
    let mut worst = 0.0_f64;
    for d in bound::cells(valid.from - at, valid.to - at) {
        let d_error = bound::offset_error(binary, at, at_held, d);
        let error = match (exact, held) {
            (Form::Polynomial { coefficients }, FloatForm::Polynomial(c)) => {
                bound::nested(binary, coefficients, c, d, d_error).1
            }
            (
                Form::Paired { mean, half_gap_squared, .. },
                FloatForm::Paired { mean: mean_held, half_gap_squared: h_held, .. },
            ) => {
                let (middle, middle_error) = bound::nested(binary, mean, mean_held, d, d_error);
                let (h, h_error) = bound::nested(binary, half_gap_squared, h_held, d, d_error);
                // |sqrt(a) - sqrt(b)| is at most sqrt|a - b|, and at most |a - b| / sqrt(a).
                let smooth = if h.low > 0.0 { h_error / libm::sqrt(h.low) } else { f64::INFINITY };
                let root_error = smooth.min(libm::sqrt(h_error));
                let half_gap = libm::sqrt(h.high.max(0.0) + h_error);
                let rounded = root_error + binary.half_ulp(half_gap);
                middle_error + rounded + binary.half_ulp(middle.size() + half_gap + middle_error + rounded)
            }
            _ => f64::INFINITY,
        };
        worst = worst.max(error);
    }
    worst
}

/// Bound on |value(inverse(v)) - v| over all branches.
fn inverse_bound(binary: Binary, float: &Float, rounding: f64) -> f64 {
    let unit = libm::scalbn(1.0, -binary.digits);
    let (low, high) = (float.from - float.at, float.to - float.at);
    let reach = low.abs().max(high.abs());
    let farthest = float.from.abs().max(float.to.abs()).max(float.at.abs());
    let derivative =
        |c: &[f64]| c.iter().enumerate().skip(1).map(|(k, c)| k as f64 * c).collect::<Vec<f64>>();
    let size = |c: &[f64]| {
        bound::cells(low, high)
            .into_iter()
            .map(|d| bound::nested(binary, c, c, d, 0.0).0.size())
            .fold(0.0, f64::max)
    };
    // An answer is rounded to the format, where the value moves with the slope.
    let (slope, curvature) = match &float.form {
        FloatForm::Polynomial(c) => (size(&derivative(c)), size(&derivative(&derivative(c)))),
        FloatForm::Paired { mean, half_gap_squared, .. } => {
            let (m1, h1) = (derivative(mean), derivative(half_gap_squared));
            let (m2, h2) = (derivative(&m1), derivative(&h1));
            let least = bound::cells(low, high)
                .into_iter()
                .map(|d| bound::nested(binary, half_gap_squared, half_gap_squared, d, 0.0).0.low)
                .fold(f64::INFINITY, f64::min);
            if least > 0.0 {
                let gap = libm::sqrt(least);
                let turn = size(&h2) / (2.0 * gap) + size(&h1) * size(&h1) / (4.0 * gap * least);
                (size(&m1) + size(&h1) / (2.0 * gap), size(&m2) + turn)
            } else {
                // Where the gap closes the root behaves like |d|: bounded by the root's own growth.
                let growth = libm::sqrt(size(&h2).max(size(&h1) / reach.max(f64::MIN_POSITIVE)));
                (size(&m1) + growth, f64::INFINITY)
            }
        }
    };
    let placed = slope * 2.0 * unit * farthest;
    let solved = match (&float.form, float.degree()) {
        (FloatForm::Polynomial(_), 1) => slope * reach * 3.0 * unit,
        (FloatForm::Polynomial(c), 2) => match c.as_slice() {
            [_, c1, c2, ..] => {
                // The discriminant's error acts like an error of the value ...
                let rise = slope * reach;
                let shifted =
                    unit * (c1 * c1 / (4.0 * c2.abs()) + 4.0 * rise + c1 * c1 / (4.0 * c2.abs()) + rise);
                // ... or, far from the vertex, like a relative error of the offset.
                let least = (c1.abs() - 2.0 * c2.abs() * reach).max(0.0);
                let discriminant = least * least;
                let relative = if discriminant > 0.0 {
                    unit * (c1 * c1 + 12.0 * c2.abs() * rise + discriminant) / (2.0 * discriminant)
                } else {
                    f64::INFINITY
                };
                shifted.min(slope * reach * relative * 2.0) + slope * reach * 5.0 * unit
            }
            _ => 0.0,
        },
        _ => {
            let halvings =
                if binary.digits == DOUBLE.digits { double::BISECTIONS } else { single::BISECTIONS };
            let width = (float.to - float.from) * libm::scalbn(1.0, -(halvings as i32));
            // After the last step: at worst the bracket times the slope, where the curvature has no bound.
            let searched =
                if curvature.is_finite() { 2.0 * curvature * width * width } else { slope * width };
            searched + slope * 2.0 * unit * farthest
        }
    };
    1.01 * (solved + placed + 2.0 * rounding)
}

fn too_coarse(measured: &FormulaOutcome, rounding: f64, place: Option<&Place>, wide: bool) -> Error {
    let name = &measured.name;
    let format = if wide { "double" } else { "single" };
    let unit = if measured.unit == "1" { String::new() } else { format!(" {}", measured.unit) };
    let shift = measured.value == ValueKind::Absolute
        && measured.series[0].abs() * libm::scalbn(1.0, if wide { -53 } else { -24 }) > 0.1 * rounding;
    let action = if shift && !wide {
        "give the formula `value: shift`, so that the level at the operating point costs no digits, or use `number: f64`"
    } else if wide {
        "loosen the tolerance"
    } else {
        "loosen the tolerance, or use `number: f64`"
    };
    empty(
        "rounding",
        format!("`{name}` cannot keep its tolerance in {format} precision"),
        place,
        format!(
            "a rounding of up to {rounding:.2e}{unit} against a tolerance of {:?}{unit}",
            measured.tolerance
        ),
        action.to_owned(),
    )
}
