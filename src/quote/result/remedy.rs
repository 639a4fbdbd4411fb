//! What was tried on single figures, and what of it brings the mask into its slot.

use serde::{Deserialize, Serialize};

use crate::number::brief;

use super::{EdgeError, Fits, Hours, Method};

/// What was done with a figure.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", tag = "what")]
pub enum Remedy {
    /// Fractured for this tolerance instead of the mask's.
    LooserTolerance {
        /// The tolerance.
        tolerance_nm: f64,
    },
    /// Fractured in the other way.
    OtherFracture {
        /// Which.
        method: Method,
    },
    /// Corners and wiggles under this radius rounded off, inward and outward, before it is fractured.
    Smoother {
        /// The radius.
        radius_nm: f64,
    },
    /// Cut as a plain staircase within this of the outline.
    CoarserStaircase {
        /// How far it strays.
        within_nm: f64,
    },
    /// The same shots at this multiple of their dose.
    OtherDose {
        /// The multiple.
        dose: f64,
    },
}

impl Remedy {
    /// As sentences say it.
    #[must_use]
    pub fn words(&self) -> String {
        match self {
            Self::LooserTolerance { tolerance_nm } => {
                format!("tolerance {} nm", brief(*tolerance_nm))
            }
            Self::OtherFracture { method } => format!("{} fracture", method.name()),
            Self::Smoother { radius_nm } => format!("outline smoothed by {} nm", brief(*radius_nm)),
            Self::CoarserStaircase { within_nm } => {
                format!("plain staircase within {} nm", brief(*within_nm))
            }
            Self::OtherDose { dose } => format!("dose × {}", brief(*dose)),
        }
    }

    /// One word for files.
    #[must_use]
    pub const fn name(&self) -> &'static str {
        match self {
            Self::LooserTolerance { .. } => "looser_tolerance",
            Self::OtherFracture { .. } => "other_fracture",
            Self::Smoother { .. } => "smoother",
            Self::CoarserStaircase { .. } => "coarser_staircase",
            Self::OtherDose { .. } => "other_dose",
        }
    }
}

/// A remedy tried on a figure: what it saves and what it costs. Edge errors are against the outline as drawn.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Trial {
    /// What was done.
    pub remedy: Remedy,
    /// Shots at one place.
    pub shots: u64,
    /// Seconds to flash and settle them at all places, of the field where clips stand for one.
    pub seconds: f64,
    /// Seconds less than without; negative if more.
    pub saved_s: f64,
    /// Edge error with it.
    pub edge_error_nm: EdgeError,
    /// Whether the figure then prints within the mask's tolerance.
    pub prints_within_tolerance: bool,
    /// Whether its pieces and holes print as drawn and it strays by twice the tolerance at most: else it is no remedy.
    pub acceptable: bool,
}

/// All that was tried on one figure.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct FigureRemedies {
    /// The layout it is of, counted from 1.
    pub clip: u64,
    /// Its number there.
    pub figure: u64,
    /// Lower-left corner of its bounds at its first place, mask coordinates.
    pub place_nm: [f64; 2],
    /// The fracture that the remedies are compared with.
    pub method: Method,
    /// Its shots at one place.
    pub shots: u64,
    /// Its seconds at all places.
    pub seconds: f64,
    /// Its edge error.
    pub edge_error_nm: EdgeError,
    /// What was tried, in a fixed order.
    pub trials: Vec<Trial>,
}

/// A figure to change, and how.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Change {
    /// The layout it is of, counted from 1.
    pub clip: u64,
    /// Its number there.
    pub figure: u64,
    /// The remedy, as tried.
    pub trial: Trial,
}

/// What must change so that the mask fits its slot, quoted again with all changes made.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct MustChange {
    /// The fracture of all other figures.
    pub method: Method,
    /// Most seconds saved first.
    pub changes: Vec<Change>,
    /// Hours with them.
    pub hours_after: Hours,
    /// Whether the slot then suffices.
    pub fits_after: Fits,
    /// By how much the upper end of the interval is still over the slot; `None` if it is not.
    pub missing_h: Option<f64>,
    /// Edge error of the whole mask with them, against the outlines as drawn.
    pub edge_error_after_nm: EdgeError,
    /// Distinct figures out of the mask's tolerance with them.
    pub figures_out_of_tolerance_after: u64,
    /// In a sentence or two.
    pub sentence: String,
}
