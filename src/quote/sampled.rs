//! A quote of many figures from the fracture of some of them.
//!
//! Figures are drawn ([`super::sample`]), fractured and judged with their neighbours; the neighbours' outlines
//! stand in for their shots. Shots, times and scores of all figures follow from those drawn by their weights. Hours are those of a pattern in which figures that were not
//! drawn stand in their places with what the fit expects of them, scaled so that all together come out as estimated.

use std::sync::Arc;

use rayon::prelude::*;

use crate::blur::Blur;
use crate::fracture::{Fracture, Fracturer, Job};
use crate::geom::{Point, Rect};
use crate::judge::{self, Settings};
use crate::mask::{DistinctFigure, Standings};
use crate::shot::{AddressUnit, Shot, ShotList};
use crate::units::{Dose, Nm, Seconds};
use crate::write_time::{Borders, Field, Summed, Sums, WriteTimeError};

use super::exposure::Exposed;
use super::exposure::{self, LongRange};
use super::hours::{self, Correction, Spread, Written};
use super::made::{self, Made, MadeMask, Scene, Setup, Unmade};
use super::result::{
    self, ByMethod, Count, DoseMap, Estimate, FractureSummary, Method, SampleUsed, StratumUsed,
};
use super::sample::{self, Drawn, Features, Scale, Stop, Strata, Total, Weights, draw};
use super::tally::Tally;
use super::uncertain;
use super::{Answer, Basis, Clip, Parts, QuoteError, Terms, check, exact, finish, fracturer};

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

/// A figure drawn: its shots and scores, and what they add up to at all places of its clip.
struct Measured {
    made: ByMethod<Result<Made, Unmade>>,
    sums: ByMethod<Sums>,
}

/// A figure with its clip, both by number.
#[derive(Clone, Copy)]
struct Unit<'a> {
    clip: usize,
    figure: usize,
    distinct: &'a DistinctFigure,
    /// Places in its clip.
    places: f64,
    /// How often the clip stands in the field.
    copies: f64,
}

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

/// What the sample says of all figures.
#[derive(Clone, Copy)]
struct Estimates {
    shots: Estimate,
    beam_h: Estimate,
}

fn each(totals: &ByMethod<Estimates>, of: fn(&Estimates) -> Estimate) -> ByMethod<Estimate> {
    let mut all = ByMethod::default();
    for (method, estimates) in totals.iter() {
        *all.slot(method) = estimates.map(of);
    }
    all
}

fn units<'a>(clips: &[Clip<'a>], terms: &Terms<'_>) -> Vec<Unit<'a>> {
    let of_clip = |(number, clip): (usize, &Clip<'a>)| {
        let copies = clip.copies_exactly(terms.field);
        let figures = clip.mask.figures.iter().enumerate();
        figures
            .map(move |(figure, distinct)| Unit {
                clip: number,
                figure,
                distinct,
                places: distinct.place_count() as f64,
                copies,
            })
            .collect::<Vec<_>>()
    };
    clips.iter().enumerate().flat_map(of_clip).collect()
}

fn strata(units: &[Unit<'_>], setup: &Setup, seed: u64) -> Strata {
    let of = |unit: &Unit<'_>| {
        let features = Features {
            places: unit.places * unit.copies,
            ..Features::of(&unit.distinct.figure, 1, setup.blur)
        };
        (features, number(unit, seed))
    };
    let figures: Vec<_> = units.par_iter().map(of).collect();
    let scale = Scale {
        sigma_nm: setup.blur.sigma().0,
        greatest_side_nm: setup.limits.greatest_side.0,
    };
    Strata::new(&figures, scale)
}

/// The random number of a figure: from the seed, its outline and those of its neighbours, so that it has the same wherever and in whatever order it stands.
fn number(unit: &Unit<'_>, seed: u64) -> u64 {
    let distinct = unit.distinct;
    let mut state = mix(seed ^ unit.clip as u64);
    let mut take = |n: u64| state = mix(state ^ n);
    for figure in std::iter::once(&distinct.figure).chain(&distinct.context) {
        for ring in figure.rings() {
            take(ring.points().len() as u64);
            for point in ring.points() {
                take(point.x.cast_unsigned());
                take(point.y.cast_unsigned());
            }
        }
    }
    state
}

