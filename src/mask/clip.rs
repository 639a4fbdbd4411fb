//! What of a figure lies in a window, in two steps.
//!
//! [`Piece::of`] leaves away what is far outside, in whole coordinates and without rounding, so pieces of figures that look alike from
//! the window are equal; its cost is in the edges at the window. [`Piece::cut`] then cuts at the window itself (Sutherland and Hodgman,
//! Comm. ACM 17 (1974) 32: each side in turn), where slanted edges are rounded to the nearest picometre, halves up.

use crate::geom::{self, Figure, Point, Rect, Ring, Transform};

use super::outline::Outline;

/// What a figure covers in a window.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub(super) enum Piece {
    /// Cut already: all of it lies inside, or it is a rectangle.
    Cut(Figure),
    /// Loops that wind round every place inside the window as often as the figure does (once or not at all); outside anyhow.
    Rough(Vec<Ring>),
}

impl Piece {
    /// The piece of a figure, `by` added to its coordinates; `None` if it keeps clear of the window (unshifted, too).
    pub(super) fn of(outline: &Outline, window: Rect, by: Point) -> Option<Self> {
        let (bounds, figure) = (outline.bounds, &outline.figure);
        if window.contains(bounds.min) && window.contains(bounds.max) {
            return Some(Self::Cut(figure.translated(by).normalized()));
        }
        if outline.is_rectangle {
            let common = common(bounds, window)?;
            return Some(Self::Cut(Figure::from_rect(common.translated(by))));
        }
        let loops: Vec<Ring> = loops(outline, window)
            .into_iter()
            .filter_map(|points| Ring::new(points.into_iter().map(|p| p + by).collect()))
            .map(Ring::from_least_point)
            .collect();
        (!loops.is_empty()).then_some(Self::Rough(loops))
    }

    /// The figures in the window, both seen through `way`; normalized.
    pub(super) fn cut(&self, way: Transform, window: Rect) -> Vec<Figure> {
        match self {
            Self::Cut(figure) => vec![figure.transformed(way).normalized()],
            Self::Rough(loops) => {
                let inside = loops
                    .iter()
                    .filter_map(|ring| cut_ring(&ring.transformed(way), window));
                geom::wound(&inside.collect::<Vec<_>>())
            }
        }
    }
}

/// What two rectangles share, if it has area.
pub(super) fn common(a: Rect, b: Rect) -> Option<Rect> {
    let min = Point::new(a.min.x.max(b.min.x), a.min.y.max(b.min.y));
    let max = Point::new(a.max.x.min(b.max.x), a.max.y.min(b.max.y));
    (min.x < max.x && min.y < max.y).then_some(Rect { min, max })
}

/// Runs of edges at the window closed outside it, and the rim of the window as often as their winding differs from the figure's.
fn loops(outline: &Outline, window: Rect) -> Vec<Vec<Point>> {
    let rim = window.grown(1);
    let edges = outline.edges_at(window);
    let mut loops: Vec<Vec<Point>> = Vec::new();
    for (ring, points) in edges.chunk_by(|a, b| a.0 == b.0).filter_map(|run| {
        let ring = outline.figure.rings().nth(run[0].0)?;
        Some((run, ring.points()))
    }) {
        let n = points.len();
        if ring.len() == n {
            loops.push(points.to_vec());
            continue;
        }
        // Start behind a gap, so that no run is torn at the ring's first edge.
        let first = (0..ring.len()).find(|&k| {
            let before = ring[(k + ring.len() - 1) % ring.len()].1;
            (before + 1) % n != ring[k].1
        });
        let order = (0..ring.len()).map(|k| ring[(first.unwrap_or(0) + k) % ring.len()].1);
        let order: Vec<usize> = order.collect();
        for run in order.chunk_by(|&i, &j| (i + 1) % n == j) {
            let edges = run.iter().map(|&i| (points[i], points[(i + 1) % n]));
            loops.push(closed(edges.collect(), rim));
        }
    }
    let corner = window.min;
    let ray = Rect::new(
        Point::new(outline.bounds.min.x.min(corner.x), corner.y),
        corner,
    );
    let within = outline.edges_at(ray).into_iter().map(|(_, _, edge)| edge);
    let found = loops
        .iter()
        .flat_map(|l| (0..l.len()).map(|i| (l[i], l[(i + 1) % l.len()])));
    let missing = winding(within, corner) - winding(found, corner);
    let rim = Figure::from_rect(rim).outer().clone();
    let rim = if missing < 0 { rim.reversed() } else { rim };
    loops.extend((0..missing.abs()).map(|_| rim.points().to_vec()));
    loops
}

