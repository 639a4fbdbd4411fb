//! What can be wrong with a layout or the options when a mask is made of it.

use crate::geom::Rect;
use crate::layout::Layer;
use crate::units::Nm;

/// Layers with their polygon counts, as a layout holds them.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct LayerCounts(pub Vec<(Layer, u128)>);

impl std::fmt::Display for LayerCounts {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        for (i, (layer, polygons)) in self.0.iter().enumerate() {
            let comma = if i == 0 { "" } else { ", " };
            let plural = if *polygons == 1 { "" } else { "s" };
            write!(
                f,
                "{comma}{}/{} ({polygons} polygon{plural})",
                layer.layer, layer.datatype
            )?;
        }
        if self.0.is_empty() {
            f.write_str("none")?;
        }
        Ok(())
    }
}

/// What can be wrong with the outline of a polygon.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Defect {
    /// It crosses itself, or winds round something more than once.
    SelfCrossing,
    /// It encloses nothing.
    NoArea,
    /// Neighbouring points coincide, at mask scale.
    RepeatedPoints,
    /// It turns straight back at a point.
    Spike,
    /// It runs clockwise; sound in every format, so noted and never refused.
    Clockwise,
    /// Its points are no whole picometres at mask scale; a matter of scale and angles, so noted and never refused.
    OffGrid,
}

impl Defect {
    /// All, in the order of the notes.
    pub const ALL: [Self; 6] = [
        Self::SelfCrossing,
        Self::NoArea,
        Self::RepeatedPoints,
        Self::Spike,
        Self::Clockwise,
        Self::OffGrid,
    ];

    /// How it is repaired.
    #[must_use]
    pub fn rule(self) -> &'static str {
        match self {
            Self::SelfCrossing => "all it winds round was filled",
            Self::NoArea => "dropped",
            Self::RepeatedPoints => "each kept once",
            Self::Spike => "the spike was dropped",
            Self::Clockwise => "filled like any other",
            Self::OffGrid => "each rounded to the nearest",
        }
    }

    /// Whether [`super::MaskOptions::strict`] refuses it.
    #[must_use]
    pub fn is_refused(self) -> bool {
        !matches!(self, Self::Clockwise | Self::OffGrid)
    }
}

impl std::fmt::Display for Defect {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(match self {
            Self::SelfCrossing => "with a self-crossing outline",
            Self::NoArea => "without area",
            Self::RepeatedPoints => "with repeated points",
            Self::Spike => "with a spike that has no area",
            Self::Clockwise => "drawn clockwise",
            Self::OffGrid => "with points between whole picometres",
        })
    }
}

/// Why no mask could be made of a layout.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum MaskError {
    /// No layer was named and there is not exactly one.
    #[error("no layer named, expected exactly one in the layout; found: {present}")]
    LayerNotChosen {
        /// What there is.
        present: LayerCounts,
    },
    /// A layer was named that holds no polygon.
    #[error("layer {}/{} holds no polygon; layers found: {present}", layer.layer, layer.datatype)]
    LayerAbsent {
        /// The one named.
        layer: Layer,
        /// What there is.
        present: LayerCounts,
    },
    /// A layer is both taken and subtracted.
    #[error("layer {}/{} is both taken and subtracted", layer.layer, layer.datatype)]
    LayerTwice {
        /// Which.
        layer: Layer,
    },
    /// A polygon needs repair, and repairs are refused.
    #[error(
        "cell `{cell}`: polygon {polygon} {defect}; expected a sound outline, repairs are refused"
    )]
    Unsound {
        /// Where it is drawn.
        cell: String,
        /// Its index.
        polygon: usize,
        /// The first thing wrong with it.
        defect: Defect,
    },
    /// The file leaves outlines open, and repairs are refused.
    #[error(
        "{count} outlines are left open in the file; expected each closed by its first point, repairs are refused"
    )]
    OpenOutlines {
        /// How many.
        count: u64,
    },
    /// No plate is that large.
    #[error(
        "the mask would be {:.6} m × {:.6} m, expected at most {greatest_m} m a side; is the scale or the database unit right?",
        found.max.to_nm()[0] * 1e-9 - found.min.to_nm()[0] * 1e-9,
        found.max.to_nm()[1] * 1e-9 - found.min.to_nm()[1] * 1e-9
    )]
    TooLarge {
        /// Around all figures.
        found: Rect,
        /// What is accepted.
        greatest_m: f64,
    },
    /// The bias is not finite or absurdly large.
    #[error("bias is {found}, expected from -1e6 to 1e6 nm")]
    Bias {
        /// What was given.
        found: Nm,
    },
    /// The frame or window has no area.
    #[error("the {what} from {:?} to {:?} nm has no area", found.min.to_nm(), found.max.to_nm())]
    EmptyRectangle {
        /// Frame or window.
        what: &'static str,
        /// What was given.
        found: Rect,
    },
    /// The scale is not a positive finite number.
    #[error("scale is {found}, expected a positive finite number")]
    Scale {
        /// What was given.
        found: f64,
    },
    /// The database unit is not a positive finite length.
    #[error("database unit is {found}, expected a positive finite length")]
    Unit {
        /// What was given.
        found: Nm,
    },
    /// The reach is negative, not finite, or absurdly large.
    #[error("reach is {found}, expected from 0 to 1e6 nm")]
    Reach {
        /// What was given.
        found: Nm,
    },
    /// A placement refers to a cell that is not there.
    #[error(
        "cell `{cell}`, placement {placement}: refers to cell number {found}, the layout has {cells}"
    )]
    MissingCell {
        /// Where the placement stands.
        cell: String,
        /// Its index.
        placement: usize,
        /// The number it refers to.
        found: usize,
        /// How many there are.
        cells: usize,
    },
    /// A cell contains itself.
    #[error("cell `{cell}` contains itself through its placements")]
    Cycle {
        /// One of those on the cycle.
        cell: String,
    },
    /// A placement has an angle or magnification that cannot be used.
    #[error(
        "cell `{cell}`, placement {placement}: magnification {magnification} and angle {angle_deg}°, expected a positive finite and a finite number"
    )]
    Placement {
        /// Where the placement stands.
        cell: String,
        /// Its index.
        placement: usize,
        /// Found.
        magnification: f64,
        /// Found.
        angle_deg: f64,
    },
    /// Something lies beyond ±2⁵² pm (4.5 km) at mask scale.
    #[error(
        "cell `{cell}`: {what} reaches beyond ±4.5 km at mask scale; is the scale or the database unit right?"
    )]
    OutOfRange {
        /// In which cell.
        cell: String,
        /// Which part of it.
        what: String,
    },
    /// Repeated parts come nearer to each other than the reach, and are too many to be resolved one by one.
    #[error(
        "cell `{cell}`: {found} parts come within reach of each other or lie at different places of the address grid and must be resolved one by one, the limit is {limit}"
    )]
    TooMany {
        /// In which cell.
        cell: String,
        /// How many.
        found: u128,
        /// How many are allowed.
        limit: u128,
    },
}
