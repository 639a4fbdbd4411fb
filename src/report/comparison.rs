//! A comparison of two quotes as text for a terminal.

use std::fmt::Write as _;

use comfy_table::{CellAlignment, Table, presets};

use crate::number::{UNMEASURED, significant, trimmed};
use crate::quote::result::{Comparison, FigureChange, Hours, Method};

use super::table::grouped;

/// The whole comparison, ending in a newline; `most` figures are listed before the rest is only counted.
#[must_use]
pub fn text(comparison: &Comparison, most: usize) -> String {
    let mut out = String::new();
    if comparison.changed.is_empty() {
        out += "No term changed.\n";
    } else {
        let mut table = plain(["changed", "before", "after"]);
        for change in &comparison.changed {
            let or = |value: &String| {
                if value.is_empty() {
                    UNMEASURED.to_owned()
                } else {
                    value.clone()
                }
            };
            table.add_row([change.what.clone(), or(&change.before), or(&change.after)]);
        }
        out += &finished(table, 1);
    }
    out.push('\n');
    out += &hours(comparison);
    out.push('\n');
    match &comparison.time {
        None => {
            out += "No figures.csv beside both quotes, or nothing to order: the change is not traced to figures.\n"
        }
        Some(time) => {
            let _ = writeln!(
                out,
                "flashing and settling: {} s by figures that came, went or take other shots, {} s by the time a shot takes",
                signed(time.figures_s),
                signed(time.writer_s)
            );
            let _ = writeln!(
                out,
                "outlines with the same places and shots: {}; with others: {}",
                grouped(comparison.same.into()),
                grouped((comparison.figures.len() as u64).into())
            );
        }
    }
    if !comparison.figures.is_empty() {
        out.push('\n');
        out += &figures(&comparison.figures, most);
    }
    let _ = writeln!(out, "{}", comparison.caution);
    out
}

/// Hours of one cause.
type Part = fn(&Hours) -> f64;

fn hours(comparison: &Comparison) -> String {
    let [before, after] = &comparison.hours;
    let names = comparison
        .recommended
        .map(|m| m.map_or("none", Method::name));
    let mut table = plain([
        "hours".to_owned(),
        format!("before ({})", names[0]),
        format!("after ({})", names[1]),
        "change".to_owned(),
    ]);
    let parts: [(&str, Part); 6] = [
        ("flash", |h| h.flash_h),
        ("settle", |h| h.settle_h),
        ("sub-field", |h| h.subfield_h),
        ("stage", |h| h.stage_h),
        ("overhead", |h| h.overhead_h),
        ("total", |h| h.total_h),
    ];
    for (name, part) in parts {
        let of = |hours: &Option<Hours>| hours.as_ref().map(part);
        let (a, b) = (of(before), of(after));
        let text = |x: Option<f64>| x.map_or_else(|| UNMEASURED.to_owned(), significant);
        let change = a.zip(b).map(|(a, b)| signed(b - a));
        table.add_row([
            name.to_owned(),
            text(a),
            text(b),
            change.unwrap_or_else(|| UNMEASURED.to_owned()),
        ]);
    }
    finished(table, 1)
}

fn figures(changes: &[FigureChange], most: usize) -> String {
    let mut table = plain([
        "figure",
        "what",
        "at, nm",
        "places",
        "shots",
        "s before",
        "s after",
        "change, s",
    ]);
    for change in changes.iter().take(most) {
        let [before, after] = change.places;
        let what = match (before.0, after.0) {
            (0, _) => "came",
            (_, 0) => "went",
            (a, b) if a != b => "other places",
            _ => "other shots",
        };
        let pair = |[a, b]: [crate::quote::result::Count; 2]| {
            if a == b {
                grouped(a)
            } else {
                format!("{} → {}", grouped(a), grouped(b))
            }
        };
        table.add_row([
            format!("{}/{}", change.clip, change.figure),
            what.to_owned(),
            format!(
                "({}, {})",
                trimmed(change.place_nm[0]),
                trimmed(change.place_nm[1])
            ),
            pair(change.places),
            pair(change.shots),
            significant(change.seconds[0]),
            significant(change.seconds[1]),
            signed(change.seconds[1] - change.seconds[0]),
        ]);
    }
    let mut out = finished(table, 3);
    if changes.len() > most {
        let rest = (changes.len() - most) as u64;
        let _ = writeln!(out, "and {} more", grouped(rest.into()));
    }
    out
}

/// With its sign, + for more.
fn signed(x: f64) -> String {
    if x > 0.0 {
        format!("+{}", significant(x))
    } else {
        significant(x)
    }
}

fn plain<T: Into<String>, const N: usize>(header: [T; N]) -> Table {
    let mut table = Table::new();
    table
        .load_style(presets::NOTHING)
        .set_header(header.map(Into::into));
    table
}

/// Columns from `right` on to the right; no space at the line ends.
fn finished(mut table: Table, right: usize) -> String {
    for (i, column) in table.column_iter_mut().enumerate() {
        column.set_padding((if i > 0 { 2 } else { 0 }, 0));
        if i >= right {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let text = table.trim_fmt();
    text.lines()
        .map(|line| format!("{}\n", line.trim_end()))
        .collect()
}
