//! Published values and general-purpose libraries against the program, one
//! file per source.

mod crossing;
mod stacks;
