//! The command line: arguments checked into plans before any work, results on stdout, talk on stderr.

mod args;
mod drawn;
mod error;
mod fracture;
mod hours;
mod inspect;
mod judge;
mod output;
mod pictures;
mod profile;
mod quote;

use clap::{Parser, Subcommand};

pub use error::CliError;

/// How a command ended that could do its work.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Outcome {
    /// Within every limit.
    Done,
    /// Done, but over a limit: hours over the slot, a contour out of tolerance, a dose over its peak.
    OverALimit,
}

impl Outcome {
    fn over_a_limit_if(over: bool) -> Self {
        if over { Self::OverALimit } else { Self::Done }
    }
}

/// Fractures curved mask figures into electron-beam shots and says how many hours they take to write and how true they print.
///
/// All lengths are nanometres at mask scale unless a name says otherwise. Doses are multiples of dose-to-size. The blur is
/// given as the standard deviation σ of a Gaussian, not as its full width at half maximum (2.355 σ).
///
/// Exit status: 0 done and within the limits given, 1 done but over a limit, 2 could not be done.
#[derive(Debug, Parser)]
#[command(version, name = "shotwright", max_term_width = 100)]
pub struct Cli {
    /// Threads to use; all processors unless given. The results do not depend on it.
    #[arg(long, global = true, display_order = 900, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    threads: Option<u16>,
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
    Quote(Box<quote::QuoteArgs>),
    Inspect(inspect::InspectArgs),
    Fracture(fracture::FractureArgs),
    Judge(judge::JudgeArgs),
    Hours(Box<hours::HoursArgs>),
    Profile(profile::ProfileArgs),
}

/// Runs a command.
///
/// # Errors
/// When it cannot be done: the reason with its place, what was found and what was expected.
pub fn run(cli: Cli) -> Result<Outcome, CliError> {
    if let Some(threads) = cli.threads {
        rayon::ThreadPoolBuilder::new()
            .num_threads(threads.into())
            .build_global()
            .map_err(|cause| CliError::Threads(cause.to_string()))?;
    }
    match cli.command {
        Command::Quote(args) => quote::run(&args),
        Command::Inspect(args) => inspect::run(&args),
        Command::Fracture(args) => fracture::run(&args),
        Command::Judge(args) => judge::run(&args),
        Command::Hours(args) => hours::run(&args),
        Command::Profile(args) => profile::run(&args),
    }
}

#[cfg(test)]
mod tests {
    use clap::CommandFactory;

    #[test]
    fn the_arguments_are_consistent() {
        super::Cli::command().debug_assert();
    }
}
