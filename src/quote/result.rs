//! The result of a quote: plain data, the same in memory, in `quote.json` and in every report.
//!
//! Units are in the names (`_nm`, `_h`, `_s`, `_nm_per_pct`). What was not measured is `None` (`null` in JSON), never 0.

mod comparison;
mod count;
mod exposure;
mod figure;
mod flag;
mod hours;
mod method;
mod remedy;
mod sampling;
mod sweep;
mod verdict;

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

pub use crate::judge::{CHANGES, Narrowest, Quantiles, Summary as Scores, ThroughDose};
pub use comparison::{Changed, Comparison, FigureChange, FigureShare, ShotShare, TimeChange};
pub use count::Count;
pub use exposure::DoseMap;
pub use figure::{FigureFracture, FigureResult};
pub use flag::{Flag, FlagKind};
pub use hours::{Hours, MoreFlashes, RasterLine, Sensitivity, StripeRow};
pub use method::{ByMethod, Method};
pub use remedy::{Change, FigureRemedies, MustChange, Remedy, Trial};
pub use sampling::{Estimate, SampleUsed, Stopped, StratumUsed};
pub use sweep::{Sweep, SweepPoint};
pub use verdict::{Fits, Flip, Verdict};

/// Said in every report, word for word.
pub const CAUTION: &str =
    "This is an estimate. The mask shop's own calibrated model and its written acceptance decide.";

/// A whole quote.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Quote {
    /// The layouts read: one, or the clips that stand for a field.
    pub sources: Vec<Source>,
    /// The profile, with the numbers used.
    pub profile: ProfileUsed,
    /// Tolerance on the edge error away from corners.
    pub tolerance_nm: f64,
    /// Standard deviation of the blur.
    pub sigma_nm: f64,
    /// The field that the clips stand for; `None` for the layout alone.
    pub scaled_to_field: Option<ScaledToField>,
    /// The dose of the mean coverage.
    pub dose_correction: DoseCorrection,
    /// What was assumed, repaired or left out, as sentences.
    pub notes: Vec<String>,
    /// Every fracture side by side.
    pub fractures: Fractures,
    /// Whether the slot suffices.
    pub verdict: Verdict,
    /// The fracture to order; `None` if none is fit to be ordered.
    pub recommended: Option<Method>,
    /// Why, in one sentence.
    pub reason: String,
    /// Slots at which the choice flips, upward; empty if it is the same for every slot.
    #[serde(default)]
    pub flips: Vec<Flip>,
    /// What moves the total of the recommended fracture, most first.
    #[serde(default)]
    pub sensitivity: Vec<Sensitivity>,
    /// A raster multi-beam writer beside it; `None` if not asked for.
    #[serde(default)]
    pub raster: Option<RasterLine>,
    /// Figures to look at or to send back, worst first.
    pub flags: Vec<Flag>,
    /// The sample that counts, hours and scores rest on; `None` if every figure was fractured without drawing.
    #[serde(default)]
    pub sample: Option<SampleUsed>,
    /// What was tried on flagged figures, most seconds first.
    #[serde(default)]
    pub remedies: Vec<FigureRemedies>,
    /// What must change for the mask to fit its slot; `None` if it fits, no slot was given, or it was not worked out.
    #[serde(default)]
    pub must_change: Option<MustChange>,
    /// In a sentence, why that is not known although the mask misses its slot; `None` if it is, or fits, or there is no slot.
    #[serde(default)]
    pub must_change_unknown: Option<String>,
    /// [`CAUTION`].
    pub caution: String,
}

