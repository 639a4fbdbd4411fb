//! The cost of many figures from the fracture of some of them, with an interval.
//!
//! Figures are put in strata by what is cheap to know of them, drawn at random within each, and measured; the totals of all follow from
//! those drawn. [`draw()`] does it until the totals are as sure as asked, [`Weights`] gives the totals.

mod draw;
mod estimate;
mod features;
mod strata;
mod student;

pub use draw::{Drawn, LEAST, Measure, Stop, Stopped, draw};
pub use estimate::{Total, Weights};
pub use features::Features;
pub use strata::{Scale, Strata};
pub use student::CONFIDENCE;
