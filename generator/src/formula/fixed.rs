//! A formula in integers that count steps: scales, shifts, and what they cost.
//!
//! The polynomial is expanded again about a whole count near the operating
//! point, in value steps per control step. Scales are chosen from the bottom
//! up, as fine as the width allows with every product inside it for every input
//! (inputs are held to the range first). Each rung rounds once; the errors are
//! added up along the ladder.

use shiftwright_runtime::double;
use shiftwright_runtime::fixed::{Branch, Rung, SLOPE_BITS};

use super::bound::{self, Interval};
use super::{Formula, Numbers, OwnRange};
use crate::diagnostic::{Diagnostic, Error, Place, Result};
use crate::form::Form;
use crate::outcome::{ControlOutcome, FormulaOutcome, Valid, ValueKind};
use crate::spec::Count;

/// A ladder and the width that holds it.
#[derive(Clone, Debug, PartialEq)]
pub struct Ladder {
    /// Rungs by rising power.
    pub rungs: Vec<Rung>,
    /// Bound on its error, in units of the lowest rung.
    pub error: f64,
}

/// The closed form.
#[derive(Clone, Debug, PartialEq)]
pub enum FixedForm {
    /// Value and slope.
    Polynomial {
        /// The value, in value steps.
        value: Ladder,
        /// The slope, times 2^16.
        slope: Ladder,
    },
    /// Mean and squared half gap.
    Paired {
        /// The mean, in value steps.
        mean: Ladder,
        /// Its slope, times 2^16.
        mean_slope: Ladder,
        /// The squared half gap, in value steps squared.
        half_gap_squared: Ladder,
        /// Its slope, times 2^16.
        half_gap_squared_slope: Ladder,
        /// True for plus.
        upper: bool,
    },
}

/// A formula in counts.
#[derive(Clone, Debug, PartialEq)]
pub struct Fixed {
    /// Bits of the control's type.
    pub control_bits: u32,
    /// Bits of the value's type.
    pub value_bits: u32,
    /// One count of the control, in its unit.
    pub control_step: f64,
    /// One count of the value, in its unit.
    pub value_step: f64,
    /// Lower end of the range.
    pub from: i64,
    /// Upper end of the range.
    pub to: i64,
    /// Operating point in counts; need not be whole.
    pub at: f64,
    /// Whole count about which the ladders count.
    pub origin: i64,
    /// Level at the operating point in counts.
    pub e0: i64,
    /// The rounding bound in whole steps, rounded up.
    pub rounding: i64,
    /// True if value steps need 64-bit products.
    pub wide: bool,
    /// The closed form.
    pub form: FixedForm,
    /// Stretch that holds the operating point.
    pub main: Branch,
    /// Stretch that ends at the cut nearest the operating point.
    pub below: Option<Branch>,
    /// Stretch that begins there.
    pub above: Option<Branch>,
}

impl Fixed {
    /// The numbers of the record's entry: integers with their shifts.
    #[must_use]
    pub fn coefficients(&self) -> serde_json::Value {
        let ladder = |l: &Ladder| {
            serde_json::json!({
                "constants": l.rungs.iter().map(|r| r.constant).collect::<Vec<_>>(),
                "before": l.rungs.iter().map(|r| r.before).collect::<Vec<_>>(),
                "shifts": l.rungs.iter().map(|r| r.shift).collect::<Vec<_>>(),
            })
        };
        let form = match &self.form {
            FixedForm::Polynomial { value, slope } => {
                serde_json::json!({"value": ladder(value), "slope": ladder(slope)})
            }
            FixedForm::Paired { mean, mean_slope, half_gap_squared, half_gap_squared_slope, upper } => {
                serde_json::json!({
                    "mean": ladder(mean),
                    "mean_slope": ladder(mean_slope),
                    "half_gap_squared": ladder(half_gap_squared),
                    "half_gap_squared_slope": ladder(half_gap_squared_slope),
                    "sign": if *upper { 1 } else { -1 },
                })
            }
        };
        let branch = |b: &Branch| serde_json::json!([b.low, b.high, b.rising]);
        serde_json::json!({
            "control_bits": self.control_bits,
            "value_bits": self.value_bits,
            "control_step": self.control_step,
            "value_step": self.value_step,
            "from": self.from,
            "to": self.to,
            "origin": self.origin,
            "rounding": self.rounding,
            "branches": {
                "main": branch(&self.main),
                "below": self.below.as_ref().map(branch),
                "above": self.above.as_ref().map(branch),
            },
            "ladders": form,
        })
    }

