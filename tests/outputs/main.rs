//! Generated files, compiled by the tools of their language and run.

mod analysis;
mod answers;
mod demo;
mod fixed;
mod float;
mod host;
mod programs;
mod proofs;
mod samples;
mod target;
mod vectors;
