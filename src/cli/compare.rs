//! `shotwright compare`: what changed between two quotes.

use std::fs::File;
use std::io::BufReader;
use std::path::{Path, PathBuf};

use clap::Args;

use crate::quote::compare::{Side, compare};
use crate::quote::result::{FigureShare, Quote};
use crate::report::{comparison, figures_csv};

use super::output::{file_error, print, print_json};
use super::{CliError, Outcome};

/// Say what changed between two quotes and which figures caused it.
///
/// Takes the quote.json of two runs, or their directories; the figures.csv beside each says which figures came, went, or take
/// other shots. Figures are the same if their outlines are, wherever they stand.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright compare revision-1/quote.json revision-2/quote.json
  shotwright compare revision-1 revision-2 --json")]
pub(super) struct CompareArgs {
    /// quote.json of the quote before, or the directory that holds it.
    before: PathBuf,
    /// quote.json of the quote after, or the directory that holds it.
    after: PathBuf,
    /// Changed figures listed before the rest is only counted.
    #[arg(long, value_name = "N", default_value_t = 20)]
    figures: usize,
    /// Print JSON.
    #[arg(long)]
    json: bool,
}

pub(super) fn run(args: &CompareArgs) -> Result<Outcome, CliError> {
    let (before, before_figures) = read(&args.before)?;
    let (after, after_figures) = read(&args.after)?;
    let found = compare(
        Side {
            quote: &before,
            figures: before_figures.as_deref(),
        },
        Side {
            quote: &after,
            figures: after_figures.as_deref(),
        },
    );
    if args.json {
        print_json(&found)?;
    } else {
        print(&comparison::text(&found, args.figures))?;
    }
    Ok(Outcome::Done)
}

/// A quote, and its figures if they lie beside it.
fn read(path: &Path) -> Result<(Quote, Option<Vec<FigureShare>>), CliError> {
    let path = if path.is_dir() {
        path.join("quote.json")
    } else {
        path.to_owned()
    };
    let text = std::fs::read_to_string(&path).map_err(|cause| file_error(&path, cause))?;
    let quote = serde_json::from_str(&text).map_err(|cause| CliError::Job {
        place: format!("{}:{}", path.display(), cause.line()),
        message: format!("is not the quote.json of a quote: {cause}"),
    })?;
    let figures = path.with_file_name("figures.csv");
    let figures = match File::open(&figures) {
        Err(cause) if cause.kind() == std::io::ErrorKind::NotFound => None,
        Err(cause) => return Err(file_error(&figures, cause)),
        Ok(file) => {
            let read = figures_csv::read(BufReader::new(file));
            Some(read.map_err(|cause| CliError::Job {
                place: figures.display().to_string(),
                message: cause.to_string(),
            })?)
        }
    };
    Ok((quote, figures))
}
