//! `shotwright fracture`: one fracture of a layout as a shot list.

use std::io::{self, BufWriter, Write};
use std::path::PathBuf;

use clap::{Args, ValueEnum};
use serde::Serialize;

use crate::fracture::Fracturer;
use crate::fracture::overlap::Overlap;
use crate::fracture::tile::{Prefer, Staircase, Tile};
use crate::judge::{Background, Settings};
use crate::mask::Mask;
use crate::quote::exposure::Exposed;
use crate::quote::made::{self, Made, Unmade};
use crate::quote::result::{Count, FractureSummary};
use crate::quote::{Setup, summary};
use crate::report::progress::Progress;
use crate::report::shots_csv::{Rows, ShotWriter};
use crate::units::Nm;

use super::args::{DoseArgs, SetupArgs};
use super::values::{EffortArg, stray};
use crate::report::table::{grouped, significant};

use super::drawn::{self, Drawn};
use super::output::{aligned, create, file_error, print, print_json, scores};
use super::{CliError, Outcome};

/// Fracture a layout into shots.
///
/// The result says how the shots print, and names the figures that do not print within tolerance with the place. Exit
/// status 1 if there is one, or a shot is outside the limits. In the shot list, x and y are the lower-left corner of a shot and w and h its size, nm at mask scale.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright fracture sample-masks/iso.oas --method overlap --sigma-nm 12 -o shots.csv
  shotwright fracture sample-masks/array-block.gds --method tile --exact --sigma-nm 12 -o -")]
