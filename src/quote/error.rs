//! Why there is no quote.

use crate::blur::BlurError;
use crate::expose::{CorrectionError, DensityError};
use crate::mask::MaskError;
use crate::write_time::WriteTimeError;

/// Why there is no quote.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum QuoteError {
    /// The writer flashes no shots.
    #[error(
        "profile {profile}: a raster writer flashes no shots, expected the profile of a shaped-beam writer"
    )]
    NoShots {
        /// Its name.
        profile: String,
    },
    /// Nothing is known of the blur.
    #[error("profile {profile}: states no `sigma_nm`, expected the standard deviation of the blur")]
    NoSigma {
        /// Its name.
        profile: String,
    },
    /// The blur is none.
    #[error(transparent)]
    Blur(#[from] BlurError),
    /// No mask could be made of the layout.
    #[error(transparent)]
    Mask(#[from] MaskError),
    /// Clips that neither stand for a field nor for themselves.
    #[error(
        "{clips} layouts, {shares} of them with a share, {}, expected one layout alone, or a field and a share of it for each",
        if *.field { "a field" } else { "no field" }
    )]
    Shares {
        /// How many there are.
        clips: usize,
        /// Of them, those with a share.
        shares: usize,
        /// Whether there is a field.
        field: bool,
    },
    /// A raster line was asked for from the profile of another writer.
    #[error("profile {profile}: flashes shots, expected the profile of a raster writer")]
    NoRaster {
        /// Its name.
        profile: String,
    },
    /// The chosen layers hold no figure.
    #[error("no figure of any area on the chosen layers, or none in the window")]
    NoFigure,
    /// The dose cannot be corrected.
    #[error(transparent)]
    Correction(#[from] CorrectionError),
    /// No density map can be made.
    #[error(transparent)]
    Density(#[from] DensityError),
    /// The writer model refuses the pattern.
    #[error(transparent)]
    WriteTime(#[from] WriteTimeError),
}
