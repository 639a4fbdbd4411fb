//! `shotwright sweep`: quotes under changed numbers.

use std::io::Write;

use clap::Args;

use crate::quote::Chosen;
use crate::quote::result::Method;
use crate::quote::sweep;
use crate::report::progress::Progress;
use crate::report::{sweep_csv, sweep_plot, sweep_text};

use super::args::mask;
use super::axis::AxisArg;
use super::files::{Output, Sink};
use super::job::RequestArgs;
use super::output::{print, print_json};
use super::{CliError, Outcome, start_threads};

/// Quote under changed numbers: hours against edge error.
///
/// Every combination of the values is quoted; a fracture is made once for all points that do not touch it. A number may be
/// tolerance_nm or any number of the profile: sigma_nm, base_dose_uc_cm2, passes, current_a_cm2, greatest_side_nm and so on.
/// LAYOUT may be a job file (.toml), as for `quote`. Exit status 0, whether or not a point fits the slot.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright sweep clip.oas --over tolerance_nm=1.5,2,3,4 --slot-h 24 --out sweep-tolerance
  shotwright sweep clip.oas --over current_a_cm2=200:1200:6 --field-mm 104x132 --coverage 0.5
  shotwright sweep job.toml --over tolerance_nm=2,3 --over greatest_side_nm=300,500,1000

With --out: sweep.csv, sweep.json, sweep.png and the resolved job.toml.
It is an estimate. The mask shop's own calibrated model and its written acceptance decide.")]
pub(super) struct SweepArgs {
    #[command(flatten)]
    request: RequestArgs,
    /// A number and its values, as KEY=V1,V2 or KEY=FROM:TO:HOW-MANY; repeat for several numbers. In place of `over` of a job file.
    #[arg(long, value_name = "KEY=VALUES", allow_negative_numbers = true)]
    over: Vec<AxisArg>,
}

/// More points are a slip of the hand.
const MOST_POINTS: usize = 10_000;

pub(super) fn run(args: &SweepArgs, threads: Option<u16>) -> Result<Outcome, CliError> {
    let mut plan = args.request.plan()?;
    let axes = plan.sweep_over(&args.over)?;
    if plan.sampling().is_some() {
        return Err(CliError::Arguments(
            "--within, --sample and --time-limit-min are for quote: a sweep fractures every figure"
                .to_owned(),
        ));
    }
    start_threads(threads.or(plan.threads))?;
    for (i, axis) in axes.iter().enumerate() {
        if axes[..i]
            .iter()
            .any(|other| other.parameter == axis.parameter)
        {
            return Err(CliError::Arguments(format!(
                "--over {} is given twice, expected one list of its values",
                axis.parameter.name()
            )));
        }
    }
    let many = axes
        .iter()
        .fold(1, |n: usize, axis| n.saturating_mul(axis.values.len()));
    if many > MOST_POINTS {
        return Err(CliError::Arguments(format!(
            "--over asks for {many} points, expected at most {MOST_POINTS}"
        )));
    }
    let terms = plan.terms();
    let points = sweep::points(&terms, &axes)?;
    let setup = terms.setup().map_err(|cause| CliError::Quote {
        file: plan.profile.name().to_owned(),
        cause,
    })?;
    let files = match &plan.out {
        Some(out) => Some(Files::create(Output::create(out)?)?),
        None => None,
    };
    let layouts = plan
        .clips
        .iter()
        .map(|clip| clip.open())
        .collect::<Result<Vec<_>, _>>()?;
    let chosen: Vec<(Chosen<'_>, Option<f64>)> = plan
        .clips
        .iter()
        .zip(&layouts)
        .map(|(clip, layout)| (clip.chosen(layout), clip.coverage))
        .collect();
    let mut figures = 0;
    for (chosen, _) in &chosen {
        figures += mask(chosen, &setup)?.figures.len() as u64;
    }
    let steps = 2 * Method::ALL.len() as u64 * figures * many as u64;
    let bar = Progress::new("figures", steps);
    let swept = sweep::sweep(&chosen, &terms, &axes, &points, &|| bar.inc());
    drop(bar);
    let names: Vec<&str> = plan.clips.iter().map(|clip| clip.name.as_str()).collect();
    let names = names.join(", ");
    let sweep = swept.map_err(|cause| CliError::Quote {
        file: names.clone(),
        cause,
    })?;
    match files {
        Some(files) => {
            let job = plan.resolved(files.output.directory(), None)?;
            files.job.write(|out| out.write_all(job.as_bytes()))?;
            files
                .csv
                .write(|out| sweep_csv::write(out, &sweep).map_err(std::io::Error::other))?;
            files.json.write(|out| {
                serde_json::to_writer_pretty(&mut *out, &sweep)?;
                writeln!(out)
            })?;
            let mut output = files.output;
            let path = output.claim("sweep.png")?;
            let title = format!("{names}: hours against edge error");
            sweep_plot::png(&sweep, &title, &path).map_err(|cause| CliError::Picture {
                file: path.display().to_string(),
                cause,
            })?;
        }
        None => eprintln!("no files written; --out DIR writes sweep.csv, sweep.json and sweep.png"),
    }
    if plan.json {
        print_json(&sweep)?;
    } else {
        print(&sweep_text::text(&sweep))?;
    }
    Ok(Outcome::Done)
}

/// The files of a sweep, opened before the work.
struct Files {
    output: Output,
    job: Sink,
    csv: Sink,
    json: Sink,
}

impl Files {
    fn create(mut output: Output) -> Result<Self, CliError> {
        Ok(Self {
            job: output.sink("job.toml")?,
            csv: output.sink("sweep.csv")?,
            json: output.sink("sweep.json")?,
            output,
        })
    }
}
