//! How a single shot is flashed, and what its limits cost.

use serde::Serialize;

use crate::profile::{Key, Profile};
use crate::units::{Amperes, Area, Dose, Nm, Seconds};

/// Flashes beyond one per shot and pass, and flashes that cannot be made; over all passes.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize)]
pub struct Cuts {
    /// More because a stripe or sub-field border cuts a shot.
    pub border: u128,
    /// Slivers that such cuts leave of shots that are none.
    pub border_slivers: u128,
    /// More because a shot is too large for the beam current.
    pub beam: u128,
    /// More because a shot needs a greater dose than one flash may give.
    pub repeated: u128,
    /// Flashes shorter than the writer's shortest: not writable in so many passes at this current.
    pub too_short: u128,
}

impl Cuts {
    pub(super) fn add(&mut self, passes: u32, shots: u128, pieces: u128, flashing: &Flashing) {
        let (parts, flashes) = flashing.of(pieces);
        let add = |sum: &mut u128, more: u128| {
            *sum = sum.saturating_add(more.saturating_mul(u128::from(passes)));
        };
        add(&mut self.border, pieces - shots);
        add(&mut self.beam, parts - pieces);
        add(&mut self.repeated, flashes - parts);
        if flashing.too_short {
            add(&mut self.too_short, flashes);
        }
    }
}

/// How one shot is flashed, wherever it stands.
#[derive(Clone, Copy, Debug)]
pub(super) struct Flashing {
    pub(super) dose: f64,
    pub(super) jump: Nm,
    pub(super) side: Nm,
    /// Parts it is cut into so that the beam current suffices.
    parts: u128,
    /// Flashes of each part.
    repeats: u128,
    too_short: bool,
}

/// Bounds on a single flash.
pub(super) struct FlashLimits {
    per_pass: f64,
    greatest: Option<f64>,
    largest: Option<Area>,
    shortest: Option<Dose>,
}

impl FlashLimits {
    pub(super) fn new(profile: &Profile) -> Self {
        let base = profile.base_dose();
        let per_pass = base.0 / f64::from(profile.passes());
        let density = profile.current_density();
        Self {
            per_pass,
            greatest: profile.value(Key::GreatestFlash),
            largest: profile
                .value(Key::GreatestBeam)
                .zip(density)
                .map(|(na, density)| density.area_of(Amperes(na * 1e-9))),
            shortest: profile
                .value(Key::ShortestFlash)
                .zip(density)
                .map(|(ns, density)| Dose(density.dose_in(Seconds::from_ns(ns)).0 / per_pass)),
        }
    }

    pub(super) fn flashing(&self, dose: f64, area: Area, jump: Nm, side: Nm) -> Flashing {
        // A quotient that rounding puts a hair over a whole number must not cost one more flash.
        let at_least = |quotient: f64| count((quotient - 1e-9).ceil()).max(1);
        let parts = self.largest.map_or(1, |largest| at_least(area / largest));
        let repeats = self
            .greatest
            .map_or(1, |greatest| at_least(dose * self.per_pass / greatest));
        Flashing {
            dose,
            jump,
            side,
            parts,
            repeats,
            too_short: self
                .shortest
                .is_some_and(|shortest| dose / repeats as f64 <= shortest.0 - 1e-12),
        }
    }
}

impl Flashing {
    /// Parts and flashes of so many cut shots. Saturates: [`Load`] refuses such numbers at the end.
    pub(super) fn of(&self, pieces: u128) -> (u128, u128) {
        let parts = pieces.saturating_mul(self.parts);
        (parts, parts.saturating_mul(self.repeats))
    }
}

/// A count from a whole non-negative float.
pub(super) fn count(n: f64) -> u128 {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a float to integer cast saturates, and counts are not negative"
    )]
    let count = n as u128;
    count
}
