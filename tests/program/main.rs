//! The command line as its users meet it.

mod calls;
mod demo;
mod hostile;
mod schema;
mod shells;
