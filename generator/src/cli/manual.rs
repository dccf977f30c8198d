//! `manual`: one page with every command.

use clap::CommandFactory;

use super::arguments::Arguments;
use super::{Ended, files, print};

/// Prints the page in the macros of `man`.
pub fn manual() -> Ended {
    let mut page = Vec::new();
    clap_mangen::Man::new(Arguments::command())
        .render(&mut page)
        .map_err(|e| files::refused("the manual cannot be written", "stdout", &e))?;
    let mut text = String::from_utf8_lossy(&page).into_owned();
    let mut arguments = Arguments::command();
    arguments.build();
    for command in arguments.get_subcommands_mut() {
        if command.get_name() == "help" {
            continue;
        }
        text.push_str(&format!(".SH \"COMMAND {}\"\n.nf\n", command.get_name().to_uppercase()));
        for line in command.render_long_help().to_string().lines() {
            // A leading dot or quote would be read as a macro.
            let line = line.replace('\\', "\\e").replace('-', "\\-");
            let guard = if line.starts_with(['.', '\'']) { "\\&" } else { "" };
            text.push_str(&format!("{guard}{line}\n"));
        }
        text.push_str(".fi\n");
    }
    print::result(&text)
}
