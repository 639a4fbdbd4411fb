//! Database units to picometres: rounding, angles and magnifications.
//!
//! A coordinate is multiplied by the picometres of one database unit (a product within 1e-9 of a whole
//! number counts as whole, so every usual grid is exact) and rounded to the nearest picometre, halves up: points in
//! their own cell, origins and displacements in their parent. Placements turned by multiples of 90° at
//! magnification 1 are exact. Any other angle or magnification makes its own copy of the cell, whose points are
//! turned and magnified in `f64` (angles and magnifications of nested placements joined first) and rounded once.

use crate::geom::{Orientation, Point, Repetition};
use crate::layout::Placement;

use super::repeat::{RANGE, span};
use super::{MAX_PARTS, MaskError};

/// A linear map that is not one of the eight orientations: turn by less than 90°, magnify. `NONE` is exact.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Residue {
    angle_deg: f64,
    magnification: f64,
}

impl Residue {
    pub(super) const NONE: Self = Self {
        angle_deg: 0.0,
        magnification: 1.0,
    };

    pub(super) fn key(self) -> (u64, u64) {
        (self.angle_deg.to_bits(), self.magnification.to_bits())
    }

    /// The placement's linear map followed by this one, as what remains in the child and the orientation after it.
    pub(super) fn after(self, placement: &Placement) -> (Self, Orientation) {
        let turn = snapped(placement.angle_deg + self.angle_deg).rem_euclid(360.0);
        let quarters = (turn / 90.0).floor();
        let rest = turn - 90.0 * quarters;
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "0 to 4"
        )]
        let mut quarters = quarters as u8;
        // R(90q + r)·M = R(90q)·M·R(−r), and R(−r) = R(−90)·R(90 − r) brings the rest back into [0°, 90°).
        let angle_deg = match (placement.mirror, rest > 0.0) {
            (true, true) => {
                quarters += 1;
                90.0 - rest
            }
            _ => rest,
        };
        // M maps y → −y, which is x → −x and a half turn.
        let orientation = Orientation::new(
            placement.mirror,
            quarters + if placement.mirror { 2 } else { 0 },
        );
        let magnification = self.magnification * placement.magnification;
        (
            Self {
                angle_deg,
                magnification: snapped(magnification),
            },
            orientation,
        )
    }
}

/// Numbers within 1e-9 (relative) of a whole number count as whole: formats store them as rounded reals.
fn snapped(x: f64) -> f64 {
    let whole = x.round();
    if (x - whole).abs() <= 1e-9 * whole.abs().max(1.0) && whole != 0.0 {
        whole
    } else {
        x
    }
}

/// Database units → picometres within one copy of a cell.
#[derive(Clone, Copy)]
pub(super) struct Scaling {
    /// Rows of the 2×2 matrix.
    cos: f64,
    sin: f64,
    /// Whole factor, when there is no turn.
    exact: Option<i64>,
}

impl Scaling {
    pub(super) fn new(pm_per_unit: f64, residue: Residue) -> Self {
        let factor = snapped(pm_per_unit * residue.magnification);
        let (sin, cos) = residue.angle_deg.to_radians().sin_cos();
        #[allow(clippy::cast_possible_truncation, reason = "a whole number below 2^52")]
        let exact = (residue.angle_deg == 0.0 && factor.fract() == 0.0 && factor.abs() < 4.5e15)
            .then_some(factor as i64);
        Self {
            cos: factor * cos,
            sin: factor * sin,
            exact,
        }
    }

    /// The unrounded image.
    #[allow(
        clippy::cast_precision_loss,
        reason = "only used where the result is rounded anyway"
    )]
    fn real(self, p: Point) -> [f64; 2] {
        let (x, y) = (p.x as f64, p.y as f64);
        [self.cos * x - self.sin * y, self.sin * x + self.cos * y]
    }

    /// Whether no point is rounded (by more than the 1e-9 that counts as whole).
    pub(super) fn keeps(self, mut points: impl Iterator<Item = Point>) -> bool {
        let is_whole = |v: f64| (v - v.round()).abs() <= 1e-9 * v.abs().max(1.0);
        self.exact.is_some() || points.all(|p| self.real(p).into_iter().all(is_whole))
    }

    /// The rounded image; `None` beyond the range.
    pub(super) fn point(self, p: Point) -> Option<Point> {
        let within = |v: i64| (v.abs() <= RANGE).then_some(v);
        if let Some(factor) = self.exact {
            return Some(Point::new(
                within(p.x.checked_mul(factor)?)?,
                within(p.y.checked_mul(factor)?)?,
            ));
        }
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a float to integer cast saturates"
        )]
        let [x, y] = self.real(p).map(|v| (v + 0.5).floor() as i64);
        Some(Point::new(within(x)?, within(y)?))
    }

    /// A repetition in picometres. A lattice whose last element would be off by half a picometre is written out.
    pub(super) fn repetition(self, r: &Repetition) -> Result<Repetition, ScaleError> {
        match r {
            Repetition::Once => Ok(Repetition::Once),
            Repetition::List(list) => {
                let mut list: Vec<Point> = list
                    .iter()
                    .map(|&p| self.point(p))
                    .collect::<Option<_>>()
                    .ok_or(ScaleError::Range)?;
                list.sort_by_key(|p| (p.y, p.x));
                list.dedup();
                Ok(if list == [Point::default()] {
                    Repetition::Once
                } else {
                    Repetition::List(list)
                })
            }
            Repetition::Lattice {
                columns,
                rows,
                a,
                b,
            } => {
                let columns = if *a == Point::default() { 1 } else { *columns };
                let rows = if *b == Point::default() { 1 } else { *rows };
                let steps = (self.point(*a), self.point(*b));
                let (Some(pa), Some(pb)) = steps else {
                    return Err(ScaleError::Range);
                };
                let drift = |p: Point, step: Point, n: u64| {
                    let [x, y] = self.real(p);
                    #[allow(clippy::cast_precision_loss, reason = "compared with a half")]
                    let (dx, dy, n) = (
                        x - step.x as f64,
                        y - step.y as f64,
                        n.saturating_sub(1) as f64,
                    );
                    dx.abs().max(dy.abs()) * n
                };
                if self.exact.is_some() || drift(*a, pa, columns) + drift(*b, pb, rows) < 0.5 {
                    return Ok(Repetition::lattice(columns, rows, pa, pb));
                }
                let written_out = Repetition::Lattice {
                    columns,
                    rows,
                    a: *a,
                    b: *b,
                };
                if written_out.count() > MAX_PARTS {
                    return Err(ScaleError::TooMany(written_out.count()));
                }
                span(&written_out).ok_or(ScaleError::Range)?;
                self.repetition(&Repetition::List(written_out.displacements().collect()))
            }
            Repetition::Nested(parts) => {
                let parts = parts
                    .iter()
                    .map(|p| self.repetition(p))
                    .collect::<Result<_, _>>()?;
                Ok(Repetition::nested(parts))
            }
        }
    }
}

pub(super) enum ScaleError {
    Range,
    TooMany(u128),
}

impl ScaleError {
    pub(super) fn at(self, cell: &str, what: String) -> MaskError {
        let cell = cell.to_owned();
        match self {
            Self::Range => MaskError::OutOfRange { cell, what },
            Self::TooMany(found) => MaskError::TooMany {
                cell,
                found,
                limit: MAX_PARTS,
            },
        }
    }
}
