//! Distinct figures: merged, seen in the least of their eight orientations, with what stands near them.

use std::sync::Arc;

use rayon::prelude::*;

use crate::geom::{self, Figure, Orientation, Point, Rect, Transform};

use super::index::{BoxIndex, clusters};

/// A figure with its context in its own frame.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub(super) struct Canonical {
    pub(super) figure: Figure,
    /// Cut to the figure's bounds grown by the reach, sorted.
    pub(super) context: Vec<Figure>,
}

/// The union of figures, block by block: only those whose bounds hang together meet in one boolean.
pub(super) fn merged(figures: &[Arc<Figure>]) -> Vec<Arc<Figure>> {
    let boxes: Vec<Rect> = figures.par_iter().map(|f| f.bounds()).collect();
    let blocks = clusters(&boxes, |_, _| true);
    let merged: Vec<Vec<Arc<Figure>>> = blocks
        .par_iter()
        .map(|block| match block[..] {
            [single] => vec![Arc::clone(&figures[single])],
            _ => {
                let block: Vec<Figure> = block.iter().map(|&i| (*figures[i]).clone()).collect();
                geom::unite(&block).into_iter().map(Arc::new).collect()
            }
        })
        .collect();
    merged.into_iter().flatten().collect()
}

/// For each figure the indices of those nearer than `reach`, ascending.
pub(super) fn neighbours(figures: &[Arc<Figure>], reach: i64) -> Vec<Vec<usize>> {
    let boxes: Vec<Rect> = figures.par_iter().map(|f| f.bounds()).collect();
    let index = BoxIndex::new(&boxes);
    (0..figures.len())
        .into_par_iter()
        .map(|i| {
            let mut near = Vec::new();
            index.touching(boxes[i].grown(reach), |j| {
                if j != i && nearer_than(&figures[i], &figures[j], reach) {
                    near.push(j);
                }
            });
            near.sort_unstable();
            near
        })
        .collect()
}

/// Whether the outlines of two disjoint figures come nearer to each other than `reach`.
fn nearer_than(f: &Figure, g: &Figure, reach: i64) -> bool {
    /// Up to this many pairs of edges a double loop beats building a tree.
    const FEW_PAIRS: usize = 1024;
    let edges_near = |figure: &Figure, other: Rect| -> Vec<(Point, Point)> {
        let near = other.grown(reach);
        let edges = figure.rings().flat_map(|r| r.edges());
        edges
            .filter(|&(p, q)| Rect::new(p, q).touches(near))
            .collect()
    };
    let (f_edges, g_edges) = (edges_near(f, g.bounds()), edges_near(g, f.bounds()));
    if f_edges.len() * g_edges.len() <= FEW_PAIRS {
        return f_edges
            .iter()
            .any(|&e| g_edges.iter().any(|&h| edges_nearer_than(e, h, reach)));
    }
    let boxes: Vec<Rect> = f_edges.iter().map(|&(p, q)| Rect::new(p, q)).collect();
    let index = BoxIndex::new(&boxes);
    g_edges.iter().any(|&h| {
        let mut found = false;
        index.touching(Rect::new(h.0, h.1).grown(reach), |i| {
            found = found || edges_nearer_than(f_edges[i], h, reach)
        });
        found
    })
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

/// A figure and its neighbours in the figure's own frame, and all ways from there back (more than one if symmetric).
///
/// The least figure of the eight orientations wins, among equals the least context. Cuts are made in the own frame, so a mirrored
/// copy of the same surroundings is cut alike to the picometre.
pub(super) fn canonical(
    figure: &Figure,
    near: &[&Figure],
    address: i64,
    reach: i64,
) -> (Canonical, Vec<Transform>) {
    let mut least: Option<Figure> = None;
    let mut into: Vec<Transform> = Vec::new();
    for orientation in Orientation::all() {
        let turn = Transform {
            orientation,
            shift: Point::default(),
        };
        let corner = turn.apply_rect(figure.bounds()).min;
        let shift = Point::new(
            -(corner.x - corner.x.rem_euclid(address)),
            -(corner.y - corner.y.rem_euclid(address)),
        );
        let way = Transform { orientation, shift };
        let own = figure.transformed(way).normalized();
        match least.as_ref().map(|l| own.cmp(l)) {
            Some(std::cmp::Ordering::Greater) => {}
            Some(std::cmp::Ordering::Equal) => into.push(way),
            _ => {
                least = Some(own);
                into = vec![way];
            }
        }
    }
    let own = least.unwrap_or_else(|| figure.clone());
    let mut context: Option<Vec<Figure>> = near.is_empty().then(Vec::new);
    if !near.is_empty() {
        let window = own.bounds().grown(reach);
        let mut ways = Vec::new();
        for way in into {
            let mut cut: Vec<Figure> = near
                .iter()
                .flat_map(|f| cut_to(&f.transformed(way), window))
                .collect();
            cut.sort();
            match context.as_ref().map(|c| cut.cmp(c)) {
                Some(std::cmp::Ordering::Greater) => {}
                Some(std::cmp::Ordering::Equal) => ways.push(way),
                _ => {
                    context = Some(cut);
                    ways = vec![way];
                }
            }
        }
        into = ways;
    }
    let back = into.into_iter().map(Transform::inverse).collect();
    (
        Canonical {
            figure: own,
            context: context.unwrap_or_default(),
        },
        back,
    )
}

/// The pieces of a figure in a window, normalized.
fn cut_to(figure: &Figure, window: Rect) -> Vec<Figure> {
    let bounds = figure.bounds();
    if window.contains(bounds.min) && window.contains(bounds.max) {
        return vec![figure.clone().normalized()];
    }
    if *figure.outer() == *Figure::from_rect(bounds).outer() && figure.holes().is_empty() {
        let min = Point::new(
            bounds.min.x.max(window.min.x),
            bounds.min.y.max(window.min.y),
        );
        let max = Point::new(
            bounds.max.x.min(window.max.x),
            bounds.max.y.min(window.max.y),
        );
        return if min.x < max.x && min.y < max.y {
            vec![Figure::from_rect(Rect { min, max })]
        } else {
            Vec::new()
        };
    }
    geom::intersect(std::slice::from_ref(figure), &[Figure::from_rect(window)])
}
