//! The dose that every place of a mask needs: what is written around it, spread by the long range, and the correction of it.
//!
//! Coverage is that of the shots, at all their places, on one mesh over the mask's extent; the correction is found on the mesh and read off
//! where figures stand. An array stays an array where one dose serves it, and is split where the dose changes.

mod level;
mod split;

use std::borrow::Cow;

use rayon::prelude::*;

use crate::expose::{self, Backscatter, Density, Folding};
use crate::geom::{Point, Rect, Repetition, Transform};
use crate::judge::{Background, Fidelity};
use crate::mask::{DistinctFigure, Mask, Place};
use crate::profile::{Key, Profile};
use crate::shot::ShotList;
use crate::target::ShotErrors;
use crate::units::{BaseDose, Dose, Nm};

use crate::quote::made::{Made, MadeMask, Unmade};
use crate::quote::result::DoseMap;
use crate::quote::{Clip, QuoteError};

use split::Splitter;

/// Cells beyond which the mesh is made coarser: 128 MiB a map, of which about eight are held.
const MOST_CELLS: f64 = 16_777_216.0;

/// The long range of a profile: backscatter and fogging.
#[derive(Clone, Debug, PartialEq)]
pub struct LongRange {
    terms: Vec<Backscatter>,
}

/// Shots of one figure at places of one dose.
#[derive(Clone, Debug)]
pub struct Portion<'a> {
    /// In the figure's own frame; their doses already corrected one by one where the figure is large against the mesh.
    pub shots: Cow<'a, ShotList>,
    /// Own frame to mask.
    pub transform: Transform,
    /// Displacements in mask axes.
    pub repetition: Cow<'a, Repetition>,
    /// Multiplies the dose of every shot.
    pub dose: Dose,
    /// The mean of what multiplies the doses of the fracture.
    pub mean: Dose,
}

/// How densely a mask is written, and the correction of that.
#[derive(Clone, Debug)]
pub struct Maps {
    /// Coverage × dose of the fracture.
    pub coverage: Density,
    /// The correction.
    pub found: expose::Correction,
}

/// The doses of one fracture of a mask.
#[derive(Clone, Debug)]
pub struct Exposed<'a> {
    /// By figure; `None` where it has no fracture.
    pub portions: Vec<Option<Vec<Portion<'a>>>>,
    /// What the correction found; `None` without a long range.
    pub map: Option<DoseMap>,
}

impl LongRange {
    /// From a profile: every backscatter term, and fogging if stated.
    #[must_use]
    pub fn new(profile: &Profile) -> Self {
        let backscatter = profile.backscatter().iter().map(|term| Backscatter {
            ratio: term.eta.value,
            radius: term.beta(),
        });
        let fogging = profile.fogging().map(|fogging| Backscatter {
            ratio: fogging.eta,
            radius: fogging.radius,
        });
        Self {
            terms: backscatter.chain(fogging).collect(),
        }
    }

    /// Energy of all terms per unit of the forward part.
    #[must_use]
    pub fn ratio(&self) -> f64 {
        self.terms.iter().map(|term| term.ratio).sum()
    }

    /// A quarter of the least radius: the mesh that resolves every term. `None` without a term.
    #[must_use]
    pub fn wanted_mesh(&self) -> Option<Nm> {
        let radii = self.terms.iter().map(|term| term.radius.0);
        Some(Nm(0.25 * radii.reduce(f64::min)?))
    }

    /// The mesh wanted, or what [`MOST_CELLS`] allow over the frame.
    fn mesh(&self, frame: Rect) -> Option<Nm> {
        let Nm(fine) = self.wanted_mesh()?;
        let [w, h] = [frame.width(), frame.height()].map(|side| Nm::from_pm(side).0);
        // Cells (w/m + 1)·(h/m + 1) at most: a quadratic in 1/m.
        let (a, b, c) = (w * h, w + h, 1.0 - MOST_CELLS);
        let inverse = (-b + (b * b - 4.0 * a * c).sqrt()) / (2.0 * a);
        Some(Nm(fine.max(1.0 / inverse)))
    }

    /// An empty map of a mask, with long stretches of arrays folded: with the wanted mesh if it then has few enough cells.
    fn folded_map(&self, mask: &Mask, around: f64) -> Result<Option<Density>, QuoteError> {
        let meshes = mask
            .extent
            .and_then(|frame| Some((frame, self.wanted_mesh()?, self.mesh(frame)?)));
        let Some((frame, wanted, affordable)) = meshes else {
            return Ok(None);
        };
        let reach = self
            .terms
            .iter()
            .map(|term| term.radius.0)
            .fold(0.0, f64::max);
        let places = mask.figures.iter().flat_map(|figure| {
            let bounds = figure.figure.bounds();
            let places = figure.places.iter();
            places.map(move |p| (p.transform.apply_rect(bounds), &p.repetition))
        });
        let folding = |mesh| Folding::new(frame, mesh, Nm(reach), places.clone());
        let fine = folding(wanted);
        let [columns, rows] = fine.size().map(|n| n as f64);
        let (mesh, folding) = if columns * rows <= MOST_CELLS {
            (wanted, fine)
        } else {
            (affordable, folding(affordable))
        };
        Ok(Some(Density::folded(frame, mesh, around, folding)?))
    }

