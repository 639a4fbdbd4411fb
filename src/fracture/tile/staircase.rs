//! Staircase of a curved figure by geometry alone: what a flow without simulation writes.

use crate::geom::{Figure, Orientation, Point, Rect, Ring, Transform, merge, offset, subtract};
use crate::shot::{AddressUnit, ShotLimits, ShotList};
use crate::units::Nm;

use super::intervals::Intervals;
use super::{PartitionError, Prefer, cut_to_greatest_side, partition, snap};

/// Exchanges x and y.
const TRANSPOSE: Transform = Transform {
    orientation: Orientation::new(true, 3),
    shift: Point::new(0, 0),
};

/// Cosine of the turn from which a corner is sharp (30°): from there on an offset draws back over 3.5 % too far.
const SHARP: f64 = 0.866;

/// How far from a sharp corner, in bands, the staircase must have come: less than 1 for the grid's sake.
const MARK: f64 = 0.9;

/// Why a figure has no staircase.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum StaircaseError {
    /// The tolerance leaves no room for the address grid, or for the narrowest part of the figure.
    #[error(
        "no staircase on a grid of {address} stays within {within} of the figure near {place:?} (pm) and keeps its pieces and holes"
    )]
    NoRoom {
        /// How far the staircase may stray.
        within: Nm,
        /// The grid.
        address: Nm,
        /// Lower-left corner of the figure, pm.
        place: Point,
    },
    /// The outline is broken.
    #[error(transparent)]
    Outline(#[from] PartitionError),
}

/// A rectilinear figure on the address grid whose outline is everywhere within `within` of that of `figure`, and the
/// other way round, with as many holes.
///
/// The figure is cut into slabs, each as tall as the tolerance permits from the one before it, with one interval per
/// slab and branch, so that both sides of a branch share their levels (which halves the tiles). An interval may end
/// anywhere between the figure shrunk and the figure grown by `within`: at a drawn wall if one is there, else halfway; a
/// slab ends at a drawn level if one is in its upper half. So what is straight mostly stays where drawn. Slabs are tried
/// along both axes and the one of fewer tiles is taken. Where that would lose a narrow part, all is done again with half
/// the tolerance, and again.
///
/// A rectilinear figure is given back unchanged. Time `O(rows · branches)` for `rows` address units of height.
///
/// # Errors
/// When no staircase on the grid keeps the tolerance and the pieces and holes.
pub fn staircase(
    figure: &Figure,
    within: Nm,
    address: AddressUnit,
) -> Result<Figure, StaircaseError> {
    if figure.is_rectilinear() {
        return Ok(figure.clone());
    }
    let reach = within.to_pm().unwrap_or(0);
    // The band is a trifle narrower than asked for, since rounded corners of offsets are chords (see `offset`).
    let mut band = reach - reach / 200 - 2;
    while band > 0 {
        let found = [Transform::IDENTITY, TRANSPOSE]
            .into_iter()
            .filter_map(|turn| {
                let stairs = slabs(&figure.transformed(turn), band, address.pm())?
                    .transformed(turn.inverse());
                let tiles = partition(&stairs, Nm(0.0), Prefer::FewTiles).ok()?.least;
                keeps(figure, &stairs, reach).then_some((tiles, stairs))
            });
        if let Some((_, stairs)) = found.min_by_key(|(tiles, _)| *tiles) {
            return Ok(stairs);
        }
        band /= 2;
    }
    Err(StaircaseError::NoRoom {
        within,
        address: address.nm(),
        place: figure.bounds().min,
    })
}

/// A fracture of a plain staircase and what it does not keep.
#[derive(Clone, Debug, PartialEq)]
pub struct StaircaseFracture {
    /// Disjoint shots of dose 1.
    pub shots: ShotList,
    /// Shots under the sliver limit.
    pub slivers: usize,
    /// Shots under the least side, which the writer cannot flash as they are.
    pub under_least_side: usize,
    /// Whether pieces and holes are as many as drawn (a rectilinear figure narrower than an address unit loses them).
    pub same_topology: bool,
}

/// The staircase cut exactly, then to the greatest side: the baseline that other fractures are measured against.
///
/// A rectilinear figure is put on the address grid instead. Steps of a slanted edge are often slivers here; they are counted.
///
/// # Errors
/// As for [`staircase()`] and [`partition()`].
pub fn fracture_staircase(
    figure: &Figure,
    within: Nm,
    limits: &ShotLimits,
) -> Result<StaircaseFracture, StaircaseError> {
    let snapped = snap(&staircase(figure, within, limits.address)?, limits.address);
    let mut shots = Vec::new();
    for piece in &snapped.figures {
        let tiles = partition(piece, limits.sliver, Prefer::FewTiles)?.tiles;
        shots.extend(
            cut_to_greatest_side(&tiles, limits)
                .iter()
                .map(|r| super::flash(r, limits.address)),
        );
    }
    let shots = ShotList::new(limits.address, shots);
    Ok(StaircaseFracture {
        slivers: shots.slivers(limits.sliver),
        under_least_side: shots.slivers(limits.least_side),
        same_topology: snapped.same_topology,
        shots,
    })
}

