//! The eight orientations that keep axis-parallel rectangles axis-parallel, with a shift.

use super::{Point, Rect};

/// One of the eight symmetries of the square: a mirror of x first (optional), then quarter turns counter-clockwise.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Orientation {
    mirror_x: bool,
    quarter_turns: u8,
}

impl Orientation {
    /// No turn, no mirror.
    pub const IDENTITY: Self = Self {
        mirror_x: false,
        quarter_turns: 0,
    };

    /// Mirror about the diagonal `x = y`: exchanges x and y.
    pub const DIAGONAL: Self = Self {
        mirror_x: true,
        quarter_turns: 3,
    };

    /// Mirror `x → −x` first if asked, then turn counter-clockwise by `quarter_turns` × 90°.
    #[must_use]
    pub const fn new(mirror_x: bool, quarter_turns: u8) -> Self {
        Self {
            mirror_x,
            quarter_turns: quarter_turns % 4,
        }
    }

    /// All eight, identity first.
    #[must_use]
    pub fn all() -> [Self; 8] {
        std::array::from_fn(|i| Self::new(i >= 4, u8::try_from(i % 4).unwrap_or(0)))
    }

    /// Whether it turns a counter-clockwise ring clockwise.
    #[must_use]
    pub const fn mirrors(self) -> bool {
        self.mirror_x
    }

    /// The image of a displacement.
    #[must_use]
    pub fn apply(self, p: Point) -> Point {
        let p = if self.mirror_x {
            Point::new(-p.x, p.y)
        } else {
            p
        };
        match self.quarter_turns {
            0 => p,
            1 => Point::new(-p.y, p.x),
            2 => Point::new(-p.x, -p.y),
            _ => Point::new(p.y, -p.x),
        }
    }

    /// First `self`, then `next`.
    #[must_use]
    pub fn then(self, next: Self) -> Self {
        // A mirror reverses the sense of the turns before it: M·R(q) = R(−q)·M.
        let turns = if next.mirror_x {
            4 - self.quarter_turns
        } else {
            self.quarter_turns
        };
        Self::new(self.mirror_x != next.mirror_x, turns + next.quarter_turns)
    }

    /// The orientation that undoes this one.
    #[must_use]
    pub fn inverse(self) -> Self {
        if self.mirror_x {
            self
        } else {
            Self::new(false, 4 - self.quarter_turns)
        }
    }
}

/// An orientation about the origin, then a shift.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Transform {
    /// Applied first.
    pub orientation: Orientation,
    /// Applied second, pm.
    pub shift: Point,
}

impl Transform {
    /// Leaves everything where it is.
    pub const IDENTITY: Self = Self {
        orientation: Orientation::IDENTITY,
        shift: Point::new(0, 0),
    };

    /// The image of a place.
    #[must_use]
    pub fn apply(self, p: Point) -> Point {
        self.orientation.apply(p) + self.shift
    }

    /// The image of a rectangle.
    #[must_use]
    pub fn apply_rect(self, r: Rect) -> Rect {
        Rect::new(self.apply(r.min), self.apply(r.max))
    }

    /// First `self`, then `next`.
    #[must_use]
    pub fn then(self, next: Self) -> Self {
        Self {
            orientation: self.orientation.then(next.orientation),
            shift: next.apply(self.shift),
        }
    }

    /// The transform that undoes this one.
    #[must_use]
    pub fn inverse(self) -> Self {
        let orientation = self.orientation.inverse();
        Self {
            orientation,
            shift: -orientation.apply(self.shift),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_diagonal_exchanges_x_and_y() {
        assert_eq!(
            Orientation::DIAGONAL.apply(Point::new(3, 11)),
            Point::new(11, 3)
        );
    }

    #[test]
    fn composition_and_inverse_agree_with_application() {
        let p = Point::new(3, 11);
        for a in Orientation::all() {
            let ta = Transform {
                orientation: a,
                shift: Point::new(5, -7),
            };
            assert_eq!(ta.inverse().apply(ta.apply(p)), p);
            for b in Orientation::all() {
                let tb = Transform {
                    orientation: b,
                    shift: Point::new(-2, 9),
                };
                assert_eq!(
                    ta.then(tb).apply(p),
                    tb.apply(ta.apply(p)),
                    "{a:?} then {b:?}"
                );
            }
        }
    }
}
