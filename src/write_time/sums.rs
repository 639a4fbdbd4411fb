//! What shots add up to, so that figures of which only such sums are known can be timed beside others.

use std::ops::{Add, Mul};

use crate::geom::{Copies, Point, Rect, Repetition};
use crate::profile::Profile;
use crate::units::{Area, Nm, Seconds};

use super::flash::{Cuts, FlashLimits, count};
use super::grid::Grid;
use super::load::{Load, PassLoad, StripeLoad, empty_stripes};
use super::pattern::{Field, Placed, check_frame};
use super::{Rates, WriteTimeError};

/// Sums over shots in one pass, cut at borders; the mean over passes where their grids differ.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Sums {
    /// Shots.
    pub shots: f64,
    /// Flashes: a shot is flashed more than once where a border cuts it or a limit of the writer divides it.
    pub flashes: f64,
    /// Σ dose over cut shots; repeated flashes share it.
    pub dose: f64,
    /// Σ jump of the deflection over flashes.
    pub jump: Nm,
    /// Σ greater side over flashes.
    pub side: Nm,
}

impl Add for Sums {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        Self {
            shots: self.shots + other.shots,
            flashes: self.flashes + other.flashes,
            dose: self.dose + other.dose,
            jump: self.jump + other.jump,
            side: self.side + other.side,
        }
    }
}

impl Mul<f64> for Sums {
    type Output = Self;
    fn mul(self, by: f64) -> Self {
        Self {
            shots: self.shots * by,
            flashes: self.flashes * by,
            dose: self.dose * by,
            jump: self.jump * by,
            side: self.side * by,
        }
    }
}

/// Where borders of stripes and sub-fields are.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Borders {
    /// Stripes cover this; shots stand where they are placed.
    Of(Rect),
    /// Shots stand anywhere in a field and are cut as expected on average.
    Somewhere(Field),
}

/// Sums of a figure at some of its places.
#[derive(Clone, Copy, Debug)]
pub struct Summed<'a> {
    /// Of one place.
    pub sums: Sums,
    /// The middle of the figure at the first of them.
    pub at: Point,
    /// Displacements in mask axes, pm.
    pub repetition: &'a Repetition,
}

impl Sums {
    /// Of shots at all their places; `spacing` is the jump to the first shot of each.
    ///
    /// # Errors
    /// When the pattern has impossible sides, doses or numbers.
    pub fn new(
        profile: &Profile,
        placed: &[Placed<'_>],
        borders: Borders,
        spacing: Nm,
    ) -> Result<Self, WriteTimeError> {
        let limits = FlashLimits::new(profile);
        let frame = match borders {
            Borders::Of(frame) => frame,
            Borders::Somewhere(field) => field.frame()?,
        };
        check_frame(frame)?;
        let grids = Grid::of_passes(profile, frame);
        let passes: f64 = grids.iter().map(|(times, _)| f64::from(*times)).sum();
        let mut sums = Self::default();
        for placed in placed {
            placed.check()?;
            let places = placed.repetition.count() as f64;
            let copies = Copies::new(placed.repetition);
            sums.shots += places * placed.shots.len() as f64;
            for (rect, flashing) in placed.flashings(&limits, spacing) {
                let pieces = match borders {
                    Borders::Of(_) => {
                        let of = |(times, grid): &(u32, Grid)| {
                            f64::from(*times) * grid.spread(rect, &copies, |_, _| {}).all as f64
                        };
                        grids.iter().map(of).sum::<f64>() / passes
                    }
                    Borders::Somewhere(_) => {
                        places
                            * grids
                                .first()
                                .map_or(1.0, |(_, grid)| grid.expected_cells(rect).all)
                    }
                };
                let (parts, flashes) = flashing.of(1);
                let (parts, flashes) = (pieces * parts as f64, pieces * flashes as f64);
                sums.flashes += flashes;
                sums.dose += parts * flashing.dose;
                sums.jump += flashing.jump * flashes;
                sums.side += flashing.side * flashes;
            }
        }
        Ok(sums)
    }

    /// Flashing and settling in all passes.
    #[must_use]
    pub fn time(&self, profile: &Profile) -> Seconds {
        let load = StripeLoad {
            flashes: 0,
            dose: self.dose,
            jump: self.jump,
            side: self.side,
            subfields: 0,
            area: Area(0.0),
        };
        let rates = Rates::new(profile, None);
        let stripe = rates.stripe(&load, 1, 0);
        (stripe.flash_s + stripe.settle_s + rates.settle * self.flashes)
            * f64::from(profile.passes())
    }
}

impl Load {
    /// Every figure goes whole to the stripe that its middle lies in.
    pub(super) fn of_sums(
        profile: &Profile,
        figures: &[Summed<'_>],
        frame: Rect,
    ) -> Result<Self, WriteTimeError> {
        check_frame(frame)?;
        let shots: f64 = figures
            .iter()
            .map(|f| f.sums.shots * f.repetition.count() as f64)
            .sum();
        let mut load = Self {
            passes: Vec::new(),
            length: Some(Nm::from_pm(frame.width())),
            shots: count(shots.round()),
            cuts: Cuts::default(),
        };
        for (times, grid) in Grid::of_passes(profile, frame) {
            let mut sums = vec![Sums::default(); usize::try_from(grid.stripes).unwrap_or_default()];
            for figure in figures {
                // A picometre of it, which no border cuts.
                let middle = Rect {
                    min: figure.at,
                    max: Point::new(figure.at.x + 1, figure.at.y + 1),
                };
                grid.spread(middle, &Copies::new(figure.repetition), |stripe, copies| {
                    if let Some(sum) = sums.get_mut(stripe) {
                        *sum = *sum + figure.sums * copies as f64;
                    }
                });
            }
            let mut stripes = empty_stripes(&grid);
            // Rounded so that the rounding of all stripes together stays under one flash.
            let (mut upto, mut given) = (0.0, 0);
            for ((stripe, sums), index) in stripes.iter_mut().zip(sums).zip(0..) {
                upto += sums.flashes;
                stripe.flashes = count(upto.round()).saturating_sub(given);
                given = given.saturating_add(stripe.flashes);
                (stripe.dose, stripe.jump, stripe.side) = (sums.dose, sums.jump, sums.side);
                stripe.subfields = grid.subfields_of(index).min(stripe.flashes);
            }
            load.passes.push(PassLoad { times, stripes });
        }
        load.checked()
    }
}
