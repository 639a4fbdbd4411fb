//! Whether the slot suffices, and where the choice flips.

use serde::{Deserialize, Serialize};

use super::Method;

/// A slot at which another fracture becomes the one to order.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Flip {
    /// The slot.
    pub slot_h: f64,
    /// Ordered below it.
    pub below: Method,
    /// Ordered from it on.
    pub from: Method,
}

/// Whether the mask can be written in the slot.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Fits {
    /// The upper end of the interval is within the slot.
    Yes,
    /// The lower end is beyond it.
    No,
    /// The slot lies inside the interval, or none was given.
    CannotSay,
}

/// The answer to "does it fit".
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Verdict {
    /// Yes, no, cannot say.
    pub fits: Fits,
    /// Hours the writer is booked for; `None` if not given.
    pub slot_h: Option<f64>,
    /// In one sentence, with the numbers.
    pub sentence: String,
}
