//! The contract of every fracturer: one figure with its context in, shots that print it out.

pub mod tile;

use crate::geom::{Figure, Point};
use crate::shot::{ShotLimits, ShotList};
use crate::units::{Dose, Nm};

/// All a fracturer may know.
#[derive(Clone, Copy, Debug)]
pub struct Job<'a> {
    /// What to print, in its own frame.
    pub figure: &'a Figure,
    /// Other figures near enough to matter, same frame.
    pub context: &'a [Figure],
    /// Standard deviation of the blur.
    pub sigma: Nm,
    /// How far the contour may stray from the outline.
    pub tolerance: Nm,
    /// What the writer can flash.
    pub limits: ShotLimits,
}

/// Turns a figure into shots.
///
/// Same job, same result; nothing else is read: no clock, no thread count, no global state.
pub trait Fracturer: Sync {
    /// One word for tables and file names.
    fn name(&self) -> &'static str;

    /// The shots, with every place that they do not print within tolerance.
    fn fracture(&self, job: &Job<'_>) -> Fracture;
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
    /// Whether it must print (and does not) or must not (and does).
    pub must_print: bool,
    /// Why, as far as known.
    pub reason: MissReason,
}

/// Why a place cannot be printed within tolerance.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum MissReason {
    /// Narrower than the blur can print.
    TooNarrow,
    /// Turns more sharply than the blur can follow.
    TooSharp,
    /// The shot limits stand in the way.
    Limits,
    /// No better solution was found.
    NotFound,
}
