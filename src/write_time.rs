//! Shots × places × profile → hours by cause and by stripe.
//!
//! ```text
//! flash(shot)  = d·Q/(P·J)                 settle(shot) = t_settle + growth with jump and size
//! stripe, pass = max(Σ flash + Σ settle + sub-fields·t_subfield, stripe length / greatest stage speed)
//! hours        = Σ_passes Σ_stripes (stripe + t_turn) + calibrations + load, soak, align and unload
//! ```
//!
//! with relative dose d, base dose Q, P passes that share it and current density J. A raster multi-beam writer of
//! current I takes `max(Q·A/(P·I), stage)` per stripe of area A and pass, whatever the pattern.

mod flash;
mod grid;
mod load;
mod pattern;
mod study;
mod sums;

use serde::Serialize;

use crate::geom::Point;
use crate::profile::{Key, Kind, Profile};
use crate::units::{Amperes, BaseDose, CurrentDensity, Dose, Hours, Nm, Seconds};

pub use flash::Cuts;
pub use pattern::{Clip, Counts, Field, Pattern, Placed};
pub use study::{Interval, Sensitivity, interval, sensitivity, tie};
pub use sums::{Borders, Summed, Sums};

use load::{Load, StripeLoad};

/// Why no time can be given.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum WriteTimeError {
    /// A side of field, clip or frame, or a mean length, that is none.
    #[error("a side or length is {found}, expected a positive one up to 1 m")]
    Side {
        /// As given.
        found: Nm,
    },
    /// A share that is none, or shares of more than the whole.
    #[error("coverage is {found}, expected over 0, up to 1 for all clips together")]
    Coverage {
        /// As given.
        found: f64,
    },
    /// A dose that is none.
    #[error("a shot has dose {found}, expected a positive finite one")]
    Dose {
        /// As given.
        found: Dose,
    },
    /// A place or displacement beyond any plate.
    #[error("a shot stands at ({}, {}) pm, expected within 1 m of the origin", .found.x, .found.y)]
    TooFar {
        /// The coordinate or displacement.
        found: Point,
    },
    /// More shots or copies than can be counted exactly.
    #[error(
        "{found} shots or copies, expected at most 1e24 shots, 1e12 copies along one side of an array and 1e12 repetitions of an array"
    )]
    TooMany {
        /// As counted.
        found: u128,
    },
    /// A raster writer needs an area.
    #[error("a raster writer's time follows from the field, and none is given")]
    NoField,
}

/// Time of one flash in one of so many passes that share the dose: `d·Q/(P·J)`.
#[must_use]
pub fn flash_time(dose: Dose, base: BaseDose, density: CurrentDensity, passes: u32) -> Seconds {
    base.flash_time(density) * (dose.0 / f64::from(passes))
}

/// What bounds a stripe.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Bound {
    /// Flashing and settling take longer than the stage needs.
    Beam,
    /// The stage takes longer than flashing and settling.
    Stage,
}

/// Consecutive stripes that are alike, in passes that are alike. Times are of one stripe in one pass.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct StripeTime {
    /// In how many passes they are written so.
    pub passes: u32,
    /// First of these stripes, counted upward from 0.
    pub stripe: usize,
    /// How many.
    pub count: usize,
    /// Flashes.
    pub flashes: u128,
    /// Flashing.
    pub flash_s: Seconds,
    /// Settling.
    pub settle_s: Seconds,
    /// Moving from sub-field to sub-field.
    pub subfield_s: Seconds,
    /// By how much the stage takes longer than these three together.
    pub stage_s: Seconds,
    /// Which of them bounds it.
    pub bound: Bound,
}

impl StripeTime {
    /// Flashing, settling and moving between sub-fields, or the stage's travel if that is longer.
    #[must_use]
    pub fn total(&self) -> Seconds {
        self.flash_s + self.settle_s + self.subfield_s + self.stage_s
    }

    fn times(&self) -> f64 {
        f64::from(self.passes) * self.count as f64
    }
}

/// What is neither flash nor settling nor waiting for the stage.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Overhead {
    /// Moving from sub-field to sub-field.
    pub subfield_h: Hours,
    /// Turning the stage.
    pub turns_h: Hours,
    /// Calibrating.
    pub calibration_h: Hours,
    /// Loading, soaking, aligning, unloading.
    pub handling_h: Hours,
}

/// Hours by cause and by stripe. `total = flash + settle + stage + overhead`, in exactly this sum.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct WriteTime {
    /// All of it.
    pub total_h: Hours,
    /// Flashing; for a raster writer, exposing.
    pub flash_h: Hours,
    /// Settling.
    pub settle_h: Hours,
    /// What stage-bound stripes take beyond their beam time.
    pub stage_h: Hours,
    /// The rest, summed.
    pub overhead_h: Hours,
    /// The rest by cause.
    pub overhead: Overhead,
    /// Shots of the pattern, each counted at each place.
    pub shots: u128,
    /// Flashes over all passes.
    pub flashes: u128,
    /// Where flashes beyond shots × passes come from.
    pub cuts: Cuts,
    /// The mean flash, and how many there are in one pass; `None` for a raster writer and for a pattern without flashes.
    #[serde(skip)]
    pub mean_flash: Option<Counts>,
    /// Calibrations.
    pub calibrations: u64,
    /// Upward, alike ones together; each grid that passes are shifted to starts anew at stripe 0.
    pub stripes: Vec<StripeTime>,
}

