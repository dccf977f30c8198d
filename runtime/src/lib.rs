//! The reference meaning of a generated formula: number formats, status and
//! evaluation order, without the standard library.
//!
//! A generated file of any language gives the bits of this crate, so a host
//! that loads a record can evaluate the formula exactly as the firmware does:
//!
//! - [`double`] and [`single`]: `c0 + d*(c1 + d*c2)` with `d = control - at`, one
//!   rounding per operation, never a fused multiply-add;
//! - [`fixed`]: counts of steps in integers that cannot overflow.
//!
//! # Which number format
//!
//! - `f64` where the target has double precision or speed does not matter: its
//!   rounding is far below every other error.
//! - `f32` on targets with a single-precision unit. Its rounding is about 6e-8 of
//!   the level itself, so a small tolerance on a large level needs `value: shift`.
//! - `fixed` on targets without a floating-point unit, or where counts of a
//!   converter go in and out anyway. Products stay in 32 bits where that costs at
//!   most a step or a sixteenth of the tolerance, else they take 64.
//!
//! # What a status means
//!
//! | status | meaning | what a control loop does |
//! | --- | --- | --- |
//! | `Below`, `Above` | the control left the measured range; nothing is promised there | stop driving further that way; never extrapolate |
//! | `NotANumber` | an argument is not a number | treat the sensor or the computation before it as failed |
//! | `NoSolution` | the branch does not reach the value | leave the loop; the target cannot be met inside the range |
//! | `OutsideFamily` | a parameter left its box | the device is not one the formula was made for |
//!
//! # Caution
//!
//! A formula says what a model says. It is no safety function and replaces none:
//! limits on high voltage, laser power or access belong in independent means that
//! follow the functional-safety, laser and high-voltage rules of the place, and
//! qualified people decide about them. Compilers must keep one rounding per
//! operation (no `-ffast-math`, no contraction) for the bits to agree.
//!
//! Nothing allocates, panics or calls a mathematics library; the square root is
//! [`root`], correctly rounded by integer arithmetic.
//!
//! With the feature `record` a host reads the numbers from a record: `record::Loaded`.
#![no_std]

#[cfg(feature = "record")]
extern crate alloc;

mod cuts;
pub mod fixed;
mod float;
#[cfg(feature = "record")]
pub mod record;
pub mod root;

pub use float::{double, single};

/// Why there is no answer.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum OutOfRange {
    /// The control lies below the range.
    Below,
    /// The control lies above the range.
    Above,
    /// An argument is not a number.
    NotANumber,
    /// The formula does not reach the value on this branch.
    NoSolution,
    /// A family parameter lies outside its box.
    OutsideFamily,
}
