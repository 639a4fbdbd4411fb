//! What can be wrong with a layout or the options when a mask is made of it.

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
