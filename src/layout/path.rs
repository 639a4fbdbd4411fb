//! Paths widened to polygons, circles turned into them.
//!
//! The outline runs at the half width on both sides of the centre line. **Joins** are mitred up to a turn of 90°; beyond it both edges
//! run on for the half width and are cut square, so no spike reaches further than √2 half widths from its vertex. (Neither format
//! fixes joins sharper than the right angle; this is a common reading, and it is continuous at 90°.) **Ends** are square, extended or not, or round.
//!
//! On the inner side of a join whose edges are too short for the mitre, the outline runs through the vertex itself. It then crosses
//! itself, but everything it winds around is covered, so the non-zero rule gives the exact union of the widened edges.

use crate::geom::Point;

/// How far a chord may stay inside the circle it stands for, database units. Rounding to the grid adds at most √½.
const CHORD_ERROR: f64 = 0.5;

/// Most chords in a full turn: holds [`CHORD_ERROR`] up to a radius of 27 million units.
const MAX_CHORDS: f64 = 16384.0;

/// How a path ends.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum End {
    /// Square, this far beyond the last vertex (negative: short of it).
    Square(f64),
    /// A half circle around the last vertex.
    Round,
}

impl End {
    fn reach(self, half_width: f64) -> f64 {
        match self {
            Self::Square(extension) => extension,
            Self::Round => half_width,
        }
    }
}

/// The outline of a path; `None` if it covers nothing. A single point counts as an edge along x.
pub(super) fn widen(centre: &[Point], half_width: f64, start: End, end: End) -> Option<Vec<Point>> {
    let mut line: Vec<Vector> = centre.iter().map(|&p| Vector::from(p)).collect();
    line.dedup();
    if line.len() == 1 {
        line.push(line[0]);
    }
    let edges: Vec<Edge> = line.windows(2).map(|w| Edge::new(w[0], w[1])).collect();
    let (first, last) = (edges.first()?, edges.last()?);
    let reach = start.reach(half_width) + end.reach(half_width);
    if half_width <= 0.0 || (edges.len() == 1 && first.length + reach <= 0.0) {
        return None;
    }
    let (mut left, mut outline) = (Vec::new(), Vec::new());
    for (i, pair) in edges.windows(2).enumerate() {
        // An edge with a join at both ends gives each half its length.
        let room_before = pair[0].length * if i == 0 { 1.0 } else { 0.5 };
        let room_after = pair[1].length * if i + 2 == edges.len() { 1.0 } else { 0.5 };
        let room = room_before.min(room_after);
        join(
            line[i + 1],
            [pair[0].direction, pair[1].direction],
            half_width,
            room,
            &mut left,
            &mut outline,
        );
    }
    cap(
        line[edges.len()],
        last.direction,
        half_width,
        end,
        &mut outline,
    );
    outline.extend(left.into_iter().rev());
    cap(line[0], -first.direction, half_width, start, &mut outline);
    on_grid(outline)
}

/// A regular polygon with its vertices on the circle, the extreme points among them; `None` for no radius.
pub(super) fn circle(centre: Point, radius: f64) -> Option<Vec<Point>> {
    if radius <= 0.0 {
        return None;
    }
    let n = 4.0 * (chords(radius) / 4.0).ceil();
    let centre = Vector::from(centre);
    on_grid(
        steps(n - 1.0)
            .map(|i| centre + Vector::at_angle(std::f64::consts::TAU * i / n) * radius)
            .collect(),
    )
}

/// Chords in a full turn that stay within [`CHORD_ERROR`]: the sagitta of each is `r·(1 − cos(π/n))`.
pub(super) fn chords(radius: f64) -> f64 {
    let half_angle = (1.0 - CHORD_ERROR / radius.max(1.0)).acos();
    (std::f64::consts::PI / half_angle)
        .ceil()
        .clamp(8.0, MAX_CHORDS)
}

