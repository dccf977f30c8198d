//! The command line: reads arguments, calls the library, prints.
//!
//! The only place that touches files, the environment or the terminal.
//! Results go to standard output, messages to standard error. Exit status:
//! 0 done, 1 `check` found a difference, 2 the spec or the call is wrong,
//! 3 the accuracy was not reached, 4 the system refused.

mod arguments;
mod check;
mod compare;
mod explain;
mod files;
mod generate;
mod library;
mod load;
mod manual;
mod message;
mod print;
mod report;
mod starter;
mod sweep;

use std::process::ExitCode;

use clap::{CommandFactory, Parser};

use crate::diagnostic::Error;
use arguments::{Arguments, Command};

pub use library::{build_script, generated};

/// How a command ended.
type Ended = std::result::Result<u8, Error>;

/// Runs the program with the arguments of the process.
#[must_use]
pub fn main() -> ExitCode {
    let arguments = match Arguments::try_parse() {
        Ok(arguments) => arguments,
        Err(error) => {
            // Help and version are results; a wrong call is a message. A closed
            // pipe at this point leaves nobody to tell.
            let _ = error.print();
            return ExitCode::from(if error.use_stderr() { 2 } else { 0 });
        }
    };
    ExitCode::from(run(&arguments.command).unwrap_or_else(|error| message::show(&error)))
}

fn run(command: &Command) -> Ended {
    match command {
        Command::Generate { specs, out, json } => generate::generate(specs, out.as_deref(), *json),
        Command::Check { specs, out, json } => check::check(specs, out.as_deref(), *json),
        Command::Compare { old, new, json } => compare::compare(old, new, *json),
        Command::Explain { spec, json } => explain::explain(spec, *json),
        Command::New { kind, file } => starter::new(*kind, file.as_deref()),
        Command::Schema => print::json(&crate::spec::schema()),
        Command::Completions { shell } => {
            let mut text = Vec::new();
            clap_complete::generate(*shell, &mut Arguments::command(), "shiftwright", &mut text);
            print::result(&String::from_utf8_lossy(&text))
        }
        Command::Manual => manual::manual(),
        Command::Sweep(arguments) => sweep::sweep(arguments),
        Command::Report { spec, out, against } => report::report(spec, out, against.as_deref()),
    }
}
