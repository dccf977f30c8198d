//! Check, compare, explain, report.
