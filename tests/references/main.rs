//! Published values and general-purpose libraries against the program, one
//! file per source.

mod box_in_field;
mod breit_rabi;
mod charge_box;
mod crossing;
mod mathieu;
mod properties;
mod quartic;
mod radial;
mod rotor_stark;
mod solved;
mod spheroidal;
mod spin_one;
mod stacks;