    /// The doses of one fracture of all clips. Around a clip that stands for part of a field lies the mean of the field, around a
    /// layout that stands for itself bare mask.
    ///
    /// # Errors
    /// As [`LongRange::expose`].
    pub(super) fn expose_clips<'a>(
        &self,
        clips: &[Clip<'a>],
        made: &[&'a MadeMask],
    ) -> Result<Vec<Exposed<'a>>, QuoteError> {
        let lists: Vec<_> = made.iter().map(|made| shots_of(made)).collect();
        self.expose_shot_clips(clips, &lists)
    }

    /// As [`LongRange::expose_clips`], of shots by clip and figure.
    ///
    /// # Errors
    /// As [`LongRange::expose`].
    pub(super) fn expose_shot_clips<'a>(
        &self,
        clips: &[Clip<'a>],
        shots: &[Vec<Option<&'a ShotList>>],
    ) -> Result<Vec<Exposed<'a>>, QuoteError> {
        let all = || clips.iter().zip(shots);
        let of_field = all().map(|(clip, shots)| {
            let share = clip.coverage.unwrap_or(0.0);
            share * coverage_of(clip.mask, shots)
        });
        let around: f64 = of_field.sum();
        all()
            .map(|(clip, shots)| self.expose_shots(clip.mask, shots, around))
            .collect()
    }

    /// The doses of one fracture. `surroundings` is the coverage beyond the mask's extent, written at the dose that suits it.
    ///
    /// # Errors
    /// When the profile's terms are beyond what the correction takes.
    pub fn expose<'a>(
        &self,
        mask: &'a Mask,
        made: &'a [Result<Made, Unmade>],
        surroundings: f64,
    ) -> Result<Exposed<'a>, QuoteError> {
        self.expose_shots(mask, &shots_of(made), surroundings)
    }

    /// As [`LongRange::expose`], of shots by figure.
    ///
    /// # Errors
    /// As [`LongRange::expose`].
    fn expose_shots<'a>(
        &self,
        mask: &'a Mask,
        shots: &[Option<&'a ShotList>],
        surroundings: f64,
    ) -> Result<Exposed<'a>, QuoteError> {
        let around = surroundings.clamp(0.0, 1.0);
        let map = self.folded_map(mask, around)?;
        let Some(Maps { coverage, found }) = self.maps_on(map, mask, shots)? else {
            return Ok(Exposed::of_shots(mask, shots));
        };
        let split = |(figure, shots): (&'a DistinctFigure, &Option<&'a ShotList>)| {
            let shots = (*shots)?;
            let mut portions = Vec::new();
            for place in &figure.places {
                let splitter = Splitter::new(&found.dose, shots, figure.figure.bounds(), place);
                portions.extend(splitter.parted(&place.repetition));
            }
            Some(portions)
        };
        let portions: Vec<Option<Vec<Portion<'a>>>> =
            mask.figures.par_iter().zip(shots).map(split).collect();
        let map = self.summary(&coverage, &found, &portions);
        Ok(Exposed {
            portions,
            map: Some(map),
        })
    }

    /// The coverage of placed shots and the correction of it; `None` of an empty mask or without a long range. `surroundings` is the coverage
    /// beyond the mask's extent.
    ///
    /// # Errors
    /// When the profile's terms are beyond what the correction takes.
    pub fn maps(
        &self,
        mask: &Mask,
        shots: &[Option<&ShotList>],
        surroundings: f64,
    ) -> Result<Option<Maps>, QuoteError> {
        let mesh = mask
            .extent
            .and_then(|frame| Some((frame, self.mesh(frame)?)));
        let around = surroundings.clamp(0.0, 1.0);
        let map = mesh.map(|(frame, mesh)| Density::new(frame, mesh, around));
        self.maps_on(map.transpose()?, mask, shots)
    }

    fn maps_on(
        &self,
        map: Option<Density>,
        mask: &Mask,
        shots: &[Option<&ShotList>],
    ) -> Result<Option<Maps>, QuoteError> {
        let Some(mut coverage) = map else {
            return Ok(None);
        };
        for (figure, shots) in mask.figures.iter().zip(shots) {
            let Some(shots) = shots else { continue };
            for place in &figure.places {
                let placed: Vec<(Rect, Dose)> = shots
                    .rects()
                    .map(|(rect, dose)| (place.transform.apply_rect(rect), dose))
                    .collect();
                coverage.add_repeated(&placed, &place.repetition);
            }
        }
        let found = expose::correct(&coverage, &self.terms)?;
        Ok(Some(Maps { coverage, found }))
    }
}

