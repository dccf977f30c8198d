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
//! Nothing allocates, panics or calls a mathematics library; the square root is
//! [`root`], correctly rounded by integer arithmetic.
#![no_std]

mod cuts;
pub mod fixed;
mod float;
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
