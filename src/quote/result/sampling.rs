//! How a quote rests on a sample of the figures.

use serde::{Deserialize, Serialize};

use super::ByMethod;

/// The sample of a quote. With the seed and the number of figures drawn, the same quote comes out again.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SampleUsed {
    /// Figures that differ, of all clips.
    pub figures_distinct: u64,
    /// Of them, those fractured.
    pub figures_drawn: u64,
    /// Seed of the drawing.
    pub seed: u64,
    /// Half width of the intervals at which the drawing was to end, as a share of the value.
    pub within: Option<f64>,
    /// Seconds after which it was to end.
    pub time_limit_s: Option<f64>,
    /// Why it ended. Where time was out, the number drawn depended on the clock.
    pub stopped: Stopped,
    /// By stratum: what it holds and how much of it was drawn.
    pub strata: Vec<StratumUsed>,
    /// Shots of one pass, on the field where clips stand for one.
    pub shots: ByMethod<Estimate>,
    /// Flashing and settling.
    pub beam_h: ByMethod<Estimate>,
}

/// A stratum of a sample.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct StratumUsed {
    /// Figures in it.
    pub figures: u64,
    /// Of them, those fractured.
    pub drawn: u64,
}

/// A total with its 95 % interval; the three are equal where it is exact.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Estimate {
    /// Best guess.
    pub value: f64,
    /// Lower end.
    pub low: f64,
    /// Upper end.
    pub high: f64,
}

/// Why no more figures were drawn.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Stopped {
    /// All were: the result is exact.
    AllDrawn,
    /// The intervals are as narrow as asked.
    NarrowEnough,
    /// As many as asked were.
    AsManyAsAsked,
    /// Time was out.
    TimeOut,
}
