//! `shotwright hours`: the writer model without a layout.

use clap::Args;
use serde::Serialize;

use crate::profile::{Key, Kind, Profile};
use crate::quote::hours::of_time;
use crate::quote::result::Hours;
use crate::report::table::{grouped, significant};
use crate::units::Dose;
use crate::write_time::{self, Bound, Counts, Pattern, WriteTime};

use super::args::Overrides;
use super::output::{aligned, print, print_json};
use super::values::{FieldMm, count, positive};
use super::{CliError, Outcome};

/// Hours from a number of shots, without a layout.
///
/// Stage travel, turns, calibrations and handling are 0 unless given, or stated by a profile. Flashing takes
/// shots × dose × base dose ÷ current density, settling takes shots × passes × settling time.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright hours --shots 3e11 --base-dose-uc-cm2 25 --current-a-cm2 400 --settle-ns 60 --passes 2
  shotwright hours --shots 2e11 --profile shaped-400 --field-mm 104x132
  shotwright hours --shots 0 --beam-na 1000 --base-dose-uc-cm2 100 --field-mm 104x132")]
pub(super) struct HoursArgs {
    /// Shots of one pass, such as 3e11.
    #[arg(long, value_name = "N", value_parser = count, allow_negative_numbers = true)]
    shots: u128,
    /// Profile to take the other numbers from: a built-in name or a TOML file.
    #[arg(long, value_name = "NAME|FILE")]
    profile: Option<String>,
    /// Mean dose of a shot, a multiple of dose-to-size.
    #[arg(long, value_name = "D", default_value_t = 1.0, value_parser = positive, allow_negative_numbers = true)]
    mean_dose: f64,
    /// Field that the stage travels over, width x height in mm; without it there is neither stage travel nor turn.
    #[arg(long, value_name = "WxH")]
    field_mm: Option<FieldMm>,
    /// Print JSON.
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    numbers: Overrides,
}

#[derive(Serialize)]
struct Answer {
    shots: crate::quote::result::Count,
    #[serde(flatten)]
    hours: Hours,
    bound: Bound,
}

pub(super) fn run(args: &HoursArgs) -> Result<Outcome, CliError> {
    let profile = match &args.profile {
        Some(name) => args.numbers.profile(name)?,
        None => {
            let kind = if args.numbers.has(Key::Beam) {
                Kind::Raster
            } else {
                Kind::Shaped
            };
            let needed = match kind {
                Kind::Shaped => Key::Current,
                Kind::Raster => Key::Beam,
            };
            for key in [needed, Key::BaseDose] {
                if !args.numbers.has(key) {
                    return Err(CliError::Arguments(format!(
                        "--{} is not given, expected {}; or name a --profile that states it",
                        key.info().name.replace('_', "-"),
                        key.expected()
                    )));
                }
            }
            Profile::from_numbers("command line", kind, args.numbers.0.iter().copied())?
        }
    };
    let pattern = Pattern::Counts {
        counts: Counts {
            mean_dose: Dose(args.mean_dose),
            ..Counts::of(args.shots)
        },
        field: args.field_mm.map(FieldMm::field),
    };
    let time = WriteTime::new(&profile, &pattern)?;
    let interval = write_time::interval(&profile, &pattern)?;
    let hours = Hours {
        low_h: interval.low_h.0,
        high_h: interval.high_h.0,
        ..of_time(&time)
    };
    let stage_bound = time.stripes.iter().any(|s| s.bound == Bound::Stage);
    if args.json {
        print_json(&Answer {
            shots: crate::quote::result::Count(args.shots),
            hours,
            bound: if stage_bound {
                Bound::Stage
            } else {
                Bound::Beam
            },
        })?;
        return Ok(Outcome::Done);
    }
    let digits = |x: f64| {
        if x >= 0.1 {
            format!("{x:.3}")
        } else {
            significant(x)
        }
    };
    let h = |x: f64| format!("{} h", digits(x));
    let mut lines = vec![
        ("shots", grouped(crate::quote::result::Count(args.shots))),
        ("flash", h(hours.flash_h)),
        ("settle", h(hours.settle_h)),
        ("sub-fields", h(hours.subfield_h)),
        ("stage", h(hours.stage_h)),
        ("overhead", h(hours.overhead_h)),
        ("total", h(hours.total_h)),
    ];
    if hours.low_h < hours.high_h {
        let interval = format!("{} to {}", digits(hours.low_h), h(hours.high_h));
        lines.push(("interval", interval));
    }
    print(&aligned(&lines))?;
    Ok(Outcome::Done)
}
