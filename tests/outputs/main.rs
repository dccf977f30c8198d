//! Generated files, compiled by the tools of their language and run.

mod analysis;
mod answers;
mod circuit;
mod demo;
mod family;
mod fixed;
mod float;
mod host;
mod programs;
mod proofs;
mod samples;
mod target;
mod vectors;