/// One step of SplitMix64 (Steele, Lea, Flood, OOPSLA 2014).
fn mix(state: u64) -> u64 {
    let z = state.wrapping_add(0x9e37_79b9_7f4a_7c15);
    let z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}

/// Fractures and judges figures one by one.
struct Drawing<'a> {
    clips: &'a [Clip<'a>],
    standings: Vec<Standings<'a>>,
    /// Where shots are cut, and the jump to the first shot of a figure; by clip.
    borders: Vec<(Borders, Nm)>,
    fracturers: [(Method, Box<dyn Fracturer>); 3],
    terms: &'a Terms<'a>,
    setup: Setup,
    settings: Settings,
    correction: Correction,
    tick: &'a (dyn Fn() + Sync),
}

impl<'a> Drawing<'a> {
    fn new(
        clips: &'a [Clip<'a>],
        terms: &'a Terms<'a>,
        basis: &Basis,
        tick: &'a (dyn Fn() + Sync),
    ) -> Self {
        Self {
            clips,
            standings: clips.iter().map(|clip| Standings::new(clip.mask)).collect(),
            borders: clips
                .iter()
                .map(|clip| hours::borders(clip, terms.field))
                .collect(),
            fracturers: Method::ALL.map(|method| (method, fracturer(method, terms))),
            terms,
            setup: basis.setup,
            settings: basis.settings,
            correction: basis.correction,
            tick,
        }
    }

    fn measure(
        &self,
        units: &[Unit<'_>],
        figures: &[usize],
    ) -> Result<Vec<Measured>, WriteTimeError> {
        figures.par_iter().map(|&i| self.one(&units[i])).collect()
    }

    fn one(&self, unit: &Unit<'_>) -> Result<Measured, WriteTimeError> {
        let mut measured = Measured {
            made: ByMethod::default(),
            sums: ByMethod::default(),
        };
        let job = Job {
            flashed: &[],
            figure: &unit.distinct.figure,
            context: &unit.distinct.context,
            blur: self.setup.blur,
            tolerance: self.setup.tolerance,
            limits: self.setup.limits,
        };
        for (method, fracturer) in &self.fracturers {
            let made = fracturer
                .fracture(&job)
                .map(|fracture| self.judged(unit, fracture))
                .map_err(Unmade::from);
            (self.tick)();
            (self.tick)();
            let sums = match &made {
                Ok(made) => {
                    // The dose of the mean coverage, until it is known what lies around.
                    let shots = &made.fracture.shots;
                    let portions = exposure::evenly(unit.distinct, shots, self.correction.dose);
                    let placed = hours::placed(&portions);
                    let (borders, spacing) = self.borders[unit.clip];
                    Sums::new(self.terms.profile, &placed, borders, spacing)? * unit.copies
                }
                Err(_) => Sums::default(),
            };
            *measured.sums.slot(*method) = Some(sums);
            *measured.made.slot(*method) = Some(made);
        }
        Ok(measured)
    }

    fn judged(&self, unit: &Unit<'_>, fracture: Fracture) -> Made {
        let mask = self.clips[unit.clip].mask;
        let flashes = |other: usize, window: Rect| {
            if other == unit.figure {
                fracture.shots.rects().collect()
            } else {
                made::stand_in(&mask.figures[other].figure, window, self.setup.blur)
            }
        };
        let scene = Scene::with(
            mask,
            &self.standings[unit.clip],
            unit.figure,
            self.setup.blur,
            flashes,
        );
        let figure = &unit.distinct.figure;
        Made {
            fidelity: judge::judge(figure, &scene.neighbours, &scene.dose, &self.settings),
            peak: made::peak(&scene.dose, &fracture),
            fracture,
        }
    }
}

/// Every figure was drawn: the exact quote from the same fractures, each judged with its neighbours' own shots.
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
        let own = fractures[clip].slot(method).take().unwrap_or_default();
        Arc::new(made::judge(clips[clip].mask, own, &basis.settings, &|| ()))
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

/// What the figures drawn say.
struct Known<'a> {
    units: &'a [Unit<'a>],
    weights: Weights<'a>,
    /// By figure, those drawn.
    by_unit: Vec<Option<&'a Measured>>,
    /// By clip.
    made: Vec<ByMethod<Arc<MadeMask>>>,
    /// By figure, those not drawn.
    stand_ins: ByMethod<Vec<Option<ShotList>>>,
}

