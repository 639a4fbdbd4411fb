//! Shots → dose and contour: the closed-form short range, level lines, the long range and its correction.

mod budget;
mod contour;
mod correction;
mod coverage;
mod density;
mod dose;
mod fold;
mod raster;
mod spread;

pub use budget::shot_noise;
pub use contour::{LevelLine, level_at, level_lines, polish};
pub use correction::{
    Backscatter, Correction, CorrectionError, backscattered, correct, uniform_correction,
};
pub use density::{Density, DensityError};
pub use dose::Exposure;
pub use fold::Folding;
pub use raster::{Raster, RasterError};
