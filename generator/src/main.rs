//! The program.

fn main() -> std::process::ExitCode {
    shiftwright::cli::main()
}
