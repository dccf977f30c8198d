//! Counts of steps.
