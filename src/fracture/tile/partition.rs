//! Exact minimum partition of a rectilinear figure into rectangles.
//!
//! A connected region with N reflex corners, H holes and at most L pairwise disjoint effective chords needs
//! N − L − H + 1 rectangles (Lipski et al., Fundamenta Informaticae 2 (1979); Ohtsuki, ISCAS 1982; Ferrari, Sankar,
//! Sklansky, CVGIP 28 (1984)). Steps:
//!
//! 1. a sweep per axis finds where the cut of every reflex corner ends; a cut that ends at a reflex corner is a chord;
//! 2. the largest independent set of chords (`matching.rs`) is cut;
//! 3. every reflex corner that is left gets one more cut, to the first wall or cut in its way;
//! 4. a sweep reads off the rectangles (`assemble.rs`);
//! 5. slivers are removed by cutting small groups of neighbours anew (`slivers.rs`).
//!
//! Where the interior touches itself in a point only, the point is split first and needs no cut.

use crate::geom::{Figure, Point, Rect};
use crate::units::Nm;

use super::assemble::rectangles;
use super::matching::independent_chords;
use super::outline::{Outline, Reflex, Wall};
use super::slivers::Tiles;
use super::sweep::{Ray, cast};

/// Why a figure has no partition.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum PartitionError {
    /// An edge is not axis-parallel.
    #[error("edge from {from:?} to {to:?} (pm) is slanted, expected axis-parallel edges")]
    Slanted {
        /// Its start, pm.
        from: Point,
        /// Its end, pm.
        to: Point,
    },
    /// The outline doubles back on itself.
    #[error("outline doubles back at {place:?} (pm), expected a turn of 90°")]
    Spike {
        /// Where, pm.
        place: Point,
    },
    /// Two edges cross, overlap, or one ends on another.
    #[error(
        "edges cross or overlap at {place:?} (pm), expected rings that share single points at most"
    )]
    Crossing {
        /// Where, pm.
        place: Point,
    },
    /// A hole lies outside the outer ring or in another hole.
    #[error("the ring through {place:?} (pm) is not nested as a hole in the outer ring")]
    Nesting {
        /// A corner of the ring, pm.
        place: Point,
    },
}

/// What a partition prefers when it cannot have both.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Prefer {
    /// The least number of tiles; slivers only break ties.
    #[default]
    FewTiles,
    /// One more tile for every cut that removes a sliver.
    FewSlivers,
}

/// Rectangles that cover a figure once.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Partition {
    /// The tiles, sorted by lower-left corner, y first; interiors disjoint, union exactly the figure.
    pub tiles: Vec<Rect>,
    /// The least number of tiles that any partition of the figure has (exact).
    pub least: usize,
    /// Tiles with a short side under the sliver limit.
    pub slivers: usize,
    /// Slivers with a long side wholly on the outline.
    pub external_slivers: usize,
}

impl Partition {
    /// Tiles added above the least number to remove slivers: the price of [`Prefer::FewSlivers`].
    #[must_use]
    pub fn price(&self) -> usize {
        self.tiles.len() - self.least
    }
}

/// Cuts a rectilinear figure into the least number of rectangles; holes and point contacts are allowed.
///
/// The number is exact: with [`Prefer::FewTiles`] no partition has fewer tiles. Among those the fewest slivers (short
/// side under `sliver`), then the fewest external ones, then the largest smallest side is *sought*, not guaranteed: the
/// result cannot be bettered by cutting a group of up to [`GROUP`](super::GROUP) neighbours around one sliver
/// anew. A `sliver` of zero or less skips that search. Time `O(c √c log² c + n log n)` for n vertices and c chords.
///
/// # Errors
/// When an edge is slanted or doubles back, or rings cross, overlap or are nested wrongly.
pub fn partition(figure: &Figure, sliver: Nm, prefer: Prefer) -> Result<Partition, PartitionError> {
    let tiles = least_partition(&Outline::new(figure)?);
    let least = tiles.len();
    let limit = sliver.to_pm().unwrap_or(i64::MAX);
    let mut tiles = Tiles::new(tiles, limit);
    if limit > 0 {
        tiles.improve(false);
    }
    // Only what cannot be had for nothing is paid for.
    if limit > 0 && prefer == Prefer::FewSlivers {
        tiles.improve(true);
    }
    let (slivers, external_slivers) = tiles.slivers();
    Ok(Partition {
        tiles: tiles.into_sorted(),
        least,
        slivers,
        external_slivers,
    })
}