impl<'a> Known<'a> {
    fn new(
        clips: &[Clip<'_>],
        units: &'a [Unit<'a>],
        strata: &'a Strata,
        drawn: &'a Drawn<Measured>,
        basis: &Basis,
    ) -> Self {
        let weights = Weights::new(strata, &drawn.taken);
        let mut by_unit: Vec<Option<&Measured>> = vec![None; units.len()];
        for (unit, measured) in &drawn.costs {
            by_unit[*unit] = Some(measured);
        }
        let mut stand_ins = ByMethod::default();
        for method in Method::ALL {
            let found = stood_in(units, &weights, &by_unit, method, basis.setup.blur);
            *stand_ins.slot(method) = Some(found);
        }
        Self {
            made: made_of(clips, units, &by_unit),
            units,
            weights,
            by_unit,
            stand_ins,
        }
    }

    /// By clip: the shots of figures drawn, what stands for those of the others.
    fn lists(&self, clips: usize, method: Method) -> Vec<Vec<Option<&ShotList>>> {
        let mut lists: Vec<Vec<Option<&ShotList>>> = vec![Vec::new(); clips];
        for (i, unit) in self.units.iter().enumerate() {
            let own = self.made[unit.clip]
                .get(method)
                .map(|all| &all[unit.figure]);
            let stand_in = || self.stand_ins.get(method).and_then(|all| all[i].as_ref());
            lists[unit.clip].push(match own {
                Some(Ok(made)) => Some(&made.fracture.shots),
                Some(Err(Unmade::Fracture(_))) => None,
                Some(Err(Unmade::NotDrawn)) | None => stand_in(),
            });
        }
        lists
    }

    /// The totals of a fracture at the doses of places.
    fn placed<'k>(
        &'k self,
        clips: &[Clip<'k>],
        terms: &Terms<'_>,
        basis: &Basis,
        method: Method,
    ) -> Result<PlacedSums<'k>, QuoteError> {
        let lists = self.lists(clips.len(), method);
        let exposed = LongRange::new(terms.profile).expose_shot_clips(clips, &lists)?;
        let borders: Vec<(Borders, Nm)> = clips
            .iter()
            .map(|clip| hours::borders(clip, terms.field))
            .collect();
        let timed = |(unit, measured): (&Unit<'_>, &Option<&Measured>)| {
            let portions = exposed[unit.clip].portions[unit.figure].as_ref();
            match portions.filter(|_| measured.is_some()) {
                Some(portions) => {
                    let (borders, spacing) = borders[unit.clip];
                    let placed = hours::placed(portions);
                    Ok(Sums::new(terms.profile, &placed, borders, spacing)? * unit.copies)
                }
                None => Ok(Sums::default()),
            }
        };
        let all = self.units.par_iter().zip(&self.by_unit).map(timed);
        let sums = all.collect::<Result<Vec<Sums>, WriteTimeError>>()?;
        let map = DoseMap::all(exposed.iter().filter_map(|exposed| exposed.map.as_ref()));
        Ok(PlacedSums {
            method,
            shots: self.weights.total(&|i| sums[i].shots),
            beam: self.beam(terms, basis, method, &sums, map),
            exposed,
            map,
            sums,
        })
    }

    /// Flashing and settling of all figures. Half its width holds what the charge of the figures not drawn, estimated from the same sample,
    /// does to every dose.
    ///
    /// Taylor linearisation (Särndal, Swensson and Wretman, *Model Assisted Survey Sampling* (1992), section 5.5): doses fall with the
    /// charge `C` of the mask as `d ln D = −κ·d ln C`, where `D = (1 + η)/(1 + 2ηU)` gives `κ = 2ηU/(1 + 2ηU) = 1 − D/(1 + η)`; so with
    /// `F` seconds of flashing in all a figure of charge `c` and time `t` scatters as `t − κ·F·c/C`.
    fn beam(
        &self,
        terms: &Terms<'_>,
        basis: &Basis,
        method: Method,
        sums: &[Sums],
        map: Option<DoseMap>,
    ) -> Total {
        let profile = terms.profile;
        let beam = self.weights.total(&|i| sums[i].time(profile).0);
        let charge = |i: usize| charge_of(&self.units[i], self.by_unit[i], method);
        let all_charge = self.weights.total(&charge).value;
        let Some(map) = map.filter(|_| all_charge > 0.0) else {
            return beam;
        };
        let settling = |sums: Sums| Sums { dose: 0.0, ..sums }.time(profile).0;
        let flashing = |i: usize| sums[i].time(profile).0 - settling(sums[i]);
        let by_charge = (1.0 - map.mean_dose / (1.0 + basis.correction.ratio)).clamp(0.0, 1.0)
            * self.weights.total(&flashing).value
            / all_charge;
        let linear = |i: usize| sums[i].time(profile).0 - by_charge * charge(i);
        Total {
            half_width: self.weights.total(&linear).half_width,
            ..beam
        }
    }
}

