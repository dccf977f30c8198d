//! Families, sweeps and sensitivities: many runs of the pipeline.

pub mod sensitivity;
pub mod sweep;
