//! Figures fitted anew where what their neighbours really flash undoes their print.
//!
//! A figure is first fractured beside neighbours that print ideally. Then every figure is looked at beside their shots, at every kind
//! of place it stands at: two places are of one kind if the same figures stand about them in the same way. A figure that
//! fails at any kind is fitted anew, for all its kinds at once, so that it stays one distinct figure. What that changes
//! for its neighbours is looked at in the next round. No two neighbours are fitted in one round, the lower number first, so the result
//! is the same for any number of threads.

use std::collections::BTreeSet;

use rayon::prelude::*;

use crate::fracture::{Fracture, Fracturer, Job, Miss, MissReason};
use crate::geom::{Orientation, Point, Rect, Repetition, Transform};
use crate::mask::{DistinctFigure, Mask, Place, Standings};
use crate::units::Dose;

use super::made::{Setup, Unmade, window};

/// Rounds at most.
const ROUNDS: usize = 8;

/// Places at most at which a distinct figure is looked at; of more, so many evenly spread.
const MOST_PLACES: usize = 200;

/// Displacements compared at most to find who stands about whom: fewer places of each figure are looked at on a mask so large.
const MOST_WORK: u128 = 1 << 31;

/// Elements looked at from either end of an array along each of its axes. The outermost have neighbours missing, so they are
/// another distinct figure than the inner ones; those inside the next two have inner ones about them only, all alike.
const RING: u64 = 3;

/// What stands about a figure: other figures, their frames → its own.
type Surroundings = Vec<(usize, Transform)>;

/// Fits figures anew that do not print beside their neighbours' shots; what is then still missed is among their misses.
pub(super) fn repair(
    mask: &Mask,
    fractures: &mut [Result<Fracture, Unmade>],
    fracturer: &dyn Fracturer,
    setup: &Setup,
) {
    let standings = Standings::new(mask);
    let places = mask.figures.iter().flat_map(|figure| &figure.places);
    let listed = |place: &Place| match &place.repetition {
        Repetition::List(list) => list.len() as u128,
        _ => 1,
    };
    let work = places.map(listed).sum::<u128>().max(1) * mask.figures.len().max(1) as u128;
    let most = usize::try_from(MOST_WORK / work).unwrap_or(MOST_PLACES);
    let most = most.clamp(1, MOST_PLACES);
    let kinds: Vec<Vec<Surroundings>> = mask
        .figures
        .par_iter()
        .enumerate()
        .map(|(i, distinct)| kinds(&standings, i, distinct, setup, most))
        .collect();
    let scene = Scene {
        mask,
        kinds: &kinds,
        fracturer,
        setup,
    };
    let beside = |i: usize| kinds[i].iter().flatten().map(|&(other, _)| other);
    let mut waiting: BTreeSet<usize> = (0..kinds.len())
        .filter(|&i| beside(i).next().is_some() && fractures[i].is_ok())
        .collect();
    for round in 0..=ROUNDS {
        let looked: Vec<usize> = waiting.iter().copied().collect();
        let misses: Vec<_> = looked
            .par_iter()
            .map(|&i| scene.misses(i, fractures))
            .collect();
        let mut failing = Vec::new();
        for (&i, misses) in looked.iter().zip(misses) {
            let Ok(fracture) = &mut fractures[i] else {
                continue;
            };
            // What does not even print beside ideal neighbours is not for the real ones to mend.
            let hopeless = round == 0 && !fracture.misses.is_empty();
            if !misses.is_empty() && !hopeless {
                failing.push(i);
            }
            fracture.misses = explained(misses, &fracture.misses);
        }
        if round == ROUNDS {
            break;
        }
        let mut held: BTreeSet<usize> = BTreeSet::new();
        let (chosen, later): (Vec<usize>, Vec<usize>) = failing.into_iter().partition(|i| {
            let free = !held.contains(i);
            if free {
                held.extend(beside(*i));
            }
            free
        });
        let fitted: Vec<_> = chosen
            .par_iter()
            .map(|&i| scene.refit(i, fractures))
            .collect();
        waiting = later.into_iter().collect();
        for (&i, fitted) in chosen.iter().zip(fitted) {
            let (Some(fitted), Ok(old)) = (fitted, &fractures[i]) else {
                continue;
            };
            // One that fails as before is not tried again until its neighbours change.
            if fitted.misses.len() < old.misses.len() {
                fractures[i] = Ok(fitted);
                waiting.insert(i);
                waiting.extend(beside(i).filter(|&other| fractures[other].is_ok()));
            }
        }
        if waiting.is_empty() {
            break;
        }
    }
}