/// A run of edges whose ends lie outside the window, closed counter-clockwise along its rim.
fn closed(run: Vec<(Point, Point)>, rim: Rect) -> Vec<Point> {
    let clamp = |p: Point| {
        Point::new(
            p.x.clamp(rim.min.x, rim.max.x),
            p.y.clamp(rim.min.y, rim.max.y),
        )
    };
    let (Some(&first), Some(&last)) = (run.first(), run.last()) else {
        return Vec::new();
    };
    let (start, end) = (clamp(first.0), clamp(last.1));
    let straight = |(p, q): (Point, Point)| p.x == q.x || p.y == q.y;
    // An axis-parallel edge leads straight to the rim; how far it goes on does not matter.
    let mut points = if straight(first) {
        vec![start]
    } else {
        vec![start, first.0]
    };
    points.extend(run[1..].iter().map(|&(p, _)| p));
    if !straight(last) {
        points.push(last.1);
    }
    points.push(end);
    let (w, h) = (rim.width(), rim.height());
    let along = |p: Point| {
        if p.y == rim.min.y {
            p.x - rim.min.x
        } else if p.x == rim.max.x {
            w + p.y - rim.min.y
        } else if p.y == rim.max.y {
            w + h + rim.max.x - p.x
        } else {
            2 * w + h + rim.max.y - p.y
        }
    };
    let round = 2 * (w + h);
    let (from, to) = (along(end), along(start));
    let to = if to < from { to + round } else { to };
    let corners = [
        (0, rim.min),
        (w, Point::new(rim.max.x, rim.min.y)),
        (w + h, rim.max),
        (2 * w + h, Point::new(rim.min.x, rim.max.y)),
    ];
    let passed = [0, round]
        .into_iter()
        .flat_map(|lap| corners.map(|(at, p)| (at + lap, p)));
    points.extend(
        passed
            .filter(|&(at, _)| from < at && at < to)
            .map(|(_, p)| p),
    );
    points.dedup();
    points
}

/// How often edges of loops wind counter-clockwise round the place just above and (less) right of `at`, which needs those left of it only.
fn winding(edges: impl Iterator<Item = (Point, Point)>, at: Point) -> i64 {
    let crossing = |(p, q): (Point, Point)| {
        let up = q.y > at.y;
        if (p.y > at.y) == up {
            return 0;
        }
        let cross = i128::from(q.x - p.x) * i128::from(at.y - p.y)
            - i128::from(q.y - p.y) * i128::from(at.x - p.x);
        match (up, cross) {
            (true, ..=0) => -1,
            (false, 0..) => 1,
            _ => 0,
        }
    };
    edges.map(crossing).sum()
}

/// A loop with everything outside the window pressed onto its sides; `None` if nothing is left.
fn cut_ring(ring: &Ring, window: Rect) -> Option<Ring> {
    let swap = |p: Point| Point::new(p.y, p.x);
    let mut points = half(ring.points(), window.min.x, 1);
    points = half(&points, window.max.x, -1);
    points = points.into_iter().map(swap).collect();
    points = half(&points, window.min.y, 1);
    points = half(&points, window.max.y, -1);
    points = points.into_iter().map(swap).collect();
    points.dedup();
    Ring::new(points)
}

/// The part of a loop where `sign · (x − at)` is not negative.
fn half(points: &[Point], at: i64, sign: i64) -> Vec<Point> {
    let mut kept = Vec::with_capacity(points.len() + 4);
    for (i, &q) in points.iter().enumerate() {
        let p = points[if i == 0 { points.len() - 1 } else { i - 1 }];
        let (before, now) = (sign * (p.x - at), sign * (q.x - at));
        if (before < 0 && now > 0) || (before > 0 && now < 0) {
            kept.push(Point::new(at, crossing(p, q, at)));
        }
        if now >= 0 {
            kept.push(q);
        }
    }
    kept
}

