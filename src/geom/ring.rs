//! One boundary loop of a figure.

use super::{Point, Rect, Transform};

/// One boundary loop: at least three points, not repeating the first at the end.
///
/// Outer rings run counter-clockwise and holes clockwise once they are part of a [`super::Figure`].
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Ring {
    points: Vec<Point>,
}

impl Ring {
    /// A ring from its points; a repeated last point is dropped. `None` for fewer than three points.
    #[must_use]
    pub fn new(mut points: Vec<Point>) -> Option<Self> {
        while points.len() > 1 && points.first() == points.last() {
            points.pop();
        }
        (points.len() >= 3).then_some(Self { points })
    }

    /// The corners of a rectangle, counter-clockwise from the lower left one; four of them even where it has no area.
    #[must_use]
    pub fn from_rect(r: Rect) -> Self {
        let points = vec![
            r.min,
            Point::new(r.max.x, r.min.y),
            r.max,
            Point::new(r.min.x, r.max.y),
        ];
        Self { points }
    }

    /// The points in order.
    #[must_use]
    pub fn points(&self) -> &[Point] {
        &self.points
    }

    /// The edges in order, the closing one last.
    pub fn edges(&self) -> impl Iterator<Item = (Point, Point)> + '_ {
        let n = self.points.len();
        (0..n).map(move |i| (self.points[i], self.points[(i + 1) % n]))
    }

    /// Twice the signed area, pm²; positive when counter-clockwise.
    #[must_use]
    pub fn area_two(&self) -> i128 {
        self.edges()
            .map(|(a, b)| i128::from(a.x) * i128::from(b.y) - i128::from(b.x) * i128::from(a.y))
            .sum()
    }

    /// Length of the loop, nm.
    #[must_use]
    pub fn length_nm(&self) -> f64 {
        self.edges()
            .map(|(a, b)| {
                let [dx, dy] = (b - a).to_nm();
                dx.hypot(dy)
            })
            .sum()
    }

    /// The least rectangle around it.
    #[must_use]
    pub fn bounds(&self) -> Rect {
        let first = Rect {
            min: self.points[0],
            max: self.points[0],
        };
        self.points
            .iter()
            .fold(first, |r, &p| r.hull(Rect { min: p, max: p }))
    }

    /// Whether every edge is axis-parallel.
    #[must_use]
    pub fn is_rectilinear(&self) -> bool {
        self.edges().all(|(a, b)| a.x == b.x || a.y == b.y)
    }

    /// The same loop run through the other way.
    #[must_use]
    pub fn reversed(mut self) -> Self {
        self.points.reverse();
        self
    }

    /// The same loop starting at its least point; where the loop passes there more than once, the least sequence wins.
    #[must_use]
    pub fn from_least_point(mut self) -> Self {
        let n = self.points.len();
        let sequence = |start: usize| (0..n).map(move |k| (start + k) % n);
        let Some(&least) = self.points.iter().min() else {
            return self;
        };
        let start = (0..n)
            .filter(|&i| self.points[i] == least)
            .min_by(|&i, &j| {
                let points = |start| sequence(start).map(|k| self.points[k]);
                points(i).cmp(points(j))
            });
        self.points.rotate_left(start.unwrap_or(0));
        self
    }

    /// Moved by a transform; the sense of rotation is kept (a mirrored ring is reversed).
    #[must_use]
    pub fn transformed(&self, t: Transform) -> Self {
        let mut points: Vec<Point> = self.points.iter().map(|&p| t.apply(p)).collect();
        if t.orientation.mirrors() {
            points.reverse();
        }
        Self { points }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_rectangle_without_area_is_a_ring_all_the_same() {
        let [a, b] = [Point::new(3, 4), Point::new(3, 9)];
        for r in [Rect::new(a, a), Rect::new(a, b)] {
            let ring = Ring::from_rect(r);
            assert_eq!(
                ring.points(),
                [
                    r.min,
                    Point::new(r.max.x, r.min.y),
                    r.max,
                    Point::new(r.min.x, r.max.y)
                ]
            );
        }
    }
}
