//! The result of a sweep.

use serde::{Deserialize, Serialize};

use super::{Fits, Fractures, Hours, Method};

/// Quotes under changed numbers.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Sweep {
    /// The layouts, as given.
    pub sources: Vec<String>,
    /// The profile.
    pub profile: String,
    /// What was changed, by the keys of files.
    pub parameters: Vec<String>,
    /// Hours the writer is booked for; `None` if not given.
    pub slot_h: Option<f64>,
    /// All combinations, the last parameter changing fastest.
    pub points: Vec<SweepPoint>,
    /// Figures fractured, each method and setup counted.
    pub fractured: u64,
    /// Figures whose fracture was there from another point.
    pub reused: u64,
    /// [`super::CAUTION`].
    pub caution: String,
}

/// One point of a sweep.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SweepPoint {
    /// Of the parameters, in their order.
    pub values: Vec<f64>,
    /// Every fracture side by side.
    pub fractures: Fractures,
    /// The fracture to order.
    pub recommended: Option<Method>,
    /// Whether it fits the slot.
    pub fits: Fits,
}

impl Sweep {
    /// Whether hours fit the slot; `None` without a slot.
    #[must_use]
    pub fn fits(&self, hours: &Hours) -> Option<Fits> {
        self.slot_h.map(|slot| hours.fits(slot))
    }
}
