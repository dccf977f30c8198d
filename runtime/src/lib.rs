//! The reference meaning of a generated formula: number formats, status and
//! evaluation order, without the standard library.
#![no_std]
