//! What is asked of a quote.

use crate::blur::Blur;
use crate::fracture::overlap::Overlap;
use crate::fracture::tile::{Staircase, Tile};
use crate::fracture::{DoseLevels, Effort, Fracturer};
use crate::profile::{Kind, Profile};
use crate::units::{Dose, Hours, Nm};
use crate::write_time::Field;

use super::result::Method;
use super::{QuoteError, Setup};

/// What is asked.
#[derive(Clone, Copy, Debug)]
pub struct Terms<'a> {
    /// Writer and process.
    pub profile: &'a Profile,
    /// How far the contour may stray from the outline.
    pub tolerance: Nm,
    /// How far the plain staircase may stray from it.
    pub within: Nm,
    /// How hard to search.
    pub effort: Effort,
    /// The field that the clips stand for; `None` for one layout alone.
    pub field: Option<Field>,
    /// Hours the writer is booked for.
    pub slot: Option<Hours>,
    /// Greatest dose that may pile up anywhere, a multiple of dose-to-size.
    pub peak_dose: Option<Dose>,
    /// The raster multi-beam writer to compare with.
    pub raster: Option<&'a Profile>,
    /// Doses that a shot of the overlap fracture may have.
    pub dose_levels: DoseLevels,
}

impl Terms<'_> {
    /// What figures are fractured for under the profile.
    ///
    /// # Errors
    /// When the profile is that of a raster writer, or states no blur or an impossible one.
    pub fn setup(&self) -> Result<Setup, QuoteError> {
        let profile = || self.profile.name().to_owned();
        let limits = match self.profile.kind() {
            Kind::Shaped => self.profile.shot_limits(),
            Kind::Raster => None,
        };
        Ok(Setup {
            limits: limits.ok_or_else(|| QuoteError::NoShots { profile: profile() })?,
            blur: Blur::new(
                self.profile
                    .sigma()
                    .ok_or_else(|| QuoteError::NoSigma { profile: profile() })?,
            )?,
            tolerance: self.tolerance,
        })
    }
}

/// The fracturer of a method.
#[must_use]
pub fn fracturer(method: Method, terms: &Terms<'_>) -> Box<dyn Fracturer> {
    match method {
        Method::Staircase => Box::new(Staircase {
            within: terms.within,
        }),
        Method::Tile => Box::new(Tile {
            effort: terms.effort,
            ..Tile::default()
        }),
        Method::Overlap => Box::new(Overlap {
            peak_dose: terms.peak_dose,
            dose_levels: terms.dose_levels,
            ..Overlap::with(terms.effort)
        }),
    }
}