    /// True if the file needs the integer square root.
    #[must_use]
    pub fn roots(&self) -> bool {
        matches!(self.form, FixedForm::Paired { .. })
    }

    /// The inverses: function, words, branch, and whether it is that of `inverse` once more.
    #[must_use]
    pub fn branches(&self) -> Vec<(&'static str, &'static str, Branch, bool)> {
        let mut out = vec![("inverse", "that holds the operating point", self.main, false)];
        let below = "that ends at the turning point nearest the operating point";
        let above = "that begins at the turning point nearest the operating point";
        for (name, words, branch) in
            [("inverse_below", below, self.below), ("inverse_above", above, self.above)]
        {
            if let Some(branch) = branch {
                out.push((name, words, branch, branch == self.main));
            }
        }
        out
    }
}

/// Everything in counts, before scales are chosen.
struct Counts {
    /// Polynomials about the origin, per count to the power.
    main: Vec<f64>,
    gap: Option<(Vec<f64>, bool)>,
    reach: f64,
}

/// Puts a formula into counts.
pub fn fixed(
    measured: &FormulaOutcome,
    control: &ControlOutcome,
    count: &Count,
    value: &Count,
    tolerance_place: Option<&Place>,
    own_range: OwnRange<'_>,
) -> Result<Formula> {
    let at = control.at / count.step;
    let origin = libm::round(at);
    let limits = |bits: u32| (-libm::scalbn(1.0, bits as i32 - 1), libm::scalbn(1.0, bits as i32 - 1) - 1.0);
    let whole = (inwards_up(measured.valid.from / count.step), inwards_down(measured.valid.to / count.step));
    control_fits(measured, &measured.valid, whole, limits(count.bits), count)?;
    let reach = (whole.0 - origin).abs().max((whole.1 - origin).abs()).max(1.0);
    let in_counts = |c: &[f64], step: f64| about(c, count.step, step, origin - at);
    let counts = match &measured.form {
        Form::Polynomial { coefficients } => {
            Counts { main: in_counts(coefficients, value.step), gap: None, reach }
        }
        Form::Paired { mean, half_gap_squared, sign, .. } => Counts {
            main: in_counts(mean, value.step),
            gap: Some((in_counts(half_gap_squared, value.step * value.step), *sign > 0.0)),
            reach,
        },
    };
    let (form, wide, steps) = scales(&counts, measured.tolerance / value.step)
        .ok_or_else(|| does_not_fit(measured, value, &counts, limits(value.bits)))?;
    value_fits(measured, control, value, limits(value.bits), steps)?;
    let rounding = steps * value.step;
    if rounding >= measured.tolerance {
        return Err(step_too_coarse(measured, value, tolerance_place, rounding));
    }
    // A step that leaves no room is a mistake of the spec.
    let mut valid = own_range(rounding).map_err(|error| match error {
        Error::Accuracy(_) => step_too_coarse(measured, value, tolerance_place, rounding),
        other => other,
    })?;
    let (from, to) = (inwards_up(valid.from / count.step), inwards_down(valid.to / count.step));
    if from >= to {
        return Err(Error::spec(
            Diagnostic::new(
                "step",
                format!("the range of `{}` holds no two counts of the control", measured.name),
            )
            .at(Some(count.place.clone()))
            .found(format!(
                "{:?} to {:?} {} in steps of {:?}",
                valid.from, valid.to, control.unit, count.step
            ))
            .action(format!("choose a step of at most {}", nice(0.01 * (valid.to - valid.from)))),
        ));
    }
    (valid.from, valid.to) = (from * count.step, to * count.step);
    let (main, below, above) = branches(&counts, from, to, origin, at);
    let slope_steps = largest_slope(&counts);
    let fixed = Fixed {
        control_bits: count.bits,
        value_bits: value.bits,
        control_step: count.step,
        value_step: value.step,
        from: from as i64,
        to: to as i64,
        at,
        origin: origin as i64,
        e0: libm::floor(measured.series[0] / value.step + 0.5) as i64,
        rounding: libm::ceil(steps) as i64,
        wide,
        form,
        main,
        below,
        above,
    };
    Ok(Formula {
        measured: measured.clone(),
        valid,
        rounding,
        inverse_rounding: (0.5 * slope_steps + steps).max(libm::ceil(steps)) * value.step,
        numbers: Numbers::Fixed(fixed),
    })
}

