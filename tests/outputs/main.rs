//! Generated files, compiled by the tools of their language and run.

mod float;
mod samples;