/// Both sides of the outline at an inner vertex.
fn join(
    p: Vector,
    [before, after]: [Vector; 2],
    half_width: f64,
    room: f64,
    left: &mut Vec<Vector>,
    right: &mut Vec<Vector>,
) {
    let (cross, dot) = (before.cross(after), before.dot(after));
    let (outer, inner, side) = if cross >= 0.0 {
        (right, left, 1.0)
    } else {
        (left, right, -1.0)
    };
    let (n0, n1) = (
        before.right() * side * half_width,
        after.right() * side * half_width,
    );
    // Half the turn's tangent: how far the mitre reaches along an edge, per half width.
    let mitre = half_width * cross.abs() / (1.0 + dot);
    if dot >= 0.0 {
        outer.push(p + n0 + before * mitre);
    } else {
        outer.extend([p + n0 + before * half_width, p + n1 - after * half_width]);
    }
    if mitre <= room {
        inner.push(p - n0 - before * mitre);
    } else {
        inner.extend([p - n0, p, p - n1]);
    }
}

/// An end seen along its outward direction, from its right side to its left.
fn cap(p: Vector, outward: Vector, half_width: f64, end: End, outline: &mut Vec<Vector>) {
    let (along, right) = (outward * half_width, outward.right() * half_width);
    match end {
        End::Square(extension) => {
            let p = p + outward * extension;
            outline.extend([p + right, p - right]);
        }
        End::Round => {
            let n = (chords(half_width) / 2.0).ceil();
            outline.extend(steps(n).map(|i| {
                let turn = Vector::at_angle(std::f64::consts::PI * i / n);
                p + right * turn.x + along * turn.y
            }));
        }
    }
}

/// 0, 1, … up to and with `last`.
fn steps(last: f64) -> impl Iterator<Item = f64> {
    std::iter::successors(Some(0.0), |i| Some(i + 1.0)).take_while(move |&i| i <= last)
}

/// Rounded to whole units, halves upward, so that a width that is odd in units stays what it is.
fn on_grid(outline: Vec<Vector>) -> Option<Vec<Point>> {
    #[allow(
        clippy::cast_possible_truncation,
        reason = "saturates; coordinates stay far below 2^63"
    )]
    let round = |v: f64| (v + 0.5).floor() as i64;
    let mut points: Vec<Point> = outline
        .into_iter()
        .map(|v| Point::new(round(v.x), round(v.y)))
        .collect();
    points.dedup();
    while points.len() > 1 && points.first() == points.last() {
        points.pop();
    }
    (points.len() >= 3).then_some(points)
}

struct Edge {
    direction: Vector,
    length: f64,
}

impl Edge {
    fn new(a: Vector, b: Vector) -> Self {
        let d = b - a;
        let length = d.x.hypot(d.y);
        let direction = if length > 0.0 {
            d * (1.0 / length)
        } else {
            Vector { x: 1.0, y: 0.0 }
        };
        Self { direction, length }
    }
}

#[derive(Clone, Copy, Debug, PartialEq)]
struct Vector {
    x: f64,
    y: f64,
}

impl Vector {
    fn at_angle(angle: f64) -> Self {
        let (y, x) = angle.sin_cos();
        Self { x, y }
    }

    /// Turned clockwise by 90°.
    fn right(self) -> Self {
        Self {
            x: self.y,
            y: -self.x,
        }
    }

    fn cross(self, other: Self) -> f64 {
        self.x * other.y - self.y * other.x
    }

    fn dot(self, other: Self) -> f64 {
        self.x * other.x + self.y * other.y
    }
}

impl From<Point> for Vector {
    fn from(p: Point) -> Self {
        #[allow(
            clippy::cast_precision_loss,
            reason = "readers refuse coordinates beyond 2^52"
        )]
        Self {
            x: p.x as f64,
            y: p.y as f64,
        }
    }
}

impl std::ops::Add for Vector {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        Self {
            x: self.x + other.x,
            y: self.y + other.y,
        }
    }
}

impl std::ops::Sub for Vector {
    type Output = Self;
    fn sub(self, other: Self) -> Self {
        self + -other
    }
}

impl std::ops::Neg for Vector {
    type Output = Self;
    fn neg(self) -> Self {
        self * -1.0
    }
}

