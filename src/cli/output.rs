//! Where results go: standard output, files opened before the work.

use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::Path;

use serde::Serialize;

use crate::quote::result::{Count, FractureSummary, Scores};
use crate::report::table::{grouped, significant};

use super::CliError;

/// Prints text.
pub(super) fn print(text: &str) -> Result<(), CliError> {
    let mut out = io::stdout().lock();
    out.write_all(text.as_bytes())
        .and_then(|()| out.flush())
        .map_err(CliError::Stdout)
}

/// Prints a value as JSON.
pub(super) fn print_json(value: &impl Serialize) -> Result<(), CliError> {
    let mut text = serde_json::to_string_pretty(value)
        .map_err(|cause| CliError::Stdout(io::Error::other(cause)))?;
    text.push('\n');
    print(&text)
}

/// Opens a file for writing.
pub(super) fn create(path: &Path) -> Result<BufWriter<File>, CliError> {
    File::create(path)
        .map(BufWriter::new)
        .map_err(|cause| file_error(path, cause))
}

pub(super) fn file_error(path: &Path, cause: io::Error) -> CliError {
    CliError::File {
        file: path.display().to_string(),
        cause,
    }
}

/// The scores of one fracture, a line each: label and value.
pub(super) fn scores(summary: &FractureSummary) -> Vec<(&'static str, String)> {
    let number = |x: Option<f64>| x.map_or_else(|| "–".to_owned(), significant);
    let signed = |x: Option<f64>| x.map_or_else(|| "–".to_owned(), |x| format!("{x:+.2}"));
    let error = summary.edge_error_nm;
    let percent = summary.out_of_tolerance_share.map(|share| 100.0 * share);
    let prints = match (
        summary.prints_within_tolerance,
        summary.figures_out_of_tolerance,
    ) {
        (Some(true), _) => "yes".to_owned(),
        (Some(false), Some(n)) => format!("no ({} figures do not)", grouped(n.into())),
        (Some(false), None) => "no".to_owned(),
        (None, _) => "not checked".to_owned(),
    };
    let mut lines = vec![
        ("shots", grouped(summary.shots)),
        (
            "smallest side",
            format!("{} nm", number(summary.smallest_side_nm)),
        ),
        ("slivers", grouped(summary.slivers)),
        ("edge error, mean", format!("{} nm", signed(error.mean))),
        ("edge error, 95 %", format!("{} nm", number(error.p95))),
        ("edge error, worst", format!("{} nm", number(error.worst))),
        ("outline out of tolerance", format!("{} %", number(percent))),
        ("prints within tolerance", prints),
        (
            "margin, median",
            format!("{} nm/%", number(summary.margin_nm_per_pct.median)),
        ),
        (
            "margin, worst",
            format!("{} nm/%", number(summary.margin_nm_per_pct.worst)),
        ),
    ];
    if let Some(scores) = summary.scores {
        lines.extend(further(&scores));
    }
    if let Some(peak) = summary.peak_dose {
        lines.push(("peak dose", format!("{} × dose-to-size", significant(peak))));
    }
    lines
}

/// What the judge says beyond the edge error; what was not measured is left out.
fn further(scores: &Scores) -> Vec<(&'static str, String)> {
    let mut lines = Vec::new();
    let mut line = |label, value: Option<f64>, unit: &str| {
        lines.extend(value.map(|x| (label, format!("{} {unit}", significant(x)))));
    };
    line("corner zones, 95 %", scores.corner_error_nm.p95, "nm");
    line("corner zones, worst", scores.corner_error_nm.worst, "nm");
    line("margin, worst 5 %", scores.margin_nm_per_pct.p95, "nm/%");
    line(
        "error budget, median",
        scores.edge_sd_nm.median,
        "nm (1 sd)",
    );
    line(
        "error budget, worst 5 %",
        scores.edge_sd_nm.p95,
        "nm (1 sd)",
    );
    let labels = [
        "edge error at -10 % dose, 95 %",
        "edge error at -5 % dose, 95 %",
        "edge error at +5 % dose, 95 %",
        "edge error at +10 % dose, 95 %",
    ];
    for (label, through) in labels.into_iter().zip(&scores.through_dose) {
        line(label, through.edge_error_nm.p95, "nm");
    }
    if let Some(narrowest) = scores.narrowest {
        line("narrowest place, drawn", Some(narrowest.drawn_nm), "nm");
        line("narrowest place, printed", narrowest.printed_nm, "nm");
    }
    let area = 100.0 * scores.printed_area_nm2 / scores.drawn_area_nm2;
    line(
        "area printed of that drawn",
        Some(area).filter(|a| a.is_finite()),
        "%",
    );
    let pieces = scores.pieces;
    for (label, n) in [
        ("figures lost", pieces.lost),
        ("figures in several pieces", pieces.split),
        ("figures bridged", pieces.bridged),
        ("figures with extra pieces", pieces.extra),
        ("figures with other holes", pieces.holes),
    ] {
        if n > 0 {
            lines.push((label, grouped(Count(n))));
        }
    }
    lines
}

/// Labels to the left, values in a column.
pub(super) fn aligned(lines: &[(&str, String)]) -> String {
    let width = lines.iter().map(|(label, _)| label.chars().count()).max();
    let width = width.unwrap_or(0) + 2;
    lines
        .iter()
        .map(|(label, value)| format!("{label:width$}{value}\n"))
        .collect()
}
