//! A place on the mask.

use std::ops::{Add, Neg, Sub};

use crate::units::Nm;

/// A place on the mask (or a displacement), whole picometres.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Point {
    /// To the right, pm.
    pub x: i64,
    /// Up, pm.
    pub y: i64,
}

impl Point {
    /// From picometres.
    #[must_use]
    pub const fn new(x: i64, y: i64) -> Self {
        Self { x, y }
    }

    /// From whole nanometres.
    #[must_use]
    pub const fn from_nm(x: i64, y: i64) -> Self {
        Self {
            x: x * crate::units::PM_PER_NM,
            y: y * crate::units::PM_PER_NM,
        }
    }

    /// As nanometres.
    #[must_use]
    pub fn to_nm(self) -> [f64; 2] {
        [Nm::from_pm(self.x).0, Nm::from_pm(self.y).0]
    }
}

impl Add for Point {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        Self::new(self.x + other.x, self.y + other.y)
    }
}

impl Sub for Point {
    type Output = Self;
    fn sub(self, other: Self) -> Self {
        Self::new(self.x - other.x, self.y - other.y)
    }
}

impl Neg for Point {
    type Output = Self;
    fn neg(self) -> Self {
        Self::new(-self.x, -self.y)
    }
}
