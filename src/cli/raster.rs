//! `judge --raster-nm`: the second witness of a shot list.

use serde::Serialize;

use crate::judge::{Settings, Summary};
use crate::mask::Mask;
use crate::quote::witness::{Witnessed, witness};
use crate::report::progress::Progress;
use crate::report::table::significant;
use crate::shot::ShotList;
use crate::units::Nm;

use super::CliError;

/// What the raster says, as JSON.
#[derive(Debug, Serialize)]
pub(super) struct Second {
    pixel_nm: f64,
    /// Its scores.
    scores: Summary,
    /// Greatest difference of the doses on the outline and σ beside it.
    dose_difference: f64,
    /// What the raster may be off for each unit of dose piled up.
    bound: f64,
    /// The share of that bound, times the dose piled up, that the difference takes at most.
    of_bound: f64,
    edge_difference_nm: f64,
    places: u64,
}

pub(super) fn ask(
    mask: &Mask,
    shots: &ShotList,
    settings: &Settings,
    pixel: Nm,
) -> Result<Second, CliError> {
    let places = u64::try_from(mask.place_count()).unwrap_or(u64::MAX);
    let bar = Progress::new("figures, raster", places);
    let Witnessed {
        scores,
        dose_difference,
        of_bound,
        bound,
        edge_difference,
        places,
    } = witness(mask, shots, settings, pixel, &|| bar.inc())?;
    Ok(Second {
        pixel_nm: pixel.0,
        scores,
        dose_difference,
        bound,
        of_bound,
        edge_difference_nm: edge_difference.0,
        places,
    })
}

impl Second {
    /// Whether it is as near to the closed form as it may be.
    pub(super) fn agrees(&self) -> bool {
        self.of_bound <= 1.0
    }

    pub(super) fn lines(&self) -> Vec<(&'static str, String)> {
        let nm =
            |x: Option<f64>| x.map_or_else(|| "–".to_owned(), |x| format!("{} nm", significant(x)));
        let yes = if self.scores.prints_within_tolerance {
            "yes"
        } else {
            "no"
        };
        let within = if self.agrees() { "within" } else { "BEYOND" };
        vec![
            (
                "raster: dose differs by",
                format!(
                    "{:.1e} at most, {within} the bound of {:.1e} for each unit of dose ({} places, {} nm pixels)",
                    self.dose_difference, self.bound, self.places, self.pixel_nm
                ),
            ),
            (
                "raster: edge error differs by",
                format!("{} at most", nm(Some(self.edge_difference_nm))),
            ),
            (
                "raster: edge error, 95 %",
                nm(self.scores.edge_error_nm.p95),
            ),
            (
                "raster: edge error, worst",
                nm(self.scores.edge_error_nm.worst),
            ),
            ("raster: prints within tolerance", yes.to_owned()),
        ]
    }
}
