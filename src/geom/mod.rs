//! Exact geometry of the mask: points, rectangles, rings, figures, the eight axis-parallel orientations, booleans.
//!
//! Coordinates are whole **picometres** (`i64`) at mask scale, x to the right and y up, so every layout grid in
//! use (1 nm, 0.5, 0.25, 0.1, 0.05 nm …) is exact. No foreign point type leaves this module.

mod boolean;
mod copies;
mod figure;
mod offset;
mod point;
mod rect;
mod repetition;
mod ring;
pub(crate) mod spans;
mod transform;

pub use boolean::{intersect, merge, subtract, unite, wound};
pub(crate) use copies::{Copies, Line};
pub use figure::Figure;
pub use offset::{offset, offset_mitred};
pub use point::Point;
pub use rect::Rect;
pub use repetition::Repetition;
pub use ring::Ring;
pub use transform::{Orientation, Transform};
