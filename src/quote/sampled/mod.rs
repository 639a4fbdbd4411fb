//! A quote of many figures from the fracture of some of them.
//!
//! Figures are drawn ([`super::sample`]), fractured and judged with their neighbours; the neighbours' outlines stand in for their shots. Shots, times
//! and scores of all figures follow from those drawn by their weights. Hours are those of a pattern in which figures that were not drawn stand
//! in their places with what the fit expects of them, scaled so that all together come out as estimated.

mod all;
mod drawing;
mod known;
mod unit;
mod words;

use std::sync::Arc;

use crate::fracture::Fracture;
use crate::units::Seconds;

use super::hours::{self, Correction, Spread, Timed, Written};
use super::made::{self, Unmade};
use super::repair::repair;
use super::result::{ByMethod, Count, Estimate, FractureSummary, Method, SampleUsed, StratumUsed};
use super::sample::{self, Drawn, Stop, Strata, Total, draw};
use super::{
    Answer, Basis, Clip, Parts, QuoteError, Terms, check, exact, finish, fracturer, uncertain,
};

use all::All;
use drawing::{Drawing, Measured};
use known::{Known, PlacedSums};
use unit::{Unit, strata, units};
pub(super) use words::{note, say};

/// How figures are drawn.
#[derive(Clone, Copy)]
pub struct Sampling<'a> {
    /// Half width of the intervals of shots and beam time at which the drawing ends, as a share of the value.
    pub within: Option<f64>,
    /// Figures at most.
    pub most: Option<usize>,
    /// Another seed, another sample.
    pub seed: u64,
    /// What the user gave, for the report.
    pub time_limit: Option<Seconds>,
    /// Whether it is used.
    pub out_of_time: &'a dyn Fn() -> bool,
}

/// Figures measured between two looks at the clock.
const AT_ONCE: usize = 16;

/// As [`super::quote`], from a sample of the distinct figures. Without a clock the same for any number of threads; where time ran out, the number of figures drawn
/// is in the result and gives the same again.
///
/// # Errors
/// As [`super::quote`].
pub fn quote_sampled(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    sampling: &Sampling<'_>,
    tick: &(dyn Fn() + Sync),
) -> Result<Answer, QuoteError> {
    check(clips, terms)?;
    let basis = Basis::new(clips, terms)?;
    let units = units(clips, terms);
    let strata = strata(&units, &basis.setup, sampling.seed);
    let drawing = Drawing::new(clips, terms, &basis, tick);
    let beam = |measured: &Measured, method| {
        measured
            .sums
            .get(method)
            .map_or(0.0, |sums| sums.time(terms.profile).0)
    };
    let shots =
        |measured: &Measured, method| measured.sums.get(method).map_or(0.0, |sums| sums.shots);
    let draw_on = |drawn: Drawn<Measured>| {
        let stop = Stop {
            within: sampling.within,
            more_than: drawn.costs.len(),
            most: sampling.most,
            out_of_time: sampling.out_of_time,
            at_once: if sampling.time_limit.is_some() {
                AT_ONCE
            } else {
                usize::MAX
            },
        };
        draw(
            &strata,
            &stop,
            &mut |figures| drawing.measure(&units, figures),
            &[
                &|m| shots(m, Method::Tile),
                &|m| shots(m, Method::Overlap),
                &|m| beam(m, Method::Tile),
                &|m| beam(m, Method::Overlap),
            ],
            drawn,
        )
    };
    let mut drawn = Drawn::none(&strata);
    loop {
        drawn = draw_on(drawn)?;
        let used = used(&strata, &drawn, sampling);
        if drawn.costs.len() == units.len() {
            return whole(clips, terms, &basis, &units, drawn, used);
        }
        let known = Known::new(clips, &units, &strata, &drawn, &basis);
        let placed = Method::ALL
            .into_iter()
            .map(|method| known.placed(clips, terms, &basis, method))
            .collect::<Result<Vec<_>, _>>()?;
        // The doses of places are known only now, and with them what is asked for: the drawing went by those of the mean coverage.
        let asked = sampling
            .within
            .filter(|_| drawn.stopped == sample::Stopped::Narrow);
        if asked.is_none_or(|within| placed.iter().all(|placed| placed.is_within(within))) {
            return sampled(clips, terms, &basis, &known, placed, used);
        }
    }
}

fn used(strata: &Strata, drawn: &Drawn<Measured>, sampling: &Sampling<'_>) -> SampleUsed {
    let sizes = strata.sizes();
    let of_stratum = |(&figures, &n): (&usize, &usize)| StratumUsed {
        figures: figures as u64,
        drawn: n as u64,
    };
    SampleUsed {
        figures_distinct: strata.len() as u64,
        figures_drawn: drawn.costs.len() as u64,
        seed: sampling.seed,
        within: sampling.within,
        time_limit_s: sampling.time_limit.map(|limit| limit.0),
        stopped: drawn.stopped.into(),
        strata: sizes.iter().zip(&drawn.taken).map(of_stratum).collect(),
        shots: ByMethod::default(),
        beam_h: ByMethod::default(),
    }
}

