//! `shotwright quote`: the whole job.

use std::io::Write;

use clap::Args;

use crate::mask::Mask;
use crate::quote::result::{Fits, FlagKind, Method};
use crate::quote::{self, Answer, Chosen, Clip, Terms};
use crate::report::figures_csv;
use crate::report::html::{self, Beside};
use crate::report::progress::Progress;
use crate::report::remedies_csv;
use crate::report::stripes_csv;
use crate::report::text::{TextOptions, text};

use super::args::mask;
use super::files::{Output, Sink};
use super::fracture::write;
use super::job::{Plan, RequestArgs};
use super::output::{print, print_json};
use super::pictures::Pictures;
use super::{CliError, Outcome, start_threads};

/// Say how many hours a layout takes to write, whether that fits the slot, which fracture to order and which figures to send back.
///
/// Every distinct figure is fractured in three ways (plain staircase, tile, overlap) and judged on its simulated dose. LAYOUT may
/// be a job file (.toml): every long flag, with _ for -, is a key of it; see `job.toml` of any --out for all of them. Flags
/// override the file. Exit status 1 if the recommended fracture does not surely fit the slot, or a dose is over --peak-dose.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright quote sample-masks/mixed.oas --slot-h 24 --out quote-mixed
  shotwright quote clip.oas --layer 1/0 --slot-h 24 --field-mm 104x132 --coverage 0.6
  shotwright quote layer.oas --layer 1/0 --slot-h 24 --within 2% --time-limit-min 30
  shotwright quote job.toml --slot-h 10 --settle-ns 50 --json

