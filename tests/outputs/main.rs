//! Generated files, compiled by the tools of their language and run.

mod fixed;
mod float;
mod proofs;
mod samples;
mod target;
mod vectors;
