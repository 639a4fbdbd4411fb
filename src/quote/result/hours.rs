//! Hours, what makes them up and what moves them.

use serde::{Deserialize, Serialize};

use super::{Count, Fits};

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
