//! The contract of every fracturer: one figure with its context in, shots that print it out.

mod fit;
mod frame;
mod levels;
pub mod overlap;
pub mod tile;

pub use levels::{DoseLevels, DoseLevelsError};

use fit::{Doses, Setting};
use std::f64::consts::FRAC_1_SQRT_2 as SLANT;

use frame::{framed, oriented, refitted};

use crate::blur::{Blur, NARROWEST_LINE};
use crate::geom::{Figure, Point, Rect};
use crate::shot::{ShotLimits, ShotList};
use crate::target::{Need, Target, Violation};
use crate::units::{Dose, Nm};

/// All a fracturer may know.
#[derive(Clone, Copy, Debug)]
pub struct Job<'a> {
    /// What to print, in its own frame.
    pub figure: &'a Figure,
    /// Other figures near enough to matter, same frame.
    pub context: &'a [Figure],
    /// What they flash, same frame, one list for each kind of place that the figure stands at: the shots must print it at all of
    /// them. No list: they are taken to print ideally.
    pub flashed: &'a [Vec<(Rect, Dose)>],
    /// The short-range blur.
    pub blur: Blur,
    /// How far the contour may stray from the outline.
    pub tolerance: Nm,
    /// What the writer can flash.
    pub limits: ShotLimits,
}

/// How hard a fracturer searches.
///
/// Measured on the 30 figures of the reference set `assist` (σ 12 nm, tolerance 2 nm, sides and slivers from 8 nm), shots and time as a
/// share of normal: quick 296 tiles at 0.8 and 241 overlapping shots at 0.55; normal 295 and 226; thorough 290 at 2.5 and 219 at 2.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord)]
pub enum Effort {
    /// One start, few trials.
    Quick,
    /// What a quote uses.
    #[default]
    Normal,
    /// All starts, wide windows: several times the work of normal for a shot less now and then.
    Thorough,
}

/// Turns a figure into shots.
///
/// Same job, same result; nothing else is read: no clock, no thread count, no global state.
pub trait Fracturer: Sync {
    /// One word for tables and file names.
    fn name(&self) -> &'static str;

    /// The shots, with every place that they do not print within tolerance.
    ///
    /// # Errors
    /// When the figure cannot be cut at all: its rings are broken or beyond what the method can count.
    fn fracture(&self, job: &Job<'_>) -> Result<Fracture, FractureError>;

    /// The places that shots made for a job do not print, where the neighbours may flash otherwise than was thought.
    fn misses(&self, job: &Job<'_>, shots: &ShotList) -> Vec<Miss> {
        misses(job, shots, Doses::default())
    }

    /// Shots like those found, moved to where they print what they now miss, or the best found; `None` if the method moves none.
    fn refit(&self, _job: &Job<'_>, _found: &Fracture) -> Option<Fracture> {
        None
    }
}

/// The places that shots do not print, and where they pile up too much dose.
fn misses(job: &Job<'_>, shots: &ShotList, doses: Doses) -> Vec<Miss> {
    let judged = refitted(job, shots, |job, shots| {
        Some(Setting::of_shots(job, doses, shots).judged(shots.clone()))
    });
    judged.map_or_else(Vec::new, |fracture| fracture.misses)
}

/// Why a figure got no shots.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum FractureError {
    /// The exact partition refused the figure.
    #[error(transparent)]
    Partition(#[from] tile::PartitionError),
    /// The plain staircase refused the figure.
    #[error(transparent)]
    Staircase(#[from] tile::StaircaseError),
}

/// Shots of one figure and what they fail at.
#[derive(Clone, Debug, PartialEq)]
pub struct Fracture {
    /// On the address grid of the job.
    pub shots: ShotList,
    /// Places that do not print within tolerance; empty means the whole neighbourhood was checked and holds.
    pub misses: Vec<Miss>,
    /// Least number of shots that any fracture of this kind needs, where a bound is known.
    pub lower_bound: Option<usize>,
    /// What the fracturer decided on its own, as sentences.
    pub notes: Vec<String>,
}

/// A place that does not print as drawn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Miss {
    /// Where.
    pub place: Point,
    /// Dose there, context included.
    pub dose: Dose,
    /// Whether it must print (and does not) or must not (and does); true for a shot outside the limits, false for a dose over the
    /// peak allowed.
    pub must_print: bool,
    /// Why, as far as known.
    pub reason: MissReason,
}

impl Miss {
    /// A shot (sides in nm) outside the limits of the writer, or a tile on another.
    fn unfit([x0, y0, x1, y1]: [f64; 4], dose: Dose) -> Self {
        Self {
            place: point([0.5 * (x0 + x1), 0.5 * (y0 + y1)]),
            dose,
            must_print: true,
            reason: MissReason::Limits,
        }
    }

    /// A place (nm) that gets more dose than is allowed anywhere.
    fn pile(place: [f64; 2], dose: f64) -> Self {
        Self {
            place: point(place),
            dose: Dose(dose),
            must_print: false,
            reason: MissReason::Limits,
        }
    }

    /// A broken rule as a miss, with the reason as far as the outline tells it.
    fn of(violation: &Violation, target: &Target, blur: Blur) -> Self {
        let sigma = blur.sigma().0;
        let must_print = violation.need == Need::Print;
        let near = |limit: f64| target.outline_within(violation.place, limit);
        let reason = if target.in_corner_zone(violation.place) {
            MissReason::TooSharp
        } else if must_print
            && near(0.5 * NARROWEST_LINE * sigma)
            && narrow(target, violation.place, NARROWEST_LINE * sigma)
        {
            MissReason::TooNarrow
        } else {
            MissReason::NotFound
        };
        Self {
            place: point(violation.place),
            dose: Dose(violation.dose),
            must_print,
            reason,
        }
    }
}

/// A place in nm, near the origin of a frame, to the nearest picometre.
fn point([x, y]: [f64; 2]) -> Point {
    let pm = |v: f64| Nm(v).to_pm().unwrap_or_default();
    Point::new(pm(x), pm(y))
}

/// Whether a place of the figure lies in a part narrower than `width` along some of four directions.
fn narrow(target: &Target, p: [f64; 2], width: f64) -> bool {
    [[1.0, 0.0], [0.0, 1.0], [SLANT, SLANT], [SLANT, -SLANT]].iter().any(|d| {
        let leaves = |sign: f64| (1..=20).find(|&k| !target.inside([p[0] + sign * f64::from(k) * width / 20.0 * d[0], p[1] + sign * f64::from(k) * width / 20.0 * d[1]]));
        matches!((leaves(1.0), leaves(-1.0)), (Some(a), Some(b)) if f64::from(a + b) * width / 20.0 <= width)
    })
}

/// Why a place cannot be printed within tolerance.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum MissReason {
    /// Narrower than the blur can print.
    TooNarrow,
    /// Turns more sharply than the blur can follow.
    TooSharp,
    /// The limits of sides or of the peak dose stand in the way: a shot is outside them, the dose is, or the place prints
    /// without them.
    Limits,
    /// No better solution was found.
    NotFound,
}
