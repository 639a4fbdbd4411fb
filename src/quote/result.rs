//! The result of a quote: plain data, the same in memory, in `quote.json` and in every report.
//!
//! Units are in the names (`_nm`, `_h`, `_s`, `_nm_per_pct`). What was not measured is `None` (`null` in JSON), never 0.

mod comparison;
mod exposure;
mod sweep;

use std::collections::BTreeMap;
use std::fmt;

mod remedy;
mod sampling;

pub use remedy::{Change, FigureRemedies, MustChange, Remedy, Trial};
pub use sampling::{Estimate, SampleUsed, Stopped, StratumUsed};

use serde::de::{self, Deserializer, Visitor};
use serde::{Deserialize, Serialize, Serializer};

pub use crate::judge::{CHANGES, Narrowest, Quantiles, Summary as Scores, ThroughDose};
pub use comparison::{Changed, Comparison, FigureChange, FigureShare, ShotShare, TimeChange};
pub use exposure::DoseMap;
pub use sweep::{Sweep, SweepPoint};

/// Said in every report, word for word.
pub const CAUTION: &str =
    "This is an estimate. The mask shop's own calibrated model and its written acceptance decide.";

/// A count that may exceed 64 bits: in JSON a number if it fits 64 bits, else a string of digits.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Count(pub u128);

impl fmt::Display for Count {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.fmt(f)
    }
}

impl From<u64> for Count {
    fn from(n: u64) -> Self {
        Self(n.into())
    }
}

impl Serialize for Count {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        match u64::try_from(self.0) {
            Ok(n) => serializer.serialize_u64(n),
            Err(_) => serializer.collect_str(self),
        }
    }
}

impl<'de> Deserialize<'de> for Count {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Digits;
        impl Visitor<'_> for Digits {
            type Value = Count;
            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a count, as a whole number or a string of digits")
            }
            fn visit_u64<E: de::Error>(self, n: u64) -> Result<Count, E> {
                Ok(n.into())
            }
            fn visit_str<E: de::Error>(self, s: &str) -> Result<Count, E> {
                s.parse()
                    .map(Count)
                    .map_err(|_| E::invalid_value(de::Unexpected::Str(s), &self))
            }
        }
        deserializer.deserialize_any(Digits)
    }
}

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

/// The three fractures that a quote compares.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Method {
    /// The plain geometric staircase in tiles: the baseline.
    Staircase,
    /// Shots that do not overlap.
    Tile,
    /// Shots that may overlap.
    Overlap,
}

impl Method {
    /// All, in the order of every report.
    pub const ALL: [Self; 3] = [Self::Staircase, Self::Tile, Self::Overlap];

    /// One word for tables and file names.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Staircase => "staircase",
            Self::Tile => "tile",
            Self::Overlap => "overlap",
        }
    }
}

/// One value per fracture; `None` where that fracture was not made.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ByMethod<T> {
    /// For [`Method::Staircase`].
    pub staircase: Option<T>,
    /// For [`Method::Tile`].
    pub tile: Option<T>,
    /// For [`Method::Overlap`].
    pub overlap: Option<T>,
}

/// What the whole mask costs and how it prints, by fracture.
pub type Fractures = ByMethod<FractureSummary>;

impl<T> Default for ByMethod<T> {
    fn default() -> Self {
        Self {
            staircase: None,
            tile: None,
            overlap: None,
        }
    }
}

impl<T> ByMethod<T> {
    /// The value for one fracture.
    #[must_use]
    pub fn get(&self, method: Method) -> Option<&T> {
        match method {
            Method::Staircase => self.staircase.as_ref(),
            Method::Tile => self.tile.as_ref(),
            Method::Overlap => self.overlap.as_ref(),
        }
    }

    /// Where the value for one fracture is kept.
    pub fn slot(&mut self, method: Method) -> &mut Option<T> {
        match method {
            Method::Staircase => &mut self.staircase,
            Method::Tile => &mut self.tile,
            Method::Overlap => &mut self.overlap,
        }
    }

