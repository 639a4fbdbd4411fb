//! The hours of a fractured mask: which pattern the writer sees, at which dose.

use rayon::prelude::*;

use crate::expose::uniform_correction;
use crate::geom::{Point, Rect};
use crate::profile::{Key, Kind, Profile};
use crate::units::{Dose, Nm};
use crate::write_time::{
    self, Borders, Bound, Counts, Field, Pattern, Placed, StripeTime, Summed, Sums, WriteTime,
    WriteTimeError,
};

use super::exposure::{Exposed, Portion};
use super::result::{Count, Hours, MoreFlashes, RasterLine, Sensitivity, StripeRow};
use super::{Clip, QuoteError, Terms};

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
    /// From the mean density of all clips. Without a stated backscatter the dose stays 1.
    ///
    /// # Errors
    /// When the profile's backscatter is beyond what the correction takes.
    pub fn new(clips: &[Clip<'_>], profile: &Profile) -> Result<Self, QuoteError> {
        let terms = profile.backscatter().iter().map(|term| term.eta.value);
        let ratio = terms.sum::<f64>() + profile.fogging().map_or(0.0, |fogging| fogging.eta);
        let of_clip = |clip: &Clip<'_>| {
            let extent = clip.mask.extent.map_or(0.0, Rect::area_nm2);
            let of_extent = if extent > 0.0 {
                (clip.mask.area_nm2() / extent).clamp(0.0, 1.0)
            } else {
                0.0
            };
            of_extent * clip.coverage.unwrap_or(1.0)
        };
        let density = clips.iter().map(of_clip).sum::<f64>().min(1.0);
        let dose = uniform_correction(ratio, density)?;
        Ok(Self {
            dose,
            ratio,
            density,
        })
    }
}

/// An empty mask: the writer model refuses it.
const NOWHERE: Rect = Rect {
    min: Point { x: 0, y: 0 },
    max: Point { x: 0, y: 0 },
};

/// The shots of one fracture of all clips as the writer sees them.
pub(super) struct Written<'a> {
    /// By clip and figure; `None` where there is no fracture.
    by_figure: Vec<Vec<Option<Vec<Placed<'a>>>>>,
    by_clip: Vec<Vec<Placed<'a>>>,
    /// By clip.
    frames: Vec<Frame>,
    field: Option<Field>,
    /// In place of all shots.
    sums: Option<Spread<'a>>,
}

/// What shots add up to, figure by figure, where only that is known.
#[derive(Clone, Debug)]
pub(super) struct Spread<'a> {
    /// Of all figures at all places, on the field.
    pub(super) total: Sums,
    pub(super) figures: Vec<Summed<'a>>,
    pub(super) frame: Rect,
    pub(super) field: Option<Field>,
}

impl Spread<'_> {
    fn pattern<R>(&self, with: impl FnOnce(&Pattern<'_>) -> R) -> R {
        let Some(field) = self.field else {
            return with(&Pattern::Summed {
                figures: &self.figures,
                frame: self.frame,
            });
        };
        let mean = |sum: f64| sum / self.total.flashes.max(1.0);
        with(&Pattern::Counts {
            counts: Counts {
                shots: Count::rounded(self.total.flashes).0,
                mean_dose: Dose(mean(self.total.dose)),
                mean_jump: Nm(mean(self.total.jump.0)),
                mean_side: Nm(mean(self.total.side.0)),
            },
            field: Some(field),
        })
    }
}

