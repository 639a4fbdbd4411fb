//! Draws figures until their totals are sure enough.
//!
//! The order of drawing follows from the strata and the costs found so far, never from what is asked for: so a drawing that
//! was stopped early, by an interval or by a clock, is the beginning of every longer one and can be repeated by its number of figures.

use super::estimate::{Total, Weights};
use super::strata::Strata;

/// Figures first drawn from each stratum.
const FIRST: usize = 12;

/// Fewest figures that a sample may hold: with less, the fit passes through them all and nothing is known of how far it is off.
pub const LEAST: usize = 30;

/// Each further batch makes the sample larger by this share.
const GROWTH: f64 = 0.25;

/// When to stop.
pub struct Stop<'a> {
    /// Half width of every interval, as a share of the value.
    pub within: Option<f64>,
    /// Figures that are known to be too few for that, whatever the intervals say.
    pub more_than: usize,
    /// Figures at most; [`LEAST`] are drawn anyway.
    pub most: Option<usize>,
    /// Asked before each figure or few; true ends the drawing once a first number was drawn.
    pub out_of_time: &'a dyn Fn() -> bool,
    /// Figures measured between two such questions.
    pub at_once: usize,
}

/// Why a drawing stopped.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Stopped {
    /// Every figure was drawn: the totals are exact.
    All,
    /// Every interval is narrow enough.
    Narrow,
    /// The number asked for was drawn.
    Most,
    /// Time was out.
    Time,
}

/// Figures drawn with their costs.
#[derive(Clone, Debug)]
pub struct Drawn<C> {
    /// Figures and costs in the order of drawing.
    pub costs: Vec<(usize, C)>,
    /// How many of each stratum.
    pub taken: Vec<usize>,
    /// Why no more.
    pub stopped: Stopped,
}

impl<C> Drawn<C> {
    /// No figure yet.
    #[must_use]
    pub fn none(strata: &Strata) -> Self {
        Self {
            costs: Vec::new(),
            taken: vec![0; strata.members.len()],
            stopped: Stopped::All,
        }
    }
}

/// Gives the costs of some figures.
pub type Measure<'a, C, E> = dyn FnMut(&[usize]) -> Result<Vec<C>, E> + 'a;

/// Draws on from the strata; `measure` gives the costs of some figures, `of` the numbers whose totals are asked for.
///
/// # Errors
/// Those of `measure`.
pub fn draw<C, E>(
    strata: &Strata,
    stop: &Stop<'_>,
    measure: &mut Measure<'_, C, E>,
    of: &[&dyn Fn(&C) -> f64],
    mut drawn: Drawn<C>,
) -> Result<Drawn<C>, E> {
    let most = stop.most.unwrap_or(usize::MAX).max(LEAST).min(strata.len());
    let mut wanted: Vec<usize> = strata.members.iter().map(|m| m.len().min(FIRST)).collect();
    loop {
        let batch = batch(strata, &drawn.taken, &wanted);
        let room = most - drawn.costs.len();
        for few in batch[..batch.len().min(room)].chunks(stop.at_once.max(1)) {
            let figures: Vec<usize> = few.iter().map(|(_, figure)| *figure).collect();
            let costs = measure(&figures)?;
            drawn.costs.extend(figures.into_iter().zip(costs));
            for (stratum, _) in few {
                drawn.taken[*stratum] += 1;
            }
            if (stop.out_of_time)()
                && enough(strata, &drawn.taken)
                && drawn.costs.len() < strata.len()
            {
                drawn.stopped = Stopped::Time;
                return Ok(drawn);
            }
        }
        if drawn.costs.len() == strata.len() {
            return Ok(drawn);
        }
        if drawn.costs.len() >= most {
            drawn.stopped = Stopped::Most;
            return Ok(drawn);
        }
        let costs = Costs::new(strata, &drawn);
        let weights = Weights::new(strata, &drawn.taken);
        let totals: Vec<Total> = of
            .iter()
            .map(|of| weights.total(&|i| costs.get(i).map_or(0.0, of)))
            .collect();
        let narrow = |within| totals.iter().all(|total| total.relative() <= within);
        if stop.within.is_some_and(narrow) && drawn.costs.len() > stop.more_than {
            drawn.stopped = Stopped::Narrow;
            return Ok(drawn);
        }
        wanted = allocate(
            strata,
            &drawn.taken,
            &scatter(&weights, &costs, &totals, of),
        );
    }
}

