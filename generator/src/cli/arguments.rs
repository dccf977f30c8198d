//! Commands, options and help. No logic.

use std::path::PathBuf;

use clap::{Args, Parser, Subcommand, ValueEnum};
use clap_complete::Shell;

/// The level of a quantum system as a short formula of one control, with the
/// range in which it was measured to hold, written as source code.
#[derive(Parser)]
#[command(
    name = "shiftwright",
    version,
    max_term_width = 80,
    after_help = "Exit status: 0 done; 1 check found a difference; 2 the spec or the call is \
                  wrong; 3 the asked accuracy was not reached; 4 the system refused.\n\nExample:\n  \
                  shiftwright new layers well.yaml\n  shiftwright generate well.yaml"
)]
pub struct Arguments {
    /// What to do
    #[command(subcommand)]
    pub command: Command,
}

/// System kinds with a starter spec.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum StarterKind {
    /// A carrier in a layer stack
    Layers,
    /// A Hamiltonian written in operators
    Parts,
    /// The matrix itself
    Matrix,
    /// A carrier in concentric shells
    Radial,
}

/// Options of `sweep`.
#[derive(Args)]
pub struct SweepArguments {
    /// Spec file
    pub spec: PathBuf,
    /// NAME=FROM:TO:COUNT, NAME=normal(MEAN, DEVIATION) or NAME=uniform(FROM, TO)
    #[arg(long, required = true, value_name = "NAME=VALUES")]
    pub vary: Vec<String>,
    /// How often each grid point is drawn
    #[arg(long, value_name = "COUNT")]
    pub draws: Option<u64>,
    /// Seed of the draws
    #[arg(long, value_name = "N", default_value_t = 1)]
    pub seed: u64,
    /// Do the K-th of N parts only; `auto` reads the index of a job array
    #[arg(long, value_name = "K/N")]
    pub slice: Option<String>,
    /// Table to write; its ending, .csv or .parquet, chooses the format
    #[arg(short, long, value_name = "FILE")]
    pub out: PathBuf,
}

/// The commands.
#[derive(Subcommand)]
pub enum Command {
    /// Solve, measure the range, write sources and record
    #[command(after_help = "Example, in a folder that holds well.yaml:\n  shiftwright generate \
                            well.yaml -o generated")]
    Generate {
        /// Spec files
        #[arg(required = true, value_name = "SPEC")]
        specs: Vec<PathBuf>,
        /// Output folder [default: `generated` beside each spec]
        #[arg(short, long, value_name = "DIR")]
        out: Option<PathBuf>,
        /// Print the result as JSON
        #[arg(long)]
        json: bool,
    },
    /// Compare what is on disk with what the spec gives now
    #[command(after_help = "Prints one line per finding, FILE:LINE:COLUMN: difference: TEXT \
                            (WORD), the form in\nwhich compilers report, so that continuous \
                            integration can mark the place. Exit\nstatus 1 if anything \
                            differs.\n\nExample, after `shiftwright generate well.yaml`:\n  \
                            shiftwright check well.yaml")]
    Check {
        /// Spec files
        #[arg(required = true, value_name = "SPEC")]
        specs: Vec<PathBuf>,
        /// Output folder [default: `generated` beside each spec]
        #[arg(short, long, value_name = "DIR")]
        out: Option<PathBuf>,
        /// Print the findings as JSON
        #[arg(long)]
        json: bool,
    },
    /// Say what moved between two records or two specs
    #[command(after_help = "Example, with an older copy of the record:\n  shiftwright compare \
                            old.record.json generated/well.record.json")]
    Compare {
        /// Older record or spec
        old: PathBuf,
        /// Newer record or spec
        new: PathBuf,
        /// Print the comparison as JSON
        #[arg(long)]
        json: bool,
    },
    /// Levels, contributions, symmetry, error budget, what limits the range
    #[command(after_help = "Example:\n  shiftwright explain well.yaml")]
    Explain {
        /// Spec file
        spec: PathBuf,
        /// Print the explanation as JSON
        #[arg(long)]
        json: bool,
    },
    /// Write a self-contained page with pictures
    #[command(after_help = "Example:\n  shiftwright report well.yaml -o well.html")]
    Report {
        /// Spec file
        spec: PathBuf,
        /// Page to write
        #[arg(short, long, value_name = "FILE.html")]
        out: PathBuf,
        /// Older record or spec, drawn under the new one
        #[arg(long, value_name = "OLD")]
        against: Option<PathBuf>,
    },
    /// Coefficients and range over a grid of constants or over random draws
    #[command(after_help = "An interrupted sweep goes on where it stopped when it is called \
                            again. Slices of a CSV\ntable are joined by\n  awk 'NR == 1 || FNR > \
                            1' part1.csv part2.csv > all.csv\nIn a job array, `--slice auto/N` \
                            takes K from SLURM_ARRAY_TASK_ID or\nJOB_COMPLETION_INDEX.\n\nExample:\n  \
                            shiftwright sweep well.yaml --vary 'width=7 nm:9 nm:5' -o widths.csv")]
    Sweep(SweepArguments),
    /// Write a commented starter spec
    #[command(after_help = "Example:\n  shiftwright new layers well.yaml")]
    New {
        /// System kind
        kind: StarterKind,
        /// File to write; standard output if left out
        file: Option<PathBuf>,
    },
    /// Print the JSON Schema of the spec language, for editors
    #[command(after_help = "Example:\n  shiftwright schema > shiftwright.schema.json")]
    Schema,
    /// Print a completion script for a shell
    #[command(after_help = "Example:\n  shiftwright completions bash > shiftwright.bash")]
    Completions {
        /// Shell
        shell: Shell,
    },
    /// Print the manual page
    #[command(after_help = "Example:\n  shiftwright manual > shiftwright.1")]
    Manual,
}
