//! A sweep as text for a terminal: a line for each point and fracture.

use comfy_table::{CellAlignment, Table, presets};

use crate::number::{UNMEASURED, brief, given, grouped, significant};
use crate::quote::result::{Fits, Sweep};

/// The whole sweep, ending in a newline.
#[must_use]
pub fn text(sweep: &Sweep) -> String {
    let mut table = Table::new();
    let header = [
        "fracture",
        "shots",
        "edge error 95 %, nm",
        "prints",
        "margin, nm/%",
        "total, h",
        "interval, h",
        "fits",
        "order",
    ];
    let parameters = sweep.parameters.iter().map(String::as_str);
    table
        .load_style(presets::NOTHING)
        .set_header(parameters.chain(header));
    let or = |x: Option<String>| x.unwrap_or_else(|| UNMEASURED.to_owned());
    for point in &sweep.points {
        for (method, fracture) in point.fractures.iter() {
            let Some(f) = fracture else { continue };
            let mut row: Vec<String> = point.values.iter().map(|x| given(*x)).collect();
            let hours = f.hours;
            row.extend([
                method.name().to_owned(),
                grouped(f.shots.0),
                or(f.edge_error_nm.p95.map(|e| format!("{e:.2}"))),
                or(f.prints_within_tolerance
                    .map(|yes| if yes { "yes" } else { "no" }.to_owned())),
                or(f.margin_nm_per_pct.median.map(|m| format!("{m:.2}"))),
                or(hours.map(|h| significant(h.total_h))),
                or(hours.map(|h| format!("{} to {}", significant(h.low_h), significant(h.high_h)))),
                or(hours.and_then(|h| sweep.fits(&h)).map(|fits| {
                    match fits {
                        Fits::Yes => "yes",
                        Fits::No => "no",
                        Fits::CannotSay => "cannot say",
                    }
                    .to_owned()
                })),
                if point.recommended == Some(method) {
                    "*".to_owned()
                } else {
                    String::new()
                },
            ]);
            table.add_row(row);
        }
    }
    let names = sweep.parameters.len();
    for (i, column) in table.column_iter_mut().enumerate() {
        column.set_padding((if i > 0 { 2 } else { 0 }, 0));
        if i != names {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let mut out = String::new();
    for line in table.trim_fmt().lines() {
        out.push_str(line.trim_end());
        out.push('\n');
    }
    out += &format!(
        "\n{} points; {} figures fractured (each method and setup counted), {} taken from points before\n",
        grouped(sweep.points.len() as u128),
        grouped(sweep.fractured.into()),
        grouped(sweep.reused.into())
    );
    if let Some(slot) = sweep.slot_h {
        out += &format!("slot: {} h; * is the fracture to order\n", brief(slot));
    }
    out += &format!("{}\n", sweep.caution);
    out
}
