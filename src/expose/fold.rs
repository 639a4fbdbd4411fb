//! Stretches of a mask over which the same is written again and again, told by a few cells instead of all.
//!
//! Far from where arrays begin and end, an array whose step is short against the long range looks even: the dose there is one number, however long
//! the array. So of a stretch in which none begins or ends only some cells are kept, each with the mean of the whole stretch. It is taken
//! so far from the ends, and kept so long, that what is told of its ends has died away in the middle.

use crate::geom::{Copies, Rect, Repetition};
use crate::units::Nm;

use super::dose::count;

/// Reach of the long range, in radii: 6 σ. Twice that from the last end of an array its effect on the corrected dose, which oscillates and decays like
/// `exp(−1.3 x/σ)` or faster for ratios up to 3, is under 1e-6.
const REACH: f64 = 6.0 * std::f64::consts::FRAC_1_SQRT_2;

/// Ends of arrays that are looked at; a mask of more is not folded.
const MOST_ENDS: u128 = 100_000;

/// Stretches folded along one axis, the longest.
const MOST_FOLDS: usize = 16;

/// Some cells in place of more.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
struct Fold {
    /// The first of the cells that are folded.
    start: usize,
    /// How many are.
    whole: usize,
    /// How many stand for them.
    kept: usize,
}

/// The folds along one axis, from left to right.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub(super) struct Folds(Vec<Fold>);

/// The folds of a mesh along both axes.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Folding {
    pub(super) folds: [Folds; 2],
    pub(super) size: [usize; 2],
}

impl Folding {
    /// Where figures of these bounds (pm, each at the displacements of a repetition) leave stretches of a frame to fold on a mesh, if the long range
    /// has this greatest radius.
    #[must_use]
    pub fn new<'a>(
        frame: Rect,
        mesh: Nm,
        radius: Nm,
        figures: impl Iterator<Item = (Rect, &'a Repetition)>,
    ) -> Self {
        let sides = [(frame.min.x, frame.max.x), (frame.min.y, frame.max.y)];
        let cells =
            sides.map(|(low, high)| count((Nm::from_pm(high - low) / mesh).ceil().max(1.0)));
        let kept = count((2.0 * REACH * (radius / mesh)).ceil());
        let mut folds = [Folds::default(), Folds::default()];
        if let Some(ends) = ends(figures, radius) {
            for ((folds, mut ends), (low, high)) in folds.iter_mut().zip(ends).zip(sides) {
                ends.extend([(low, low), (high, high)]);
                *folds = Folds::between(&mut ends, low, mesh, radius * REACH, kept);
            }
        }
        let size = [0, 1].map(|axis| cells[axis] - folds[axis].left_out());
        Self { folds, size }
    }

    /// Every cell for itself.
    pub(super) fn none(frame: Rect, mesh: Nm) -> Self {
        Self::new(frame, mesh, Nm(f64::INFINITY), std::iter::empty())
    }

    /// Columns and rows that are left.
    #[must_use]
    pub fn size(&self) -> [usize; 2] {
        self.size
    }
}

/// Intervals along either axis in which arrays begin or end; `None` if there are too many.
fn ends<'a>(
    figures: impl Iterator<Item = (Rect, &'a Repetition)>,
    radius: Nm,
) -> Option<[Vec<(i64, i64)>; 2]> {
    let mut left = MOST_ENDS;
    let [mut across, mut up] = [Vec::new(), Vec::new()];
    for (bounds, repetition) in figures {
        let copies = Copies::new(repetition);
        left = left.checked_sub(copies.parts())?;
        for by in copies.rest() {
            let Rect { min, max } = bounds.translated(by);
            let line =
                |ends: &mut Vec<(i64, i64)>, (low, high): (i64, i64), step: i64, last: i64| {
                    if Nm::from_pm(step) > radius {
                        ends.push((low, high + last));
                    } else {
                        ends.extend([(low, high), (low + last, high + last)]);
                    }
                };
            copies.across(|x, copies| {
                line(
                    &mut across,
                    (min.x + x, max.x + x),
                    copies.step,
                    copies.last(),
                )
            });
            copies
                .up(|y, copies| line(&mut up, (min.y + y, max.y + y), copies.step, copies.last()));
        }
    }
    Some([across, up])
}

impl Folds {
    /// Folds what lies further than `margin` from all these intervals (pm), on a mesh that starts at `origin`.
    fn between(ends: &mut [(i64, i64)], origin: i64, mesh: Nm, margin: Nm, kept: usize) -> Self {
        ends.sort_unstable();
        let Some(&(_, mut reached)) = ends.first() else {
            return Self::default();
        };
        let mut folds = Vec::new();
        for &(low, high) in &*ends {
            let cells = |pm: i64, by: Nm| (Nm::from_pm(pm - origin) + by) / mesh;
            let start = count(cells(reached, margin).ceil());
            let end = count(cells(low, margin * -1.0).floor());
            if end > start + kept {
                folds.push(Fold {
                    start,
                    whole: end - start,
                    kept,
                });
            }
            reached = reached.max(high);
        }
        folds.sort_by_key(|fold| (std::cmp::Reverse(fold.whole), fold.start));
        folds.truncate(MOST_FOLDS);
        folds.sort_by_key(|fold| fold.start);
        Self(folds)
    }

    fn left_out(&self) -> usize {
        self.0.iter().map(|fold| fold.whole - fold.kept).sum()
    }

    /// Each fold with the cells left out before it.
    fn each(&self) -> impl Iterator<Item = (Fold, usize)> + '_ {
        self.0.iter().scan(0, |out, fold| {
            let before = *out;
            *out += fold.whole - fold.kept;
            Some((*fold, before))
        })
    }

    /// Where a place of the mask stands among the cells that are left; both in cells from the origin. What lies further inside a fold than half of its kept
    /// cells stands in its middle.
    pub(super) fn place(&self, at: f64) -> f64 {
        let mut out = 0.0;
        for fold in &self.0 {
            let [start, whole, kept] = [fold.start, fold.whole, fold.kept].map(|n| n as f64);
            if at <= start {
                break;
            }
            if at < start + whole {
                let (from_start, from_end) = (at - start, start + whole - at);
                let half = 0.5 * kept;
                let within = if from_end < half {
                    kept - from_end
                } else {
                    from_start.min(half)
                };
                return start - out + within;
            }
            out += whole - kept;
        }
        at - out
    }

    /// The first of all cells for which a kept one stands, and how many those are.
    pub(super) fn stretch(&self, kept: usize) -> (usize, usize) {
        let mut out = 0;
        for (fold, before) in self.each() {
            if kept < fold.start - before {
                break;
            }
            if kept < fold.start - before + fold.kept {
                return (fold.start, fold.whole);
            }
            out = before + fold.whole - fold.kept;
        }
        (kept + out, 1)
    }

    /// The kept cells that stand for one of all cells: the first, and the one behind the last.
    pub(super) fn kept(&self, cell: usize) -> (usize, usize) {
        let mut out = 0;
        for (fold, before) in self.each() {
            if cell < fold.start {
                break;
            }
            if cell < fold.start + fold.whole {
                let first = fold.start - before;
                return (first, first + fold.kept);
            }
            out = before + fold.whole - fold.kept;
        }
        (cell - out, cell - out + 1)
    }

    /// For how many of all cells a kept one stands.
    pub(super) fn weight(&self, kept: usize) -> f64 {
        let (start, whole) = self.stretch(kept);
        let (first, end) = self.kept(start);
        whole as f64 / (end - first) as f64
    }
}