/// Misses beside real neighbours, with the reason that was known before where they do not tell.
fn explained(mut misses: Vec<Miss>, known: &[Miss]) -> Vec<Miss> {
    if known.iter().any(|miss| miss.reason == MissReason::Limits) {
        let unknown = |miss: &&mut Miss| miss.reason == MissReason::NotFound;
        let unknown = misses.iter_mut().filter(unknown);
        unknown.for_each(|miss| miss.reason = MissReason::Limits);
    }
    misses
}

/// All that a fit beside real neighbours needs.
struct Scene<'a> {
    mask: &'a Mask,
    kinds: &'a [Vec<Surroundings>],
    fracturer: &'a dyn Fracturer,
    setup: &'a Setup,
}

impl Scene<'_> {
    /// Calls `look` with the job of a figure beside what its neighbours now flash.
    fn with_job<T>(
        &self,
        figure: usize,
        fractures: &[Result<Fracture, Unmade>],
        look: impl FnOnce(&Job<'_>) -> T,
    ) -> T {
        let distinct = &self.mask.figures[figure];
        let window = window(distinct, self.setup.blur);
        let flashed = |surroundings: &Surroundings| {
            let mut list: Vec<(Rect, Dose)> = Vec::new();
            for &(other, into_frame) in surroundings {
                let Ok(fracture) = &fractures[other] else {
                    continue;
                };
                let rects = fracture.shots.rects();
                let moved = rects.map(|(rect, dose)| (into_frame.apply_rect(rect), dose));
                list.extend(moved.filter(|(rect, _)| rect.touches(window)));
            }
            list
        };
        let flashed: Vec<_> = self.kinds[figure].iter().map(flashed).collect();
        look(&Job {
            figure: &distinct.figure,
            context: &distinct.context,
            flashed: &flashed,
            blur: self.setup.blur,
            tolerance: self.setup.tolerance,
            limits: self.setup.limits,
        })
    }

    fn misses(&self, figure: usize, fractures: &[Result<Fracture, Unmade>]) -> Vec<Miss> {
        let Ok(fracture) = &fractures[figure] else {
            return Vec::new();
        };
        self.with_job(figure, fractures, |job| {
            self.fracturer.misses(job, &fracture.shots)
        })
    }

    fn refit(&self, figure: usize, fractures: &[Result<Fracture, Unmade>]) -> Option<Fracture> {
        let found = fractures[figure].as_ref().ok()?;
        self.with_job(figure, fractures, |job| self.fracturer.refit(job, found))
    }
}

/// The kinds of places of a figure.
fn kinds(
    standings: &Standings<'_>,
    figure: usize,
    distinct: &DistinctFigure,
    setup: &Setup,
    most: usize,
) -> Vec<Surroundings> {
    if distinct.context.is_empty() {
        return Vec::new();
    }
    let window = window(distinct, setup.blur);
    let places: Vec<Transform> = distinct.places.iter().flat_map(elements).collect();
    let every = places.len().div_ceil(most).max(1);
    let kinds: BTreeSet<Vec<(usize, Orientation, Point)>> = places
        .iter()
        .step_by(every)
        .map(|&place| {
            let back = place.inverse();
            let near = standings.touching(place.apply_rect(window)).into_iter();
            let others = near.filter(|&other| other != (figure, place));
            let mut others: Vec<_> = others
                .map(|(other, transform)| {
                    let t = transform.then(back);
                    (other, t.orientation, t.shift)
                })
                .collect();
            others.sort_unstable();
            others
        })
        .collect();
    let surroundings = |kind: Vec<(usize, Orientation, Point)>| {
        kind.into_iter()
            .map(|(other, orientation, shift)| (other, Transform { orientation, shift }))
            .collect()
    };
    kinds.into_iter().map(surroundings).collect()
}

/// The elements of a placement that stand for all: own frame → mask.
fn elements(place: &Place) -> Vec<Transform> {
    let transform = place.transform;
    let moved = |by: Point| Transform {
        shift: transform.shift + by,
        ..transform
    };
    place.repetition.ends(RING).into_iter().map(moved).collect()
}