    /// All three in the order of every report.
    pub fn iter(&self) -> impl Iterator<Item = (Method, Option<&T>)> {
        Method::ALL.into_iter().map(|m| (m, self.get(m)))
    }
}

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

/// A slot at which another fracture becomes the one to order.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Flip {
    /// The slot.
    pub slot_h: f64,
    /// Ordered below it.
    pub below: Method,
    /// Ordered from it on.
    pub from: Method,
}

/// Hours by cause. `total_h` is the sum of `flash_h`, `settle_h`, `subfield_h`, `stage_h` and `overhead_h`.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Hours {
    /// Shots of one pass that they are for: those of the whole field where clips stand for one.
    #[serde(default)]
    pub shots_written: Count,
    /// Flashes over all passes: a shot is flashed more than once where a border cuts it or a limit of the writer divides it.
    #[serde(default)]
    pub flashes: Count,
    /// Of them, those beyond one for each shot and pass, by what made them.
    #[serde(default)]
    pub more_flashes: MoreFlashes,
    /// Of them, those shorter than the shortest that the writer can make: not writable in so many passes at this current.
    #[serde(default)]
    pub too_short: Count,
    /// Stripes over all passes …
    #[serde(default)]
    pub stripes: u64,
    /// … and those of them in which the beam waits for the stage.
    #[serde(default)]
    pub stage_bound_stripes: u64,
    /// All together.
    pub total_h: f64,
    /// Beam on.
    pub flash_h: f64,
    /// Waiting for the beam to settle between shots.
    pub settle_h: f64,
    /// Moving between sub-fields.
    pub subfield_h: f64,
    /// Stage travel that the beam waits for, and turns.
    pub stage_h: f64,
    /// Calibrations, load, soak, align, unload.
    pub overhead_h: f64,
    /// Lower end of the interval of the total; `total_h` if exact.
    pub low_h: f64,
    /// Upper end of the interval of the total; `total_h` if exact.
    pub high_h: f64,
}

/// How one number of the profile moves the total when it alone changes by ±10 % (a count by ±1).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Sensitivity {
    /// Its key.
    pub key: String,
    /// As the profile has it.
    pub value: f64,
    /// Total with the number at its lower value.
    pub at_lower_h: f64,
    /// Total with the number at its upper value.
    pub at_upper_h: f64,
}

/// A raster multi-beam writer over the same field at the same base dose: its hours do not depend on the pattern.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct RasterLine {
    /// Its profile.
    pub profile: String,
    /// Its hours.
    pub hours: Hours,
    /// Flashes of one pass at which the shaped-beam writer takes as long, flashed as the recommended fracture is on average;
    /// `None` where it takes longer without any flash, or nothing is recommended.
    pub tie_flashes: Option<Count>,
    /// Flashes of one pass of the recommended fracture.
    pub flashes: Option<Count>,
}

/// Consecutive stripes that are alike, in passes that are alike: a line of `stripes.csv`. Times are of one stripe in one pass.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct StripeRow {
    /// In how many passes they are written so.
    pub passes: u32,
    /// First of these stripes, counted upward from 0.
    pub stripe: u64,
    /// How many.
    pub count: u64,
    /// Flashes.
    pub flashes: Count,
    /// Flashing.
    pub flash_s: f64,
    /// Settling.
    pub settle_s: f64,
    /// Moving from sub-field to sub-field.
    pub subfield_s: f64,
    /// By how much the stage takes longer than these three together; it bounds the stripe where this is not 0.
    pub stage_s: f64,
}

/// Flashes beyond one for each shot and pass, over all passes.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct MoreFlashes {
    /// A border of a stripe or sub-field cuts a shot.
    pub border: Count,
    /// A shot is too large for the beam current.
    pub beam_current: Count,
    /// A shot needs a greater dose than one flash may give.
    pub dose: Count,
}

/// Whether the mask can be written in the slot.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Fits {
    /// The upper end of the interval is within the slot.
    Yes,
    /// The lower end is beyond it.
    No,
    /// The slot lies inside the interval, or none was given.
    CannotSay,
}

