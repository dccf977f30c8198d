//! Closest approaches of two levels, handled as a whole.
//!
//! Near an approach the squared gap is a parabola, `g^2 + (slope (x - x0))^2`, so
//! the place and the gap follow from three solves, then three closer ones.

use super::exact::{defined, solve};
use crate::diagnostic::Result;
use crate::pencil::Scalar;
use crate::series::Level;

/// Part of the spacing below which a gap is none.
const NO_GAP: f64 = 1e-10;
/// Squared overlap above which a state is the same on both sides.
const SAME: f64 = 0.9;

/// A closest approach through which the state goes on in the other level.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Crossing {
    /// Control value of the smallest gap.
    pub x: f64,
    /// The gap there, model units.
    pub gap: f64,
    /// Control values around it where the gap has grown to four times that, the one
    /// nearer to the operating point first.
    pub window: (f64, f64),
    /// Numbers of the followed level before and after.
    pub numbers: (usize, usize),
    /// Change of the mean of both from the operating point's level.
    pub mean: f64,
}

/// The place of the smallest gap between `low` and `low + 1` near `x`, found between
/// `x - width` and `x + width`, with the gap and the slope by which it opens.
fn closest<T: Scalar>(level: &Level<T>, low: usize, x: f64, width: f64) -> Result<Option<(f64, f64, f64)>> {
    let square = |x: f64| -> Result<f64> {
        let solved = solve(level, x, low + 1)?;
        let gap = solved.get(low + 1)?.energy - solved.get(low)?.energy;
        Ok(gap * gap)
    };
    let (mut x, mut width) = (x, width);
    let finest = 1e-13 * (x.abs() + width);
    let mut best: Option<(f64, f64, f64)> = None;
    for _ in 0..14 {
        if !defined(level, x - width) || !defined(level, x + width) {
            return Ok(best);
        }
        let (below, here, above) = (square(x - width)?, square(x)?, square(x + width)?);
        let curvature = (below - 2.0 * here + above) / (2.0 * width * width);
        if !curvature.is_finite() || curvature <= 0.0 {
            return Ok(best);
        }
        let step = ((below - above) / (4.0 * curvature * width)).clamp(-width, width);
        let there = square(x + step)?;
        let (place, value) = if there < here { (x + step, there) } else { (x, here) };
        best = Some((place, libm::sqrt(value), libm::sqrt(curvature)));
        let next = (0.5 * libm::sqrt(value / curvature)).max(step.abs() * 1e-2).max(finest);
        x = place;
        if next >= 0.5 * width && step.abs() < 0.5 * width {
            break;
        }
        width = next.min(0.5 * width);
    }
    Ok(best)
}

/// Where the gap has grown to `times` itself, from `x` towards `side`.
fn grown<T: Scalar>(level: &Level<T>, low: usize, x: f64, gap: f64, start: f64) -> Result<Option<f64>> {
    let wanted = libm::sqrt(15.0) * gap;
    let mut away = start * wanted;
    for _ in 0..30 {
        if !defined(level, x + away) {
            return Ok(None);
        }
        let solved = solve(level, x + away, low + 1)?;
        let now = solved.get(low + 1)?.energy - solved.get(low)?.energy;
        let risen = libm::sqrt((now * now - gap * gap).max(0.0));
        if (risen - wanted).abs() <= 1e-6 * wanted {
            return Ok(Some(x + away));
        }
        away *= (wanted / risen.max(1e-3 * wanted)).clamp(0.25, 3.0);
    }
    Ok(None)
}

/// The crossing near `x`, if the closest approach there is one and its gap is at most
/// `widest`. `at` is the operating point, `spacing` the distance to further levels.
pub(super) fn crossing<T: Scalar>(
    level: &Level<T>,
    (followed, low): (usize, usize),
    (x, width): (f64, f64),
    spacing: f64,
    widest: f64,
) -> Result<Option<Crossing>> {
    let Some((x, gap, slope)) = closest(level, low, x, width)? else {
        return Ok(None);
    };
    if gap > widest {
        return Ok(None);
    }
    let other = if followed == low { low + 1 } else { low };
    let at = level.model.at();
    let solved = solve(level, x, low + 1)?;
    let mean = 0.5 * (solved.change(level, x, (low, low))? + solved.change(level, x, (low + 1, low + 1))?);
    let numbers = (followed, other);
    if gap <= NO_GAP * spacing {
        return Ok(Some(Crossing { x, gap, window: (x, x), numbers, mean }));
    }
    let outwards = if x >= at { 1.0 } else { -1.0 };
    let start = outwards / slope;
    let (Some(near), Some(far)) = (grown(level, low, x, gap, -start)?, grown(level, low, x, gap, start)?)
    else {
        return Ok(None);
    };
    if (near - at) * outwards < 0.0 {
        return Ok(None);
    }
    let before = solve(level, near, low + 1)?;
    let after = solve(level, far, low + 1)?;
    let same = before.get(followed)?.state.dotc(&after.get(other)?.state).modulus_squared();
    Ok((same > SAME).then_some(Crossing { x, gap, window: (near, far), numbers, mean }))
}