/// Largest change of the value over one count, in steps.
fn largest_slope(counts: &Counts) -> f64 {
    let main = bound_of(&derivative(&counts.main), counts.reach);
    main + counts.gap.as_ref().map_or(0.0, |(h, _)| {
        // |sqrt(a) - sqrt(b)| <= sqrt|a - b|.
        libm::sqrt(bound_of(&derivative(h), counts.reach))
    })
}

fn derivative(c: &[f64]) -> Vec<f64> {
    c.iter().enumerate().skip(1).map(|(k, c)| k as f64 * c).collect()
}

/// A count just inside, unless the quotient is whole up to its own rounding.
fn inwards_up(q: f64) -> f64 {
    let near = libm::round(q);
    if (q - near).abs() <= 1e-9 * q.abs().max(1.0) { near } else { libm::ceil(q) }
}

fn inwards_down(q: f64) -> f64 {
    -inwards_up(-q)
}

/// Coefficients in value steps per count^k about a whole count that lies
/// `shift` counts above the operating point.
fn about(c: &[f64], control_step: f64, value_step: f64, shift: f64) -> Vec<f64> {
    let mut factor = 1.0;
    let mut g: Vec<f64> = Vec::with_capacity(c.len());
    for c in c {
        g.push(c * factor / value_step);
        factor *= control_step;
    }
    if shift != 0.0 {
        // Repeated synthetic division by (k + shift).
        for low in 0..g.len() {
            for k in (low..g.len().saturating_sub(1)).rev() {
                let above = g.get(k + 1).copied().unwrap_or(0.0);
                if let Some(slot) = g.get_mut(k) {
                    *slot += shift * above;
                }
            }
        }
    }
    g
}

/// Sum of |c_k| reach^k.
fn bound_of(c: &[f64], reach: f64) -> f64 {
    c.iter().rev().fold(0.0, |sum, c| c.abs() + reach * sum)
}

/// The ladder of a polynomial.
///
/// - `bits`: magnitudes stay below 2^bits, and what is shifted below 2^(bits - 1),
///   so that a language without shifts of negative numbers can move it up by that;
/// - `scale`: the lowest rung counts in units of 2^-scale.
fn ladder(c: &[f64], reach: f64, bits: i32, scale: i32) -> Option<Ladder> {
    let degree = c.iter().rposition(|c| *c != 0.0).unwrap_or(0);
    // What is added before a shift takes up to three sixteenths.
    let limit = 0.8125 * libm::scalbn(1.0, bits - 1);
    // Finest scale of each rung above the lowest: its product with any count stays inside.
    let mut scales = vec![scale; degree + 1];
    let mut finest = i32::MAX;
    for k in (1..=degree).rev() {
        let size = bound_of(c.get(k..=degree)?, reach);
        let room = limit / reach - 2.0;
        if room < 1.0 {
            return None;
        }
        finest = finest.min(libm::floor(libm::log2(room / size)) as i32);
        *scales.get_mut(k)? = finest;
    }
    for k in 1..=degree {
        let below = *scales.get(k - 1)?;
        let slot = scales.get_mut(k)?;
        *slot = (*slot).min(below + bits - 4);
        if *slot < below {
            return None;
        }
    }
    let mut rungs = vec![Rung { constant: 0, before: 0, shift: 0 }; c.len().max(1)];
    let mut error = 0.0;
    for k in (0..=degree).rev() {
        let (scale, coefficient) = (*scales.get(k)?, *c.get(k)?);
        let scaled = libm::scalbn(coefficient, scale);
        if scaled.is_nan() || scaled.abs() >= libm::scalbn(1.0, bits) {
            return None;
        }
        let rung = rungs.get_mut(k)?;
        if k == degree {
            rung.constant = libm::floor(scaled + 0.5) as i64;
            error = (scaled - rung.constant as f64).abs();
            continue;
        }
        let shift = scales.get(k + 1)? - scale;
        let floor = libm::floor(scaled);
        let part = libm::scalbn(1.0, shift);
        rung.shift = shift.unsigned_abs();
        error *= reach / part;
        if shift == 0 {
            rung.constant = libm::floor(scaled + 0.5) as i64;
            error += (scaled - rung.constant as f64).abs();
        } else {
            rung.constant = floor as i64;
            // Half a unit for rounding to nearest, and the fraction of the constant.
            rung.before = libm::floor((scaled - floor + 0.5) * part + 0.5) as i64;
            error += 0.5 + 0.5 / part;
        }
        // What stands here, fractions and errors of the rungs above included.
        let size = libm::scalbn(bound_of(c.get(k..=degree)?, reach), scale) + error + 1.0;
        if size.is_nan() || size >= libm::scalbn(1.0, bits) {
            return None;
        }
    }
    // The coefficients themselves were computed in double precision.
    error += 16.0 * f64::EPSILON * libm::scalbn(bound_of(c, reach), scale);
    Some(Ladder { rungs, error })
}

