//! Growing and shrinking of figures.

use i_overlay::i_float::int::angle::Angle;
use i_overlay::mesh::int::arc::ArcOptions;
use i_overlay::mesh::int::outline::offset::IntOutlineOffset;
use i_overlay::mesh::int::style::{IntLineJoin, IntOutlineStyle};

use super::boolean::{figures_of, paths_of};
use super::{Figure, Point, Ring};

/// Greatest angle between points of a rounded corner: 1/64 turn, so a chord is 0.12 % of the radius inside its arc.
const ARC_STEP: Angle = Angle::from_bits(1 << 26);

/// All places within `by` pm of the figures; with `by` negative, all places of them at least `−by` from the outside.
///
/// Corners are rounded by chords that lie inside the arcs, so that the outline strays from the true one by 0.12 % of
/// `by` and a few pm of rounding, toward the figures drawn. Figures may unite, split or vanish.
#[must_use]
pub fn offset(figures: &[Figure], by: i64) -> Vec<Figure> {
    let arc = ArcOptions {
        max_step: ARC_STEP,
        ..ArcOptions::default()
    };
    let style = IntOutlineStyle::<i64>::new(by).line_join(IntLineJoin::Round(arc));
    // Construction cannot fail: the library only reports ranges when asked to check them.
    figures_of(paths_of(figures).outline(&style).unwrap_or_default())
}

/// Edges are prolonged no further than those of a corner of 60° until they meet, √3 times the distance, and joined by a chord there.
const SHARPEST_MITRE: Angle = Angle::from_bits(u32::MAX / 6);

/// Turns under a twentieth of a degree are joined by a chord: lines that nearly coincide cross nowhere for certain.
const LEAST_MITRE_TURN: Angle = Angle::from_bits(u32::MAX / 7200);

/// All edges moved outward by `by` pm (inward if negative) and prolonged until they meet; rectilinear figures stay so, exactly.
///
/// Corners sharper than 60° are cut off, so that no place is further than twice `by` from the figures. Other vertices are rounded to whole
/// picometres. Figures may unite, split or vanish.
#[must_use]
pub fn offset_mitred(figures: &[Figure], by: i64) -> Vec<Figure> {
    let style = IntOutlineStyle::<i64>::new(by)
        .line_join(IntLineJoin::Miter(SHARPEST_MITRE))
        .miter_min_turn(LEAST_MITRE_TURN);
    let moved = figures_of(paths_of(figures).outline(&style).unwrap_or_default());
    moved.into_iter().map(straightened).collect()
}

/// Without the points that only rounding keeps off a straight line: the ends of the moved edges, before they were prolonged.
fn straightened(figure: Figure) -> Figure {
    if figure.is_rectilinear() {
        return figure;
    }
    let ring = |ring: &Ring| {
        Ring::new(without_straight_points(ring.points())).unwrap_or_else(|| ring.clone())
    };
    Figure::new(
        ring(figure.outer()),
        figure.holes().iter().map(ring).collect(),
    )
    .normalized()
}

/// Every point left away lies within 1 pm of the edge that takes its place.
fn without_straight_points(points: &[Point]) -> Vec<Point> {
    /// Most points that one edge takes the place of; two ends of moved edges, and some.
    const MOST: usize = 8;
    let mut kept: Vec<Point> = Vec::with_capacity(points.len());
    let mut left_away = 0;
    for (i, &point) in points.iter().enumerate() {
        let (Some(&from), Some(&to)) = (kept.last(), points.get(i + 1)) else {
            kept.push(point);
            continue;
        };
        let between = &points[i - left_away..=i];
        if left_away < MOST && between.iter().all(|&p| is_within_1_pm(p, from, to)) {
            left_away += 1;
        } else {
            kept.push(point);
            left_away = 0;
        }
    }
    kept
}

/// Whether `p` lies within 1 pm of the edge.
fn is_within_1_pm(p: Point, from: Point, to: Point) -> bool {
    let product = |a: i64, b: i64| i128::from(a) * i128::from(b);
    let (edge, along) = (to - from, p - from);
    let square = product(edge.x, edge.x) + product(edge.y, edge.y);
    let across = product(edge.x, along.y) - product(edge.y, along.x);
    let forward = product(edge.x, along.x) + product(edge.y, along.y);
    let within = across
        .checked_mul(across)
        .is_some_and(|square_across| square_across <= square);
    within && (0..=square).contains(&forward)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::geom::{Point, Rect};

    #[test]
    fn a_grown_rectangle_gains_its_rim_and_a_disc() {
        // Steiner: area + perimeter · d + π d².
        let square = Figure::from_rect(Rect::new(Point::from_nm(0, 0), Point::from_nm(100, 50)));
        let grown = offset(std::slice::from_ref(&square), 10_000);
        let expected = 5000.0 + 300.0 * 10.0 + std::f64::consts::PI * 100.0;
        assert!(
            (grown[0].area_nm2() - expected).abs() < 1.0,
            "{}",
            grown[0].area_nm2()
        );
        assert_eq!(offset(&[square], -10_000)[0].area_nm2(), 80.0 * 30.0);
    }

    #[test]
    fn a_figure_narrower_than_twice_the_distance_vanishes() {
        let bar = Figure::from_rect(Rect::new(Point::from_nm(0, 0), Point::from_nm(100, 19)));
        assert!(offset(&[bar], -10_000).is_empty());
    }
}