/// Whether the outline of `figure` is within `reach` of the stairs'; the converse holds by construction.
fn keeps(figure: &Figure, stairs: &Figure, reach: i64) -> bool {
    let (figure, stairs) = (std::slice::from_ref(figure), std::slice::from_ref(stairs));
    subtract(figure, &offset(stairs, reach)).is_empty()
        && subtract(&offset(stairs, -reach), figure).is_empty()
}

/// The union of slabs as tall as `band` permits; `None` if there is none or it has other pieces or holes.
fn slabs(figure: &Figure, band: i64, unit: i64) -> Option<Figure> {
    let (inside, outside) = corner_marks(figure, band);
    let mut inner = Edges::new(&offset(std::slice::from_ref(figure), -band), &inside, unit);
    let mut outer = Edges::new(&offset(std::slice::from_ref(figure), band), &outside, unit);
    let (levels, walls) = straights(figure, band, unit);
    let bounds = figure.bounds();
    let (mut bottom, end) = (nearest(bounds.min.y, unit), nearest(bounds.max.y, unit));

    let mut rects = Vec::new();
    while bottom < end {
        let (mut must, mut may) = (inner.section(bottom), outer.section(bottom));
        let mut choices = Vec::new();
        let mut top = bottom;
        while top < end {
            must.unite(inner.extents(top, top + unit));
            may.subtract(&outer.extents(top, top + unit));
            let Some(choice) = between(&must, &may, &walls, unit) else {
                break;
            };
            choices.push(choice);
            top += unit;
        }
        // A drawn level in the upper half of the slab is worth ending it there: what is straight stays where drawn.
        let reached = &levels[..levels.partition_point(|&y| y <= top)];
        top = reached
            .last()
            .copied()
            .filter(|&y| 2 * y > bottom + top)
            .unwrap_or(top);
        let rows = usize::try_from((top - bottom) / unit).ok()?;
        for &(from, to) in choices.get(rows.checked_sub(1)?)? {
            rects.push(Figure::from_rect(Rect {
                min: Point::new(from, bottom),
                max: Point::new(to, top),
            }));
        }
        bottom = top;
    }
    let mut stairs = merge(rects.iter().map(Figure::outer));
    let stairs = stairs.pop().filter(|_| stairs.is_empty())?;
    (stairs.holes().len() == figure.holes().len()).then_some(stairs)
}

/// The multiple of `unit` nearest to a coordinate.
fn nearest(pm: i64, unit: i64) -> i64 {
    (2 * pm + unit).div_euclid(2 * unit) * unit
}

/// Heights at which an axis-parallel edge longer than twice the band lies or ends, and places of the upright ones; both
/// on the grid in rising order.
fn straights(figure: &Figure, band: i64, unit: i64) -> (Vec<i64>, Vec<i64>) {
    let (mut heights, mut walls) = (Vec::new(), Vec::new());
    for (a, b) in figure.rings().flat_map(Ring::edges) {
        let (dx, dy) = ((b.x - a.x).abs(), (b.y - a.y).abs());
        if dx.min(dy) == 0 && dx.max(dy) > 2 * band {
            heights.extend([nearest(a.y, unit), nearest(b.y, unit)]);
        }
        if dx == 0 && dy > 2 * band {
            walls.push(nearest(a.x, unit));
        }
    }
    heights.sort_unstable();
    walls.sort_unstable();
    (heights, walls)
}

/// Places that keep sharp corners: the figure shrunk or grown draws back from a corner by more than `band`, so the
/// stairs must reach to a place inside each convex corner, and stay clear of one outside each other corner.
fn corner_marks(figure: &Figure, band: i64) -> (Vec<Point>, Vec<Point>) {
    let (mut inside, mut outside) = (Vec::new(), Vec::new());
    for ring in figure.rings() {
        let points = ring.points();
        for i in 0..points.len() {
            let (before, p) = (points[(i + points.len() - 1) % points.len()], points[i]);
            let after = points[(i + 1) % points.len()];
            let unit = |v: Point| {
                let [x, y] = v.to_nm();
                [x / x.hypot(y), y / x.hypot(y)]
            };
            let (came, goes) = (unit(p - before), unit(after - p));
            let (cos, sin) = (
                came[0] * goes[0] + came[1] * goes[1],
                came[0] * goes[1] - came[1] * goes[0],
            );
            if cos < SHARP {
                // The difference of the two directions points into the lesser angle.
                let reach = MARK * Nm::from_pm(band).0 / (2.0 - 2.0 * cos).sqrt();
                let at = |k: usize| Nm(reach * (goes[k] - came[k])).to_pm().unwrap_or(0);
                let mark = p + Point::new(at(0), at(1));
                if sin > 0.0 { &mut inside } else { &mut outside }.push(mark);
            }
        }
    }
    (inside, outside)
}