/// Form, whether it needs 64-bit products, and the error in steps.
fn scales(counts: &Counts, tolerance: f64) -> Option<(FixedForm, bool, f64)> {
    const NARROW: i32 = 31;
    const WIDE: i32 = 63;
    let slope = |c: &[f64]| ladder(&padded(derivative(c)), counts.reach, WIDE, SLOPE_BITS as i32);
    let Some((gap, upper)) = &counts.gap else {
        let slope = slope(&counts.main)?;
        // 32-bit products where they cost no more than a sixteenth of the tolerance or a step.
        let narrow = ladder(&counts.main, counts.reach, NARROW, 0)
            .filter(|l| l.error <= (tolerance / 16.0).max(1.0) && counts.reach < 65_536.0);
        let wide = narrow.is_none();
        let value = match narrow {
            Some(value) => value,
            None => ladder(&counts.main, counts.reach, WIDE, 0)?,
        };
        let error = value.error;
        return Some((FixedForm::Polynomial { value, slope }, wide, error));
    };
    let mean = ladder(&counts.main, counts.reach, WIDE, 0)?;
    let half_gap_squared = ladder(gap, counts.reach, WIDE - 1, 0)?;
    // |sqrt(a) - sqrt(b)| <= sqrt|a - b|, and where the gap is wide |a - b| / sqrt(a).
    let least = bound::cells(-counts.reach, counts.reach)
        .into_iter()
        .map(|d| bound::nested(bound::DOUBLE, gap, gap, d, 0.0).0.low)
        .fold(f64::INFINITY, f64::min);
    let smooth = if least > 0.0 { half_gap_squared.error / libm::sqrt(least) } else { f64::INFINITY };
    let error = mean.error + 0.5 + smooth.min(libm::sqrt(half_gap_squared.error));
    let form = FixedForm::Paired {
        mean_slope: slope(&counts.main)?,
        half_gap_squared_slope: slope(gap)?,
        mean,
        half_gap_squared,
        upper: *upper,
    };
    Some((form, true, error))
}

fn padded(mut c: Vec<f64>) -> Vec<f64> {
    if c.is_empty() {
        c.push(0.0);
    }
    c
}