pub(super) struct FractureArgs {
    #[command(flatten)]
    setup: SetupArgs,
    /// How to fracture.
    #[arg(long, value_enum)]
    method: MethodArg,
    /// How far the plain staircase may stray from the outline, nm. Default: the tolerance.
    #[arg(long, value_name = "NM", value_parser = stray, allow_negative_numbers = true)]
    within_nm: Option<f64>,
    /// Tile every rectilinear figure exactly, even one that is a curve drawn in pixels.
    #[arg(long)]
    exact: bool,
    /// What an exact tiling prefers: the fewest shots, or no slivers at the price of shots (the price is shown).
    #[arg(long, value_enum, default_value_t = PreferArg::Shots)]
    prefer: PreferArg,
    #[command(flatten)]
    doses: DoseArgs,
    /// Prove how many shots any overlap fracture needs at least: about half as much work again.
    #[arg(long)]
    bound: bool,
    /// How hard to search.
    #[arg(long, value_enum, default_value_t)]
    effort: EffortArg,
    /// Where the shots go: CSV, or a layout if the name ends in .oas or .gds (layer 1, the dose in thousandths as datatype); - is CSV
    /// on standard output, and the summary then goes to standard error.
    #[arg(short, long, value_name = "FILE")]
    output: Option<PathBuf>,
    /// Write the shots of each distinct figure once, at its first place, instead of at all its places.
    #[arg(long)]
    distinct: bool,
    /// Draw the printed contours into the layout, too: layer 2/0, around holes 2/1.
    #[arg(long)]
    contours: bool,
    /// Print the summary as JSON.
    #[arg(long)]
    json: bool,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum MethodArg {
    /// Plain geometric staircase in tiles, made without a model of the blur.
    Staircase,
    /// Shots that do not overlap.
    Tile,
    /// Shots that may overlap.
    Overlap,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum PreferArg {
    /// The fewest shots; slivers only break ties.
    Shots,
    /// One shot more for every sliver that a cut removes.
    Slivers,
}

#[derive(Serialize)]
struct Answer {
    #[serde(flatten)]
    summary: FractureSummary,
    figures_distinct: u64,
    figures_placed: Count,
    /// Shots at all places that any list of the kind needs; `None` if not known of every figure.
    lower_bound: Option<Count>,
    /// Shots at all places with a side outside the limits.
    shots_beyond_limits: Count,
    failing: Vec<Failing>,
    /// What the fracturer decided on its own, by figure.
    notes: Vec<String>,
}

/// A figure that does not print within tolerance.
#[derive(Serialize)]
struct Failing {
    figure: u64,
    /// The gravest place, mask coordinates.
    place_nm: [f64; 2],
    dose: Option<f64>,
    reason: String,
}

/// Failing figures told one by one.
const MOST_TOLD: usize = 20;

pub(super) fn run(args: &FractureArgs) -> Result<Outcome, CliError> {
    let plan = args.setup.plan()?;
    let setup = plan.setup;
    if args.bound && !matches!(args.method, MethodArg::Overlap) {
        return Err(CliError::Arguments(
            "--bound is for --method overlap".to_owned(),
        ));
    }
    if let Some(option) = args.doses.given()
        && !matches!(args.method, MethodArg::Overlap)
    {
        return Err(CliError::Arguments(format!(
            "{option} is for --method overlap"
        )));
    }
    if args.bound && !args.doses.levels().are_one() {
        return Err(CliError::Arguments(
            "--bound is proved for dose 1 only: leave out --dose-levels".to_owned(),
        ));
    }
    let to_stdout = args
        .output
        .as_ref()
        .is_some_and(|path| path.as_os_str() == "-");
    if to_stdout && args.json {
        return Err(CliError::Arguments(
            "--json and -o - both want standard output: give -o a file".to_owned(),
        ));
    }
    let drawn = args.output.as_deref().and_then(drawn::format);
    if args.contours && drawn.is_none() {
        return Err(CliError::Arguments(
            "--contours needs a layout to draw into: -o with a name that ends in .oas or .gds"
                .to_owned(),
        ));
    }
    let file = args
        .output
        .as_ref()
        .filter(|_| !to_stdout)
        .map(|path| Ok::<_, CliError>((path, create(path)?)))
        .transpose()?;
    let mask = args.setup.mask(&plan)?;
    let bar = Progress::new("figures", 2 * mask.figures.len() as u64);
    let tick = || bar.inc();
    let shots = made::fracture(&mask, args.fracturer().as_ref(), &setup, &tick);
    let settings = Settings::new(setup.blur, setup.tolerance);
    let made = made::judge(&mask, shots, &settings, &tick);
    drop(bar);
    let summary = summary::of_mask(
        &mask.figures,
        &made,
        &Exposed::as_fractured(&mask, &made),
        Background::default(),
        setup.limits.sliver,
    );

    if let (Some((path, out)), Some(format)) = (&file, drawn) {
        let drawn = Drawn {
            mask: &mask,
            made: &made,
            blur: setup.blur,
            contours: args.contours,
            distinct: args.distinct,
        };
        let (layout, shots) = drawn.layout();
        layout
            .write(format, BufWriter::new(out.get_ref()))
            .map_err(|cause| file_error(path, io::Error::other(cause)))?;
        eprintln!("{}: {shots} shots written as {format}", path.display());
        let left_out = drawn::too_large(&mask, setup.blur);
        if args.contours && left_out > 0 {
            eprintln!("{left_out} figures are too large for their contour to be drawn");
        }
    } else if let Some((path, mut out)) = file {
        let rows = write(&mask, &made, args.distinct, &mut out)
            .map_err(|cause| file_error(path, cause))?;
        eprintln!("{}: {rows} shots written", path.display());
    } else if to_stdout {
        write(&mask, &made, args.distinct, &mut io::stdout().lock()).map_err(CliError::Stdout)?;
    }
    let answer = Answer {
        shots_beyond_limits: Count(beyond_limits(&mask, &made, &setup)),
        figures_distinct: mask.figures.len() as u64,
        figures_placed: Count(mask.place_count()),
        lower_bound: lower_bound(&mask, &made),
        failing: failing(&mask, &made),
        notes: notes(&made),
        summary,
    };
    for note in answer.notes.iter().take(MOST_TOLD) {
        eprintln!("{note}");
    }
    if answer.notes.len() > MOST_TOLD {
        eprintln!("and {} more notes", answer.notes.len() - MOST_TOLD);
    }
    for one in answer.failing.iter().take(MOST_TOLD) {
        let [x, y] = one.place_nm;
        let dose = one
            .dose
            .map_or_else(String::new, |d| format!(", dose {d:.4}"));
        eprintln!(
            "figure {} at ({x:.1}, {y:.1}) nm does not print within tolerance{dose}: {}",
            one.figure, one.reason
        );
    }
    if answer.failing.len() > MOST_TOLD {
        eprintln!("and {} more figures", answer.failing.len() - MOST_TOLD);
    }
    if answer.shots_beyond_limits.0 > 0 {
        eprintln!(
            "{} shots have a side outside {} to {} nm",
            answer.shots_beyond_limits, setup.limits.least_side.0, setup.limits.greatest_side.0
        );
    }
    if args.json {
        print_json(&answer)?;
    } else if to_stdout {
        eprint!("{}", text(&answer));
    } else {
        print(&text(&answer))?;
        if args.output.is_none() {
            eprintln!("no file written; -o FILE writes the shots");
        }
    }
    let over = !answer.failing.is_empty() || answer.shots_beyond_limits.0 > 0;
    Ok(Outcome::over_a_limit_if(over))
}

impl FractureArgs {
    fn fracturer(&self) -> Box<dyn Fracturer> {
        let effort = self.effort.into();
        match self.method {
            MethodArg::Staircase => Box::new(Staircase {
                within: Nm(self.within_nm.unwrap_or(self.setup.tolerance_nm)),
            }),
            MethodArg::Tile => Box::new(Tile {
                effort,
                exact: self.exact,
                prefer: match self.prefer {
                    PreferArg::Shots => Prefer::FewTiles,
                    PreferArg::Slivers => Prefer::FewSlivers,
                },
            }),
            MethodArg::Overlap => Box::new(Overlap {
                bound: self.bound,
                peak_dose: self.doses.peak(),
                dose_levels: self.doses.levels(),
                ..Overlap::with(effort)
            }),
        }
    }
}

/// The notes of all figures, each with its figure.
fn notes(made: &[Result<Made, Unmade>]) -> Vec<String> {
    let of = |(figure, made): (u64, &Result<Made, Unmade>)| {
        let notes = made.as_ref().map_or(&[][..], |m| &m.fracture.notes);
        notes
            .iter()
            .map(|note| format!("figure {figure}: {note}"))
            .collect::<Vec<_>>()
    };
    (0..).zip(made).flat_map(of).collect()
}

/// Writes the shots of all figures; returns the number of lines.
pub(super) fn write(
    mask: &Mask,
    made: &[Result<Made, Unmade>],
    distinct: bool,
    out: impl Write,
) -> io::Result<u64> {
    let rows = if distinct {
        Rows::Distinct
    } else {
        Rows::Placed
    };
    let mut writer = ShotWriter::new(out, rows)?;
    for (number, (figure, made)) in (0..).zip(mask.figures.iter().zip(made)) {
        let Ok(made) = made else { continue };
        let places = figure.places.iter().map(|p| (p.transform, &p.repetition));
        writer.figure(number, &made.fracture.shots, places)?;
    }
    let lines = writer.lines();
    writer.finish()?;
    Ok(lines)
}

/// The scores, and how far the shots are from the fewest possible where that is known.
fn text(answer: &Answer) -> String {
    let mut lines = scores(&answer.summary);
    if let Some(bound) = answer.lower_bound {
        let excess = answer.summary.shots.0.saturating_sub(bound.0);
        #[allow(clippy::cast_precision_loss, reason = "a share, to be read")]
        let gap = 100.0 * excess as f64 / answer.summary.shots.0.max(1) as f64;
        lines.push((
            "lower bound",
            format!(
                "{} shots; at most {} % of those above could be saved",
                grouped(bound),
                significant(gap)
            ),
        ));
    }
    aligned(&lines)
}

fn lower_bound(mask: &Mask, made: &[Result<Made, Unmade>]) -> Option<Count> {
    let all = mask.figures.iter().zip(made);
    let mut bounds = all.map(|(figure, made)| {
        let bound = made.as_ref().ok()?.fracture.lower_bound?;
        Some(figure.place_count().saturating_mul(bound as u128))
    });
    let total = bounds.try_fold(0, |sum: u128, bound| Some(sum.saturating_add(bound?)));
    total.map(Count)
}

fn beyond_limits(mask: &Mask, made: &[Result<Made, Unmade>], setup: &Setup) -> u128 {
    let (least, greatest) = (setup.limits.least_side, setup.limits.greatest_side);
    let all = mask.figures.iter().zip(made);
    all.filter_map(|(figure, made)| {
        let beyond = summary::beyond_limits(&made.as_ref().ok()?.fracture.shots, least, greatest);
        Some(figure.place_count().saturating_mul(beyond as u128))
    })
    .fold(0, u128::saturating_add)
}

fn failing(mask: &Mask, made: &[Result<Made, Unmade>]) -> Vec<Failing> {
    let one = |(figure, made): (usize, &Result<Made, Unmade>)| {
        let distinct = &mask.figures[figure];
        let first = made::first_place(distinct);
        let corner = first.apply_rect(distinct.figure.bounds()).min.to_nm();
        let failing = |place_nm, dose, reason: String| {
            Some(Failing {
                figure: figure as u64,
                place_nm,
                dose,
                reason,
            })
        };
        let made = match made {
            Ok(made) if made.fidelity.prints_within_tolerance() => return None,
            Ok(made) => made,
            Err(error) => return failing(corner, None, error.to_string()),
        };
        let worst = made
            .fracture
            .misses
            .iter()
            .max_by(|a, b| (a.dose.0 - 0.5).abs().total_cmp(&(b.dose.0 - 0.5).abs()));
        match worst {
            Some(miss) => {
                let need = if miss.must_print {
                    "must print"
                } else {
                    "must not print"
                };
                let place = first.apply(miss.place).to_nm();
                failing(
                    place,
                    Some(miss.dose.0),
                    format!("{need}; {}", made::why(miss.reason)),
                )
            }
            None => {
                let violation = made.fidelity.worst_violations.first();
                let at = violation.map_or(corner, |v| {
                    let pm = |v: f64| Nm(v).to_pm().unwrap_or_default();
                    let place = crate::geom::Point::new(pm(v.place[0]), pm(v.place[1]));
                    first.apply(place).to_nm()
                });
                let dose = violation.map(|v| v.dose);
                failing(at, dose, "the shots of its neighbours reach it".to_owned())
            }
        }
    };
    made.iter().enumerate().filter_map(one).collect()
}