/// Steps 1 to 4.
fn least_partition(outline: &Outline) -> Vec<Rect> {
    let reflex = &outline.reflex;
    let (chords_h, ends_h) = chords(reflex, &outline.horizontal_end, |r, end| {
        (
            r.right,
            Point::new(end, r.place.y),
            Wall::cut(r.place.y, r.place.x, end),
        )
    });
    let (chords_v, ends_v) = chords(reflex, &outline.vertical_end, |r, end| {
        (
            r.up,
            Point::new(r.place.x, end),
            Wall::cut(r.place.x, r.place.y, end),
        )
    });
    let choice = independent_chords(&chords_h, &chords_v);

    let mut resolved = vec![false; reflex.len()];
    let mut horizontal = outline.horizontal.clone();
    let mut vertical = outline.vertical.clone();
    let kept_h = (0..chords_h.len()).filter(|&i| choice.keep_horizontal[i]);
    let kept_v = (0..chords_v.len()).filter(|&i| choice.keep_vertical[i]);
    for i in kept_h {
        horizontal.push(chords_h[i]);
        ends_h[i].iter().for_each(|&corner| resolved[corner] = true);
    }
    for i in kept_v {
        vertical.push(chords_v[i]);
        ends_v[i].iter().for_each(|&corner| resolved[corner] = true);
    }

    // The shorter of the two cuts leaves the fatter tiles more often. All horizontal cuts go first, so that they end
    // at chords and walls only and one sweep finds all ends; the vertical ones then end at them too.
    let (across, upright): (Vec<usize>, Vec<usize>) =
        (0..reflex.len()).filter(|&i| !resolved[i]).partition(|&i| {
            let place = reflex[i].place;
            (outline.horizontal_end[i] - place.x).abs() <= (outline.vertical_end[i] - place.y).abs()
        });
    cut(&across, &vertical, &mut horizontal, |i| {
        reflex[i].horizontal()
    });
    cut(&upright, &horizontal, &mut vertical, |i| {
        reflex[i].vertical()
    });
    rectangles(vertical, horizontal)
}

/// The effective chords along one axis with the two reflex corners that each joins.
fn chords(
    reflex: &[Reflex],
    ends: &[i64],
    of: impl Fn(&Reflex, i64) -> (bool, Point, Wall),
) -> (Vec<Wall>, Vec<[usize; 2]>) {
    let mut walls = Vec::new();
    let mut corners = Vec::new();
    for (i, r) in reflex.iter().enumerate() {
        let (forward, end, wall) = of(r, ends[i]);
        // Each chord is seen from both its ends; it is taken from the lower.
        if forward && let Ok(j) = reflex.binary_search_by_key(&end, |r| r.place) {
            walls.push(wall);
            corners.push([i, j]);
        }
    }
    (walls, corners)
}

/// Extends the cuts of some reflex corners to the first of `walls` and adds them to `cuts`.
fn cut(corners: &[usize], walls: &[Wall], cuts: &mut Vec<Wall>, ray: impl Fn(usize) -> Ray) {
    let rays: Vec<Ray> = corners.iter().map(|&i| ray(i)).collect();
    for (ray, hit) in rays.iter().zip(cast(walls, &rays)) {
        // A ray that the outline check saw end also ends here: the walls are a superset.
        if let Some(hit) = hit {
            cuts.push(Wall::cut(ray.level, ray.from, walls[hit].at));
        }
    }
}