/// Stretches of the range between turning points, to whole counts.
fn branches(
    counts: &Counts,
    from: f64,
    to: f64,
    origin: f64,
    at: f64,
) -> (Branch, Option<Branch>, Option<Branch>) {
    // The operating point is the double formula's, so that it counts as a cut where it is one.
    let form = match &counts.gap {
        None => double::Form::Polynomial(&counts.main),
        Some((gap, upper)) => {
            double::Form::Paired { mean: &counts.main, half_gap_squared: gap, upper: *upper }
        }
    };
    let formula = double::Formula { from: from - origin, to: to - origin, at: 0.0, rounding: 0.0, form };
    let found = formula.branches();
    let whole = |b: double::Branch| Branch {
        low: (libm::round(b.low) + origin) as i64,
        high: (libm::round(b.high) + origin) as i64,
        rising: b.rising,
    };
    let keep = |b: Option<double::Branch>| b.map(whole).filter(|b| b.low < b.high);
    let (below, above) = (keep(found.below), keep(found.above));
    let (below, above) = match (below, above) {
        (Some(below), Some(above)) => (Some(below), Some(above)),
        // A turning point that rounds to an end of the range cuts nothing off.
        _ => (None, None),
    };
    let main = match (below, above) {
        // Which side of the cut holds the operating point; at the cut itself, the one above.
        (Some(below), Some(above)) => {
            let cut = found.above.map_or(0.0, |b| b.low);
            if at - origin < cut - 1e-9 * cut.abs().max(1.0) { below } else { above }
        }
        _ => whole(double::Branch {
            low: from - origin,
            high: to - origin,
            rising: formula.value(to - origin) > formula.value(from - origin),
            through_at: true,
        }),
    };
    (main, below, above)
}

/// A number with one significant digit, not above `x`.
fn nice(x: f64) -> String {
    let unit = libm::pow(10.0, libm::floor(libm::log10(x)));
    let digit = libm::floor(x / unit).max(1.0);
    let text = format!("{:.0}e{:.0}", digit, libm::log10(unit));
    text.parse::<f64>().map_or(text, |x| format!("{x:?}"))
}

fn control_fits(
    measured: &FormulaOutcome,
    valid: &Valid,
    whole: (f64, f64),
    limits: (f64, f64),
    count: &Count,
) -> Result<()> {
    if whole.0 >= limits.0 && whole.1 <= limits.1 {
        return Ok(());
    }
    let farthest = valid.from.abs().max(valid.to.abs());
    let step = round_up(farthest / limits.1);
    Err(Error::spec(
        Diagnostic::new(
            "width",
            format!("the range of `{}` does not fit the control's count", measured.name),
        )
        .at(Some(count.place.clone()))
        .found(format!(
            "{:?} to {:?} in steps of {:?}: counts {} to {}",
            valid.from, valid.to, count.step, whole.0, whole.1
        ))
        .expected(format!("counts from {} to {}, as {} bits hold", limits.0, limits.1, count.bits))
        .action(format!("choose a step of at least {step}{}", wider(count.bits))),
    ))
}

fn wider(bits: u32) -> String {
    if bits < 32 { format!(", or more than {bits} bits") } else { String::new() }
}

/// A number with two significant digits, not below `x`.
fn round_up(x: f64) -> String {
    let unit = libm::pow(10.0, libm::floor(libm::log10(x)) - 1.0);
    let text = format!("{:.0}e{:.0}", libm::ceil(x / unit), libm::log10(unit));
    text.parse::<f64>().map_or(text, |x| format!("{x:?}"))
}

/// All that a form can reach on an interval of the offset.
fn enclosure(form: &Form, d: Interval) -> Interval {
    let reached = |c: &[f64]| bound::nested(bound::DOUBLE, c, c, d, 0.0).0;
    match form {
        Form::Polynomial { coefficients } => reached(coefficients),
        Form::Paired { mean, half_gap_squared, sign, .. } => {
            let (mean, squared) = (reached(mean), reached(half_gap_squared));
            let [near, far] = [squared.low, squared.high].map(|h| libm::sqrt(h.max(0.0)));
            let (low, high) = if *sign > 0.0 { (near, far) } else { (-far, -near) };
            Interval { low: mean.low + low, high: mean.high + high }
        }
    }
}

fn value_fits(
    measured: &FormulaOutcome,
    control: &ControlOutcome,
    value: &Count,
    limits: (f64, f64),
    rounding: f64,
) -> Result<()> {
    let valid = &measured.valid;
    let (mut least, mut most) = (f64::INFINITY, f64::NEG_INFINITY);
    for d in bound::cells(valid.from - control.at, valid.to - control.at) {
        let reached = enclosure(&measured.form, d);
        (least, most) = (least.min(reached.low / value.step), most.max(reached.high / value.step));
    }
    let margin = rounding + 1.0;
    if least - margin >= limits.0 && most + margin <= limits.1 {
        return Ok(());
    }
    let farthest = least.abs().max(most.abs()) * value.step;
    let shift = if measured.value == ValueKind::Absolute { ", or `value: shift`" } else { "" };
    Err(Error::spec(
        Diagnostic::new("width", format!("the value of `{}` does not fit its count", measured.name))
            .at(Some(value.place.clone()))
            .found(format!("counts {least:.0} to {most:.0} in steps of {:?} {}", value.step, measured.unit))
            .expected(format!("counts from {} to {}, as {} bits hold", limits.0, limits.1, value.bits))
            .action(format!(
                "choose a step of at least {}{}{shift}",
                round_up(1.02 * farthest / limits.1),
                wider(value.bits)
            )),
    ))
}

