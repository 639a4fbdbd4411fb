//! Tile fracture: rectangles that do not overlap.
//!
//! [`partition()`] cuts a rectilinear figure exactly; [`staircase()`] makes a curved one rectilinear by geometry alone.

mod assemble;
mod cuts;
mod group;
mod intervals;
mod matching;
mod outline;
mod partition;
mod pixels;
mod slivers;
mod snap;
mod staircase;
mod sweep;

pub use cuts::cut_to_greatest_side;
pub use partition::{Partition, PartitionError, Prefer, partition};
pub use pixels::is_pixel_curve;
pub use slivers::GROUP;
pub use snap::{Snapped, snap};
pub use staircase::{StaircaseError, StaircaseFracture, fracture_staircase, staircase};