impl<'a> Exposed<'a> {
    /// Every shot at the dose that its fracture gave it.
    #[must_use]
    pub fn as_fractured(mask: &'a Mask, made: &'a [Result<Made, Unmade>]) -> Self {
        Self::of_shots(mask, &shots_of(made))
    }

    fn of_shots(mask: &'a Mask, shots: &[Option<&'a ShotList>]) -> Self {
        let of_figure = |(figure, shots): (&'a DistinctFigure, &Option<&'a ShotList>)| {
            Some(evenly(figure, (*shots)?, Dose(1.0)))
        };
        Self {
            portions: mask.figures.iter().zip(shots).map(of_figure).collect(),
            map: None,
        }
    }

    /// Puts the score of a figure in, once for each place times its weight, with the margins of its dose there; it was judged over this
    /// background.
    pub(super) fn merge(
        &self,
        figure: usize,
        (score, background, weight): (&Fidelity, Background, u64),
        all: &mut Fidelity,
    ) {
        let portions = self.portions.get(figure).and_then(Option::as_ref);
        for portion in portions.into_iter().flatten() {
            let places = portion.count().saturating_mul(weight.into());
            let places = u64::try_from(places).unwrap_or(u64::MAX);
            let here = match self.map {
                Some(_) => Background::of_dose(background.ratio, portion.mean),
                None => background,
            };
            all.merge_flattened(score, places, here.flattening() / background.flattening());
        }
    }

    /// The mean dose of a figure over its places.
    pub(super) fn mean_dose(&self, figure: usize) -> Option<Dose> {
        self.map?;
        let portions = self.portions.get(figure)?.as_ref()?;
        let places: f64 = portions.iter().map(|p| p.count() as f64).sum();
        let sum: f64 = portions.iter().map(|p| p.count() as f64 * p.mean.0).sum();
        (places > 0.0).then(|| Dose(sum / places))
    }
}

fn shots_of(made: &[Result<Made, Unmade>]) -> Vec<Option<&ShotList>> {
    made.iter()
        .map(|made| Some(&made.as_ref().ok()?.fracture.shots))
        .collect()
}

/// Shots of a figure at one dose at all its places.
pub(super) fn evenly<'a>(
    figure: &'a DistinctFigure,
    shots: &'a ShotList,
    dose: Dose,
) -> Vec<Portion<'a>> {
    let place = |place: &'a Place| Portion {
        shots: Cow::Borrowed(shots),
        transform: place.transform,
        repetition: Cow::Borrowed(&place.repetition),
        dose,
        mean: dose,
    };
    figure.places.iter().map(place).collect()
}

/// What a profile says of random errors, at a mean dose that the noise of the electrons depends on.
#[must_use]
pub fn shot_errors(profile: &Profile, mean: Dose) -> ShotErrors {
    ShotErrors {
        edge: Nm(profile.plain(Key::ShotEdgeSd)),
        dose: 0.01 * profile.plain(Key::ShotDoseSd),
        base_dose: Some(BaseDose(profile.base_dose().0 * mean.0)),
    }
}

impl Portion<'_> {
    /// At how many places.
    #[must_use]
    pub fn count(&self) -> u128 {
        self.repetition.count()
    }
}

/// Dose times area of all shots at all places over the area of the extent: what a mask would cover if no shots lay on one another.
#[must_use]
pub fn mean_coverage(mask: &Mask, made: &[Result<Made, Unmade>]) -> f64 {
    coverage_of(mask, &shots_of(made))
}

/// Dose times area of shots, nm².
pub(super) fn charge(shots: &ShotList) -> f64 {
    shots
        .rects()
        .map(|(rect, dose)| dose.0 * rect.area_nm2())
        .sum()
}

fn coverage_of(mask: &Mask, shots: &[Option<&ShotList>]) -> f64 {
    let extent = mask.extent.map_or(0.0, Rect::area_nm2);
    if extent == 0.0 {
        return 0.0;
    }
    let of_figure = |(figure, shots): (&DistinctFigure, &Option<&ShotList>)| {
        shots.map_or(0.0, charge) * figure.place_count() as f64
    };
    mask.figures.iter().zip(shots).map(of_figure).sum::<f64>() / extent
}

/// The middle of a rectangle, rounded down to a picometre: the same wherever the rectangle stands.
fn middle(rect: Rect) -> Point {
    let half = |a: i64, b: i64| a + (b - a) / 2;
    Point::new(half(rect.min.x, rect.max.x), half(rect.min.y, rect.max.y))
}
