//! The command line as its users meet it.

mod calls;
mod demo;
mod faults;
mod hostile;
mod injection;
mod schema;
mod shells;
