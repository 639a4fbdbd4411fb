//! `shotwright` on the command line: parse, run, map to an exit code.

use std::process::ExitCode;

use clap::Parser;
use shotwright::cli::{self, Cli, Outcome};

fn main() -> ExitCode {
    match cli::run(Cli::parse()) {
        Ok(Outcome::Done) => ExitCode::SUCCESS,
        Ok(Outcome::OverALimit) => ExitCode::from(1),
        Err(error) if error.is_broken_pipe() => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}
