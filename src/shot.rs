//! A shot, the limits it must keep, and lists of shots.

use crate::geom::{Point, Rect, Transform};
use crate::units::{Dose, Nm, PM_PER_NM};

/// The writer's address unit: every shot side lies on a multiple of it. A whole number of picometres.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct AddressUnit(i64);

/// An address unit that is no whole positive number of picometres, or is over 100 nm.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[error("address unit is {found}, expected a whole number of picometres from 0.001 nm to 100 nm")]
pub struct AddressUnitError {
    /// What was asked for.
    pub found: Nm,
}

impl AddressUnit {
    /// 1 pm: every coordinate of the crate lies on it.
    pub const FINEST: Self = Self(1);

    /// From nanometres.
    ///
    /// # Errors
    /// When not a whole number of picometres (to 1e-6 pm), or outside 0.001 nm to 100 nm.
    pub fn new(unit: Nm) -> Result<Self, AddressUnitError> {
        match unit.to_pm() {
            Some(pm)
                if (1..=100 * PM_PER_NM).contains(&pm)
                    && (Nm::from_pm(pm).0 - unit.0).abs() < 1e-9 =>
            {
                Ok(Self(pm))
            }
            _ => Err(AddressUnitError { found: unit }),
        }
    }

    /// Picometres in one unit.
    #[must_use]
    pub const fn pm(self) -> i64 {
        self.0
    }

    /// Its length.
    #[must_use]
    pub fn nm(self) -> Nm {
        Nm::from_pm(self.0)
    }

    /// The nearest address to a coordinate: the one rounding of the crate (halves go up).
    ///
    /// Not finite or absurdly large input saturates.
    #[must_use]
    pub fn nearest(self, coordinate: Nm) -> i64 {
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a float to integer cast saturates"
        )]
        let address = (coordinate.0 / self.nm().0 + 0.5).floor() as i64;
        address
    }

    /// An address as a coordinate.
    #[must_use]
    pub fn coordinate(self, address: i64) -> Nm {
        Nm::from_pm(address * self.0)
    }
}

/// One axis-parallel rectangle flashed with one dose; sides in address units of the list it is in.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Shot {
    /// Left side, address units.
    pub x0: i64,
    /// Lower side, address units.
    pub y0: i64,
    /// Right side, address units; greater than `x0`.
    pub x1: i64,
    /// Upper side, address units; greater than `y0`.
    pub y1: i64,
    /// Multiple of dose-to-size.
    pub dose: Dose,
}

impl Shot {
    /// The lesser side, address units.
    #[must_use]
    pub fn short_side(&self) -> i64 {
        (self.x1 - self.x0).min(self.y1 - self.y0)
    }

    /// The greater side, address units.
    #[must_use]
    pub fn long_side(&self) -> i64 {
        (self.x1 - self.x0).max(self.y1 - self.y0)
    }

    fn key(&self) -> (i64, i64, i64, i64) {
        (self.y0, self.x0, self.y1, self.x1)
    }
}

/// What the writer can flash.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ShotLimits {
    /// Grid of all shot sides.
    pub address: AddressUnit,
    /// Least side.
    pub least_side: Nm,
    /// Greatest side.
    pub greatest_side: Nm,
    /// A shot whose short side is under this is a sliver.
    pub sliver: Nm,
}

/// Shots on one address grid, sorted by lower-left corner (y first), so equal sets are equal bytes.
#[derive(Clone, Debug, PartialEq)]
pub struct ShotList {
    address: AddressUnit,
    shots: Vec<Shot>,
}

impl ShotList {
    /// A list from shots in any order.
    #[must_use]
    pub fn new(address: AddressUnit, mut shots: Vec<Shot>) -> Self {
        shots.sort_by(|a, b| a.key().cmp(&b.key()).then(a.dose.0.total_cmp(&b.dose.0)));
        Self { address, shots }
    }

    /// The grid.
    #[must_use]
    pub fn address(&self) -> AddressUnit {
        self.address
    }

    /// The shots in order.
    #[must_use]
    pub fn shots(&self) -> &[Shot] {
        &self.shots
    }

    /// How many.
    #[must_use]
    pub fn len(&self) -> usize {
        self.shots.len()
    }

    /// Whether there is none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.shots.is_empty()
    }

    /// One shot as a rectangle, pm.
    #[must_use]
    pub fn rect(&self, shot: &Shot) -> Rect {
        let pm = self.address.pm();
        Rect {
            min: Point::new(shot.x0 * pm, shot.y0 * pm),
            max: Point::new(shot.x1 * pm, shot.y1 * pm),
        }
    }

    /// Rectangles (pm) with their doses, in order.
    pub fn rects(&self) -> impl Iterator<Item = (Rect, Dose)> + '_ {
        self.shots.iter().map(|s| (self.rect(s), s.dose))
    }

    /// The list moved by a transform whose shift is a whole number of address units.
    ///
    /// # Panics
    /// Never: a shift off the grid is rounded to it (debug builds assert).
    #[must_use]
    pub fn transformed(&self, t: Transform) -> Self {
        let pm = self.address.pm();
        debug_assert!(
            t.shift.x % pm == 0 && t.shift.y % pm == 0,
            "shift {:?} is off the {pm} pm grid",
            t.shift
        );
        let t = Transform {
            orientation: t.orientation,
            shift: Point::new(t.shift.x.div_euclid(pm), t.shift.y.div_euclid(pm)),
        };
        let shots = self.shots.iter().map(|s| {
            let r = t.apply_rect(Rect {
                min: Point::new(s.x0, s.y0),
                max: Point::new(s.x1, s.y1),
            });
            Shot {
                x0: r.min.x,
                y0: r.min.y,
                x1: r.max.x,
                y1: r.max.y,
                dose: s.dose,
            }
        });
        Self::new(self.address, shots.collect())
    }

    /// The least short side; `None` for no shot.
    #[must_use]
    pub fn smallest_side(&self) -> Option<Nm> {
        self.shots
            .iter()
            .map(Shot::short_side)
            .min()
            .map(|a| self.address.coordinate(a))
    }

    /// How many shots have a short side under `limit`.
    #[must_use]
    pub fn slivers(&self, limit: Nm) -> usize {
        self.shots
            .iter()
            .filter(|s| self.address.coordinate(s.short_side()).0 < limit.0 - 1e-9)
            .count()
    }
}
