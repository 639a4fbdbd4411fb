//! A figure with its edges at hand: those near a window, how near another figure comes.

use std::sync::Arc;

use crate::geom::{Figure, Point, Rect};

use super::index::BoxIndex;

/// Up to this many edges a walk along them beats a tree.
const FEW_EDGES: usize = 64;

/// Up to this many pairs of edges a double loop beats asking the tree.
const FEW_PAIRS: usize = 1024;

/// A figure, its bounds, and a tree over its edges if they are many.
pub(super) struct Outline {
    pub(super) figure: Arc<Figure>,
    pub(super) bounds: Rect,
    /// Whether the figure is its bounds.
    pub(super) is_rectangle: bool,
    tree: Option<EdgeTree>,
}

struct EdgeTree {
    /// Number of the first edge of each ring, in the order of [`Figure::rings`].
    starts: Vec<usize>,
    edges: Vec<(Point, Point)>,
    index: BoxIndex,
}

impl Outline {
    pub(super) fn new(figure: Arc<Figure>) -> Self {
        let bounds = figure.bounds();
        let is_rectangle = figure.holes().is_empty()
            && figure.outer().points().len() == 4
            && *figure.outer() == *Figure::from_rect(bounds).outer();
        let tree = (figure.vertices() > FEW_EDGES).then(|| EdgeTree::new(&figure));
        Self {
            figure,
            bounds,
            is_rectangle,
            tree,
        }
    }

    /// The edges whose bounds touch the window: ring, number in the ring, ends; in that order.
    pub(super) fn edges_at(&self, window: Rect) -> Vec<(usize, usize, (Point, Point))> {
        let Some(tree) = &self.tree else {
            let rings = self.figure.rings().enumerate();
            let edges =
                rings.flat_map(|(r, ring)| ring.edges().enumerate().map(move |(i, e)| (r, i, e)));
            return edges
                .filter(|&(_, _, (p, q))| Rect::new(p, q).touches(window))
                .collect();
        };
        let mut found = Vec::new();
        tree.index.touching(window, |i| found.push(i));
        found.sort_unstable();
        let place = |i: usize| {
            let ring = tree.starts.partition_point(|&start| start <= i) - 1;
            (ring, i - tree.starts[ring], tree.edges[i])
        };
        found.into_iter().map(place).collect()
    }

    /// Whether the outlines of two disjoint figures come nearer to each other than `reach`.
    pub(super) fn nearer_than(&self, other: &Self, reach: i64) -> bool {
        if self.is_rectangle && other.is_rectangle {
            return rectangles_nearer_than(self.bounds, other.bounds, reach);
        }
        let mine = self.edges_at(other.bounds.grown(reach));
        let theirs = other.edges_at(self.bounds.grown(reach));
        if mine.len() * theirs.len() <= FEW_PAIRS {
            let near_any = |e| {
                theirs
                    .iter()
                    .any(|&(_, _, h)| edges_nearer_than(e, h, reach))
            };
            return mine.iter().any(|&(_, _, e)| near_any(e));
        }
        let boxes: Vec<Rect> = mine.iter().map(|&(_, _, (p, q))| Rect::new(p, q)).collect();
        let index = BoxIndex::new(&boxes);
        theirs.iter().any(|&(_, _, h)| {
            let mut found = false;
            index.touching(Rect::new(h.0, h.1).grown(reach), |i| {
                found = found || edges_nearer_than(mine[i].2, h, reach);
            });
            found
        })
    }
}

impl EdgeTree {
    fn new(figure: &Figure) -> Self {
        let mut starts = Vec::new();
        let mut edges = Vec::with_capacity(figure.vertices());
        for ring in figure.rings() {
            starts.push(edges.len());
            edges.extend(ring.edges());
        }
        let boxes: Vec<Rect> = edges.iter().map(|&(p, q)| Rect::new(p, q)).collect();
        Self {
            starts,
            edges,
            index: BoxIndex::new(&boxes),
        }
    }
}

fn rectangles_nearer_than(a: Rect, b: Rect, reach: i64) -> bool {
    let gap = |a_min: i64, a_max: i64, b_min: i64, b_max: i64| {
        i128::from((b_min - a_max).max(a_min - b_max).max(0))
    };
    let dx = gap(a.min.x, a.max.x, b.min.x, b.max.x);
    let dy = gap(a.min.y, a.max.y, b.min.y, b.max.y);
    dx * dx + dy * dy < i128::from(reach) * i128::from(reach)
}

/// The same for two edges that do not cross: the nearest place is an end of one.
fn edges_nearer_than((a, b): (Point, Point), (c, d): (Point, Point), reach: i64) -> bool {
    [(a, c, d), (b, c, d), (c, a, b), (d, a, b)]
        .into_iter()
        .any(|(p, q, r)| point_nearer_than(p, q, r, reach))
}

/// Only differences of coordinates enter, so the answer is the same after a shift, turn or mirror.
fn point_nearer_than(p: Point, a: Point, b: Point, reach: i64) -> bool {
    #[allow(clippy::cast_precision_loss, reason = "differences stay below 2^53")]
    let vector = |from: Point, to: Point| ((to.x - from.x) as f64, (to.y - from.y) as f64);
    let ((ex, ey), (px, py)) = (vector(a, b), vector(a, p));
    let along = px * ex + py * ey;
    let length_two = ex * ex + ey * ey;
    let square = if along <= 0.0 || length_two == 0.0 {
        px * px + py * py
    } else if along >= length_two {
        let (qx, qy) = vector(b, p);
        qx * qx + qy * qy
    } else {
        let across = px * ey - py * ex;
        across * across / length_two
    };
    #[allow(clippy::cast_precision_loss, reason = "below 2^53")]
    let reach = reach as f64;
    square < reach * reach
}
