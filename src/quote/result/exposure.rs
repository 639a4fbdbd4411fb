//! What long-range exposure did to one fracture: plain data.

use serde::{Deserialize, Serialize};

/// The dose correction of one fracture, place by place. It makes flashes longer or shorter and margins better or worse; the
/// forward part of the dose at an edge, and so the contour, stays as it is.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct DoseMap {
    /// Side of a cell of the density map.
    pub mesh_nm: f64,
    /// A quarter of the least long-range radius; `mesh_nm` is greater where the mask is too large for it.
    pub wanted_mesh_nm: f64,
    /// Coverage beyond the mask's extent, 0 to 1, written at the dose that suits it.
    pub surroundings: f64,
    /// Least dose that a shot is multiplied by.
    pub least_dose: f64,
    /// Greatest dose that a shot is multiplied by.
    pub greatest_dose: f64,
    /// Mean by flashed area.
    pub mean_dose: f64,
    /// Least and greatest level that wide edges would see without correction, relative to the threshold.
    pub uncorrected_level: [f64; 2],
    /// Greatest distance from 1 of the level that they see with it, at the places of the figures with the doses handed out.
    pub level_error: f64,
    /// Rounds to the fixed point.
    pub rounds: u32,
}

impl DoseMap {
    /// Of several clips together: extremes; the mean weighs them alike. `None` of none.
    #[must_use]
    pub fn all<'a>(maps: impl IntoIterator<Item = &'a Self>) -> Option<Self> {
        let maps: Vec<Self> = maps.into_iter().copied().collect();
        let mean = maps.iter().map(|m| m.mean_dose).sum::<f64>() / maps.len() as f64;
        let both = |a: Self, b: Self| Self {
            mesh_nm: a.mesh_nm.max(b.mesh_nm),
            least_dose: a.least_dose.min(b.least_dose),
            greatest_dose: a.greatest_dose.max(b.greatest_dose),
            uncorrected_level: [
                a.uncorrected_level[0].min(b.uncorrected_level[0]),
                a.uncorrected_level[1].max(b.uncorrected_level[1]),
            ],
            level_error: a.level_error.max(b.level_error),
            rounds: a.rounds.max(b.rounds),
            ..a
        };
        let all = maps.into_iter().reduce(both)?;
        Some(Self {
            mean_dose: mean,
            ..all
        })
    }
}
