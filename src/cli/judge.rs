//! `shotwright judge`: the score of any shot list.

use std::fs::File;
use std::io::BufReader;
use std::path::PathBuf;

use clap::Args;
use serde::Serialize;

use crate::judge::Settings;
use crate::quote::result::FractureSummary;
use crate::quote::shots::score;
use crate::report::progress::Progress;
use crate::report::shots_csv;
use crate::units::Nm;

use super::args::SetupArgs;
use super::output::{aligned, file_error, print, print_json, scores};
use super::values::positive;
use super::{CliError, Outcome, raster};

/// Score a shot list against a layout.
///
/// Every figure at every place is judged on the dose of the whole list. Exit status 1 if one does not print within
/// tolerance, or a shot is outside the limits.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright judge sample-masks/iso.oas shots.csv --sigma-nm 12 --tolerance-nm 2
  shotwright judge clip.gds shots.csv --layer 1/0 --sigma-nm 12 --min-side-nm 10 --json

The shot list needs the columns x_nm, y_nm (lower-left corner), w_nm and h_nm; dose is 1 where there is no such column.")]
pub(super) struct JudgeArgs {
    #[command(flatten)]
    setup: SetupArgs,
    /// Shot list, CSV with a header.
    shots: PathBuf,
    /// Judge a second time on a raster of shots with pixels of this side, nm, blurred there, and compare: at most half of sigma.
    #[arg(long, value_name = "NM", value_parser = positive, allow_negative_numbers = true)]
    raster_nm: Option<f64>,
    /// Print JSON.
    #[arg(long)]
    json: bool,
}

#[derive(Serialize)]
struct Answer {
    #[serde(flatten)]
    summary: FractureSummary,
    /// Shots further than 5 σ from every figure.
    stray_shots: u64,
    /// Shots with a side outside the limits.
    shots_beyond_limits: u64,
    /// What the raster says; `None` if it was not asked.
    raster: Option<raster::Second>,
}

/// Failing figures told one by one.
const MOST_TOLD: usize = 20;

pub(super) fn run(args: &JudgeArgs) -> Result<Outcome, CliError> {
    let plan = args.setup.plan()?;
    let setup = plan.setup;
    let input = File::open(&args.shots).map_err(|cause| file_error(&args.shots, cause))?;
    let mask = args.setup.mask(&plan)?;
    let file = args.shots.display().to_string();
    let list = shots_csv::read(BufReader::new(input), setup.limits.address)
        .map_err(|cause| CliError::Shots { file, cause })?;
    for note in &list.notes {
        eprintln!("note: {}: {note}", args.shots.display());
    }
    let places = u64::try_from(mask.place_count()).unwrap_or(u64::MAX);
    let bar = Progress::new("figures", places);
    let settings = Settings::new(setup.blur, setup.tolerance);
    let scored =
        score(&mask, &list.shots, &settings, &setup.limits, &|| bar.inc()).map_err(|cause| {
            CliError::TooManyPlaces {
                file: plan.name,
                cause,
            }
        })?;
    drop(bar);
    for (figure, transform, fidelity) in scored.failing.iter().take(MOST_TOLD) {
        let bounds = transform.apply_rect(mask.figures[*figure].figure.bounds());
        let [x, y] = bounds.min.to_nm();
        let worst = fidelity.worst_violations.first().map_or_else(
            || "its pieces or holes are not as drawn".to_owned(),
            |v| {
                format!(
                    "dose {:.4} at ({:.1}, {:.1}) nm",
                    v.dose, v.place[0], v.place[1]
                )
            },
        );
        eprintln!(
            "figure {figure} at ({x:.1}, {y:.1}) nm does not print within tolerance: {worst}"
        );
    }
    if scored.failing.len() > MOST_TOLD {
        eprintln!("and {} more figures", scored.failing.len() - MOST_TOLD);
    }
    if scored.stray > 0 {
        eprintln!(
            "{} shots are further than 5 σ from every figure",
            scored.stray
        );
    }
    if scored.beyond_limits > 0 {
        eprintln!(
            "{} shots have a side outside {} to {} nm",
            scored.beyond_limits, setup.limits.least_side.0, setup.limits.greatest_side.0
        );
    }
    let second = match args.raster_nm {
        Some(pixel) => Some(raster::ask(&mask, &list.shots, &settings, Nm(pixel))?),
        None => None,
    };
    let prints = scored.summary.prints_within_tolerance == Some(true)
        && second.as_ref().is_none_or(raster::Second::agrees);
    let outcome = Outcome::over_a_limit_if(!prints || scored.beyond_limits > 0);
    if args.json {
        print_json(&Answer {
            summary: scored.summary,
            stray_shots: scored.stray as u64,
            shots_beyond_limits: scored.beyond_limits as u64,
            raster: second,
        })?;
    } else {
        let mut lines = scores(&scored.summary);
        lines.extend(second.iter().flat_map(raster::Second::lines));
        print(&aligned(&lines))?;
    }
    Ok(outcome)
}
