//! `shotwright sweep`: quotes under changed numbers.

use std::io::Write;
use std::str::FromStr;

use clap::Args;

use crate::quote::Chosen;
use crate::quote::result::Method;
use crate::quote::sweep::{self, Axis, Parameter};
use crate::report::progress::Progress;
use crate::report::{sweep_csv, sweep_plot, sweep_text};

use super::args::mask;
use super::files::{Output, Sink};
use super::job::RequestArgs;
use super::output::{print, print_json};
use super::values::Finite;
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
    /// A number and its values, as KEY=V1,V2 or KEY=FROM:TO:HOW-MANY; repeat for several numbers.
    #[arg(
        long,
        value_name = "KEY=VALUES",
        required = true,
        allow_negative_numbers = true
    )]
    over: Vec<AxisArg>,
}

/// More points are a slip of the hand.
const MOST_POINTS: usize = 10_000;

/// `tolerance_nm=1,2,3` or `tolerance_nm=1:3:3`.
#[derive(Clone, Debug, PartialEq)]
struct AxisArg(Axis);

impl FromStr for AxisArg {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let form = "expected KEY=V1,V2 or KEY=FROM:TO:HOW-MANY, as tolerance_nm=1.5,2,3";
        let (name, values) = text.split_once('=').ok_or(form)?;
        let name = name.replace('-', "_");
        let parameter = Parameter::named(&name)
            .ok_or_else(|| format!("`{name}` is no number of a profile, nor tolerance_nm"))?;
        let number = |text: &str| {
            let number = text.trim().parse::<Finite>().map(|Finite(x)| x);
            number.map_err(|_| form.to_owned())
        };
        let ends: Vec<&str> = values.split(':').collect();
        let values = match ends[..] {
            [from, to, many] => {
                let (from, to) = (number(from)?, number(to)?);
                let many: u16 = many.trim().parse().map_err(|_| form.to_owned())?;
                if many < 2 {
                    return Err(form.to_owned());
                }
                let share = |i: u16| f64::from(i) / f64::from(many - 1);
                (0..many)
                    .map(|i| from + (to - from) * share(i))
                    .collect::<Vec<f64>>()
            }
            [_] => values.split(',').map(number).collect::<Result<_, _>>()?,
            _ => return Err(form.to_owned()),
        };
        if parameter == Parameter::Tolerance
            && let Some(wrong) = values.iter().find(|x| !(**x > 0.0 && **x <= 1000.0))
        {
            return Err(format!(
                "`{name}` is {wrong}, expected a number over 0, up to 1000"
            ));
        }
        Ok(Self(Axis { parameter, values }))
    }
}

pub(super) fn run(args: &SweepArgs, threads: Option<u16>) -> Result<Outcome, CliError> {
    let plan = args.request.plan()?;
    if plan.sampling().is_some() {
        return Err(CliError::Arguments(
            "--within, --sample and --time-limit-min are for quote: a sweep fractures every figure"
                .to_owned(),
        ));
    }
    start_threads(threads.or(plan.threads))?;
    let axes: Vec<Axis> = args.over.iter().map(|AxisArg(axis)| axis.clone()).collect();
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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_are_a_list_or_a_range() {
        let values = |text: &str| AxisArg::from_str(text).map(|AxisArg(axis)| axis.values);
        assert_eq!(values("tolerance-nm=1,2.5").unwrap(), [1.0, 2.5]);
        assert_eq!(values("sigma_nm=10:20:3").unwrap(), [10.0, 15.0, 20.0]);
        for wrong in [
            "sigma_nm",
            "sigma_nm=",
            "sigma_nm=1:2",
            "sigma_nm=1:2:1",
            "sigma_nm=a",
            "nobody=1",
            "tolerance_nm=0",
        ] {
            assert!(values(wrong).is_err(), "{wrong}");
        }
    }
}
