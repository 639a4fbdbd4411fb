//! Figures to look at or to send back.

use serde::{Deserialize, Serialize};

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