impl std::ops::Mul<f64> for Vector {
    type Output = Self;
    fn mul(self, factor: f64) -> Self {
        Self {
            x: self.x * factor,
            y: self.y * factor,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const FLUSH: End = End::Square(0.0);

    fn points(list: &[(i64, i64)]) -> Vec<Point> {
        list.iter().map(|&(x, y)| Point::new(x, y)).collect()
    }

    fn area_two(ring: &[Point]) -> i128 {
        let next = ring.iter().cycle().skip(1);
        ring.iter()
            .zip(next)
            .map(|(a, b)| i128::from(a.x) * i128::from(b.y) - i128::from(b.x) * i128::from(a.y))
            .sum()
    }

    #[test]
    fn a_right_angle_keeps_its_square_corner() {
        let outline = widen(&points(&[(0, 0), (100, 0), (100, 50)]), 10.0, FLUSH, FLUSH);
        let want = [(110, -10), (110, 50), (90, 50), (90, 10), (0, 10), (0, -10)];
        assert_eq!(outline, Some(points(&want)));
    }

    #[test]
    fn a_sharp_turn_is_cut_at_the_half_width() {
        // There and back again: the far end stands out by the half width and no more.
        let outline = widen(&points(&[(0, 0), (100, 0), (0, 0)]), 10.0, FLUSH, FLUSH);
        let reach = outline.into_iter().flatten().map(|p| p.x).max();
        assert_eq!(reach, Some(110));
    }

    #[test]
    fn odd_widths_stay_what_they_are() {
        let outline = widen(&points(&[(0, 0), (100, 0)]), 2.5, FLUSH, FLUSH);
        assert_eq!(outline.map(|o| area_two(&o)), Some(2 * 5 * 100));
    }

    #[test]
    fn ends_reach_as_far_as_they_say() {
        let line = points(&[(0, 0), (100, 0)]);
        let outline = widen(&line, 10.0, End::Square(-20.0), End::Square(30.0));
        assert_eq!(outline.map(|o| area_two(&o)), Some(2 * 20 * 110));
        assert_eq!(widen(&line, 10.0, End::Square(-120.0), FLUSH), None);
        assert_eq!(widen(&line[..1], 10.0, FLUSH, FLUSH), None);
        let dot = widen(&line[..1], 10.0, End::Square(10.0), End::Square(10.0));
        assert_eq!(dot.map(|o| area_two(&o)), Some(2 * 400));
    }

    #[test]
    fn circles_stay_within_the_chord_error() {
        for radius in [1, 3, 10, 100, 12_345, 20_000_000] {
            let r = f64::from(radius);
            let ring = circle(Point::new(7, -7), r).expect("has a radius");
            let next = ring.iter().cycle().skip(1);
            for (a, b) in ring.iter().zip(next) {
                let (a, b) = (Vector::from(*a), Vector::from(*b));
                let middle = (a + b) * 0.5 - Vector { x: 7.0, y: -7.0 };
                let gap = r - middle.x.hypot(middle.y);
                assert!(
                    (-0.71..=CHORD_ERROR + 0.71).contains(&gap),
                    "radius {radius}: {gap}"
                );
            }
        }
    }

    #[test]
    fn short_inner_edges_still_cover_every_widened_edge() {
        // A step of 4 in a path 40 wide: the union of three quads, merged by the non-zero rule.
        let outline = widen(
            &points(&[(0, 0), (100, 0), (100, 4), (200, 4)]),
            20.0,
            FLUSH,
            FLUSH,
        );
        let ring = outline.and_then(crate::geom::Ring::new).expect("a ring");
        let merged = crate::geom::merge([&ring]);
        // By hand: [0,120]×[−20,20] ∪ [80,200]×[−16,24]; the outer mitres fill both to x = 120 and 80.
        assert_eq!(merged.len(), 1);
        assert_eq!(
            merged[0].outer().area_two(),
            2 * (120 * 40 + 120 * 40 - 40 * 36)
        );
    }
}
