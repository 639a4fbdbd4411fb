//! What is to be written: nouns of the writer model, and what they refuse.

use crate::geom::{Point, Rect, Repetition, Transform};
use crate::shot::ShotList;
use crate::units::{Dose, Nm, PM_PER_NM};

use super::WriteTimeError;
use super::flash::{FlashLimits, Flashing};
use super::sums::Summed;

/// Shots that stand in one orientation at one place or many.
#[derive(Clone, Copy, Debug)]
pub struct Placed<'a> {
    /// In their own frame.
    pub shots: &'a ShotList,
    /// Own frame to mask.
    pub transform: Transform,
    /// Displacements in mask axes, pm.
    pub repetition: &'a Repetition,
    /// Multiplies the dose of every shot (long-range correction at these places).
    pub dose: Dose,
}

/// Shots of which only the number is known.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Counts {
    /// Shots of one pass, as flashed: none is cut further.
    pub shots: u128,
    /// Their mean dose.
    pub mean_dose: Dose,
    /// Mean jump of the deflection from shot to shot.
    pub mean_jump: Nm,
    /// Mean greater side.
    pub mean_side: Nm,
}

impl Counts {
    /// So many shots at dose 1; jumps and sides unknown, so they cost nothing.
    #[must_use]
    pub fn of(shots: u128) -> Self {
        Self {
            shots,
            mean_dose: Dose(1.0),
            mean_jump: Nm(0.0),
            mean_side: Nm(0.0),
        }
    }
}

/// The part of the plate that the stage travels over; stripes run along its width.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Field {
    /// Along the stripes.
    pub width: Nm,
    /// Across them.
    pub height: Nm,
}

impl Field {
    pub(super) fn frame(self) -> Result<Rect, WriteTimeError> {
        let side = |length: Nm| {
            length
                .to_pm()
                .filter(|pm| (1..=FARTHEST).contains(pm))
                .ok_or(WriteTimeError::Side { found: length })
        };
        Ok(Rect {
            min: Point::new(0, 0),
            max: Point::new(side(self.width)?, side(self.height)?),
        })
    }
}

/// What is to be written.
#[derive(Clone, Copy, Debug)]
pub enum Pattern<'a> {
    /// So many shots, evenly over the field; without a field there is neither stage nor turn.
    Counts {
        /// The shots.
        counts: Counts,
        /// Where.
        field: Option<Field>,
    },
    /// Every shot where it stands.
    Placed {
        /// The shots.
        placed: &'a [Placed<'a>],
        /// What the stripes cover. Shots that overhang it are written in the nearest stripe.
        frame: Rect,
    },
    /// Clips that stand for a field: copies of each fill their share of it evenly, the rest is empty. Cuts are counted as
    /// expected for a clip at a random place.
    Sample {
        /// The clips.
        clips: &'a [Clip<'a>],
        /// The field.
        field: Field,
    },
    /// Figures of which only sums are known, each whole in the stripe of its middle. Exact for the profile that the sums were made with, and
    /// for others that cut and divide shots alike.
    Summed {
        /// The figures.
        figures: &'a [Summed<'a>],
        /// What the stripes cover.
        frame: Rect,
    },
}

/// A clip with the share of a field that looks like it.
#[derive(Clone, Copy, Debug)]
pub struct Clip<'a> {
    /// Its shots.
    pub placed: &'a [Placed<'a>],
    /// Around it.
    pub frame: Rect,
    /// Share of the field; over 0, and 1 at most for all clips together.
    pub coverage: f64,
}

impl Pattern<'_> {
    /// What the stage travels over.
    pub(super) fn frame(&self) -> Result<Rect, WriteTimeError> {
        match *self {
            Self::Counts { field: None, .. } => Err(WriteTimeError::NoField),
            Self::Counts {
                field: Some(field), ..
            }
            | Self::Sample { field, .. } => field.frame(),
            Self::Placed { frame, .. } | Self::Summed { frame, .. } => {
                check_frame(frame)?;
                Ok(frame)
            }
        }
    }
}

/// Largest coordinate and side: 1 m in picometres. Keeps the arithmetic of cells within `i64`.
const FARTHEST: i64 = 1_000_000_000 * PM_PER_NM;