fn does_not_fit(measured: &FormulaOutcome, value: &Count, counts: &Counts, limits: (f64, f64)) -> Error {
    let size = bound_of(&counts.main, counts.reach);
    let factor = (size / limits.1).max(2.0);
    Error::spec(
        Diagnostic::new("width", format!("`{}` needs products of more than 64 bits", measured.name))
            .at(Some(value.place.clone()))
            .found(format!("a step of {:?} {}", value.step, measured.unit))
            .action(format!("choose a step of at least {}", round_up(value.step * factor))),
    )
}

fn step_too_coarse(measured: &FormulaOutcome, value: &Count, place: Option<&Place>, rounding: f64) -> Error {
    let place = Some(value.place.clone()).or_else(|| place.cloned());
    Error::spec(
        Diagnostic::new(
            "step",
            format!("`{}` cannot keep its tolerance in counts of this step", measured.name),
        )
        .at(place)
        .found(format!(
            "a rounding of up to {rounding:.2e} {} from a step of {:?} against a tolerance of {:?}",
            measured.unit, value.step, measured.tolerance
        ))
        .action(format!(
            "choose a step of at most {}",
            nice(0.25 * value.step * measured.tolerance / rounding)
        )),
    )
}

#[cfg(test)]
mod tests {
    use super::*;
    use shiftwright_runtime::fixed::climb;

    /// Against the real polynomial in double precision, which is exact enough here.
    #[test]
    fn ladders_keep_their_bound_and_are_not_loose() {
        let cases: [(&[f64], f64); 4] = [
            (&[1458934408.1, 0.0, -0.0546], 6000.0),
            (&[34934.3, -12.34567, -0.0005459, 1.2e-8], 6000.0),
            (&[12.5, 0.012, 0.00054], 100.0),
            (&[0.0, 300.25], 32_000.0),
        ];
        for (c, reach) in cases {
            for (bits, scale) in [(31, 0), (63, 0), (63, 16)] {
                let Some(ladder) = ladder(c, reach, bits, scale) else { panic!("{c:?} {bits}") };
                let mut worst = 0.0_f64;
                for k in -(reach as i64)..=(reach as i64) {
                    let exact = c.iter().rev().fold(0.0, |sum, c| c + k as f64 * sum) * f64::from(1 << scale);
                    worst = worst.max((climb(&ladder.rungs, k) as f64 - exact).abs());
                }
                assert!(worst <= ladder.error, "{c:?} {bits} {scale}: {worst} {}", ladder.error);
                assert!(
                    ladder.error <= 20.0 * worst.max(0.25),
                    "{c:?} {bits} {scale}: {worst} {}",
                    ladder.error
                );
            }
        }
    }

    #[test]
    fn moving_the_origin_keeps_the_polynomial() {
        let c = [2.0, -3.0, 0.5, 0.25];
        let g = about(&c, 0.1, 0.01, 0.3);
        for k in [-7.0, 0.0, 12.0] {
            let d = (k + 0.3) * 0.1;
            let exact = c.iter().rev().fold(0.0, |sum, c| c + d * sum) / 0.01;
            let moved = g.iter().rev().fold(0.0, |sum, c| c + k * sum);
            assert!((exact - moved).abs() < 1e-9, "{exact} {moved}");
        }
    }

    #[test]
    fn range_ends_round_inwards() {
        assert_eq!(inwards_up(-6000.0000000000001), -6000.0);
        assert_eq!(inwards_up(2.1), 3.0);
        assert_eq!(inwards_down(-2.1), -3.0);
        assert_eq!(inwards_down(0.3 / 0.1), 3.0);
    }
}
