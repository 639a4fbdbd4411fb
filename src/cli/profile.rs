//! `shotwright profile`: the built-in profiles.

use clap::Args;

use crate::profile::{Profile, ProfileErrors};

use super::output::print;
use super::{CliError, Outcome};

/// List the built-in profiles, or print one as a file to start one's own from.
///
/// They are illustrative: orders of magnitude of writer generations, no machine's data.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright profile
  shotwright profile shaped-400 > mine.toml")]
pub(super) struct ProfileArgs {
    /// The profile to print.
    name: Option<String>,
}

pub(super) fn run(args: &ProfileArgs) -> Result<Outcome, CliError> {
    match &args.name {
        Some(name) => {
            let text = Profile::builtin_text(name).map_err(|error| ProfileErrors(vec![error]))?;
            print(text)?;
        }
        None => {
            for name in Profile::builtins() {
                let profile = Profile::builtin(name)?;
                print(&format!("{name:12}  {}\n", profile.about()))?;
            }
        }
    }
    Ok(Outcome::Done)
}
