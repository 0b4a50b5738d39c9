//! The arguments.

use clap::{Parser, Subcommand, ValueEnum};
use std::path::PathBuf;

const EXAMPLES: &str = "\
Examples:
  rackside                                   the start screen
  rackside demo                              a half-typed rack to play with
  rackside new --example > protocol.ron      a commented protocol to change
  rackside new rack.ron --from protocol.ron  a new titration
  rackside open rack.ron                     to the bench; resumes where it stopped
  rackside take rack.ron counts.csv          readings from a table
  rackside summary rack.ron | less           the result on paper

Exit codes: 0 done, 1 failed, 2 wrong call, 65 bad file or data, 73 cannot
create, 74 cannot read or write, 75 locked by another.

Research use only, not for diagnosis or treatment. Handling labelled material
follows the local rules and the responsible radiation-safety or safety officer;
the program checks arithmetic, not safety.";

/// Walks a ligand-binding titration tube by tube: counts in, Kd and sites out, nothing lost.
#[derive(Debug, Parser)]
#[command(name = "rackside", version, after_help = EXAMPLES)]
pub(super) struct Args {
    /// What to do; nothing shows the start screen.
    #[command(subcommand)]
    pub command: Option<Command>,
}

/// The commands.
#[derive(Debug, Subcommand)]
pub(super) enum Command {
    /// Make a new titration from a protocol
    #[command(
        after_help = "Examples:\n  rackside new --example > protocol.ron\n  rackside new rack.ron --from protocol.ron"
    )]
    New {
        /// The file to make; it must not be there yet
        #[arg(required_unless_present = "example")]
        file: Option<PathBuf>,
        /// The protocol with its ladder
        #[arg(long, value_name = "PROTOCOL.ron", required_unless_present = "example")]
        from: Option<PathBuf>,
        /// Print a commented protocol to start from
        #[arg(long, conflicts_with_all = ["file", "from"])]
        example: bool,
        /// Who makes it
        #[arg(long, value_name = "NAME")]
        operator: Option<String>,
    },
    /// Take a titration to the bench; it resumes where it stopped
    #[command(
        after_help = "Examples:\n  rackside open rack.ron\n  rackside open rack.ron --operator \"M. Example\""
    )]
    Open {
        /// The titration
        file: PathBuf,
        #[command(flatten)]
        sitting: Sitting,
    },
    /// Take readings from a table, all or none, as one entry
    #[command(
        after_help = "The table is CSV with a header: vial or level,role,replicate; then counts and, if you like, minutes.\nLevel is the number of the level and is empty for background; role is total, nonspecific or background; replicate is a, b, c or 1, 2, 3.\n\nExamples:\n  rackside take rack.ron counts.csv\n  printf 'vial,counts\\n1,195\\n2,213\\n' | rackside take rack.ron -"
    )]
    Take {
        /// The titration
        file: PathBuf,
        /// The table; - or nothing for standard input
        readings: Option<PathBuf>,
        /// Readings of tubes that have one are recounts and add up
        #[arg(long)]
        recount: bool,
        /// Who takes them
        #[arg(long, value_name = "NAME")]
        operator: Option<String>,
    },
    /// Print the result
    #[command(
        after_help = "Examples:\n  rackside summary rack.ron\n  rackside summary rack.ron --format json | head\n  rackside summary rack.ron --all-laws\n  rackside summary rack.ron --working 12"
    )]
    Summary {
        /// The titration
        file: PathBuf,
        /// A page to read, or JSON
        #[arg(long, value_enum, default_value_t = Format::Text)]
        format: Format,
        /// Plain characters in the plot
        #[arg(long)]
        ascii: bool,
        /// Two classes and Hill with their intervals too, whether or not they are supported
        #[arg(long)]
        all_laws: bool,
        /// After the page, the working of one vial, or of every tube: from the printout to bound and free, step by step
        #[arg(long, value_name = "VIAL", num_args = 0..=1)]
        working: Option<Option<u32>>,
    },
    /// Say whether a file is whole and as rackside wrote it
    #[command(after_help = "Example:\n  rackside check rack.ron")]
    Check {
        /// The titration
        file: PathBuf,
    },
    /// Open a fresh copy of an invented titration; without a terminal, print its summary
    #[command(
        after_help = "Examples:\n  rackside demo\n  rackside demo finished\n  rackside demo --list"
    )]
    Demo {
        /// Which one
        name: Option<String>,
        /// Name the demos
        #[arg(long, conflicts_with = "name")]
        list: bool,
        #[command(flatten)]
        sitting: Sitting,
    },
}

/// What a sitting at the bench may be told.
#[derive(Debug, clap::Args)]
pub(super) struct Sitting {
    /// Who is at the keyboard
    #[arg(long, value_name = "NAME")]
    pub operator: Option<String>,
    /// Plain characters in the plot
    #[arg(long)]
    pub ascii: bool,
}

/// How a summary is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(super) enum Format {
    /// A page for 80 columns
    Text,
    /// For programs; the keys are in the README
    Json,
}
