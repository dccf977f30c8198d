//! The closed form as a small symbolic tree.
//!
//! In: [`Ranged`](crate::range::Ranged) forms. Out: a [`Formula`] with value,
//! slope and inverse as trees, the rounding bound and own range of each number
//! format. Simplification happens here; printers do no arithmetic.
//!
//! Not here: syntax of any language.
