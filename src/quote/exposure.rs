//! The dose that every place of a mask needs: what is written around it, spread by the long range, and the correction of it.
//!
//! Coverage is that of the shots, at all their places, on one mesh over the mask's extent; the correction is found on the mesh and read off
//! where figures stand. An array stays an array where one dose serves it, and is split where the dose changes.

use std::borrow::Cow;
use std::collections::BTreeMap;

use rayon::prelude::*;

use crate::expose::{self, Backscatter, Density, Folding};
use crate::geom::{Orientation, Point, Rect, Repetition, Transform};
use crate::judge::{Background, Fidelity};
use crate::mask::{DistinctFigure, Mask, Place};
use crate::profile::{Key, Profile};
use crate::shot::{Shot, ShotList};
use crate::target::ShotErrors;
use crate::units::{BaseDose, Dose, Nm};

use super::made::{Made, MadeMask, Unmade};
use super::result::DoseMap;
use super::{Clip, QuoteError};

/// Doses nearer than this share of each other are one: a thousandth moves an edge by a tenth of its margin.
const STEP: f64 = 1e-3;

/// Cells beyond which the mesh is made coarser: 128 MiB a map, of which about eight are held.
const MOST_CELLS: f64 = 16_777_216.0;

/// Copies of figures larger than a cell that get a dose for each shot, in shots; what is beyond gets one for each copy.
const MOST_SHOTS: usize = 10_000_000;

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

    /// A quarter of the least radius.
    fn wanted_mesh(&self) -> Option<Nm> {
        let least = self.terms.iter().map(|term| term.radius.0);
        Some(Nm(0.25 * least.reduce(f64::min)?))
    }

    /// That, or what [`MOST_CELLS`] allow over the frame.
    fn mesh(&self, frame: Rect) -> Option<Nm> {
        let fine = self.wanted_mesh()?.0;
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
                let mut splitter = Splitter {
                    dose: &found.dose,
                    shots,
                    place: place.transform,
                    bounds: place.transform.apply_rect(figure.figure.bounds()),
                    singles: BTreeMap::new(),
                    portions: Vec::new(),
                };
                splitter.split(&place.repetition, Point::default());
                portions.extend(splitter.done());
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

    /// What the correction found, and the level that edges see with the doses as they were handed out.
    fn summary(
        &self,
        coverage: &Density,
        found: &expose::Correction,
        portions: &[Option<Vec<Portion<'_>>>],
    ) -> DoseMap {
        // Beyond the frame, and in what cells reach beyond it, stands what the correction took there.
        let mut written = coverage.emptied().times(&found.dose);
        let all = || portions.iter().flatten().flatten();
        for portion in all() {
            let placed: Vec<(Rect, Dose)> = portion
                .shots
                .rects()
                .map(|(rect, dose)| (portion.transform.apply_rect(rect), dose * portion.dose.0))
                .collect();
            written.add_repeated(&placed, &portion.repetition);
        }
        let back = expose::backscattered(&written, &self.terms);
        let total = 1.0 + self.ratio();
        let mut error = 0.0_f64;
        let (mut least, mut greatest) = (f64::INFINITY, 0.0_f64);
        let (mut charge, mut plain) = (0.0, 0.0);
        for portion in all() {
            let copies = portion.repetition.count() as f64;
            let at = |rect: Rect, by: Point| {
                let rect = portion.transform.apply_rect(rect).translated(by);
                back.at_point(middle(rect))
            };
            let mut look = |rect: Rect, dose: f64, by: Point| {
                let level = (dose + 2.0 * at(rect, by)) / total;
                error = error.max((level - 1.0).abs());
                (least, greatest) = (least.min(dose), greatest.max(dose));
            };
            match &portion.shots {
                // Its own dose for each shot: at dose 1 of the fracture that is the shot's.
                Cow::Owned(shots) => {
                    for (rect, _) in shots.rects() {
                        let dose = found
                            .dose
                            .at_point(middle(portion.transform.apply_rect(rect)));
                        look(rect, dose, Point::default());
                    }
                }
                Cow::Borrowed(shots) => {
                    let Some(bounds) = shots.rects().map(|(rect, _)| rect).reduce(Rect::hull)
                    else {
                        continue;
                    };
                    for by in ends(&portion.repetition) {
                        look(bounds, portion.dose.0, by);
                    }
                }
            }
            let area: f64 = portion
                .shots
                .rects()
                .map(|(rect, dose)| {
                    dose.0 * (Nm::from_pm(rect.width()).0 * Nm::from_pm(rect.height()).0)
                })
                .sum();
            charge += copies * area * portion.dose.0;
            plain += copies * area * portion.dose.0 / portion.mean.0;
        }
        let [low, high] = found.uncorrected_where_written(coverage);
        DoseMap {
            mesh_nm: coverage.mesh().0,
            wanted_mesh_nm: 0.25
                * self
                    .terms
                    .iter()
                    .map(|t| t.radius.0)
                    .fold(f64::INFINITY, f64::min),
            surroundings: coverage.around(),
            least_dose: least,
            greatest_dose: greatest,
            mean_dose: charge / plain,
            uncorrected_level: [low, high],
            level_error: error,
            rounds: found.rounds,
        }
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
    let area = |rect: Rect| Nm::from_pm(rect.width()).0 * Nm::from_pm(rect.height()).0;
    shots.rects().map(|(rect, dose)| dose.0 * area(rect)).sum()
}

fn coverage_of(mask: &Mask, shots: &[Option<&ShotList>]) -> f64 {
    let area = |rect: Rect| Nm::from_pm(rect.width()).0 * Nm::from_pm(rect.height()).0;
    let extent = mask.extent.map_or(0.0, area);
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

/// Displacements at the corners of an array, all of a list.
fn ends(repetition: &Repetition) -> Vec<Point> {
    match repetition {
        Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => {
            let last = |n: u64| i64::try_from(n.saturating_sub(1)).unwrap_or(i64::MAX);
            let (i, j) = (last(*columns), last(*rows));
            let (far_a, far_b) = (Point::new(a.x * i, a.y * i), Point::new(b.x * j, b.y * j));
            vec![Point::default(), far_a, far_b, far_a + far_b]
        }
        Repetition::Nested(parts) => parts.iter().fold(vec![Point::default()], |sums, part| {
            let ends = ends(part);
            sums.iter()
                .flat_map(|s| ends.iter().map(|e| *s + *e))
                .collect()
        }),
        Repetition::Once | Repetition::List(_) => repetition.displacements().collect(),
    }
}

/// Splits the places of one figure by dose.
struct Splitter<'a, 'm> {
    dose: &'m Density,
    shots: &'a ShotList,
    place: Transform,
    /// Of the figure without displacement, mask axes.
    bounds: Rect,
    /// Copies that stand alone, by dose in steps.
    singles: BTreeMap<i64, Vec<(Point, f64)>>,
    portions: Vec<Portion<'a>>,
}

impl<'a> Splitter<'a, '_> {
    fn split(&mut self, repetition: &Repetition, shift: Point) {
        let span = repetition.span();
        // A figure that is small against the mesh has one dose, that of its middle.
        let own = if self.is_large() {
            self.bounds
        } else {
            let middle = middle(self.bounds);
            Rect::new(middle, middle)
        };
        let window = Rect {
            min: own.min + shift + span.min,
            max: own.max + shift + span.max,
        };
        let even = self.dose.even_in(window, STEP);
        if let Some(dose) = even.filter(|_| *repetition != Repetition::Once) {
            return self.push(repetition.clone(), shift, Dose(dose));
        }
        match repetition {
            Repetition::Once => self.single(shift, even.is_none()),
            Repetition::List(list) => {
                for by in list {
                    self.split(&Repetition::Once, shift + *by);
                }
            }
            &Repetition::Lattice { a, b, .. } => {
                let along = [a, b].map(|step| self.change_along(repetition, step, shift));
                for (half, by) in halves(repetition, along) {
                    self.split(&half, shift + by);
                }
            }
            Repetition::Nested(parts) => {
                let Some((outermost, inner)) = parts.split_last() else {
                    return self.split(&Repetition::Once, shift);
                };
                let parts: Vec<(Repetition, Point)> = match outermost {
                    &Repetition::Lattice { a, b, .. } => {
                        let along = [a, b].map(|step| self.change_along(outermost, step, shift));
                        halves(outermost, along)
                    }
                    _ => {
                        let each = outermost.displacements();
                        each.map(|by| (Repetition::Once, by)).collect()
                    }
                };
                for (part, by) in parts {
                    let mut all = inner.to_vec();
                    all.push(part);
                    self.split(&Repetition::nested(all), shift + by);
                }
            }
        }
    }

    /// How much the dose changes along one side of an array, through its middle.
    fn change_along(&self, array: &Repetition, step: Point, shift: Point) -> f64 {
        let &Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } = array
        else {
            return 0.0;
        };
        let last = |n: u64| i64::try_from(n - 1).unwrap_or(i64::MAX);
        let times = |p: Point, n: i64| Point::new(p.x.saturating_mul(n), p.y.saturating_mul(n));
        let (n, other) = if step == a {
            (last(columns), times(b, last(rows) / 2))
        } else {
            (last(rows), times(a, last(columns) / 2))
        };
        let at = |k: i64| {
            let by = shift + other + times(step, k);
            self.dose.at_point(middle(self.bounds.translated(by)))
        };
        let ends = [at(0), at(n / 2), at(n)];
        let [low, high] = ends
            .iter()
            .fold([f64::INFINITY, f64::NEG_INFINITY], |[l, h], d| {
                [l.min(*d), h.max(*d)]
            });
        high - low
    }

    fn is_large(&self) -> bool {
        let longest = self.bounds.width().max(self.bounds.height());
        Nm::from_pm(longest).0 > self.dose.mesh().0
    }

    /// One copy; if the dose changes over a large one, each of its shots gets its own.
    fn single(&mut self, shift: Point, changes: bool) {
        let many = (self.portions.len() + 1) * self.shots.len() > MOST_SHOTS;
        if !(changes && self.is_large()) || self.shots.is_empty() || many {
            let dose = self.dose.at_point(middle(self.bounds.translated(shift)));
            #[allow(
                clippy::cast_possible_truncation,
                reason = "a float to integer cast saturates"
            )]
            let step = (dose.ln() / STEP).round() as i64;
            return self.singles.entry(step).or_default().push((shift, dose));
        }
        let transform = self.moved(shift);
        let mut sum = 0.0;
        let corrected = |shot: &Shot| {
            let at = middle(transform.apply_rect(self.shots.rect(shot)));
            let dose = self.dose.at_point(at);
            sum += dose;
            Shot {
                dose: shot.dose * dose,
                ..*shot
            }
        };
        let shots: Vec<Shot> = self.shots.shots().iter().map(corrected).collect();
        let mean = Dose(sum / shots.len() as f64);
        self.portions.push(Portion {
            shots: Cow::Owned(ShotList::new(self.shots.address(), shots)),
            transform,
            repetition: Cow::Owned(Repetition::Once),
            dose: Dose(1.0),
            mean,
        });
    }

    fn moved(&self, shift: Point) -> Transform {
        self.place.then(Transform {
            orientation: Orientation::IDENTITY,
            shift,
        })
    }

    fn push(&mut self, repetition: Repetition, shift: Point, dose: Dose) {
        self.portions.push(Portion {
            shots: Cow::Borrowed(self.shots),
            transform: self.moved(shift),
            repetition: Cow::Owned(repetition),
            dose,
            mean: dose,
        });
    }

    /// All portions; single copies of like dose together, at their mean dose.
    fn done(mut self) -> Vec<Portion<'a>> {
        for (_, copies) in std::mem::take(&mut self.singles) {
            let mean = copies.iter().map(|(_, dose)| dose).sum::<f64>() / copies.len() as f64;
            let first = copies[0].0;
            let repetition = match copies.len() {
                1 => Repetition::Once,
                _ => Repetition::List(copies.iter().map(|(shift, _)| *shift - first).collect()),
            };
            self.push(repetition, first, Dose(mean));
        }
        self.portions
    }
}

/// An array cut in two across the side along which the dose changes more, of equal ones the longer; a single copy is no array.
fn halves(repetition: &Repetition, change: [f64; 2]) -> Vec<(Repetition, Point)> {
    let &Repetition::Lattice {
        columns,
        rows,
        a,
        b,
    } = repetition
    else {
        return vec![(repetition.clone(), Point::default())];
    };
    let part = |columns: u64, rows: u64| {
        if columns * rows == 1 {
            Repetition::Once
        } else {
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
            }
        }
    };
    let times = |p: Point, n: u64| {
        let n = i64::try_from(n).unwrap_or(i64::MAX);
        Point::new(p.x.saturating_mul(n), p.y.saturating_mul(n))
    };
    let first = change[0] > change[1] || (change[0] == change[1] && columns >= rows);
    if columns > 1 && (first || rows == 1) {
        let left = columns / 2;
        vec![
            (part(left, rows), Point::default()),
            (part(columns - left, rows), times(a, left)),
        ]
    } else if rows > 1 {
        let low = rows / 2;
        vec![
            (part(columns, low), Point::default()),
            (part(columns, rows - low), times(b, low)),
        ]
    } else {
        vec![(Repetition::Once, Point::default())]
    }
}
