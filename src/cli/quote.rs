//! `shotwright quote`: the whole job.

use std::fs;
use std::io::Write;
use std::path::{Path, PathBuf};

use clap::Args;

use crate::mask::Mask;
use crate::quote::result::{Fits, FlagKind, Method};
use crate::quote::{self, Answer, Chosen, Share, Terms};
use crate::report::figures_csv;
use crate::report::progress::Progress;
use crate::report::table::{self, TextOptions};
use crate::units::{Hours, Nm};
use crate::write_time::Field;

use super::args::{
    DoseArgs, EffortArg, LayoutArgs, Overrides, field_mm, mask, positive, share, stray,
};
use super::fracture::write;
use super::output::{create, file_error, print, print_json};
use super::pictures::Pictures;
use super::{CliError, Outcome};

/// Say how many hours a layout takes to write, whether that fits the slot, which fracture to order and which figures to send back.
///
/// Every distinct figure is fractured in three ways (plain staircase, tile, overlap) and judged on its simulated dose.
/// Exit status 1 if the recommended fracture does not surely fit the slot, or a dose is over --peak-dose.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright quote sample-masks/mixed.oas --slot-h 24 --out quote-mixed
  shotwright quote clip.oas --layer 1/0 --slot-h 24 --field-mm 104x132 --coverage 0.6
  shotwright quote clip.gds --slot-h 10 --profile mine.toml --settle-ns 50 --json

It is an estimate. The mask shop's own calibrated model and its written acceptance decide.")]
pub(super) struct QuoteArgs {
    #[command(flatten)]
    layout: LayoutArgs,
    /// Hours the writer is booked for.
    #[arg(long, value_name = "H", value_parser = positive, allow_negative_numbers = true)]
    slot_h: Option<f64>,
    /// Writer and process numbers: a built-in name (see `shotwright profile`) or a TOML file.
    #[arg(long, value_name = "NAME|FILE", default_value = "shaped-400")]
    profile: String,
    /// How far the printed contour may stray from the drawn outline, nm.
    #[arg(long, value_name = "NM", default_value_t = 2.0, value_parser = stray, allow_negative_numbers = true)]
    tolerance_nm: f64,
    /// How far the plain staircase may stray from the outline, nm. Default: the tolerance.
    #[arg(long, value_name = "NM", value_parser = stray, allow_negative_numbers = true)]
    within_nm: Option<f64>,
    /// How hard to search for fewer shots.
    #[arg(long, value_enum, default_value_t)]
    effort: EffortArg,
    /// Field that the layout is a clip of, width x height in mm. Default: the layout alone.
    #[arg(long, value_name = "WxH", value_parser = field_mm, requires = "coverage")]
    field_mm: Option<Field>,
    /// Share of the field that is filled with copies of the clip, over 0, up to 1.
    #[arg(long, value_name = "C", value_parser = share, allow_negative_numbers = true, requires = "field_mm")]
    coverage: Option<f64>,
    #[command(flatten)]
    doses: DoseArgs,
    /// Directory for quote.json, figures.csv, shot lists and pictures; made if it is not there. Default: no files.
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Flagged figures listed and drawn before the rest is only counted.
    #[arg(long, value_name = "N", default_value_t = 10)]
    flags: usize,
    /// Print the quote as JSON.
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    numbers: Overrides,
}

/// Lines of a shot list beyond which distinct figures are written once instead of at all their places.
const MOST_LINES: u128 = 1_000_000_000;

pub(super) fn run(args: &QuoteArgs) -> Result<Outcome, CliError> {
    let profile = args.numbers.profile(&args.profile)?;
    let terms = Terms {
        profile: &profile,
        tolerance: Nm(args.tolerance_nm),
        within: Nm(args.within_nm.unwrap_or(args.tolerance_nm)),
        effort: args.effort.into(),
        share: args
            .field_mm
            .zip(args.coverage)
            .map(|(field, coverage)| Share { field, coverage }),
        slot: args.slot_h.map(Hours),
        peak_dose: args.doses.peak(),
        dose_levels: args.doses.levels(),
    };
    let options = args.layout.options()?;
    let name = args.layout.file();
    let failed = |cause| CliError::Quote {
        file: name.clone(),
        cause,
    };
    let setup = terms.setup().map_err(|cause| CliError::Quote {
        file: args.profile.clone(),
        cause,
    })?;
    let files = args.out.as_deref().map(Files::create).transpose()?;
    let layout = args.layout.open()?;
    let chosen = Chosen {
        name: &name,
        layout: &layout,
        options: &options,
    };
    let mask = mask(&chosen, &setup)?;
    let bar = Progress::new("figures", quote::ticks(&mask));
    let mut answer = quote::quote(&chosen, &mask, &terms, &|| bar.inc()).map_err(failed)?;
    drop(bar);
    match files {
        Some(files) => files.write(&mask, &mut answer, &terms, args.flags)?,
        None => {
            eprintln!("no files written; --out DIR writes quote.json, figures, shots and pictures")
        }
    }
    if args.json {
        print_json(&answer.quote)?;
    } else {
        let options = TextOptions {
            flags: args.flags,
            ..TextOptions::default()
        };
        print(&table::text(&answer.quote, options))?;
    }
    let late = terms.slot.is_some() && answer.quote.verdict.fits != Fits::Yes;
    let peak = answer
        .quote
        .flags
        .iter()
        .any(|flag| flag.kind == FlagKind::PeakDoseOverLimit);
    Ok(Outcome::over_a_limit_if(late || peak))
}

/// The files of a quote, opened before the work.
struct Files {
    directory: PathBuf,
    quote: Sink,
    figures: Sink,
    tile: Sink,
    overlap: Sink,
}

type Sink = (PathBuf, std::io::BufWriter<fs::File>);

impl Files {
    fn create(directory: &Path) -> Result<Self, CliError> {
        fs::create_dir_all(directory).map_err(|cause| file_error(directory, cause))?;
        let sink = |name: &str| {
            let path = directory.join(name);
            let file = create(&path)?;
            Ok::<_, CliError>((path, file))
        };
        Ok(Self {
            directory: directory.to_owned(),
            quote: sink("quote.json")?,
            figures: sink("figures.csv")?,
            tile: sink("shots-tile.csv")?,
            overlap: sink("shots-overlap.csv")?,
        })
    }

    fn write(
        self,
        mask: &Mask,
        answer: &mut Answer,
        terms: &Terms<'_>,
        most: usize,
    ) -> Result<(), CliError> {
        for (method, (path, out)) in [(Method::Tile, self.tile), (Method::Overlap, self.overlap)] {
            let Some(made) = answer.made.get(method) else {
                continue;
            };
            let lines = answer.quote.fractures.get(method).map_or(0, |f| f.shots.0);
            let distinct = lines > MOST_LINES;
            write(mask, made, distinct, out).map_err(|cause| file_error(&path, cause))?;
            if distinct {
                answer.quote.notes.push(format!(
                    "{}: {lines} lines, so each distinct figure is written once, at its first place",
                    path.display()
                ));
            }
        }
        Pictures {
            mask,
            terms,
            directory: &self.directory,
        }
        .write(answer, most)?;
        let (path, out) = self.figures;
        figures_csv::write(out, &answer.figures)
            .map_err(|cause| file_error(&path, std::io::Error::other(cause)))?;
        let (path, mut out) = self.quote;
        serde_json::to_writer_pretty(&mut out, &answer.quote)
            .map_err(std::io::Error::from)
            .and_then(|()| writeln!(out))
            .and_then(|()| out.flush())
            .map_err(|cause| file_error(&path, cause))
    }
}