/// Every figure was drawn: the exact quote from the same fractures, each fitted anew where its neighbours' shots undo it.
fn whole(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    basis: &Basis,
    units: &[Unit<'_>],
    drawn: Drawn<Measured>,
    used: SampleUsed,
) -> Result<Answer, QuoteError> {
    let mut fractures: Vec<ByMethod<Vec<Result<Fracture, Unmade>>>> = Vec::new();
    for clip in clips {
        let mut of_clip = ByMethod::default();
        for method in Method::ALL {
            *of_clip.slot(method) = Some(vec![Err(Unmade::NotDrawn); clip.mask.figures.len()]);
        }
        fractures.push(of_clip);
    }
    for (i, mut measured) in drawn.costs {
        let unit = &units[i];
        for method in Method::ALL {
            let made = measured.made.slot(method).take();
            if let (Some(made), Some(all)) = (made, fractures[unit.clip].slot(method)) {
                all[unit.figure] = made.map(|made| made.fracture);
            }
        }
    }
    let mut answer = exact(clips, terms, basis, &mut |clip, method| {
        let mut own = fractures[clip].slot(method).take().unwrap_or_default();
        let mask = clips[clip].mask;
        repair(
            mask,
            &mut own,
            fracturer(method, terms).as_ref(),
            &basis.setup,
        );
        Arc::new(made::judge(mask, own, &basis.settings, &|| ()))
    })?;
    answer.quote.sample = Some(SampleUsed {
        shots: exact_totals(&answer, |f| {
            f.hours.map_or(f.shots, |h| h.shots_written).0 as f64
        }),
        beam_h: exact_totals(&answer, |f| f.hours.map_or(0.0, |h| h.flash_h + h.settle_h)),
        ..used
    });
    Ok(answer)
}

fn exact_totals(answer: &Answer, of: fn(&FractureSummary) -> f64) -> ByMethod<Estimate> {
    let mut all = ByMethod::default();
    for (method, summary) in answer.quote.fractures.iter() {
        *all.slot(method) = summary.map(|summary| {
            let value = of(summary);
            Estimate {
                value,
                low: value,
                high: value,
            }
        });
    }
    all
}

/// The quote from those drawn.
fn sampled(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    basis: &Basis,
    known: &Known<'_>,
    placed: Vec<PlacedSums<'_>>,
    mut used: SampleUsed,
) -> Result<Answer, QuoteError> {
    let units = known.units;
    let mut parts = Parts::empty(clips.len());
    for placed in placed {
        let method = placed.method;
        let all = All::new(&known.weights, units, &placed, terms);
        let spread = |shift| all.spread(units, shift, (hours::frame(clips), terms.field));
        let even = uncertain::of_map(basis.correction, placed.map)?;
        let mut timed = timed(&spread, terms, even)?;
        timed.hours.shots_written = Count::rounded(placed.shots.value);
        *parts.fractures.slot(method) = Some(FractureSummary {
            hours: Some(timed.hours),
            dose_map: placed.map,
            ..known.scores(&placed, basis, clips.len() > 1)
        });
        *parts.stripes.slot(method) = Some(hours::rows(&timed.time));
        for (clip, seconds) in parts.seconds.iter_mut().enumerate() {
            let of_clip = (0..units.len()).filter(|&i| units[i].clip == clip);
            let time = |i: usize| known.by_unit[i].map(|_| placed.sums[i].time(terms.profile).0);
            *seconds.slot(method) = Some(of_clip.map(time).collect());
        }
        *parts.spread.slot(method) = Some(spread(0.0));
        *used.shots.slot(method) = Some(estimate(&placed.shots, 1.0));
        *used.beam_h.slot(method) = Some(estimate(&placed.beam, 1.0 / 3600.0));
        *parts.exposed.slot(method) = Some(placed.exposed);
    }
    parts.sample = Some(used);
    finish(clips, terms, basis, &known.made, parts)
}

/// Hours with an interval of two independent causes: the sample, and the ± values of the profile.
fn timed<'a>(
    spread: &dyn Fn(f64) -> Spread<'a>,
    terms: &Terms<'_>,
    even: Correction,
) -> Result<Timed, QuoteError> {
    let time = |shift| Written::of_sums(spread(shift)).time(terms.profile);
    let mut timed = time(0.0)?;
    let written = Written::of_sums(spread(0.0));
    let of_profile = uncertain::widened(timed.hours, &written, terms.profile, even)?;
    let total = timed.hours.total_h;
    let (low, high) = (time(-1.0)?.hours.total_h, time(1.0)?.hours.total_h);
    timed.hours.low_h = total - (total - low).hypot(total - of_profile.low_h);
    timed.hours.high_h = total + (high - total).hypot(of_profile.high_h - total);
    Ok(timed)
}

fn estimate(total: &Total, unit: f64) -> Estimate {
    Estimate {
        value: total.value * unit,
        low: (total.value - total.half_width) * unit,
        high: (total.value + total.half_width) * unit,
    }
}
