//! The command line as its users meet it.

mod calls;
mod hostile;
mod schema;
