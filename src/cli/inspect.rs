//! `shotwright inspect`: what a layout holds.

use clap::Args;
use comfy_table::{CellAlignment, Table, presets};
use serde::Serialize;

use crate::layout::{Layer, Layout};
use crate::mask::{self, MaskOptions};
use crate::quote::result::Count;
use crate::report::table::{grouped, significant};
use crate::units::Nm;

use super::args::LayoutArgs;
use super::output::{print, print_json};
use super::{CliError, Outcome};

/// Show what a layout holds: cells, layers, figures, extents.
///
/// Polygons are counted as the file holds them; figures are what remains when the polygons of a layer are merged. Lengths
/// are at mask scale.
#[derive(Debug, Args)]
#[command(after_long_help = "Examples:
  shotwright inspect sample-masks/array-block.gds
  shotwright inspect clip.oas --layer 1/0 --scale 4 --json")]
pub(super) struct InspectArgs {
    #[command(flatten)]
    layout: LayoutArgs,
    /// Print JSON.
    #[arg(long)]
    json: bool,
}

#[derive(Serialize)]
struct Contents {
    file: String,
    database_unit_nm: f64,
    scale: f64,
    cells: u64,
    top_cells: Vec<String>,
    placements: Count,
    layers: Vec<LayerContents>,
    notes: Vec<String>,
}

#[derive(Serialize)]
struct LayerContents {
    layer: String,
    polygons: Count,
    figures_placed: Count,
    figures_distinct: u64,
    vertices: Count,
    holes: Count,
    most_vertices: u64,
    extent_nm: Option<[f64; 2]>,
    area_um2: f64,
    outline_um: f64,
    /// Of the figures, 0 to 1.
    curved_share: Option<f64>,
    /// Of the length of all outlines, 0 to 1.
    curved_outline_share: Option<f64>,
    rectilinear_outline_share: Option<f64>,
}

pub(super) fn run(args: &InspectArgs) -> Result<Outcome, CliError> {
    let layout = args.layout.open()?;
    let contents = contents(args, &layout)?;
    if args.json {
        print_json(&contents)?;
    } else {
        print(&text(&contents))?;
    }
    Ok(Outcome::Done)
}

fn contents(args: &InspectArgs, layout: &Layout) -> Result<Contents, CliError> {
    let summary = layout.summary();
    let options = args.layout.options()?;
    let chosen: Vec<Layer> = if options.layers.is_empty() {
        let all = summary.layers.keys().copied();
        all.filter(|layer| !options.minus.contains(layer)).collect()
    } else {
        options.layers.clone()
    };
    let mut layers = Vec::new();
    let mut notes = layout.notes.clone();
    for layer in chosen {
        let options = MaskOptions {
            layers: vec![layer],
            ..options.clone()
        };
        let mask = mask::build(layout, &options)
            .map_err(|cause| CliError::mask(&args.layout.file(), cause))?;
        let figures = mask.summary();
        let name = format!("{}/{}", layer.layer, layer.datatype);
        notes.extend(
            mask.notes
                .iter()
                .map(|note| format!("layer {name}: {note}")),
        );
        layers.push(LayerContents {
            layer: name,
            polygons: Count(summary.layers.get(&layer).copied().unwrap_or(0)),
            figures_placed: Count(figures.placed),
            figures_distinct: figures.distinct as u64,
            vertices: Count(figures.vertices),
            holes: Count(figures.holes),
            most_vertices: figures.most_vertices as u64,
            extent_nm: mask
                .extent
                .map(|extent| [extent.width(), extent.height()].map(|side| Nm::from_pm(side).0)),
            area_um2: figures.area_nm2 * 1e-6,
            outline_um: Nm(figures.outline_nm).um(),
            curved_share: figures.curved_share,
            curved_outline_share: figures.curved_outline_share,
            rectilinear_outline_share: figures.curved_outline_share.map(|share| 1.0 - share),
        });
    }
    Ok(Contents {
        file: args.layout.file(),
        database_unit_nm: layout.unit.0,
        scale: args.layout.scale(),
        cells: layout.cells.len() as u64,
        top_cells: summary
            .top_cells
            .iter()
            .map(|id| layout.cells[id.0].name.clone())
            .collect(),
        placements: Count(summary.placements),
        layers,
        notes,
    })
}

/// Top cells named in the text before the rest is only counted.
const MOST_NAMES: usize = 5;

fn text(contents: &Contents) -> String {
    let mut names = contents.top_cells[..contents.top_cells.len().min(MOST_NAMES)].join(", ");
    if contents.top_cells.len() > MOST_NAMES {
        names += &format!(" and {} more", contents.top_cells.len() - MOST_NAMES);
    }
    let mut table = Table::new();
    table.load_style(presets::NOTHING).set_header([
        "layer",
        "polygons",
        "figures",
        "distinct",
        "vertices",
        "holes",
        "extent, nm",
        "area, µm²",
        "curved, % of outline",
    ]);
    for layer in &contents.layers {
        let percent = layer.curved_outline_share.map(|share| 100.0 * share);
        let extent = layer.extent_nm.map(|[w, h]| format!("{w} × {h}"));
        table.add_row([
            layer.layer.clone(),
            grouped(layer.polygons),
            grouped(layer.figures_placed),
            grouped(layer.figures_distinct.into()),
            grouped(layer.vertices),
            grouped(layer.holes),
            extent.unwrap_or_else(|| "–".to_owned()),
            significant(layer.area_um2),
            percent.map_or_else(|| "–".to_owned(), significant),
        ]);
    }
    for (i, column) in table.column_iter_mut().enumerate() {
        column.set_padding((if i > 0 { 2 } else { 0 }, 0));
        if i > 0 {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let mut out = format!(
        "{}: database unit {} nm, scale {}\n{} cells, {} placements; top: {names}\n\n{}\n",
        contents.file,
        contents.database_unit_nm,
        contents.scale,
        grouped(contents.cells.into()),
        grouped(contents.placements),
        table.trim_fmt()
    );
    for note in &contents.notes {
        out += &format!("note: {note}\n");
    }
    out
}