/// The answer to "does it fit".
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Verdict {
    /// Yes, no, cannot say.
    pub fits: Fits,
    /// Hours the writer is booked for; `None` if not given.
    pub slot_h: Option<f64>,
    /// In one sentence, with the numbers.
    pub sentence: String,
}

/// What is wrong with a figure.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum FlagKind {
    /// Takes a greater share of the hours than of the outline.
    CostsMoreThanItsShare,
    /// Narrower than this blur can print.
    NotPrintableAtThisBlur,
    /// No fracture was found that prints within tolerance.
    ToleranceNotReached,
    /// A shot is beyond what the writer can flash.
    ShotLimitsNotMet,
    /// The dose piles up above the limit.
    PeakDoseOverLimit,
    /// The outline crosses itself, or was repaired.
    BrokenOutline,
}

impl FlagKind {
    /// As written in files.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::CostsMoreThanItsShare => "costs_more_than_its_share",
            Self::NotPrintableAtThisBlur => "not_printable_at_this_blur",
            Self::ToleranceNotReached => "tolerance_not_reached",
            Self::ShotLimitsNotMet => "shot_limits_not_met",
            Self::PeakDoseOverLimit => "peak_dose_over_limit",
            Self::BrokenOutline => "broken_outline",
        }
    }
}

/// A figure to look at or to send back.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Flag {
    /// The layout it is of, counted from 1 in the order of the sources.
    pub clip: u64,
    /// Number of the distinct figure in it.
    pub figure: u64,
    /// Where it shows, mask coordinates.
    pub place_nm: [f64; 2],
    /// What is wrong.
    pub kind: FlagKind,
    /// How much, in `unit`; `None` where there is nothing to measure.
    pub number: Option<f64>,
    /// Unit of `number`, with what it counts: "nm edge error", "% of the hours".
    pub unit: String,
    /// What would help, in one sentence.
    pub remedy: String,
    /// Picture of the figure, a file beside the report.
    pub picture: Option<String>,
}

impl Hours {
    /// Whether they fit so many hours: by the upper end of the interval.
    #[must_use]
    pub fn fits(&self, slot_h: f64) -> Fits {
        if self.high_h <= slot_h {
            Fits::Yes
        } else if self.low_h > slot_h {
            Fits::No
        } else {
            Fits::CannotSay
        }
    }
}

/// One distinct figure: a line of `figures.csv`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct FigureResult {
    /// The layout it is of, counted from 1 in the order of the sources.
    pub clip: u64,
    /// Its number there.
    pub figure: u64,
    /// Lower-left corner of its bounds at its first place, mask coordinates.
    pub place_nm: [f64; 2],
    /// Hash of its outline in its own frame, 16 hexadecimal digits: equal figures have equal ones, in other layouts too.
    pub fingerprint: String,
    /// At how many places it stands.
    pub places: Count,
    /// Length of all its rings.
    pub outline_nm: f64,
    /// Vertices of all its rings.
    pub vertices: u64,
    /// Whether every edge is axis-parallel.
    pub rectilinear: bool,
    /// Its fractures.
    pub fractures: ByMethod<FigureFracture>,
    /// What is wrong with it.
    pub flags: Vec<FlagKind>,
}

/// One fracture of one distinct figure.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct FigureFracture {
    /// Shots at one place.
    pub shots: u64,
    /// Edge error along its outline.
    pub edge_error_nm: EdgeError,
    /// Whether it prints within tolerance; `None` if not checked.
    pub prints_within_tolerance: Option<bool>,
    /// All its scores.
    #[serde(default)]
    pub scores: Option<Scores>,
    /// Mean of the doses that its shots are multiplied by at all its places; `None` without a long range.
    #[serde(default)]
    pub mean_dose: Option<f64>,
    /// Seconds to flash and settle it at all its places; `None` if not computed.
    pub seconds: Option<f64>,
}