/// Most copies along one side of a lattice: beyond any plate, and exact in `i128` sums.
const MOST_COPIES: u64 = 1 << 40;

impl Placed<'_> {
    /// Its shots as rectangles in mask axes, each with the way it is flashed. `spacing` is the jump to the first.
    ///
    /// Two plates deflect at once, so a jump is as long as the greater of its two parts.
    pub(super) fn flashings<'s>(
        &'s self,
        limits: &'s FlashLimits,
        spacing: Nm,
    ) -> impl Iterator<Item = (Rect, Flashing)> + 's {
        let mut before: Option<Rect> = None;
        self.shots.rects().map(move |(rect, dose)| {
            let rect = self.transform.apply_rect(rect);
            let jump = before.map_or(spacing, |b| {
                // Sums of opposite sides are twice the centres.
                let along = |r: Rect| (r.min.x + r.max.x, r.min.y + r.max.y);
                let (from, to) = (along(b), along(rect));
                Nm::from_pm((to.0 - from.0).abs().max((to.1 - from.1).abs())) / 2.0
            });
            before = Some(rect);
            let (w, h) = (Nm::from_pm(rect.width()), Nm::from_pm(rect.height()));
            let side = if w > h { w } else { h };
            (
                rect,
                limits.flashing(dose.0 * self.dose.0, w.by(h), jump, side),
            )
        })
    }

    /// Refuses what is too far out for exact arithmetic, and doses that are none.
    pub(super) fn check(&self) -> Result<(), WriteTimeError> {
        let within = |p: Point| {
            [p.x, p.y]
                .iter()
                .all(|c| (-FARTHEST..=FARTHEST).contains(c))
        };
        let far = |found| Err(WriteTimeError::TooFar { found });
        if let Some(found) = too_many(self.repetition) {
            return Err(WriteTimeError::TooMany { found });
        }
        let span = self.repetition.span();
        if let Some(&corner) = [span.min, span.max].iter().find(|&&p| !within(p)) {
            return far(corner);
        }
        if !within(self.transform.shift) {
            return far(self.transform.shift);
        }
        for (rect, dose) in self.shots.rects() {
            for p in [rect.min, rect.max] {
                if !within(p) {
                    return far(p);
                }
            }
            let dose = dose * self.dose.0;
            if !(dose.0.is_finite() && dose.0 > 0.0) {
                return Err(WriteTimeError::Dose { found: dose });
            }
        }
        Ok(())
    }
}

/// The number of copies that cannot be counted along one side of an array, or by which arrays repeat an array.
fn too_many(repetition: &Repetition) -> Option<u128> {
    match repetition {
        Repetition::Once | Repetition::List(_) => None,
        Repetition::Lattice { columns, rows, .. } => {
            (*columns.max(rows) > MOST_COPIES).then(|| repetition.count())
        }
        Repetition::Nested(parts) => {
            let outer = parts
                .iter()
                .skip(1)
                .fold(1, |n: u128, part| n.saturating_mul(part.count()));
            if outer > u128::from(MOST_COPIES) {
                Some(outer)
            } else {
                parts.iter().find_map(too_many)
            }
        }
    }
}

/// Mean distance of figures if they stood evenly: what the deflection jumps from one to the next.
pub(super) fn spacing(placed: &[Placed<'_>], frame: Rect) -> Nm {
    let figures = placed
        .iter()
        .fold(0, |n: u128, p| n.saturating_add(p.repetition.count()));
    Nm((frame.area_nm2() / (figures.max(1) as f64)).sqrt())
}

pub(super) fn check_frame(frame: Rect) -> Result<(), WriteTimeError> {
    for side in [frame.width(), frame.height()] {
        if !(1..=FARTHEST).contains(&side) {
            return Err(WriteTimeError::Side {
                found: Nm::from_pm(side),
            });
        }
    }
    for corner in [frame.min, frame.max] {
        if corner.x.abs().max(corner.y.abs()) > FARTHEST {
            return Err(WriteTimeError::TooFar { found: corner });
        }
    }
    Ok(())
}
