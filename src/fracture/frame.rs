//! The frame in which a job is fractured, so that the result does not depend on where and how the figure lies.

use super::{Fracture, Job};
use crate::geom::{Figure, Orientation, Point, Rect, Transform};
use crate::shot::ShotList;
use crate::units::Dose;

/// Fractures a job in a frame of its own, so that equal figures at different places give equal shots to the bit: the lower-left
/// corner of the bounds goes to within one address unit of the origin.
pub(super) fn framed<E>(
    job: &Job<'_>,
    fracture: impl FnOnce(&Job<'_>) -> Result<Fracture, E>,
) -> Result<Fracture, E> {
    let (figure, context) = (job.figure.clone(), job.context.to_vec());
    fracture_in(
        job,
        Framed::new(job, Orientation::IDENTITY, figure, context),
        fracture,
    )
}

/// As [`framed`], with shots made before.
pub(super) fn refitted(
    job: &Job<'_>,
    shots: &ShotList,
    fit: impl FnOnce(&Job<'_>, &ShotList) -> Option<Fracture>,
) -> Option<Fracture> {
    let (figure, context) = (job.figure.clone(), job.context.to_vec());
    let framed = Framed::new(job, Orientation::IDENTITY, figure, context);
    let moved = shots.transformed(framed.to);
    fracture_in(job, framed, |job| fit(job, &moved).ok_or(())).ok()
}

/// As [`framed`], turned and mirrored to the least of the eight ways that the figure can lie, so that its images give images of its shots.
///
/// Of ways that look the same the first is taken: images of a symmetric figure give as many shots, but not always images of them.
pub(super) fn oriented<E>(
    job: &Job<'_>,
    fracture: impl FnOnce(&Job<'_>) -> Result<Fracture, E>,
) -> Result<Fracture, E> {
    let ways = Orientation::all().map(|orientation| {
        let turned = |f: &Figure| {
            let shift = Point::new(0, 0);
            f.transformed(Transform { orientation, shift }).normalized()
        };
        let mut context: Vec<Figure> = job.context.iter().map(turned).collect();
        context.sort_unstable();
        Framed::new(job, orientation, turned(job.figure), context)
    });
    // The first of equals.
    let least = ways.into_iter().min_by(|a, b| {
        a.figure
            .cmp(&b.figure)
            .then_with(|| a.context.cmp(&b.context))
    });
    match least {
        Some(least) => fracture_in(job, least, fracture),
        None => framed(job, fracture),
    }
}

/// A figure with its context, turned and then shifted to the origin.
struct Framed {
    /// From the job to here.
    to: Transform,
    figure: Figure,
    context: Vec<Figure>,
}

impl Framed {
    /// Shifts a figure and its context, which are turned already.
    fn new(job: &Job<'_>, orientation: Orientation, figure: Figure, context: Vec<Figure>) -> Self {
        let unit = job.limits.address.pm();
        let low = figure.bounds().min;
        let whole = |at: i64| -at.div_euclid(unit) * unit;
        let shift = Point::new(whole(low.x), whole(low.y));
        Self {
            to: Transform { orientation, shift },
            figure: figure.translated(shift),
            context: context.iter().map(|f| f.translated(shift)).collect(),
        }
    }
}

/// Fractures there and brings the result back.
fn fracture_in<E>(
    job: &Job<'_>,
    framed: Framed,
    fracture: impl FnOnce(&Job<'_>) -> Result<Fracture, E>,
) -> Result<Fracture, E> {
    let moved = |list: &Vec<(Rect, Dose)>| {
        list.iter()
            .map(|&(rect, dose)| (framed.to.apply_rect(rect), dose))
            .collect()
    };
    let flashed: Vec<Vec<(Rect, Dose)>> = job.flashed.iter().map(moved).collect();
    let mut found = fracture(&Job {
        figure: &framed.figure,
        context: &framed.context,
        flashed: &flashed,
        ..*job
    })?;
    let back = framed.to.inverse();
    found.shots = found.shots.transformed(back);
    for miss in &mut found.misses {
        miss.place = back.apply(miss.place);
    }
    Ok(found)
}