/// One fracture at the doses of places, known from those drawn.
struct PlacedSums<'a> {
    method: Method,
    /// By clip.
    exposed: Vec<Exposed<'a>>,
    map: Option<DoseMap>,
    /// By figure, on the field; of those not drawn 0.
    sums: Vec<Sums>,
    shots: Total,
    beam: Total,
}

impl PlacedSums<'_> {
    /// Whether its totals are as sure as asked; those of the plain staircase are not asked for.
    fn is_within(&self, share: f64) -> bool {
        let sure = |total: Total| total.relative() <= share;
        self.method == Method::Staircase || (sure(self.shots) && sure(self.beam))
    }
}

fn sampled(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    basis: &Basis,
    known: &Known<'_>,
    placed: Vec<PlacedSums<'_>>,
    used: SampleUsed,
) -> Result<Answer, QuoteError> {
    let (units, weights, by_unit) = (known.units, &known.weights, &known.by_unit);
    let mut parts = Parts::empty(clips.len());
    let mut totals = ByMethod::default();
    for placed in placed {
        let PlacedSums {
            method,
            exposed,
            map,
            sums: all_sums,
            shots,
            beam,
        } = placed;
        let sums = |i: usize| all_sums[i];
        let all = All::new(weights, units, &sums, &beam, terms);
        let frame = hours::frame(clips);
        let spread = |shift| all.spread(units, shift, (frame, terms.field));
        let time = |shift| Written::of_sums(spread(shift)).time(terms.profile);
        let mut timed = time(0.0)?;
        timed.hours = uncertain::widened(
            timed.hours,
            &Written::of_sums(spread(0.0)),
            terms.profile,
            uncertain::of_map(basis.correction, map)?,
        )?;
        let low = time(-1.0)?.hours.total_h;
        let high = time(1.0)?.hours.total_h;
        let total = timed.hours.total_h;
        // Two independent causes: the sample, and the ± values of the profile.
        timed.hours.low_h = total - (total - low).hypot(total - timed.hours.low_h);
        timed.hours.high_h = total + (high - total).hypot(timed.hours.high_h - total);
        timed.hours.shots_written = Count(whole_count(shots.value));
        let mut tally = Tally::default();
        for &(i, weight) in weights.of_figures() {
            let made = by_unit[i].and_then(|m| m.made.get(method));
            let unit = &units[i];
            let scores = if clips.len() > 1 { unit.copies } else { 1.0 };
            if let Some(made) = made {
                tally.add(
                    (unit.distinct, unit.figure),
                    made,
                    (weight, weight * scores),
                    (&exposed[unit.clip], basis.settings.background),
                    basis.setup.limits.sliver,
                );
            }
        }
        *parts.fractures.slot(method) = Some(FractureSummary {
            hours: Some(timed.hours),
            dose_map: map,
            ..tally.summary()
        });
        *parts.stripes.slot(method) = Some(hours::rows(&timed.time));
        for (clip, seconds) in parts.seconds.iter_mut().enumerate() {
            let of_clip = (0..units.len()).filter(|&i| units[i].clip == clip);
            let time = |i: usize| by_unit[i].map(|_| sums(i).time(terms.profile).0);
            *seconds.slot(method) = Some(of_clip.map(time).collect());
        }
        *parts.exposed.slot(method) = Some(exposed);
        *parts.spread.slot(method) = Some(spread(0.0));
        *totals.slot(method) = Some(Estimates {
            shots: estimate(&shots, 1.0),
            beam_h: estimate(&beam, 1.0 / 3600.0),
        });
    }
    parts.sample = Some(SampleUsed {
        shots: each(&totals, |e| e.shots),
        beam_h: each(&totals, |e| e.beam_h),
        ..used
    });
    finish(clips, terms, basis, &known.made, parts)
}

