//! The command line: arguments checked into plans before any work, results on stdout, talk on stderr.

mod args;
mod axis;
mod compare;
mod correct;
mod drawn;
mod error;
mod files;
mod fracture;
mod hours;
mod inspect;
mod job;
mod judge;
mod output;
mod pictures;
mod profile;
mod quote;
mod raster;
mod sampling;
mod sweep;
mod values;

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
    Sweep(Box<sweep::SweepArgs>),
    Compare(compare::CompareArgs),
    Correct(Box<correct::CorrectArgs>),
    Profile(profile::ProfileArgs),
}

/// Runs a command.
///
/// # Errors
/// When it cannot be done: the reason with its place, what was found and what was expected.
pub fn run(cli: Cli) -> Result<Outcome, CliError> {
    let threads = cli.threads;
    // A job file may say how many.
    if !matches!(cli.command, Command::Quote(_) | Command::Sweep(_)) {
        start_threads(threads)?;
    }
    match cli.command {
        Command::Quote(args) => quote::run(&args, threads),
        Command::Inspect(args) => inspect::run(&args),
        Command::Fracture(args) => fracture::run(&args),
        Command::Judge(args) => judge::run(&args),
        Command::Hours(args) => hours::run(&args),
        Command::Sweep(args) => sweep::run(&args, threads),
        Command::Compare(args) => compare::run(&args),
        Command::Correct(args) => correct::run(&args),
        Command::Profile(args) => profile::run(&args),
    }
}

/// Sets the number of threads if one is given; once.
fn start_threads(threads: Option<u16>) -> Result<(), CliError> {
    let Some(threads) = threads else {
        return Ok(());
    };
    rayon::ThreadPoolBuilder::new()
        .num_threads(threads.into())
        .build_global()
        .map_err(|cause| CliError::Threads(cause.to_string()))
}

#[cfg(test)]
mod tests {
    use clap::CommandFactory;

    #[test]
    fn the_arguments_are_consistent() {
        super::Cli::command().debug_assert();
    }
}
