//! An axis-parallel rectangle.

use super::Point;
use crate::units::Nm;

/// A closed axis-parallel rectangle, picometres; `min` is the lower-left corner.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Rect {
    /// Lower-left corner.
    pub min: Point,
    /// Upper-right corner.
    pub max: Point,
}

impl Rect {
    /// The rectangle between two opposite corners, in any order.
    #[must_use]
    pub fn new(a: Point, b: Point) -> Self {
        Self {
            min: Point::new(a.x.min(b.x), a.y.min(b.y)),
            max: Point::new(a.x.max(b.x), a.y.max(b.y)),
        }
    }

    /// The least rectangle that holds all points; `None` for no point.
    #[must_use]
    pub fn around(points: impl IntoIterator<Item = Point>) -> Option<Self> {
        points
            .into_iter()
            .map(|p| Self { min: p, max: p })
            .reduce(Self::hull)
    }

    /// The least rectangle that holds both.
    #[must_use]
    pub fn hull(self, other: Self) -> Self {
        Self {
            min: Point::new(self.min.x.min(other.min.x), self.min.y.min(other.min.y)),
            max: Point::new(self.max.x.max(other.max.x), self.max.y.max(other.max.y)),
        }
    }

    /// Moved outward by `pm` on all four sides.
    #[must_use]
    pub fn grown(self, pm: i64) -> Self {
        Self {
            min: self.min - Point::new(pm, pm),
            max: self.max + Point::new(pm, pm),
        }
    }

    /// Shifted by `by`.
    #[must_use]
    pub fn translated(self, by: Point) -> Self {
        Self {
            min: self.min + by,
            max: self.max + by,
        }
    }

    /// Width, pm.
    #[must_use]
    pub fn width(self) -> i64 {
        self.max.x - self.min.x
    }

    /// Height, pm.
    #[must_use]
    pub fn height(self) -> i64 {
        self.max.y - self.min.y
    }

    /// Area, nm².
    #[must_use]
    pub fn area_nm2(self) -> f64 {
        Nm::from_pm(self.width()).0 * Nm::from_pm(self.height()).0
    }

    /// Whether the two share at least a point.
    #[must_use]
    pub fn touches(self, other: Self) -> bool {
        self.min.x <= other.max.x
            && other.min.x <= self.max.x
            && self.min.y <= other.max.y
            && other.min.y <= self.max.y
    }

    /// Whether `p` lies in the closed rectangle.
    #[must_use]
    pub fn contains(self, p: Point) -> bool {
        self.min.x <= p.x && p.x <= self.max.x && self.min.y <= p.y && p.y <= self.max.y
    }
}
