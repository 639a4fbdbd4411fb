//! The hours of a fractured mask: which pattern the writer sees, at which dose.

use rayon::prelude::*;

use crate::expose::uniform_correction;
use crate::geom::Rect;
use crate::mask::Mask;
use crate::profile::Profile;
use crate::units::{Dose, Nm};
use crate::write_time::{self, Field, Pattern, Placed, WriteTime, WriteTimeError};

use super::QuoteError;
use super::exposure::{Exposed, Portion};
use super::result::{Count, Hours};

/// The field that a clip stands for.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Share {
    /// The field.
    pub field: Field,
    /// Part of it that is filled with copies of the clip, over 0, up to 1.
    pub coverage: f64,
}

/// The dose that keeps a wide edge where it was drawn if coverage is spread evenly over the mask.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Correction {
    /// For the mean coverage.
    pub dose: Dose,
    /// Backscatter ratio η, all terms and fogging together.
    pub ratio: f64,
    /// Mean coverage, of the field if there is one, else of the mask's extent.
    pub density: f64,
}

impl Correction {
    /// From the mask's mean density. Without a stated backscatter the dose stays 1.
    ///
    /// # Errors
    /// When the profile's backscatter is beyond what the correction takes.
    pub fn new(mask: &Mask, profile: &Profile, share: Option<Share>) -> Result<Self, QuoteError> {
        let terms = profile.backscatter().iter().map(|term| term.eta.value);
        let ratio = terms.sum::<f64>() + profile.fogging().map_or(0.0, |fogging| fogging.eta);
        let extent = mask.extent.map_or(0.0, |extent| {
            Nm::from_pm(extent.width()).0 * Nm::from_pm(extent.height()).0
        });
        let of_extent = if extent > 0.0 {
            (mask.area_nm2() / extent).clamp(0.0, 1.0)
        } else {
            0.0
        };
        let density = of_extent * share.map_or(1.0, |share| share.coverage);
        let dose = uniform_correction(ratio, density)?;
        Ok(Self {
            dose,
            ratio,
            density,
        })
    }
}

/// Hours of one fracture of the mask, and the seconds that each distinct figure is flashed and settled for, at all its places.
///
/// # Errors
/// As [`WriteTime::new`].
pub fn of_mask(
    mask: &Mask,
    profile: &Profile,
    share: Option<Share>,
    exposed: &Exposed<'_>,
) -> Result<(Hours, Vec<Option<f64>>), WriteTimeError> {
    let Some(frame) = mask.extent else {
        return Ok((Hours::default(), Vec::new()));
    };
    let by_figure: Vec<Option<Vec<Placed<'_>>>> = exposed
        .portions
        .iter()
        .map(|portions| Some(placed(portions.as_ref()?)))
        .collect();
    let all: Vec<Placed<'_>> = by_figure.iter().flatten().flatten().copied().collect();
    let pattern = pattern(&all, frame, share);
    let time = WriteTime::new(profile, &pattern)?;
    let interval = write_time::interval(profile, &pattern)?;
    let seconds = |placed: &Vec<Placed<'_>>| {
        let alone = WriteTime::new(profile, &self::pattern(placed, frame, share))?;
        Ok(3600.0 * (alone.flash_h.0 + alone.settle_h.0))
    };
    let seconds = by_figure
        .par_iter()
        .map(|placed| placed.as_ref().map(seconds).transpose())
        .collect::<Result<_, WriteTimeError>>()?;
    let hours = Hours {
        low_h: interval.low_h.0,
        high_h: interval.high_h.0,
        ..of_time(&time)
    };
    Ok((hours, seconds))
}

/// Hours as reports show them, without an interval.
#[must_use]
pub fn of_time(time: &WriteTime) -> Hours {
    let turns = time.overhead.turns_h.0;
    let subfield_h = time.overhead.subfield_h.0;
    Hours {
        shots_written: Count(time.shots),
        total_h: time.total_h.0,
        flash_h: time.flash_h.0,
        settle_h: time.settle_h.0,
        subfield_h,
        stage_h: time.stage_h.0 + turns,
        overhead_h: time.overhead_h.0 - turns - subfield_h,
        low_h: time.total_h.0,
        high_h: time.total_h.0,
    }
}

fn placed<'a>(portions: &'a [Portion<'_>]) -> Vec<Placed<'a>> {
    let place = |portion: &'a Portion<'_>| Placed {
        shots: &portion.shots,
        transform: portion.transform,
        repetition: &portion.repetition,
        dose: portion.dose,
    };
    portions.iter().map(place).collect()
}

/// The shots where they stand, or as a sample of the field.
fn pattern<'a>(placed: &'a [Placed<'a>], frame: Rect, share: Option<Share>) -> Pattern<'a> {
    match share {
        None => Pattern::Placed { placed, frame },
        Some(Share { field, coverage }) => Pattern::Sample {
            placed,
            clip: frame,
            field,
            coverage,
        },
    }
}