impl WriteTime {
    /// Hours of a pattern under a profile.
    ///
    /// Exact in its counts: lattices are distributed over stripes and sub-fields by arithmetic, not copy by copy.
    ///
    /// # Errors
    /// When the pattern has impossible sides, doses or numbers, or a raster writer no field.
    pub fn new(profile: &Profile, pattern: &Pattern<'_>) -> Result<Self, WriteTimeError> {
        Ok(Self::of_load(profile, &Load::new(profile, pattern)?))
    }

    fn of_load(profile: &Profile, load: &Load) -> Self {
        let rates = Rates::new(profile, load.length);
        let mut stripes: Vec<StripeTime> = Vec::new();
        for pass in &load.passes {
            let begun = stripes.len();
            for (index, stripe) in pass.stripes.iter().enumerate() {
                let time = rates.stripe(stripe, pass.times, index);
                match stripes[begun..].last_mut() {
                    Some(last)
                        if time
                            == (StripeTime {
                                stripe: index,
                                count: 1,
                                ..*last
                            }) =>
                    {
                        last.count += 1;
                    }
                    _ => stripes.push(time),
                }
            }
        }
        let sum = |part: fn(&StripeTime) -> Seconds| {
            stripes
                .iter()
                .fold(Seconds(0.0), |sum, s| sum + part(s) * s.times())
        };
        let (flash, settle) = (sum(|s| s.flash_s), sum(|s| s.settle_s));
        let (subfield, stage) = (sum(|s| s.subfield_s), sum(|s| s.stage_s));
        // Without a field nothing is known of stripes, so none is turned at.
        let turns = load.length.map_or(Seconds(0.0), |_| {
            Seconds(profile.plain(Key::Turn)) * stripes.iter().map(StripeTime::times).sum::<f64>()
        });
        let writing = flash + settle + subfield + stage + turns;
        let calibrations = profile
            .value(Key::CalibrationEvery)
            .map_or(0, |minutes| whole(writing / Seconds::from_minutes(minutes)));
        let calibration = Seconds(profile.plain(Key::Calibration)) * calibrations as f64;

        let overhead = Overhead {
            subfield_h: subfield.into(),
            turns_h: turns.into(),
            calibration_h: calibration.into(),
            handling_h: profile.handling().into(),
        };
        let overhead_h =
            overhead.subfield_h + overhead.turns_h + overhead.calibration_h + overhead.handling_h;
        let (flash_h, settle_h, stage_h) = (flash.into(), settle.into(), stage.into());
        Self {
            total_h: flash_h + settle_h + stage_h + overhead_h,
            flash_h,
            settle_h,
            stage_h,
            overhead_h,
            overhead,
            shots: load.shots,
            flashes: load.flashes(),
            cuts: load.cuts,
            mean_flash: load.mean_flash(),
            calibrations,
            stripes,
        }
    }
}

/// A profile's numbers as times.
struct Rates {
    exposure: Exposure,
    settle: Seconds,
    settle_per_nm_jump: Seconds,
    settle_per_nm_side: Seconds,
    subfield: Seconds,
    /// Stage travel over one stripe.
    travel: Seconds,
}

enum Exposure {
    /// Flash at dose 1 in one pass.
    Shaped(Seconds),
    /// Dose of one pass and current.
    Raster(BaseDose, Amperes),
}

impl Rates {
    fn new(profile: &Profile, length: Option<Nm>) -> Self {
        let (base, passes) = (profile.base_dose(), profile.passes());
        let per_nm = |key| Seconds::from_ns(profile.plain(key) / Nm::from_um(1.0).0);
        let exposure = match profile.kind() {
            Kind::Shaped => {
                let density = CurrentDensity(profile.plain(Key::Current));
                Exposure::Shaped(flash_time(Dose(1.0), base, density, passes))
            }
            Kind::Raster => {
                let current = Amperes(profile.plain(Key::Beam) * 1e-9);
                Exposure::Raster(base / f64::from(passes), current)
            }
        };
        let travel = length.zip(profile.value(Key::Stage));
        Self {
            exposure,
            settle: Seconds::from_ns(profile.plain(Key::Settle)),
            settle_per_nm_jump: per_nm(Key::SettlePerJump),
            settle_per_nm_side: per_nm(Key::SettlePerSide),
            subfield: Seconds::from_us(profile.plain(Key::SubfieldTime)),
            travel: travel.map_or(Seconds(0.0), |(length, mm_s)| {
                Seconds(length / Nm::from_mm(mm_s))
            }),
        }
    }

    fn stripe(&self, load: &StripeLoad, passes: u32, stripe: usize) -> StripeTime {
        let (flash, settle, subfield) = match self.exposure {
            Exposure::Shaped(flash) => (
                flash * load.dose,
                self.settle * load.flashes as f64
                    + self.settle_per_nm_jump * load.jump.0
                    + self.settle_per_nm_side * load.side.0,
                self.subfield * load.subfields as f64,
            ),
            Exposure::Raster(dose, current) => (
                dose.exposure_time(load.area, current),
                Seconds(0.0),
                Seconds(0.0),
            ),
        };
        let wait = self.travel - (flash + settle + subfield);
        let stage = if wait.0 > 0.0 { wait } else { Seconds(0.0) };
        StripeTime {
            passes,
            stripe,
            count: 1,
            flashes: load.flashes,
            flash_s: flash,
            settle_s: settle,
            subfield_s: subfield,
            stage_s: stage,
            bound: if wait.0 > 0.0 {
                Bound::Stage
            } else {
                Bound::Beam
            },
        }
    }
}

/// Whole intervals in a quotient.
fn whole(quotient: f64) -> u64 {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a float to integer cast saturates, and times are not negative"
    )]
    let whole = quotient.floor() as u64;
    whole
}