/// Around the layout that stands for itself.
pub(super) fn frame(clips: &[Clip<'_>]) -> Rect {
    let extent = clips.iter().find_map(|clip| clip.mask.extent);
    extent.unwrap_or(NOWHERE)
}

/// Where the shots of a clip are cut, and the jump to the first shot of a figure: as far as figures stand apart if they stand evenly.
pub(super) fn borders(clip: &Clip<'_>, field: Option<Field>) -> (Borders, Nm) {
    let extent = clip.mask.extent.unwrap_or(NOWHERE);
    let spacing = Nm((extent.area_nm2() / clip.mask.place_count().max(1) as f64).sqrt());
    let borders = field.map_or(Borders::Of(extent), Borders::Somewhere);
    (borders, spacing)
}

/// Around a clip, and its share of the field.
#[derive(Clone, Copy)]
struct Frame {
    around: Rect,
    coverage: Option<f64>,
}

/// How long one fracture of all clips takes.
pub(super) struct Timed {
    pub(super) hours: Hours,
    pub(super) time: WriteTime,
    /// By clip and figure: flashing and settling at all its places.
    pub(super) seconds: Vec<Vec<Option<f64>>>,
}

impl<'a> Written<'a> {
    /// `exposed` by clip.
    pub(super) fn new(
        clips: &[Clip<'_>],
        exposed: &'a [Exposed<'_>],
        field: Option<Field>,
    ) -> Self {
        let of_clip = |exposed: &'a Exposed<'_>| -> Vec<_> {
            let portions = exposed.portions.iter();
            portions
                .map(|portions| Some(placed(portions.as_ref()?)))
                .collect()
        };
        let by_figure: Vec<Vec<Option<Vec<Placed<'a>>>>> = exposed.iter().map(of_clip).collect();
        Self {
            by_clip: by_figure
                .iter()
                .map(|figures| figures.iter().flatten().flatten().copied().collect())
                .collect(),
            frames: clips
                .iter()
                .map(|clip| Frame {
                    around: clip.mask.extent.unwrap_or(NOWHERE),
                    coverage: clip.coverage,
                })
                .collect(),
            by_figure,
            field,
            sums: None,
        }
    }

    /// Of figures of which only sums are known.
    pub(super) fn of_sums(sums: Spread<'a>) -> Self {
        Self {
            by_figure: Vec::new(),
            by_clip: Vec::new(),
            frames: Vec::new(),
            field: sums.field,
            sums: Some(sums),
        }
    }

    /// Hands over the whole pattern.
    pub(super) fn pattern<R>(&self, with: impl FnOnce(&Pattern<'_>) -> R) -> R {
        if let Some(sums) = &self.sums {
            return sums.pattern(with);
        }
        let parts = self.by_clip.iter().map(Vec::as_slice).zip(&self.frames);
        self.of(&parts.collect::<Vec<_>>(), with)
    }

    /// The shots where they stand, or as samples of the field.
    fn of<R>(&self, parts: &[(&[Placed<'_>], &Frame)], with: impl FnOnce(&Pattern<'_>) -> R) -> R {
        let clips: Vec<write_time::Clip<'_>> = parts
            .iter()
            .map(|(placed, frame)| write_time::Clip {
                placed,
                frame: frame.around,
                coverage: frame.coverage.unwrap_or(1.0),
            })
            .collect();
        with(&match (self.field, &clips[..]) {
            (None, [clip]) => Pattern::Placed {
                placed: clip.placed,
                frame: clip.frame,
            },
            (field, clips) => Pattern::Sample {
                clips,
                field: field.unwrap_or(Field {
                    width: Nm(0.0),
                    height: Nm(0.0),
                }),
            },
        })
    }

    /// What moves the total when it alone changes, most first.
    ///
    /// # Errors
    /// As [`WriteTime::new`].
    pub(super) fn sensitivity(
        &self,
        profile: &Profile,
    ) -> Result<Vec<Sensitivity>, WriteTimeError> {
        let found = self.pattern(|pattern| write_time::sensitivity(profile, pattern))?;
        let one = |moved: &write_time::Sensitivity| Sensitivity {
            key: moved.key.to_string(),
            value: moved.value,
            at_lower_h: moved.at_lower_h.0,
            at_upper_h: moved.at_upper_h.0,
        };
        Ok(found.iter().map(one).collect())
    }

    /// Hours, and the seconds that each distinct figure is flashed and settled for.
    ///
    /// # Errors
    /// As [`WriteTime::new`].
    pub(super) fn time(&self, profile: &Profile) -> Result<Timed, WriteTimeError> {
        let (hours, time) = self.hours(profile)?;
        let of_figure = |placed: &Option<Vec<Placed<'_>>>, clip: usize| {
            let Some(placed) = placed else {
                return Ok(None);
            };
            let alone = [(placed.as_slice(), &self.frames[clip])];
            let alone = self.of(&alone, |pattern| WriteTime::new(profile, pattern))?;
            Ok(Some(3600.0 * (alone.flash_h.0 + alone.settle_h.0)))
        };
        let seconds = self
            .by_figure
            .par_iter()
            .enumerate()
            .map(|(clip, figures)| {
                let figures = figures.par_iter();
                figures.map(|placed| of_figure(placed, clip)).collect()
            })
            .collect::<Result<_, WriteTimeError>>()?;
        Ok(Timed {
            hours,
            time,
            seconds,
        })
    }

    /// Hours of the whole.
    ///
    /// # Errors
    /// As [`WriteTime::new`].
    pub(super) fn hours(&self, profile: &Profile) -> Result<(Hours, WriteTime), WriteTimeError> {
        let (time, interval) = self.pattern(|pattern| {
            Ok::<_, WriteTimeError>((
                WriteTime::new(profile, pattern)?,
                write_time::interval(profile, pattern)?,
            ))
        })?;
        let hours = Hours {
            low_h: interval.low_h.0,
            high_h: interval.high_h.0,
            ..of_time(&time)
        };
        Ok((hours, time))
    }
}

/// Hours as reports show them, without an interval.
#[must_use]
pub fn of_time(time: &WriteTime) -> Hours {
    let turns = time.overhead.turns_h.0;
    let subfield_h = time.overhead.subfield_h.0;
    Hours {
        shots_written: Count(time.shots),
        flashes: Count(time.flashes),
        more_flashes: MoreFlashes {
            border: Count(time.cuts.border),
            beam_current: Count(time.cuts.beam),
            dose: Count(time.cuts.repeated),
        },
        too_short: Count(time.cuts.too_short),
        stripes: travels(time, |_| true),
        stage_bound_stripes: travels(time, |stripe| stripe.bound == Bound::Stage),
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

/// Stripes of all passes that are as asked.
fn travels(time: &WriteTime, asked: impl Fn(&StripeTime) -> bool) -> u64 {
    let stripes = time.stripes.iter().filter(|stripe| asked(stripe));
    stripes
        .map(|stripe| u64::from(stripe.passes) * stripe.count as u64)
        .sum()
}

pub(super) fn placed<'a>(portions: &'a [Portion<'_>]) -> Vec<Placed<'a>> {
    let place = |portion: &'a Portion<'_>| Placed {
        shots: &portion.shots,
        transform: portion.transform,
        repetition: &portion.repetition,
        dose: portion.dose,
    };
    portions.iter().map(place).collect()
}

/// The stripes as reports show them.
pub(super) fn rows(time: &WriteTime) -> Vec<StripeRow> {
    let row = |stripe: &StripeTime| StripeRow {
        passes: stripe.passes,
        stripe: stripe.stripe as u64,
        count: stripe.count as u64,
        flashes: Count(stripe.flashes),
        flash_s: stripe.flash_s.0,
        settle_s: stripe.settle_s.0,
        subfield_s: stripe.subfield_s.0,
        stage_s: stripe.stage_s.0,
    };
    time.stripes.iter().map(row).collect()
}

/// Hours of a mask without a single flash.
///
/// # Errors
/// As [`WriteTime::new`].
pub(super) fn beamless(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
) -> Result<crate::units::Hours, WriteTimeError> {
    let extent = frame(clips);
    let field = terms.field.unwrap_or(Field {
        width: Nm::from_pm(extent.width()),
        height: Nm::from_pm(extent.height()),
    });
    let pattern = Pattern::Counts {
        counts: Counts::of(0),
        field: Some(field),
    };
    Ok(WriteTime::new(terms.profile, &pattern)?.total_h)
}

/// A raster writer over the same field at the base dose of the shaped-beam writer, and where the two tie.
///
/// # Errors
/// When the profile is not that of a raster writer; as [`WriteTime::new`].
pub(super) fn raster(
    raster: &Profile,
    terms: &Terms<'_>,
    clips: &[Clip<'_>],
    recommended: Option<&Written<'_>>,
) -> Result<RasterLine, QuoteError> {
    if raster.kind() != Kind::Raster {
        return Err(QuoteError::NoRaster {
            profile: raster.name().to_owned(),
        });
    }
    let extent = clips.iter().find_map(|clip| clip.mask.extent);
    let extent = extent.unwrap_or(NOWHERE);
    let field = terms.field.unwrap_or(Field {
        width: Nm::from_pm(extent.width()),
        height: Nm::from_pm(extent.height()),
    });
    let mut same_dose = raster.clone();
    if let Some(dose) = terms.profile.number(Key::BaseDose) {
        same_dose = same_dose.with_number(Key::BaseDose, dose);
    }
    let pattern = Pattern::Counts {
        counts: Counts::of(0),
        field: Some(field),
    };
    let time = WriteTime::new(&same_dose, &pattern)?;
    let interval = write_time::interval(&same_dose, &pattern)?;
    let flash = match recommended {
        Some(written) => {
            let time = written.pattern(|pattern| WriteTime::new(terms.profile, pattern))?;
            time.mean_flash
        }
        None => None,
    };
    let tie = match flash {
        Some(flash) => write_time::tie(terms.profile, flash, field, time.total_h)?,
        None => None,
    };
    Ok(RasterLine {
        profile: raster.name().to_owned(),
        hours: Hours {
            low_h: interval.low_h.0,
            high_h: interval.high_h.0,
            ..of_time(&time)
        },
        tie_flashes: tie.map(Count),
        flashes: flash.map(|flash| Count(flash.shots)),
    })
}