/// For each interval of `may` that holds some of `must`, one on the grid between the two: at a drawn wall if there is
/// one, else halfway. `None` if some of `must` is not in `may` or there is no grid line between.
fn between(must: &Intervals, may: &Intervals, walls: &[i64], unit: i64) -> Option<Vec<(i64, i64)>> {
    let line = |lo: i64, hi: i64| {
        let (first, last) = (
            (lo + unit - 1).div_euclid(unit) * unit,
            hi.div_euclid(unit) * unit,
        );
        let middle = nearest(lo + (hi - lo) / 2, unit).clamp(first, last.max(first));
        let wall = walls[walls.partition_point(|&w| w < first)..]
            .iter()
            .take_while(|&&w| w <= last);
        let line = wall
            .min_by_key(|&w| (w - middle).abs())
            .copied()
            .unwrap_or(middle);
        (first <= last).then_some(line)
    };
    let mut chosen = Vec::new();
    let mut rest = must.as_slice();
    for &(from, to) in may.as_slice() {
        let held = rest.iter().take_while(|m| m.1 <= to).count();
        if held > 0 {
            let (first, last) = (rest[0].0, rest[held - 1].1);
            if first < from {
                return None;
            }
            let (left, right) = (line(from, first)?, line(last, to)?);
            if left >= right {
                return None;
            }
            chosen.push((left, right));
            rest = &rest[held..];
        }
    }
    rest.is_empty().then_some(chosen)
}

/// Edges of figures met by a line that moves upward, down by one slab at most.
struct Edges {
    /// Lower end first, sorted by it.
    edges: Vec<(Point, Point)>,
    next: usize,
    active: Vec<(Point, Point)>,
}

impl Edges {
    /// Edges of figures and marks, each mark a flat edge of no length; off the grid lines, so that a row holds it.
    fn new(figures: &[Figure], marks: &[Point], unit: i64) -> Self {
        let marks = marks.iter().map(|&p| {
            let p = Point::new(p.x, p.y + i64::from(p.y.rem_euclid(unit) == 0));
            (p, p)
        });
        let mut edges: Vec<(Point, Point)> = figures
            .iter()
            .flat_map(Figure::rings)
            .flat_map(|r| r.edges().collect::<Vec<_>>())
            .map(|(a, b)| if a.y <= b.y { (a, b) } else { (b, a) })
            .chain(marks)
            .collect();
        edges.sort_unstable_by_key(|e| (e.0.y, *e));
        Self {
            edges,
            next: 0,
            active: Vec::new(),
        }
    }

    /// The figures cut by the line just above `y`. Edges that end below are forgotten.
    fn section(&mut self, y: i64) -> Intervals {
        self.admit(y + 1);
        self.active.retain(|e| e.1.y > y);
        let crossing = self.active.iter().filter(|e| e.0.y <= y);
        let mut xs: Vec<i64> = crossing.map(|e| at_height(e, y)).collect();
        xs.sort_unstable();
        Intervals::new(xs.chunks_exact(2).map(|x| (x[0], x[1])).collect())
    }

    /// What the edges span sideways in the open row between two heights.
    fn extents(&mut self, from: i64, to: i64) -> Intervals {
        self.admit(to);
        let span = |e: &(Point, Point)| {
            let ends = if e.0.y == e.1.y {
                (from < e.0.y && e.0.y < to).then_some((e.0.x, e.1.x))
            } else {
                (e.1.y > from && e.0.y < to).then(|| (at_height(e, from), at_height(e, to)))
            }?;
            Some((ends.0.min(ends.1), ends.0.max(ends.1)))
        };
        Intervals::new(self.active.iter().filter_map(span).collect())
    }

    /// Adds the edges that begin below `y`.
    fn admit(&mut self, y: i64) {
        while let Some(&edge) = self.edges.get(self.next).filter(|e| e.0.y < y) {
            self.active.push(edge);
            self.next += 1;
        }
    }
}

/// Where an edge that is not flat is at a height, or at its end nearest to it; rounded to a pm.
fn at_height((a, b): &(Point, Point), y: i64) -> i64 {
    let y = y.clamp(a.y, b.y);
    let along = i128::from(b.x - a.x) * i128::from(y - a.y);
    let x = i128::from(a.x) + along.div_euclid(i128::from(b.y - a.y));
    i64::try_from(x).unwrap_or(a.x)
}