/// The height at which the line through two points passes `x = at`, halves up.
fn crossing(p: Point, q: Point, at: i64) -> i64 {
    let (p, q) = if p.x < q.x { (p, q) } else { (q, p) };
    let run = i128::from(q.x - p.x);
    let rise = i128::from(q.y - p.y) * i128::from(at - p.x);
    // Between the heights of the two points, so it fits.
    p.y + i64::try_from((2 * rise + run).div_euclid(2 * run)).unwrap_or(0)
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use proptest::prelude::*;

    use super::*;
    use crate::geom::Orientation;

    fn area_two(figures: &[Figure]) -> i128 {
        figures.iter().map(Figure::area_two).sum()
    }

    /// Jagged figures with a hole, of few and of many edges; rectilinear ones step.
    fn figures() -> impl Strategy<Value = Figure> {
        (
            3_u32..120,
            any::<bool>(),
            prop::collection::vec(300_u32..1_000, 120),
        )
            .prop_map(|(n, stepped, radii)| {
                let corner = |k: u32, scale: f64| {
                    let t = std::f64::consts::TAU * f64::from(k) / f64::from(n);
                    let r = f64::from(radii[k as usize]) * scale;
                    #[allow(clippy::cast_possible_truncation, reason = "a few thousand at most")]
                    let whole = |v: f64| (v * 50.0) as i64;
                    Point::new(whole(r * t.cos()), whole(r * t.sin()))
                };
                let ring = |scale: f64| {
                    let corners = (0..n).map(|k| corner(k, scale));
                    let next = |k: u32| corner((k + 1) % n, scale);
                    let points: Vec<Point> = match stepped {
                        true => corners
                            .zip(0..)
                            .flat_map(|(p, k)| [p, Point::new(next(k).x, p.y)])
                            .collect(),
                        false => corners.collect(),
                    };
                    Ring::new(points)
                        .into_iter()
                        .flat_map(|r| geom::merge([&r]))
                        .collect::<Vec<_>>()
                };
                let figures = geom::subtract(&ring(1.0), &ring(0.3));
                let largest = figures.into_iter().max_by_key(Figure::area_two);
                largest.unwrap_or_else(|| {
                    Figure::from_rect(Rect::new(Point::new(0, 0), Point::new(9, 9)))
                })
            })
    }

    fn windows() -> impl Strategy<Value = Rect> {
        let side = || -60_000_i64..60_000;
        (side(), side(), 1_i64..40_000, 1_i64..40_000)
            .prop_map(|(x, y, w, h)| Rect::new(Point::new(x, y), Point::new(x + w, y + h)))
    }

    proptest! {
        #[test]
        fn a_cut_is_the_intersection_with_the_window(figure in figures(), window in windows(), turn in 0_usize..8) {
            let expected = geom::intersect(std::slice::from_ref(&figure), &[Figure::from_rect(window)]);
            let outline = Outline::new(Arc::new(figure));
            let way = Transform { orientation: Orientation::all()[turn], shift: Point::new(17, -4) };
            let turned = way.apply_rect(window);
            let found = Piece::of(&outline, window, Point::default()).map_or(Vec::new(), |piece| piece.cut(way, turned));
            prop_assert!(found.iter().all(|f| turned.contains(f.bounds().min) && turned.contains(f.bounds().max)));
            let back: Vec<Figure> = found.iter().map(|f| f.transformed(way.inverse())).collect();
            let wrong = area_two(&geom::subtract(&back, &expected)) + area_two(&geom::subtract(&expected, &back));
            // Rounding moves slanted edges by 1 pm or so along their length, and nothing else.
            let rectilinear = outline.figure.is_rectilinear();
            let outline: f64 = expected.iter().map(Figure::outline_nm).sum();
            #[allow(clippy::cast_precision_loss, reason = "a bound")]
            let wrong = wrong as f64;
            prop_assert!(wrong <= if rectilinear { 0.0 } else { 4_000.0 * outline }, "{wrong}");
        }

        #[test]
        fn many_edges_are_found_as_few_are(figure in figures(), window in windows()) {
            let found = Outline::new(Arc::new(figure.clone())).edges_at(window);
            let rings = figure.rings().enumerate();
            let edges = rings.flat_map(|(r, ring)| ring.edges().enumerate().map(move |(i, e)| (r, i, e)));
            let scan: Vec<_> = edges.filter(|&(_, _, (p, q))| Rect::new(p, q).touches(window)).collect();
            prop_assert_eq!(found, scan);
        }
    }
}
