//! `sweep.csv`: a line for each point and fracture.

use std::io::Write;

use crate::quote::result::{Fits, Sweep};

/// Columns after those of the parameters.
const COLUMNS: [&str; 20] = [
    "fracture",
    "recommended",
    "fits",
    "shots",
    "smallest_side_nm",
    "slivers",
    "edge_error_mean_nm",
    "edge_error_p95_nm",
    "edge_error_worst_nm",
    "out_of_tolerance_share",
    "prints_within_tolerance",
    "margin_median_nm_per_pct",
    "flash_h",
    "settle_h",
    "subfield_h",
    "stage_h",
    "overhead_h",
    "total_h",
    "low_h",
    "high_h",
];

/// Writes a sweep after one header line. What was not measured is an empty cell.
///
/// # Errors
/// When the output cannot be written.
pub fn write(out: impl Write, sweep: &Sweep) -> Result<(), csv::Error> {
    let mut out = csv::Writer::from_writer(out);
    let parameters = sweep.parameters.iter().map(String::as_str);
    out.write_record(parameters.chain(COLUMNS))?;
    let number = |x: Option<f64>| x.map(|x| x.to_string()).unwrap_or_default();
    for point in &sweep.points {
        for (method, fracture) in point.fractures.iter() {
            let Some(f) = fracture else { continue };
            let mut row: Vec<String> = point.values.iter().map(f64::to_string).collect();
            let time =
                |part: fn(&crate::quote::result::Hours) -> f64| number(f.hours.as_ref().map(part));
            row.extend([
                method.name().to_owned(),
                (point.recommended == Some(method)).to_string(),
                f.hours
                    .and_then(|hours| sweep.fits(&hours))
                    .map_or_else(String::new, |fits| {
                        match fits {
                            Fits::Yes => "yes",
                            Fits::No => "no",
                            Fits::CannotSay => "cannot_say",
                        }
                        .to_owned()
                    }),
                f.shots.to_string(),
                number(f.smallest_side_nm),
                f.slivers.to_string(),
                number(f.edge_error_nm.mean),
                number(f.edge_error_nm.p95),
                number(f.edge_error_nm.worst),
                number(f.out_of_tolerance_share),
                f.prints_within_tolerance
                    .map(|yes| yes.to_string())
                    .unwrap_or_default(),
                number(f.margin_nm_per_pct.median),
                time(|h| h.flash_h),
                time(|h| h.settle_h),
                time(|h| h.subfield_h),
                time(|h| h.stage_h),
                time(|h| h.overhead_h),
                time(|h| h.total_h),
                time(|h| h.low_h),
                time(|h| h.high_h),
            ]);
            out.write_record(row)?;
        }
    }
    out.flush()?;
    Ok(())
}
