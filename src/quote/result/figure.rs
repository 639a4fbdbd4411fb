//! One line of `figures.csv`.

use serde::{Deserialize, Serialize};

use super::{ByMethod, Count, EdgeError, FlagKind, Scores};

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
