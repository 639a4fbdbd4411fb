//! `stripes.csv`: the time of each stripe by cause, alike ones together.

use std::io::Write;

use crate::quote::result::{ByMethod, StripeRow};

/// Writes the stripes of every fracture, after one header line. Times are of one stripe in one pass.
///
/// # Errors
/// When the output cannot be written.
pub fn write(out: impl Write, stripes: &ByMethod<Vec<StripeRow>>) -> Result<(), csv::Error> {
    let mut out = csv::Writer::from_writer(out);
    out.write_record([
        "fracture",
        "passes",
        "stripe",
        "count",
        "flashes",
        "flash_s",
        "settle_s",
        "subfield_s",
        "stage_s",
        "bound",
    ])?;
    for (method, rows) in stripes.iter() {
        for row in rows.into_iter().flatten() {
            let bound = if row.stage_s > 0.0 { "stage" } else { "beam" };
            out.write_record([
                method.name(),
                &row.passes.to_string(),
                &row.stripe.to_string(),
                &row.count.to_string(),
                &row.flashes.to_string(),
                &row.flash_s.to_string(),
                &row.settle_s.to_string(),
                &row.subfield_s.to_string(),
                &row.stage_s.to_string(),
                bound,
            ])?;
        }
    }
    out.flush()?;
    Ok(())
}