/// The layout a quote is about.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Source {
    /// File name as given.
    pub name: String,
    /// Layers united, each as `L/D`.
    pub layers: Vec<String>,
    /// Layers subtracted from them.
    pub minus: Vec<String>,
    /// Mask length per layout length.
    pub scale: f64,
    /// Mirrored, `x → −x`.
    pub mirror: bool,
    /// Then moved by this.
    pub shift_nm: [f64; 2],
    /// Drawn edges moved outward by this.
    pub bias_nm: f64,
    /// `x0, y0, x1, y1` of the frame whose background is exposed; `None` if the figures are.
    pub background_of_nm: Option<[f64; 4]>,
    /// `x0, y0, x1, y1` of what alone was taken; `None` for all.
    pub window_nm: Option<[f64; 4]>,
    /// Width and height around all figures at mask scale; `None` for an empty mask.
    pub extent_nm: Option<[f64; 2]>,
    /// Share of the field filled with copies of it, 0 to 1; `None` where it stands for itself.
    pub coverage: Option<f64>,
    /// Figures that differ, each counted once.
    pub figures_distinct: u64,
    /// Figures at all their places.
    pub figures_placed: Count,
}

/// The profile of a quote.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ProfileUsed {
    /// Its name.
    pub name: String,
    /// Every number used, overrides included, by its key (which carries the unit).
    pub numbers: BTreeMap<String, f64>,
}

/// The field that clips stand for.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct ScaledToField {
    /// Width of the field.
    pub width_mm: f64,
    /// Height of the field.
    pub height_mm: f64,
    /// Share of the field filled with copies of the clips, 0 to 1.
    pub coverage: f64,
}

/// The dose that would suit the whole mask if its coverage were spread evenly. Contours at other doses and the shot noise are those
/// at this dose; flashes and margins follow the dose of each place, see [`FractureSummary::dose_map`].
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct DoseCorrection {
    /// For the mean coverage.
    pub dose: f64,
    /// Backscatter ratio η of the profile, all terms together.
    pub backscatter_ratio: f64,
    /// Mean coverage, 0 to 1.
    pub density: f64,
}

/// What the whole mask costs and how it prints, by fracture.
pub type Fractures = ByMethod<FractureSummary>;

/// One fracture of the whole mask.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct FractureSummary {
    /// Shots at all places.
    pub shots: Count,
    /// Shots of the distinct figures, each figure counted once.
    pub shots_distinct: u64,
    /// Least side of any shot; `None` without shots.
    pub smallest_side_nm: Option<f64>,
    /// Shots at all places whose short side is under the sliver limit.
    pub slivers: Count,
    /// Edge error over all outlines, corner zones apart.
    pub edge_error_nm: EdgeError,
    /// Share of the outline out of its tolerance, 0 to 1.
    pub out_of_tolerance_share: Option<f64>,
    /// Whether every figure prints within tolerance; `None` if not checked.
    pub prints_within_tolerance: Option<bool>,
    /// Distinct figures that do not print within tolerance; `None` if not checked.
    pub figures_out_of_tolerance: Option<u64>,
    /// How far the contour moves for 1 % of dose.
    pub margin_nm_per_pct: Margin,
    /// Standard deviation of the contour under the profile's errors of shot edges, shot doses and electrons, not exceeded on 95 % of the outline;
    /// `None` if the profile states no errors.
    #[serde(default)]
    pub edge_sd_nm: Option<f64>,
    /// Greatest dose anywhere, multiples of dose-to-size.
    pub peak_dose: Option<f64>,
    /// All scores: corner zones, contours at other doses, error budget, widths, areas, pieces.
    #[serde(default)]
    pub scores: Option<Scores>,
    /// The dose correction by place; `None` without a long range.
    #[serde(default)]
    pub dose_map: Option<DoseMap>,
    /// Hours to write the mask; `None` if they could not be computed.
    pub hours: Option<Hours>,
}

/// Edge error: the mean is signed (+ prints too large), the other two are magnitudes.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct EdgeError {
    /// Signed mean.
    pub mean: Option<f64>,
    /// Not exceeded on 95 % of the outline.
    pub p95: Option<f64>,
    /// Greatest.
    pub worst: Option<f64>,
}

/// How far the contour moves for 1 % of dose (small is good).
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Margin {
    /// Median over the contour.
    pub median: Option<f64>,
    /// Greatest.
    pub worst: Option<f64>,
}
