//! `remedies.csv`: what was tried on single figures, and which of it must be done.

use std::io::Write;

use crate::quote::result::{Quote, Trial};

const HEADER: [&str; 14] = [
    "clip",
    "figure",
    "must_change",
    "remedy",
    "detail",
    "shots",
    "seconds",
    "saved_s",
    "edge_error_mean_nm",
    "edge_error_p95_nm",
    "edge_error_worst_nm",
    "prints_within_tolerance",
    "acceptable",
    "flagged",
];

/// Writes a line for each trial on a flagged figure, then those of the changes on figures that are not flagged, after one header line.
///
/// # Errors
/// When the output cannot be written.
pub fn write(out: impl Write, quote: &Quote) -> Result<(), csv::Error> {
    let mut out = csv::Writer::from_writer(out);
    out.write_record(HEADER)?;
    let changes = quote.must_change.iter().flat_map(|change| &change.changes);
    let must = |clip: u64, figure: u64, trial: &Trial| {
        changes.clone().any(|change| {
            (change.clip, change.figure) == (clip, figure) && change.trial.remedy == trial.remedy
        })
    };
    for of_figure in &quote.remedies {
        for trial in &of_figure.trials {
            let (clip, figure) = (of_figure.clip, of_figure.figure);
            out.write_record(row(clip, figure, must(clip, figure, trial), trial, true))?;
        }
    }
    for change in changes.clone() {
        let flagged = quote
            .remedies
            .iter()
            .any(|r| (r.clip, r.figure) == (change.clip, change.figure));
        if !flagged {
            out.write_record(row(change.clip, change.figure, true, &change.trial, false))?;
        }
    }
    out.flush()?;
    Ok(())
}

fn row(clip: u64, figure: u64, must: bool, trial: &Trial, flagged: bool) -> [String; HEADER.len()] {
    let number = |x: Option<f64>| x.map(|x| x.to_string()).unwrap_or_default();
    [
        clip.to_string(),
        figure.to_string(),
        must.to_string(),
        trial.remedy.name().to_owned(),
        trial.remedy.words(),
        trial.shots.to_string(),
        trial.seconds.to_string(),
        trial.saved_s.to_string(),
        number(trial.edge_error_nm.mean),
        number(trial.edge_error_nm.p95),
        number(trial.edge_error_nm.worst),
        trial.prints_within_tolerance.to_string(),
        trial.acceptable.to_string(),
        flagged.to_string(),
    ]
}
