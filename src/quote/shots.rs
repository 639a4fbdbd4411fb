//! The score of a flat shot list against all figures of a mask at all their places.

use rayon::prelude::*;

use crate::blur::REACH;
use crate::expose::Exposure;
use crate::geom::{Figure, Rect, Transform};
use crate::judge::{self, Fidelity, Settings};
use crate::mask::{Mask, Standings};
use crate::shot::{ShotLimits, ShotList};
use crate::units::Dose;

use super::result::{Count, FractureSummary};
use super::summary;

/// Most placed figures that are judged one by one.
pub const MOST_PLACES: u128 = 1_000_000;

/// Neighbours are known this many σ around a figure, so that one whose shots only reach it is not taken for a stray print.
const NEIGHBOURS: f64 = 12.0;

/// More figures than can be judged one by one.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[error(
    "the mask has {found} figures at all places, expected at most {MOST_PLACES} to judge a shot list"
)]
pub struct TooManyPlaces {
    /// Figures at all their places.
    pub found: u128,
}

/// The score of a shot list.
#[derive(Clone, Debug)]
pub struct Scored {
    /// Numbers of the whole.
    pub summary: FractureSummary,
    /// By placed figure that does not print: its number, its place, its score.
    pub failing: Vec<(usize, Transform, Fidelity)>,
    /// Shots further than 5 σ from every figure's bounds.
    pub stray: usize,
    /// Shots with a side that the writer cannot flash.
    pub beyond_limits: usize,
}

/// Judges every figure at every place on the dose of the whole list; `tick` is called after each.
///
/// # Errors
/// When there are too many figures.
pub fn score(
    mask: &Mask,
    shots: &ShotList,
    settings: &Settings,
    limits: &ShotLimits,
    tick: &(dyn Fn() + Sync),
) -> Result<Scored, TooManyPlaces> {
    let found = mask.place_count();
    if found > MOST_PLACES {
        return Err(TooManyPlaces { found });
    }
    let standings = Standings::new(mask);
    let pm = |sigmas: f64| (settings.blur.sigma() * sigmas).to_pm().unwrap_or_default();
    let index = ShotIndex::new(shots);
    let placed: Vec<(usize, Transform)> = mask
        .extent
        .map_or_else(Vec::new, |extent| standings.touching(extent));
    let judged: Vec<Fidelity> = placed
        .par_iter()
        .map(|&(figure, transform)| {
            let own = mask.figures[figure].figure.transformed(transform);
            let context = context(mask, &standings, (figure, transform), settings);
            let dose = Exposure::new(settings.blur, index.touching(own.bounds().grown(pm(REACH))));
            let fidelity = judge::judge(&own, &context, &dose, settings);
            tick();
            fidelity
        })
        .collect();
    let mut all = Fidelity::default();
    for fidelity in &judged {
        all.merge(fidelity, 1);
    }
    let stray = shots
        .rects()
        .filter(|(rect, _)| standings.touching(rect.grown(pm(REACH))).is_empty())
        .count();
    let failing: Vec<_> = placed
        .iter()
        .zip(judged)
        .filter(|(_, fidelity)| !fidelity.prints_within_tolerance())
        .map(|(&(figure, transform), fidelity)| (figure, transform, fidelity))
        .collect();
    let scores = all.summary();
    Ok(Scored {
        summary: FractureSummary {
            shots: Count(shots.len() as u128),
            shots_distinct: shots.len() as u64,
            smallest_side_nm: shots.smallest_side().map(|side| side.0),
            slivers: Count(shots.slivers(limits.sliver) as u128),
            prints_within_tolerance: Some(scores.prints_within_tolerance && stray == 0),
            figures_out_of_tolerance: Some(failing.len() as u64),
            ..summary::of_fidelity(&scores)
        },
        failing,
        stray,
        beyond_limits: summary::beyond_limits(shots, limits.least_side, limits.greatest_side),
    })
}

/// The figures around one at one of its places.
pub(super) fn context(
    mask: &Mask,
    standings: &Standings<'_>,
    (figure, transform): (usize, Transform),
    settings: &Settings,
) -> Vec<Figure> {
    let reach = settings.blur.sigma() * NEIGHBOURS;
    let own = transform.apply_rect(mask.figures[figure].figure.bounds());
    let near = standings.touching(own.grown(reach.to_pm().unwrap_or_default()));
    near.iter()
        .filter(|other| **other != (figure, transform))
        .map(|&(other, t)| mask.figures[other].figure.transformed(t))
        .collect()
}

/// Shots by lower side, to find those in a window.
pub(super) struct ShotIndex {
    rects: Vec<(Rect, Dose)>,
    tallest: i64,
}

impl ShotIndex {
    pub(super) fn new(shots: &ShotList) -> Self {
        // A shot list is sorted by its lower side.
        let rects: Vec<_> = shots.rects().collect();
        let tallest = rects.iter().map(|(rect, _)| rect.height()).max();
        Self {
            tallest: tallest.unwrap_or(0),
            rects,
        }
    }

    pub(super) fn touching(&self, window: Rect) -> impl Iterator<Item = (Rect, Dose)> + '_ {
        let lowest = window.min.y - self.tallest;
        let from = self.rects.partition_point(|(rect, _)| rect.min.y < lowest);
        let to = self
            .rects
            .partition_point(|(rect, _)| rect.min.y <= window.max.y);
        let band = self.rects[from..to.max(from)].iter().copied();
        band.filter(move |(rect, _)| rect.touches(window))
    }
}
