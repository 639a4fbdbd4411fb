//! Arithmetic of repetitions: how far they span, which of their elements come near something.
//!
//! An item of a cell carries a stack of repetitions, innermost first; its displacements are the sums of one of each.

use crate::geom::{Point, Rect, Repetition};

use super::index::BoxIndex;

/// Greatest coordinate magnitude, pm: the limit of [`crate::units::Nm::to_pm`].
pub(super) const RANGE: i64 = 1 << 52;

/// The least rectangle around all displacements; `None` when it leaves ±[`RANGE`].
pub(super) fn span(repetition: &Repetition) -> Option<Rect> {
    let span = match repetition {
        Repetition::Once => Rect::around([Point::default()]),
        Repetition::List(list) => Rect::around(list.iter().copied()),
        Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => {
            let step = |p: Point, n: u64| {
                let n = i64::try_from(n.saturating_sub(1)).ok()?;
                Some(Point::new(p.x.checked_mul(n)?, p.y.checked_mul(n)?))
            };
            let (a, b) = (step(*a, *columns)?, step(*b, *rows)?);
            if [a, b].iter().any(|p| !in_range(*p)) {
                return None;
            }
            Rect::around([Point::default(), a, b, a + b])
        }
        Repetition::Nested(parts) => {
            return parts
                .iter()
                .try_fold(POINT_BOX, |sum, part| add_spans(sum, span(part)?));
        }
    }?;
    (in_range(span.min) && in_range(span.max)).then_some(span)
}

/// The span of the origin alone.
pub(super) const POINT_BOX: Rect = Rect {
    min: Point::new(0, 0),
    max: Point::new(0, 0),
};

/// The rectangle around all sums of a point of each; `None` when it leaves ±[`RANGE`].
pub(super) fn add_spans(a: Rect, b: Rect) -> Option<Rect> {
    let sum = Rect {
        min: a.min + b.min,
        max: a.max + b.max,
    };
    (in_range(sum.min) && in_range(sum.max)).then_some(sum)
}

fn in_range(p: Point) -> bool {
    p.x.abs() <= RANGE && p.y.abs() <= RANGE
}

/// Displacements that bring `part` (a box) to within `reach` of `other`, as a closed window.
pub(super) fn window(part: Rect, other: Rect, reach: i64) -> Rect {
    Rect {
        min: other.min - part.max,
        max: other.max - part.min,
    }
    .grown(reach)
}

/// Column and row indices, first and last, both included.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct IndexRange {
    pub(super) columns: (i64, i64),
    pub(super) rows: (i64, i64),
}

/// A range of indices that holds all `(i, j)` of `all` with `i·a + j·b` in the window; `None` if there is surely none.
///
/// Least possible when `a` and `b` lie along different axes; otherwise an outer bound by Cramer's rule.
pub(super) fn indices_in(all: IndexRange, a: Point, b: Point, window: Rect) -> Option<IndexRange> {
    // Counted from the first index of each, so that a single column or row is index 0.
    let origin = Point::new(
        all.columns.0 * a.x + all.rows.0 * b.x,
        all.columns.0 * a.y + all.rows.0 * b.y,
    );
    let window = window.translated(-origin);
    let (ax, ay, bx, by) = (
        i128::from(a.x),
        i128::from(a.y),
        i128::from(b.x),
        i128::from(b.y),
    );
    let single = |(first, last): (i64, i64)| first == last;
    // A step that is never taken must not make the lattice look degenerate.
    let (ax, ay) = if single(all.columns) && ax * by == ay * bx {
        (-by, bx)
    } else {
        (ax, ay)
    };
    let (bx, by) = if single(all.rows) && ax * by == ay * bx {
        (-ay, ax)
    } else {
        (bx, by)
    };
    let det = ax * by - ay * bx;
    if det == 0 {
        return Some(all);
    }
    let (x0, x1) = (i128::from(window.min.x), i128::from(window.max.x));
    let (y0, y1) = (i128::from(window.min.y), i128::from(window.max.y));
    // i = (x·by − y·bx)/det, j = (y·ax − x·ay)/det over the four corners.
    let extremes = |u: i128, v: i128| {
        let values =
            [(x0, y0), (x0, y1), (x1, y0), (x1, y1)].map(|(x, y)| (x * u + y * v) * det.signum());
        let least = values.iter().copied().min().unwrap_or(0);
        let most = values.iter().copied().max().unwrap_or(0);
        (-(-least).div_euclid(det.abs()), most.div_euclid(det.abs()))
    };
    let clip = |(least, most): (i128, i128), (first, last): (i64, i64)| {
        let least = (least + i128::from(first)).max(i128::from(first));
        let most = (most + i128::from(first)).min(i128::from(last));
        Some((i64::try_from(least).ok()?, i64::try_from(most).ok()?)).filter(|_| least <= most)
    };
    Some(IndexRange {
        columns: clip(extremes(by, -bx), all.columns)?,
        rows: clip(extremes(-ay, ax), all.rows)?,
    })
}

/// Whether two displacements bring boxes of the size of `part` within `reach` of each other (never missed, sometimes suspected).
pub(super) fn interacts_with_itself(part: Rect, repetition: &Repetition, reach: i64) -> bool {
    let near = Rect {
        min: Point::new(-part.width(), -part.height()),
        max: Point::new(part.width(), part.height()),
    }
    .grown(reach);
    match repetition {
        Repetition::Once => false,
        Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        } => {
            let last = |n: u64| i64::try_from(n.saturating_sub(1)).unwrap_or(i64::MAX);
            let (c, r) = (last(*columns), last(*rows));
            let all = IndexRange {
                columns: (-c, c),
                rows: (-r, r),
            };
            let Some(range) = indices_in(all, *a, *b, near) else {
                return false;
            };
            let size = |(first, last): (i64, i64)| last.saturating_sub(first).saturating_add(1);
            // A skewed lattice with a wide outer bound is left to the exact pass over its elements.
            if size(range.columns).saturating_mul(size(range.rows)) > 10_000 {
                return true;
            }
            (range.rows.0..=range.rows.1)
                .flat_map(|j| (range.columns.0..=range.columns.1).map(move |i| (i, j)))
                .any(|(i, j)| {
                    (i, j) != (0, 0)
                        && near.contains(Point::new(i * a.x + j * b.x, i * a.y + j * b.y))
                })
        }
        Repetition::List(list) => {
            let boxes: Vec<Rect> = list.iter().map(|&d| part.translated(d)).collect();
            let index = BoxIndex::new(&boxes);
            boxes.iter().enumerate().any(|(i, b)| {
                let mut found = false;
                index.touching(b.grown(reach), |j| found |= i != j);
                found
            })
        }
        Repetition::Nested(_) => true,
    }
}
