//! The command line as its users meet it.

mod calls;
mod demo;
mod determinism;
mod faults;
mod hostile;
mod injection;
mod limits;
mod schema;
mod shells;