/// Whether two figures or more of every stratum that has them were drawn, and [`LEAST`] in all: less says nothing of how they scatter.
fn enough(strata: &Strata, taken: &[usize]) -> bool {
    if taken.iter().sum::<usize>() < LEAST.min(strata.len()) {
        return false;
    }
    strata
        .members
        .iter()
        .zip(taken)
        .all(|(members, &n)| n >= members.len().min(2))
}

/// Costs by figure.
struct Costs<'a, C>(Vec<Option<&'a C>>);

impl<'a, C> Costs<'a, C> {
    fn new(strata: &Strata, drawn: &'a Drawn<C>) -> Self {
        let mut by_figure = vec![None; strata.len()];
        for (figure, cost) in &drawn.costs {
            by_figure[*figure] = Some(cost);
        }
        Self(by_figure)
    }

    fn get(&self, figure: usize) -> Option<&'a C> {
        self.0[figure]
    }
}

/// By stratum, how far one figure's costs scatter: root of the sum over costs, each as a share of its total.
fn scatter<C>(
    weights: &Weights<'_>,
    costs: &Costs<'_, C>,
    totals: &[Total],
    of: &[&dyn Fn(&C) -> f64],
) -> Vec<f64> {
    let mut sum: Vec<f64> = Vec::new();
    for (of, total) in of.iter().zip(totals) {
        let scatter = weights.scatter(&|i| costs.get(i).map_or(0.0, of));
        sum.resize(scatter.len(), 0.0);
        for (sum, s) in sum.iter_mut().zip(scatter) {
            if total.value != 0.0 {
                *sum += (s / total.value).powi(2);
            }
        }
    }
    sum.into_iter().map(f64::sqrt).collect()
}

/// How many of each stratum a sample that is larger by [`GROWTH`] should hold: in proportion to its number times its scatter (Neyman 1934), never
/// fewer than there are or more than it has.
fn allocate(strata: &Strata, taken: &[usize], scatter: &[f64]) -> Vec<usize> {
    let drawn: usize = taken.iter().sum();
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a share of a number of figures"
    )]
    let aim = (drawn + 1 + (GROWTH * drawn as f64) as usize).min(strata.len());
    let cost: Vec<f64> = strata
        .members
        .iter()
        .zip(scatter)
        .map(|(members, s)| members.len() as f64 * s.max(1e-300))
        .collect();
    // The level at which the strata together hold as many as aimed at, by bisection of its logarithm.
    let at = |level: f64| -> Vec<usize> {
        let one = |((members, cost), &taken): ((&Vec<usize>, &f64), &usize)| {
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "positive; a float to integer cast saturates"
            )]
            let n = (cost * level).ceil() as usize;
            n.clamp(taken, members.len())
        };
        strata
            .members
            .iter()
            .zip(&cost)
            .zip(taken)
            .map(one)
            .collect()
    };
    let (mut low, mut high) = (-700.0_f64, 700.0_f64);
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if at(middle.exp()).iter().sum::<usize>() >= aim {
            high = middle
        } else {
            low = middle
        }
    }
    at(high.exp())
}

/// The figures to bring `taken` up to `wanted`, as stratum and figure; strata take turns, so that any beginning holds of each its part.
fn batch(strata: &Strata, taken: &[usize], wanted: &[usize]) -> Vec<(usize, usize)> {
    let mut batch: Vec<(f64, usize, usize)> = Vec::new();
    for (stratum, members) in strata.members.iter().enumerate() {
        let (from, to) = (taken[stratum], wanted[stratum]);
        let share = to.saturating_sub(from) as f64;
        for (i, &figure) in members[from..to.max(from)].iter().enumerate() {
            batch.push((i as f64 / share, stratum, figure));
        }
    }
    batch.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    batch
        .into_iter()
        .map(|(_, stratum, figure)| (stratum, figure))
        .collect()
}
