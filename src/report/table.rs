//! The table of a quote: a line for each fracture, or a column where lines are too short.

use comfy_table::{CellAlignment, ContentArrangement, Table};

use crate::number::{self, UNMEASURED, trimmed};
use crate::quote::result::{Count, FractureSummary, Hours, Quote, RasterLine};

pub use crate::number::significant;

/// Below this width, or where the wide table would not fit, measures run down and fractures across.
const NARROW: usize = 100;

/// Digits of a count in groups of three: `1 412`.
#[must_use]
pub fn grouped(count: Count) -> String {
    number::grouped(count.0)
}

/// One measure of a fracture: up to three header lines (wide table), a label (narrow table), its value.
struct Measure {
    header: &'static str,
    label: &'static str,
    value: Value,
}

/// What a measure is taken of.
enum Value {
    /// Shots and how they print.
    Print(fn(&FractureSummary) -> Option<String>),
    /// The hours, which a raster writer has too.
    Time(fn(&Hours) -> f64),
}

const fn print(
    header: &'static str,
    label: &'static str,
    value: fn(&FractureSummary) -> Option<String>,
) -> Measure {
    let value = Value::Print(value);
    Measure {
        header,
        label,
        value,
    }
}

const fn time(header: &'static str, label: &'static str, value: fn(&Hours) -> f64) -> Measure {
    let value = Value::Time(value);
    Measure {
        header,
        label,
        value,
    }
}

const MEASURES: [Measure; 15] = [
    print("\nshots\n", "shots", |f| Some(grouped(f.shots))),
    print("smallest\nside\nnm", "smallest side, nm", |f| {
        f.smallest_side_nm.map(trimmed)
    }),
    print("\nslivers\n", "slivers", |f| Some(grouped(f.slivers))),
    print("edge\nmean\nnm", "edge error, mean, nm", |f| {
        f.edge_error_nm.mean.map(|e| format!("{e:+.2}"))
    }),
    print("error\n95 %\nnm", "edge error, 95 %, nm", |f| {
        f.edge_error_nm.p95.map(|e| format!("{e:.2}"))
    }),
    print("\nworst\nnm", "edge error, worst, nm", |f| {
        f.edge_error_nm.worst.map(|e| format!("{e:.2}"))
    }),
    print("out of\ntol.\n%", "outline out of tolerance, %", |f| {
        f.out_of_tolerance_share
            .map(|s| format!("{:.2}", 100.0 * s))
    }),
    print("margin\nmedian\nnm/%", "margin, median, nm/%", |f| {
        f.margin_nm_per_pct.median.map(|m| format!("{m:.2}"))
    }),
    print("\nworst\nnm/%", "margin, worst, nm/%", |f| {
        f.margin_nm_per_pct.worst.map(|m| format!("{m:.2}"))
    }),
    time("time\nflash\nh", "time, flash, h", |h| h.flash_h),
    time("\nsettle\nh", "time, settle, h", |h| h.settle_h),
    time("sub-\nfield\nh", "time, sub-field moves, h", |h| {
        h.subfield_h
    }),
    time("\nstage\nh", "time, stage, h", |h| h.stage_h),
    time("over-\nhead\nh", "time, overhead, h", |h| h.overhead_h),
    time("\ntotal\nh", "time, total, h", |h| h.total_h),
];

/// Columns of the wide table that begin a group: edge error, margin, time.
const GROUPS: [usize; 3] = [4, 8, 10];

impl Measure {
    fn of(&self, column: Column<'_>) -> String {
        let value = match (&self.value, column) {
            (Value::Print(value), Column::Fracture(Some(fracture))) => value(fracture),
            (Value::Time(value), Column::Fracture(Some(fracture))) => {
                fracture.hours.map(|hours| significant(value(&hours)))
            }
            (Value::Time(value), Column::Raster(raster)) => Some(significant(value(&raster.hours))),
            (_, Column::Fracture(None)) | (Value::Print(_), Column::Raster(_)) => None,
        };
        value.unwrap_or_else(|| UNMEASURED.to_owned())
    }
}

/// What stands side by side.
#[derive(Clone, Copy)]
enum Column<'a> {
    Fracture(Option<&'a FractureSummary>),
    Raster(&'a RasterLine),
}

/// Every fracture, and the raster writer if there is one.
fn columns(quote: &Quote) -> Vec<(&'static str, Column<'_>)> {
    let fractures = quote.fractures.iter();
    let fractures = fractures.map(|(method, f)| (method.name(), Column::Fracture(f)));
    let raster = quote.raster.iter().map(|r| ("raster", Column::Raster(r)));
    fractures.chain(raster).collect()
}

/// Fractures side by side in at most `width` characters: one line each, or one column each where that is too wide.
pub(super) fn comparison(quote: &Quote, width: usize) -> String {
    if width >= NARROW {
        let wide = finished(wide(quote), &GROUPS);
        if wide.lines().all(|l| l.chars().count() <= width) {
            return wide;
        }
    }
    finished(narrow(quote), &[1, 2, 3, 4])
}

fn wide(quote: &Quote) -> Table {
    let mut table = Table::new();
    table.set_header(std::iter::once("\nfracture\n").chain(MEASURES.iter().map(|m| m.header)));
    for (name, column) in columns(quote) {
        table
            .add_row(std::iter::once(name.to_owned()).chain(MEASURES.iter().map(|m| m.of(column))));
    }
    table
}

fn narrow(quote: &Quote) -> Table {
    let mut table = Table::new();
    let columns = columns(quote);
    table.set_header(std::iter::once("").chain(columns.iter().map(|(name, _)| *name)));
    for measure in &MEASURES {
        table.add_row(
            std::iter::once(measure.label.to_owned())
                .chain(columns.iter().map(|(_, column)| measure.of(*column))),
        );
    }
    table
}

/// One line under the header, numbers to the right, a wider gap before the columns `gaps`, no space at the line ends.
pub(super) fn finished(mut table: Table, gaps: &[usize]) -> String {
    table
        .load_style(comfy_table::presets::NOTHING)
        .set_content_arrangement(ContentArrangement::Disabled);
    for (i, column) in table.column_iter_mut().enumerate() {
        let gap = if gaps.contains(&i) { 2 } else { 1 };
        column.set_padding((if i > 0 { gap } else { 0 }, 0));
        if i > 0 {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let text = table.trim_fmt();
    let lines: Vec<&str> = text.lines().collect();
    let rule = lines.iter().map(|l| l.chars().count()).max().unwrap_or(0);
    let head = table.header().map_or(0, |h| {
        h.cell_iter()
            .map(|c| c.content().split('\n').count())
            .max()
            .unwrap_or(0)
    });
    let mut out = String::new();
    for (i, line) in lines.iter().enumerate() {
        if i == head {
            out.push_str(&"─".repeat(rule));
            out.push('\n');
        }
        out.push_str(line.trim_end());
        out.push('\n');
    }
    out
}