A job file:
  slot_h = 24
  profile = \"shaped-400\"        # a built-in name, a file, or a table [profile]
  field_mm = [104, 132]         # with a coverage for each clip; leave both out for one layout alone
  [numbers]                     # in place of the profile's own
  settle_ns = { value = 50, plus_minus = 5 }
  [[clip]]                      # one or more; files are named as seen from the job file
  layout = \"dense.oas\"
  layer = [\"1/0\"]
  coverage = 0.4
  [[clip]]
  layout = \"iso.oas\"
  coverage = 0.2

It is an estimate. The mask shop's own calibrated model and its written acceptance decide.")]
pub(super) struct QuoteArgs {
    #[command(flatten)]
    request: RequestArgs,
}

/// Lines of a shot list beyond which distinct figures are written once instead of at all their places.
const MOST_LINES: u128 = 1_000_000_000;

pub(super) fn run(args: &QuoteArgs, threads: Option<u16>) -> Result<Outcome, CliError> {
    let plan = args.request.plan()?;
    plan.no_sweep()?;
    start_threads(threads.or(plan.threads))?;
    let terms = plan.terms();
    let of_profile = |cause| CliError::Quote {
        file: plan.profile.name().to_owned(),
        cause,
    };
    let setup = terms.setup().map_err(of_profile)?;
    let files = match &plan.out {
        Some(out) => Some(Files::create(Output::create(out)?, &plan)?),
        None => None,
    };
    let layouts = plan
        .clips
        .iter()
        .map(|clip| clip.open())
        .collect::<Result<Vec<_>, _>>()?;
    let chosen: Vec<Chosen<'_>> = plan
        .clips
        .iter()
        .zip(&layouts)
        .map(|(clip, layout)| clip.chosen(layout))
        .collect();
    let masks = chosen
        .iter()
        .map(|chosen| mask(chosen, &setup))
        .collect::<Result<Vec<Mask>, _>>()?;
    let clips: Vec<Clip<'_>> = plan
        .clips
        .iter()
        .zip(chosen.iter().zip(&masks))
        .map(|(clip, (&chosen, mask))| Clip {
            chosen,
            mask,
            coverage: clip.coverage,
        })
        .collect();
    let bar = Progress::new("figures", quote::ticks(&masks));
    let tick = || bar.inc();
    let answer = match plan.sampling() {
        Some(sample) => {
            sample.run(|sampling| quote::quote_sampled(&clips, &terms, sampling, &tick))
        }
        None => quote::quote(&clips, &terms, &tick),
    };
    drop(bar);
    let answer = answer.and_then(|mut answer| {
        quote::remedies(&clips, &terms, &mut answer)?;
        Ok(answer)
    });
    let names: Vec<&str> = plan.clips.iter().map(|clip| clip.name.as_str()).collect();
    let mut answer = answer.map_err(|cause| CliError::Quote {
        file: names.join(", "),
        cause,
    })?;
    match files {
        Some(files) => files.write(&clips, &mut answer, &terms, &plan)?,
        None => {
            eprintln!("no files written; --out DIR writes quote.json, figures, shots and pictures")
        }
    }
    if plan.json {
        print_json(&answer.quote)?;
    } else {
        let options = TextOptions {
            flags: plan.flags,
            ..TextOptions::default()
        };
        print(&text(&answer.quote, options))?;
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
    output: Output,
    job: Sink,
    quote: Sink,
    figures: Sink,
    stripes: Sink,
    remedies: Sink,
    page: Sink,
    /// By clip: tile and overlap, with their names.
    shots: Vec<[(Method, String, Sink); 2]>,
}

/// What the page links to.
const BESIDE: [Beside<'static>; 5] = [
    Beside {
        name: "quote.json",
        about: "the whole result",
    },
    Beside {
        name: "figures.csv",
        about: "a line for each distinct figure",
    },
    Beside {
        name: "stripes.csv",
        about: "the time of each stripe by cause",
    },
    Beside {
        name: "remedies.csv",
        about: "what was tried on flagged figures and what must change, with seconds saved and edge error paid",
    },
    Beside {
        name: "job.toml",
        about: "all that was asked, to quote again",
    },
];

/// What the files of a clip begin with: nothing where there is one, else its number.
pub(super) fn prefix(clip: usize, clips: usize) -> String {
    if clips > 1 {
        format!("clip-{}-", clip + 1)
    } else {
        String::new()
    }
}

impl Files {
    fn create(mut output: Output, plan: &Plan) -> Result<Self, CliError> {
        let clips = plan.clips.len();
        let mut shots = Vec::with_capacity(clips);
        for clip in 0..clips {
            let mut of = |method: Method| {
                let name = format!("{}shots-{}.csv", prefix(clip, clips), method.name());
                let sink = output.sink(&name)?;
                Ok::<_, CliError>((method, name, sink))
            };
            shots.push([of(Method::Tile)?, of(Method::Overlap)?]);
        }
        Ok(Self {
            job: output.sink("job.toml")?,
            quote: output.sink("quote.json")?,
            figures: output.sink("figures.csv")?,
            stripes: output.sink("stripes.csv")?,
            remedies: output.sink("remedies.csv")?,
            page: output.sink("report.html")?,
            shots,
            output,
        })
    }

    fn write(
        mut self,
        clips: &[Clip<'_>],
        answer: &mut Answer,
        terms: &Terms<'_>,
        plan: &Plan,
    ) -> Result<(), CliError> {
        let job = plan.resolved(self.output.directory(), answer.quote.sample.as_ref())?;
        self.job.write(|out| out.write_all(job.as_bytes()))?;
        for ((clip, of_clip), sinks) in clips.iter().zip(&answer.made).zip(self.shots) {
            for (method, name, sink) in sinks {
                let Some(made) = of_clip.get(method) else {
                    continue;
                };
                let lines = clip.mask.figures.iter().zip(made.iter()).fold(
                    0,
                    |sum: u128, (figure, made)| {
                        let shots = made.as_ref().map_or(0, |made| made.fracture.shots.len());
                        sum.saturating_add(figure.place_count().saturating_mul(shots as u128))
                    },
                );
                let distinct = lines > MOST_LINES;
                sink.write(|out| write(clip.mask, made, distinct, out).map(drop))?;
                if distinct {
                    answer.quote.notes.push(format!(
                        "{name}: {lines} lines, so each distinct figure is written once, at its first place"
                    ));
                }
            }
        }
        let pictures = Pictures { clips, terms };
        let shown = pictures.write(answer, plan.flags, &mut self.output)?;
        self.figures
            .write(|out| figures_csv::write(out, &answer.figures).map_err(std::io::Error::other))?;
        self.remedies
            .write(|out| remedies_csv::write(out, &answer.quote).map_err(std::io::Error::other))?;
        self.stripes
            .write(|out| stripes_csv::write(out, &answer.stripes).map_err(std::io::Error::other))?;
        self.page.write(|out| {
            let pictures: Vec<Beside<'_>> = shown
                .iter()
                .map(|(name, about)| Beside { name, about })
                .collect();
            let page = html::page(&answer.quote, &pictures, &BESIDE, plan.flags);
            out.write_all(page.as_bytes())
        })?;
        self.quote.write(|out| {
            serde_json::to_writer_pretty(&mut *out, &answer.quote)?;
            writeln!(out)
        })
    }
}
