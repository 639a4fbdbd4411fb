//! `shotwright correct`: the dose correction of a mask, as numbers and as a picture.

use std::path::PathBuf;

use clap::Args;
use serde::Serialize;

use crate::expose::Density;
use crate::fracture::DoseLevels;
use crate::fracture::Effort;
use crate::quote::exposure::{LongRange, Maps};
use crate::quote::result::Method;
use crate::quote::{Chosen, Terms, made};
use crate::report::map_plot::{CorrectionPicture, Curve, MapValues};
use crate::report::progress::Progress;
use crate::report::table::significant;
use crate::shot::ShotList;
use crate::units::Nm;

use super::args::{LayoutArgs, Overrides, mask};
use super::output::{aligned, print, print_json};
use super::values::{Share, stray};
use super::{CliError, Outcome};

/// Show how densely a mask is written and the dose that every place of it needs against backscatter.
///
/// Coverage is that of the plain staircase, on a mesh of a quarter of the least long-range radius of the profile.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright correct sample-masks/mixed.oas --out correction.png
  shotwright correct clip.gds --layer 1/0 --profile mine.toml --surroundings 0.3 --json")]
pub(super) struct CorrectArgs {
    #[command(flatten)]
    layout: LayoutArgs,
    /// Writer and process numbers: a built-in name (see `shotwright profile`) or a TOML file.
    #[arg(long, value_name = "NAME|FILE", default_value = "shaped-400")]
    profile: String,
    /// How far the plain staircase may stray from the outline, nm.
    #[arg(long, value_name = "NM", default_value_t = 2.0, value_parser = stray, allow_negative_numbers = true)]
    within_nm: f64,
    /// Coverage of the mask beyond the layout, over 0, up to 1, written at the dose that suits it. Default: bare mask.
    #[arg(long, value_name = "C", allow_negative_numbers = true)]
    surroundings: Option<Share>,
    /// Picture to write, PNG: coverage, dose, and the level of edges before and after along the middle from left to right.
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
    /// Print JSON.
    #[arg(long)]
    json: bool,
    #[command(flatten)]
    numbers: Overrides,
}

#[derive(Serialize)]
struct Answer {
    backscatter_ratio: f64,
    mesh_nm: f64,
    /// A quarter of the least radius; the mesh is coarser where the mask has too many of such cells.
    wanted_mesh_nm: f64,
    columns: usize,
    rows: usize,
    surroundings: f64,
    mean_coverage: f64,
    least_dose: f64,
    greatest_dose: f64,
    /// Relative to the threshold, where something is written.
    uncorrected_level: [f64; 2],
    /// Greatest distance of the corrected level from 1, in any cell.
    residual: f64,
    rounds: u32,
}

pub(super) fn run(args: &CorrectArgs) -> Result<Outcome, CliError> {
    let profile = args.numbers.profile(&args.profile)?;
    let terms = Terms {
        profile: &profile,
        tolerance: Nm(args.within_nm),
        within: Nm(args.within_nm),
        effort: Effort::Quick,
        field: None,
        slot: None,
        peak_dose: None,
        dose_levels: DoseLevels::ONE,
        raster: None,
    };
    let refused = |file: &str| {
        let file = file.to_owned();
        move |cause| CliError::Quote { file, cause }
    };
    let setup = terms.setup().map_err(refused(&args.profile))?;
    let long_range = LongRange::new(&profile);
    if long_range.ratio() == 0.0 {
        return Err(CliError::Arguments(format!(
            "profile {}: states no backscatter and no fogging, expected at least one term",
            profile.name()
        )));
    }
    let options = args.layout.options()?;
    let layout = args.layout.open()?;
    let name = args.layout.file();
    let chosen = Chosen {
        name: &name,
        layout: &layout,
        options: &options,
    };
    let mask = mask(&chosen, &setup)?;
    let bar = Progress::new("figures", mask.figures.len() as u64);
    let staircase = crate::quote::fracturer(Method::Staircase, &terms);
    let fractures = made::fracture(&mask, staircase.as_ref(), &setup, &|| bar.inc());
    drop(bar);
    let shots: Vec<Option<&ShotList>> = fractures
        .iter()
        .map(|f| f.as_ref().ok().map(|f| &f.shots))
        .collect();
    let around = args.surroundings.map_or(0.0, |share| share.0);
    let maps = long_range
        .maps(&mask, &shots, around)
        .map_err(refused(&name))?;
    let Some(maps) = maps else {
        return Err(CliError::Arguments(
            "no density map of an empty mask".to_owned(),
        ));
    };
    let [columns, rows] = maps.coverage.size();
    let [least_dose, greatest_dose] = maps.found.dose.range();
    let answer = Answer {
        backscatter_ratio: long_range.ratio(),
        mesh_nm: maps.coverage.mesh().0,
        wanted_mesh_nm: long_range.wanted_mesh().map_or(0.0, |mesh| mesh.0),
        columns,
        rows,
        surroundings: maps.coverage.around(),
        mean_coverage: maps.coverage.mean(),
        least_dose,
        greatest_dose,
        uncorrected_level: maps.found.uncorrected_where_written(&maps.coverage),
        residual: maps.found.residual,
        rounds: maps.found.rounds,
    };
    if let Some(path) = &args.out {
        picture(&name, &maps)
            .png(path)
            .map_err(|cause| CliError::Picture {
                file: path.display().to_string(),
                cause,
            })?;
    }
    if args.json {
        print_json(&answer)?;
    } else {
        print(&aligned(&lines(&answer)))?;
    }
    Ok(Outcome::Done)
}

