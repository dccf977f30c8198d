//! The level of a quantum system as a short formula of one control, with the
//! range in which the formula was measured to hold, written as source code.
//!
//! One pipeline in one direction; each stage takes the type before it and
//! returns the type after it, and imports only stages to its left:
//!
//! ```text
//! text -> spec -> model -> series -> form -> range -> formula -> emit -> files
//! ```
//!
//! The core is values in, values out: only [`cli`] reads files, clocks, the
//! environment or the terminal. The same input gives the same bytes on every
//! machine, so no function of the system's mathematics library is called
//! (`libm` instead), sums run in a fixed order, and nothing depends on the
//! number of threads.

pub mod cli;
pub mod diagnostic;
pub mod emit;
pub mod expr;
pub mod form;
pub mod formula;
pub mod model;
pub mod outcome;
pub mod pencil;
pub mod pipeline;
pub mod range;
pub mod review;
pub mod series;
pub mod spec;
pub mod study;
pub mod units;

pub use cli::{build_script, generated};
pub use diagnostic::{Diagnostic, Error, Result};
pub use outcome::Outcome;