/// Shots and scores by clip and figure, of those drawn.
fn made_of(
    clips: &[Clip<'_>],
    units: &[Unit<'_>],
    by_unit: &[Option<&Measured>],
) -> Vec<ByMethod<Arc<MadeMask>>> {
    let of_clip = |clip: usize| {
        let mut made = ByMethod::default();
        for method in Method::ALL {
            let one = |(_, measured): (&Unit<'_>, &Option<&Measured>)| {
                let made = measured.and_then(|m| m.made.get(method));
                made.cloned().unwrap_or(Err(Unmade::NotDrawn))
            };
            let all = units.iter().zip(by_unit);
            let own = all.filter(|(unit, _)| unit.clip == clip);
            *made.slot(method) = Some(Arc::new(own.map(one).collect()));
        }
        made
    };
    (0..clips.len()).map(of_clip).collect()
}

/// What stands on the density map for the shots of figures that were not drawn: slabs of their outlines, with as much dose times area to
/// the area of the outline as those drawn have.
fn stood_in(
    units: &[Unit<'_>],
    weights: &Weights<'_>,
    by_unit: &[Option<&Measured>],
    method: Method,
    blur: Blur,
) -> Vec<Option<ShotList>> {
    let places = |i: usize| units[i].places * units[i].copies;
    let charge = |i: usize| charge_of(&units[i], by_unit[i], method);
    let outlines: Vec<f64> = units
        .par_iter()
        .map(|u| u.distinct.figure.area_nm2())
        .collect();
    let outline: f64 = (0..units.len()).map(|i| places(i) * outlines[i]).sum();
    let ratio = weights.total(&charge).value / outline;
    let one = |(i, unit): (usize, &Unit<'_>)| {
        if by_unit[i].is_some() {
            return None;
        }
        let rects = made::slabs(&unit.distinct.figure, blur);
        let area = |r: &Rect| Nm::from_pm(r.width()).0 * Nm::from_pm(r.height()).0;
        let covered: f64 = rects.iter().map(area).sum();
        let dose = Dose(ratio * outlines[i] / covered);
        let shot = |r: &Rect| Shot {
            x0: r.min.x,
            y0: r.min.y,
            x1: r.max.x,
            y1: r.max.y,
            dose,
        };
        let shots = rects.iter().map(shot).collect();
        (covered > 0.0).then(|| ShotList::new(AddressUnit::FINEST, shots))
    };
    units.par_iter().enumerate().map(one).collect()
}

/// Dose times area of a figure drawn at all its places, nm²; of one that was not drawn 0.
fn charge_of(unit: &Unit<'_>, measured: Option<&Measured>, method: Method) -> f64 {
    let made = measured.and_then(|measured| measured.made.get(method));
    let shots = made.and_then(|made| Some(&made.as_ref().ok()?.fracture.shots));
    let places = unit.places * unit.copies;
    shots.map_or(0.0, |shots| places * exposure::charge(shots))
}

fn estimate(total: &Total, unit: f64) -> Estimate {
    Estimate {
        value: total.value * unit,
        low: (total.value - total.half_width) * unit,
        high: (total.value + total.half_width) * unit,
    }
}

/// What every figure adds, drawn or expected.
struct All {
    /// By figure: at all its places, on the field; and whether it was drawn.
    sums: Vec<(Sums, bool)>,
    /// By how much the figures not drawn are greater together at the end of the interval, as a share.
    swing: f64,
}

impl All {
    fn new(
        weights: &Weights<'_>,
        units: &[Unit<'_>],
        sums: &dyn Fn(usize) -> Sums,
        beam: &Total,
        terms: &Terms<'_>,
    ) -> Self {
        let mut all: Vec<(Sums, bool)> = vec![(Sums::default(), false); units.len()];
        for &(i, _) in weights.of_figures() {
            all[i] = (sums(i), true);
        }
        type Part = (fn(&Sums) -> f64, fn(&mut Sums) -> &mut f64);
        let parts: [Part; 5] = [
            (|s| s.shots, |s| &mut s.shots),
            (|s| s.flashes, |s| &mut s.flashes),
            (|s| s.dose, |s| &mut s.dose),
            (|s| s.jump.0, |s| &mut s.jump.0),
            (|s| s.side.0, |s| &mut s.side.0),
        ];
        for (get, slot) in parts {
            let cost = |i: usize| get(&sums(i));
            let total = weights.total(&cost).value;
            let fitted = weights.fitted(&cost);
            let drawn: f64 = all
                .iter()
                .filter(|(_, drawn)| *drawn)
                .map(|(s, _)| get(s))
                .sum();
            let expected: Vec<f64> = (0..units.len())
                .map(|i| if all[i].1 { 0.0 } else { fitted(i).max(0.0) })
                .collect();
            let of_rest: f64 = expected.iter().sum();
            let scale = if of_rest > 0.0 {
                ((total - drawn) / of_rest).max(0.0)
            } else {
                0.0
            };
            for ((sums, drawn), expected) in all.iter_mut().zip(expected) {
                if !*drawn {
                    *slot(sums) = scale * expected;
                }
            }
        }
        let drawn: f64 = all
            .iter()
            .filter(|(_, drawn)| *drawn)
            .map(|(s, _)| s.time(terms.profile).0)
            .sum();
        let rest = beam.value - drawn;
        Self {
            sums: all,
            swing: if rest > 0.0 {
                beam.half_width / rest
            } else {
                0.0
            },
        }
    }

    /// Where it all stands, the figures not drawn `shift` half widths of the interval away from the estimate.
    fn spread<'a>(
        &self,
        units: &[Unit<'a>],
        shift: f64,
        (frame, field): (Rect, Option<Field>),
    ) -> Spread<'a> {
        let factor = |drawn: bool| {
            if drawn {
                1.0
            } else {
                (1.0 + shift * self.swing).max(0.0)
            }
        };
        let sums = self.sums.iter().map(|(sums, drawn)| *sums * factor(*drawn));
        let places = |(sums, unit): (Sums, &Unit<'a>)| {
            let bounds = unit.distinct.figure.bounds();
            let sums = sums * (1.0 / unit.places);
            unit.distinct.places.iter().map(move |place| {
                let bounds = place.transform.apply_rect(bounds);
                Summed {
                    sums,
                    at: Point::new(
                        (bounds.min.x + bounds.max.x) / 2,
                        (bounds.min.y + bounds.max.y) / 2,
                    ),
                    repetition: &place.repetition,
                }
            })
        };
        Spread {
            total: sums.clone().fold(Sums::default(), |all, one| all + one),
            figures: sums.zip(units).flat_map(places).collect(),
            frame,
            field,
        }
    }
}

/// A sum of shots as a number of them.
pub(super) fn whole_count(sum: f64) -> u128 {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a float to integer cast saturates, and sums are not negative"
    )]
    let count = sum.round() as u128;
    count
}

impl From<super::sample::Stopped> for result::Stopped {
    fn from(stopped: super::sample::Stopped) -> Self {
        use super::sample::Stopped;
        match stopped {
            Stopped::All => Self::AllDrawn,
            Stopped::Narrow => Self::NarrowEnough,
            Stopped::Most => Self::AsManyAsAsked,
            Stopped::Time => Self::TimeOut,
        }
    }
}

/// What a sample leaves open.
pub(super) fn note(sample: &SampleUsed, fractures: &result::Fractures) -> Option<String> {
    if sample.figures_drawn == sample.figures_distinct {
        return None;
    }
    let none_fails = |method| {
        fractures
            .get(method)
            .is_some_and(|f| f.figures_out_of_tolerance == Some(0))
    };
    // Of n drawn none fails: with 95 % confidence fewer than 3/n of all do (Hanley and Lippman-Hand, JAMA 249 (1983) 1743).
    let most = 3.0 / sample.figures_drawn as f64;
    let fails = if none_fails(Method::Tile) || none_fails(Method::Overlap) {
        format!(
            "; where none of them is out of tolerance, up to {} % of all may be",
            crate::number::brief(100.0 * most)
        )
    } else {
        String::new()
    };
    Some(format!(
        "worst values, flags and shot lists are those of the figures drawn, judged beside their neighbours as drawn in the layout{fails}"
    ))
}

/// Says of a verdict that cannot be given that a larger sample may give it.
pub(super) fn say(verdict: &mut result::Verdict, sample: &SampleUsed) {
    if verdict.fits == result::Fits::CannotSay && verdict.slot_h.is_some() {
        verdict.sentence += &format!(
            " It rests on {} of {} figures: a larger sample narrows it as far as it comes from drawing.",
            sample.figures_drawn, sample.figures_distinct
        );
    }
}
