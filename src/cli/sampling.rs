//! The flags of a sample, and the clock that may end its drawing.

use std::cell::Cell;
use std::fmt;
use std::str::FromStr;
use std::time::Instant;

use serde::{Deserialize, Serialize};

use crate::quote::Sampling;
use crate::units::Seconds;

/// A share in percent: `2%`, in flags and files alike.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(try_from = "String", into = "String")]
pub(super) struct Percent(f64);

const EXPECTED: &str = "a percentage over 0, up to 100, as 2%";

impl FromStr for Percent {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let number = text
            .trim()
            .strip_suffix('%')
            .and_then(|n| n.trim().parse::<f64>().ok());
        number
            .filter(|n| *n > 0.0 && *n <= 100.0)
            .map(Self)
            .ok_or_else(|| format!("expected {EXPECTED}"))
    }
}

impl TryFrom<String> for Percent {
    type Error = String;

    fn try_from(text: String) -> Result<Self, String> {
        text.parse()
            .map_err(|_| format!("found `{text}`, expected {EXPECTED}"))
    }
}

impl fmt::Display for Percent {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}%", self.0)
    }
}

impl From<Percent> for String {
    fn from(percent: Percent) -> Self {
        percent.to_string()
    }
}

impl Percent {
    /// As a share of one.
    pub(super) fn share(self) -> f64 {
        self.0 / 100.0
    }
}

/// A sample that was asked for.
#[derive(Clone, Copy, Debug)]
pub(super) struct SamplePlan {
    pub(super) within: Option<Percent>,
    pub(super) most: Option<usize>,
    pub(super) seed: u64,
    pub(super) minutes: Option<f64>,
}

impl SamplePlan {
    /// Hands over the sampling; the clock runs from now.
    pub(super) fn run<R>(&self, with: impl FnOnce(&Sampling<'_>) -> R) -> R {
        let limit = self.minutes.map(Seconds::from_minutes);
        let begun = Instant::now();
        // Once out of time, always: the answers must not change while they are asked for.
        let over = Cell::new(false);
        let out_of_time = || {
            let late = limit.is_some_and(|limit| begun.elapsed().as_secs_f64() >= limit.0);
            over.set(over.get() || late);
            over.get()
        };
        with(&Sampling {
            within: self.within.map(Percent::share),
            most: self.most,
            seed: self.seed,
            time_limit: limit,
            out_of_time: &out_of_time,
        })
    }
}
