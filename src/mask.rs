//! Layout → mask: chosen layers at mask scale, merged, as distinct figures with their contexts and places.

use crate::geom::{Figure, Rect, Repetition, Transform};
use crate::layout::Layer;
use crate::shot::AddressUnit;
use crate::units::Nm;

/// What to take from a layout.
#[derive(Clone, Debug)]
pub struct MaskOptions {
    /// Layers united; empty means the only one there is.
    pub layers: Vec<Layer>,
    /// Mask length per layout length (4 for wafer-scale data at 4:1).
    pub scale: f64,
    /// Other figures nearer than this are context (5 σ).
    pub reach: Nm,
    /// Distinct figures are kept apart by their position within the address grid.
    pub address: AddressUnit,
}

/// The figures of the chosen layers, each distinct one once.
#[derive(Clone, Debug)]
pub struct Mask {
    /// Sorted by first place (y, then x), so numbering does not depend on how the layout was built.
    pub figures: Vec<DistinctFigure>,
    /// Around all figures at all places; `None` for an empty mask.
    pub extent: Option<Rect>,
    /// What was repaired, as sentences.
    pub notes: Vec<String>,
}

/// One figure with its context, equal up to the eight orientations and shifts by whole address units, and where it stands.
#[derive(Clone, Debug)]
pub struct DistinctFigure {
    /// In its own frame: the least of the eight orientations, lower-left corner of the bounds within one address unit of (0, 0).
    pub figure: Figure,
    /// Other figures within reach in the same frame, cut to the figure's bounds grown by the reach, sorted.
    pub context: Vec<Figure>,
    /// Where it stands; not empty.
    pub places: Vec<Place>,
}

/// Places of a distinct figure: own frame → mask, perhaps repeated (displacements in mask axes, pm).
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Place {
    /// Own frame to mask.
    pub transform: Transform,
    /// Displacements in mask axes.
    pub repetition: Repetition,
}