impl Answer {
    /// What a mesh coarser than wanted means: within it the doses are right on average only.
    fn coarse(&self) -> Option<String> {
        (self.mesh_nm > 1.001 * self.wanted_mesh_nm).then(|| {
            format!(
                ", coarser than the {} nm of a quarter of the least radius, for the size of the mask: a step of coverage is smeared over a cell",
                significant(self.wanted_mesh_nm)
            )
        })
    }
}

fn lines(a: &Answer) -> Vec<(&'static str, String)> {
    let [low, high] = a.uncorrected_level;
    vec![
        (
            "backscatter ratio, all terms",
            significant(a.backscatter_ratio),
        ),
        (
            "mesh",
            format!(
                "{} nm, {} × {} cells{}",
                significant(a.mesh_nm),
                a.columns,
                a.rows,
                a.coarse().unwrap_or_default()
            ),
        ),
        ("coverage, mean", significant(a.mean_coverage)),
        ("coverage beyond the layout", significant(a.surroundings)),
        (
            "dose",
            format!("{:.4} to {:.4}", a.least_dose, a.greatest_dose),
        ),
        (
            "edge level before, where written",
            format!("{low:.4} to {high:.4} of the threshold"),
        ),
        (
            "edge level after",
            format!("within {:.1e} of it, after {} rounds", a.residual, a.rounds),
        ),
    ]
}

/// Cells shown to both sides of the steepest step of a wide map: ten times the least radius.
const AROUND_STEP: usize = 40;

/// Owns what the picture borrows.
struct Picture {
    title: String,
    origin_um: [f64; 2],
    mesh_um: f64,
    along: &'static str,
    size: [usize; 2],
    cells: [Vec<f64>; 2],
    curves: [(&'static str, Vec<(f64, f64)>); 3],
}

fn picture(name: &str, maps: &Maps) -> Picture {
    let Maps { coverage, found } = maps;
    let [columns, rows] = coverage.size();
    let middle = rows / 2;
    let row = |map: &Density| map.cells()[middle * columns..(middle + 1) * columns].to_vec();
    // Over a wide map nothing could be seen of a step: shown is where the dose changes most.
    let (shown, along_what) = if columns > 4 * AROUND_STEP {
        let dose = row(&found.dose);
        let steps = dose.windows(2).map(|pair| (pair[1] - pair[0]).abs());
        let steepest = steps
            .enumerate()
            .max_by(|a, b| a.1.total_cmp(&b.1))
            .map_or(0, |(i, _)| i);
        let from = steepest.saturating_sub(AROUND_STEP);
        let to = (steepest + AROUND_STEP + 1).min(columns);
        (from..to, "along the middle, around its steepest step")
    } else {
        (0..columns, "along the middle from left to right")
    };
    let along = |map: &Density| -> Vec<(f64, f64)> {
        let row = row(map);
        let x = |column: usize| Nm(coverage.middle(column, middle)[0]).um();
        shown.clone().map(|i| (x(i), row[i])).collect()
    };
    let [x, y] = coverage.middle(0, 0).map(|v| Nm(v).um());
    let mesh_um = coverage.mesh().um();
    Picture {
        title: format!(
            "{name}: dose correction on a mesh of {} µm",
            significant(mesh_um)
        ),
        origin_um: [x - 0.5 * mesh_um, y - 0.5 * mesh_um],
        mesh_um,
        along: along_what,
        size: [columns, rows],
        cells: [coverage.cells().to_vec(), found.dose.cells().to_vec()],
        curves: [
            ("edge level before correction", along(&found.uncorrected)),
            ("edge level after correction", along(&found.edge_level)),
            ("dose, × dose-to-size", along(&found.dose)),
        ],
    }
}

impl Picture {
    fn png(&self, path: &std::path::Path) -> Result<(), crate::report::map_plot::PlotError> {
        let map = |label, i: usize| MapValues {
            label,
            size: self.size,
            cells: &self.cells[i],
        };
        let curves = self
            .curves
            .iter()
            .map(|(label, points)| Curve { label, points });
        CorrectionPicture {
            title: &self.title,
            origin_um: self.origin_um,
            mesh_um: self.mesh_um,
            maps: [map("coverage", 0), map("dose, × dose-to-size", 1)],
            along: self.along,
            curves: &curves.collect::<Vec<_>>(),
        }
        .png(path)
    }
}
