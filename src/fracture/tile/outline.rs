//! The outline of a rectilinear figure as walls and reflex corners, point contacts split, checked to be simple.

use crate::geom::{Figure, Point, Ring};

use super::PartitionError;
use super::sweep::{Ray, cast};

/// An axis-parallel segment: `at` is its constant coordinate, `lo < hi` bound the other one.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Wall {
    pub(super) at: i64,
    pub(super) lo: i64,
    pub(super) hi: i64,
    /// Whether the interior lies at coordinates below `at`.
    pub(super) inside_below: bool,
    /// Whether the interior lies at coordinates above `at`.
    pub(super) inside_above: bool,
}

impl Wall {
    /// A cut through the interior.
    pub(super) fn cut(at: i64, a: i64, b: i64) -> Self {
        Self {
            at,
            lo: a.min(b),
            hi: a.max(b),
            inside_below: true,
            inside_above: true,
        }
    }
}

/// A corner of 270° and the two ways in which its edges go on into the interior.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(super) struct Reflex {
    pub(super) place: Point,
    /// Whether its horizontal cut runs to the right.
    pub(super) right: bool,
    /// Whether its vertical cut runs upward.
    pub(super) up: bool,
}

impl Reflex {
    pub(super) fn horizontal(&self) -> Ray {
        Ray {
            from: self.place.x,
            level: self.place.y,
            forward: self.right,
        }
    }

    pub(super) fn vertical(&self) -> Ray {
        Ray {
            from: self.place.y,
            level: self.place.x,
            forward: self.up,
        }
    }
}

/// Walls and reflex corners of one figure.
pub(super) struct Outline {
    pub(super) vertical: Vec<Wall>,
    pub(super) horizontal: Vec<Wall>,
    /// Sorted by place, each place once.
    pub(super) reflex: Vec<Reflex>,
    /// Where the horizontal cut of each reflex corner first meets the outline.
    pub(super) horizontal_end: Vec<i64>,
    /// Where the vertical cut of each reflex corner first meets the outline.
    pub(super) vertical_end: Vec<i64>,
}

impl Outline {
    pub(super) fn new(figure: &Figure) -> Result<Self, PartitionError> {
        let (mut vertical, mut horizontal) = (Vec::new(), Vec::new());
        let mut reflex = Vec::new();
        for ring in figure.rings() {
            let corners = corners(ring)?;
            let n = corners.len();
            for i in 0..n {
                let (before, p, after) =
                    (corners[(i + n - 1) % n], corners[i], corners[(i + 1) % n]);
                // The interior is to the left of the edge p → after.
                if p.x == after.x {
                    vertical.push(Wall {
                        inside_below: after.y > p.y,
                        inside_above: after.y < p.y,
                        ..Wall::cut(p.x, p.y, after.y)
                    });
                } else {
                    horizontal.push(Wall {
                        inside_below: after.x < p.x,
                        inside_above: after.x > p.x,
                        ..Wall::cut(p.y, p.x, after.x)
                    });
                }
                if turns_right(before, p, after) {
                    // The edge that comes in goes on forward, the one that leaves goes on backward.
                    reflex.push(Reflex {
                        place: p,
                        right: before.x < p.x || after.x < p.x,
                        up: before.y < p.y || after.y < p.y,
                    });
                }
            }
        }
        reflex.sort_unstable();
        drop_contacts(&mut reflex);
        check_overlaps(&mut vertical, |w| Point::new(w.at, w.lo))?;
        check_overlaps(&mut horizontal, |w| Point::new(w.lo, w.at))?;

        let rays: Vec<Ray> = reflex.iter().map(Reflex::horizontal).collect();
        let horizontal_end = ends(&vertical, &horizontal, rays, Point::new)?;
        let rays: Vec<Ray> = reflex.iter().map(Reflex::vertical).collect();
        let vertical_end = ends(&horizontal, &vertical, rays, |y, x| Point::new(x, y))?;
        Ok(Self {
            vertical,
            horizontal,
            reflex,
            horizontal_end,
            vertical_end,
        })
    }
}

/// The points of a ring where it turns; between them the edges alternate in direction.
fn corners(ring: &Ring) -> Result<Vec<Point>, PartitionError> {
    if let Some((from, to)) = ring.edges().find(|(a, b)| a.x != b.x && a.y != b.y) {
        return Err(PartitionError::Slanted { from, to });
    }
    let mut points = ring.points().to_vec();
    points.dedup();
    let n = points.len();
    let mut corners = Vec::with_capacity(n);
    for i in 0..n {
        let (before, p, after) = (points[(i + n - 1) % n], points[i], points[(i + 1) % n]);
        let (came, goes) = (p - before, after - p);
        if (came.x == 0) != (goes.x == 0) {
            corners.push(p);
        } else if (came.x > 0) != (goes.x > 0) || (came.y > 0) != (goes.y > 0) {
            return Err(PartitionError::Spike { place: p });
        }
    }
    Ok(corners)
}

fn turns_right(before: Point, p: Point, after: Point) -> bool {
    let (came, goes) = (p - before, after - p);
    came.x.signum() * goes.y.signum() - came.y.signum() * goes.x.signum() < 0
}

/// Where two reflex corners share a place the interior only touches itself there: both quadrants of it have a convex
/// corner once the rings are split, so neither needs a cut.
fn drop_contacts(reflex: &mut Vec<Reflex>) {
    let mut kept: Vec<Reflex> = Vec::with_capacity(reflex.len());
    for r in reflex.drain(..) {
        if kept.last().is_some_and(|k| k.place == r.place) {
            kept.pop();
        } else {
            kept.push(r);
        }
    }
    *reflex = kept;
}

fn check_overlaps(
    walls: &mut [Wall],
    place: impl Fn(&Wall) -> Point,
) -> Result<(), PartitionError> {
    walls.sort_unstable_by_key(|w| (w.at, w.lo, w.hi));
    match walls
        .windows(2)
        .find(|w| w[0].at == w[1].at && w[0].hi > w[1].lo)
    {
        Some(pair) => Err(PartitionError::Crossing {
            place: place(&pair[1]),
        }),
        None => Ok(()),
    }
}

/// Casts `rays` and every outline edge along their common direction onto the walls across it.
///
/// An edge must reach its own other end before anything else, and a ray must meet a wall from its inner side; anything
/// else means that rings cross or are nested wrongly. Gives where each ray ends.
fn ends(
    across: &[Wall],
    along: &[Wall],
    mut rays: Vec<Ray>,
    point: impl Fn(i64, i64) -> Point,
) -> Result<Vec<i64>, PartitionError> {
    let cuts = rays.len();
    rays.extend(along.iter().map(|edge| Ray {
        from: edge.lo,
        level: edge.at,
        forward: true,
    }));
    let hits = cast(across, &rays);
    for (edge, hit) in along.iter().zip(&hits[cuts..]) {
        let reached = hit.map(|h| across[h].at);
        if reached != Some(edge.hi) {
            let place = point(reached.unwrap_or(edge.hi), edge.at);
            return Err(PartitionError::Crossing { place });
        }
    }
    rays.iter()
        .zip(&hits[..cuts])
        .map(|(ray, hit)| match hit.map(|h| across[h]) {
            Some(w) if (ray.forward && w.inside_below) || (!ray.forward && w.inside_above) => {
                Ok(w.at)
            }
            _ => Err(PartitionError::Nesting {
                place: point(ray.from, ray.level),
            }),
        })
        .collect()
}
