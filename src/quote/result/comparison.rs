//! The result of a comparison of two quotes.

use serde::{Deserialize, Serialize};

use super::{ByMethod, Count, Hours, Method};

/// What one figure of a quote costs: what a comparison needs of a line of `figures.csv`.
#[derive(Clone, Debug, PartialEq)]
pub struct FigureShare {
    /// The layout it is of, counted from 1.
    pub clip: u64,
    /// Its number there.
    pub figure: u64,
    /// Lower-left corner of its bounds at its first place, mask coordinates.
    pub place_nm: [f64; 2],
    /// Hash of its outline.
    pub fingerprint: String,
    /// At how many places it stands.
    pub places: Count,
    /// Its fractures.
    pub fractures: ByMethod<ShotShare>,
}

/// One fracture of one figure.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ShotShare {
    /// Shots at one place.
    pub shots: u64,
    /// Seconds to flash and settle it at all its places.
    pub seconds: Option<f64>,
}

/// What changed from one quote to another.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Comparison {
    /// Terms and numbers that are not the same, in the order of the quote.
    pub changed: Vec<Changed>,
    /// The fracture to order, before and after.
    pub recommended: [Option<Method>; 2],
    /// Hours of the fractures to order, before and after.
    pub hours: [Option<Hours>; 2],
    /// Where the change of flashing and settling comes from; `None` without figures of both, or without a fracture to order.
    pub time: Option<TimeChange>,
    /// Figures that changed, most seconds first.
    pub figures: Vec<FigureChange>,
    /// Distinct outlines whose places and shots are as before.
    pub same: u64,
    /// [`super::CAUTION`].
    pub caution: String,
}

/// One term or number that is not the same.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Changed {
    /// Which.
    pub what: String,
    /// Before; empty where there was none.
    pub before: String,
    /// After; empty where there is none.
    pub after: String,
}

/// Seconds of flashing and settling that came or went: together the whole change over the figures.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct TimeChange {
    /// Because figures came, went, or take other shots, at the time per shot of before (of after for those that came).
    pub figures_s: f64,
    /// Because a shot of the same figure takes another time: dose, current, settling, passes.
    pub writer_s: f64,
}

/// A figure that costs another number of shots.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct FigureChange {
    /// Hash of its outline.
    pub fingerprint: String,
    /// Layout (from 1), number and first place: after, or before where it went.
    pub clip: u64,
    /// Its number there.
    pub figure: u64,
    /// Lower-left corner of its bounds, mask coordinates.
    pub place_nm: [f64; 2],
    /// Places before and after.
    pub places: [Count; 2],
    /// Shots at all places, before and after.
    pub shots: [Count; 2],
    /// Seconds to flash and settle it at all places, before and after.
    pub seconds: [f64; 2],
}
