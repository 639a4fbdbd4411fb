//! Remedies that are computed: what each saves on a figure and what it costs in edge error, and the shortest list that brings a mask into its slot.

use std::collections::BTreeMap;
use std::sync::Arc;

use rayon::prelude::*;

use crate::fracture::tile::Staircase;
use crate::fracture::{Fracture, Fracturer, Job};
use crate::geom::{Figure, Rect, offset};
use crate::judge::{self, Fidelity, Pieces};
use crate::mask::{DistinctFigure, Standings};
use crate::number::brief as number;
use crate::shot::{Shot, ShotList};
use crate::units::{Dose, Hours, Nm};
use crate::write_time::{Sums, WriteTimeError};

use super::exposure::{self, Exposed, LongRange};
use super::hours::{self, Written};
use super::made::{self, Made, MadeMask, Scene, Unmade, first_place};
use super::result::{
    Change, DoseMap, FigureRemedies, Fits, FractureSummary, Method, MustChange, Remedy, Trial,
};
use super::{Answer, Basis, Clip, QuoteError, Terms, fracturer};
use super::{summary, uncertain};

/// Looser tolerances tried, multiples of the mask's.
const LOOSER: [f64; 2] = [1.5, 2.0];
/// Radii of smoothing tried, σ: half of it changes what the blur hides anyway, a whole one what it does not quite.
const SMOOTHER: [f64; 2] = [0.5, 1.0];
/// Plain staircases tried, multiples of the tolerance.
const COARSER: [f64; 2] = [2.0, 3.0];
/// Doses tried.
const DOSES: [f64; 2] = [0.95, 1.05];
/// A remedy that strays further than this many tolerances, and the accuracy of a contour, is none.
const FURTHEST: f64 = 2.0;
/// To how much of a nm a contour is found.
const CONTOUR_NM: f64 = 0.01;
/// Flagged figures on which remedies are tried, most seconds first.
const MOST_FLAGGED: usize = 32;
/// Figures on which remedies are tried to bring the mask into its slot, most seconds first.
const MOST_CHANGED: usize = 96;

/// Tries remedies on the flagged figures, and finds what must change if the mask misses its slot; writes both into the answer.
///
/// # Errors
/// As [`super::quote`].
pub fn remedies(
    clips: &[Clip<'_>],
    terms: &Terms<'_>,
    answer: &mut Answer,
) -> Result<(), QuoteError> {
    let Some(method) = answer.quote.recommended else {
        return Ok(());
    };
    let basis = Basis::new(clips, terms)?;
    let shop = Shop::new(clips, terms, &basis, answer, method);
    let all = shop.by_seconds(answer);
    let flagged: Vec<&Subject> = all
        .iter()
        .filter(|subject| {
            answer
                .quote
                .flags
                .iter()
                .any(|flag| subject.is(flag.clip, flag.figure))
        })
        .take(MOST_FLAGGED)
        .collect();
    let mut tried = shop.try_all(&flagged)?;
    let late = answer.quote.verdict.fits != Fits::Yes;
    let sampled = answer
        .quote
        .sample
        .as_ref()
        .is_some_and(|s| s.figures_drawn < s.figures_distinct);
    let change = match terms.slot.filter(|_| late && !sampled) {
        Some(slot) => shop.must_change(slot, &all, &mut tried)?,
        None => None,
    };
    let (flags, quote) = (answer.quote.flags.clone(), &mut answer.quote);
    quote.remedies = flagged
        .iter()
        .filter_map(|subject| tried.get(&subject.key()))
        .map(|tested| tested.remedies.clone())
        .collect();
    let distinct: std::collections::BTreeSet<(u64, u64)> =
        flags.iter().map(|flag| (flag.clip, flag.figure)).collect();
    if distinct.len() > quote.remedies.len() {
        quote.notes.push(format!(
            "remedies were tried on {} of {} flagged figures, those of the most seconds",
            quote.remedies.len(),
            distinct.len()
        ));
    }
    quote.must_change = change;
    if let Some(slot) = terms.slot.filter(|_| late && sampled) {
        let beamless = hours::beamless(clips, terms)?;
        quote.must_change_unknown = Some(if beamless > slot {
            out_of_reach(slot, beamless)
        } else {
            "not worked out from a sample, since the figures of the most seconds may not be among those drawn; quoted without \
             --within, --sample and --time-limit-min it is."
                .to_owned()
        });
    }
    Ok(())
}

/// A figure with its clip, both from 0, and its seconds.
struct Subject {
    clip: usize,
    figure: usize,
    seconds: f64,
    /// The mean of what its shots' doses are multiplied by.
    dose: Dose,
}

impl Subject {
    fn is(&self, clip: u64, figure: u64) -> bool {
        (self.clip as u64 + 1, self.figure as u64) == (clip, figure)
    }

    fn key(&self) -> (usize, usize) {
        (self.clip, self.figure)
    }
}

/// What was tried, by clip and figure.
type Tried = BTreeMap<(usize, usize), Tested>;

/// What was tried on one figure, and the shots of each trial.
struct Tested {
    remedies: FigureRemedies,
    fractures: Vec<Fracture>,
}

/// A change with its shots.
#[derive(Clone, Copy)]
struct Fix<'a> {
    change: Change,
    fracture: &'a Fracture,
}

/// All that remedies are worked out with.
struct Shop<'a> {
    clips: &'a [Clip<'a>],
    terms: &'a Terms<'a>,
    basis: &'a Basis,
    method: Method,
    /// By clip: the fracture that is recommended, and its shots alone.
    made: Vec<Arc<MadeMask>>,
    fractures: Vec<Vec<Result<Fracture, Unmade>>>,
    standings: Vec<Standings<'a>>,
}

impl<'a> Shop<'a> {
    fn new(
        clips: &'a [Clip<'a>],
        terms: &'a Terms<'a>,
        basis: &'a Basis,
        answer: &Answer,
        method: Method,
    ) -> Self {
        let made: Vec<Arc<MadeMask>> = answer
            .made
            .iter()
            .filter_map(|made| made.get(method).cloned())
            .collect();
        Self {
            clips,
            terms,
            basis,
            method,
            fractures: made.iter().map(|made| made::fractures_of(made)).collect(),
            made,
            standings: clips.iter().map(|clip| Standings::new(clip.mask)).collect(),
        }
    }

    /// All figures made, most seconds first.
    fn by_seconds(&self, answer: &Answer) -> Vec<Subject> {
        let mut all: Vec<Subject> = answer
            .figures
            .iter()
            .filter_map(|figure| {
                let fracture = figure.fractures.get(self.method)?;
                Some(Subject {
                    clip: usize::try_from(figure.clip).ok()?.checked_sub(1)?,
                    figure: usize::try_from(figure.figure).ok()?,
                    seconds: fracture.seconds?,
                    dose: fracture.mean_dose.map_or(self.basis.correction.dose, Dose),
                })
            })
            .collect();
        all.sort_by(|a, b| b.seconds.total_cmp(&a.seconds).then(a.key().cmp(&b.key())));
        all
    }

    fn distinct(&self, subject: &Subject) -> &'a DistinctFigure {
        &self.clips[subject.clip].mask.figures[subject.figure]
    }

    fn try_all(&self, subjects: &[&Subject]) -> Result<Tried, WriteTimeError> {
        subjects
            .par_iter()
            .filter_map(|subject| {
                let tried = self.try_one(subject).transpose()?;
                Some(tried.map(|tried| (subject.key(), tried)))
            })
            .collect()
    }

    /// Every remedy on one figure; `None` where it has no shots.
    fn try_one(&self, subject: &Subject) -> Result<Option<Tested>, WriteTimeError> {
        let Ok(now) = &self.made[subject.clip][subject.figure] else {
            return Ok(None);
        };
        let before = self.seconds(subject, &now.fracture)?;
        let (mut trials, mut fractures) = (Vec::new(), Vec::new());
        for remedy in self.candidates() {
            let Some(fracture) = self.fractured(subject, now, remedy) else {
                continue;
            };
            let fidelity = self.judged(subject, &fracture);
            let seconds = self.seconds(subject, &fracture)?;
            let scores = fidelity.summary();
            let furthest = FURTHEST * self.basis.setup.tolerance.0 + CONTOUR_NM;
            let near = scores
                .edge_error_nm
                .worst
                .is_some_and(|worst| worst <= furthest);
            trials.push(Trial {
                remedy,
                shots: fracture.shots.len() as u64,
                seconds,
                saved_s: before - seconds,
                edge_error_nm: summary::edge_error(&scores),
                prints_within_tolerance: scores.prints_within_tolerance,
                acceptable: near
                    && fidelity.pieces == Pieces::default()
                    && scores.unmeasured_share == Some(0.0),
            });
            fractures.push(fracture);
        }
        let distinct = self.distinct(subject);
        let corner = first_place(distinct)
            .apply_rect(distinct.figure.bounds())
            .min;
        let remedies = FigureRemedies {
            clip: subject.clip as u64 + 1,
            figure: subject.figure as u64,
            place_nm: corner.to_nm(),
            method: self.method,
            shots: now.fracture.shots.len() as u64,
            seconds: before,
            edge_error_nm: summary::edge_error(&now.fidelity.summary()),
            trials,
        };
        Ok(Some(Tested {
            remedies,
            fractures,
        }))
    }

    fn candidates(&self) -> Vec<Remedy> {
        let (tolerance, sigma) = (
            self.basis.setup.tolerance.0,
            self.basis.setup.blur.sigma().0,
        );
        let other = match self.method {
            Method::Overlap => Method::Tile,
            Method::Tile | Method::Staircase => Method::Overlap,
        };
        let looser = LOOSER.map(|times| Remedy::LooserTolerance {
            tolerance_nm: times * tolerance,
        });
        let smoother = SMOOTHER.map(|times| Remedy::Smoother {
            radius_nm: times * sigma,
        });
        let coarser = COARSER.map(|times| Remedy::CoarserStaircase {
            within_nm: times * tolerance,
        });
        let doses = DOSES.map(|dose| Remedy::OtherDose { dose });
        let mut all = looser.to_vec();
        all.push(Remedy::OtherFracture { method: other });
        all.extend(smoother.into_iter().chain(coarser).chain(doses));
        all
    }

    /// The shots of a figure with the remedy; `None` where there are none to speak of.
    fn fractured(&self, subject: &Subject, now: &Made, remedy: Remedy) -> Option<Fracture> {
        let (setup, distinct) = (&self.basis.setup, self.distinct(subject));
        let own = fracturer(self.method, self.terms);
        let cut = |fracturer: &dyn Fracturer, figure: &Figure, tolerance: Nm| {
            let job = Job {
                flashed: &[],
                figure,
                context: &distinct.context,
                blur: setup.blur,
                tolerance,
                limits: setup.limits,
            };
            fracturer
                .fracture(&job)
                .ok()
                .filter(|made| !made.shots.is_empty())
        };
        match remedy {
            Remedy::LooserTolerance { tolerance_nm } => {
                cut(own.as_ref(), &distinct.figure, Nm(tolerance_nm))
            }
            Remedy::OtherFracture { method } => cut(
                fracturer(method, self.terms).as_ref(),
                &distinct.figure,
                setup.tolerance,
            ),
            Remedy::Smoother { radius_nm } => cut(
                own.as_ref(),
                &smooth(&distinct.figure, Nm(radius_nm))?,
                setup.tolerance,
            ),
            Remedy::CoarserStaircase { within_nm } => {
                let plain = Staircase {
                    within: Nm(within_nm),
                };
                cut(&plain, &distinct.figure, setup.tolerance)
            }
            Remedy::OtherDose { dose } => {
                let shots = now.fracture.shots.shots().iter();
                let shots = shots
                    .map(|shot| Shot {
                        dose: shot.dose * dose,
                        ..*shot
                    })
                    .collect();
                Some(Fracture {
                    shots: ShotList::new(now.fracture.shots.address(), shots),
                    ..now.fracture.clone()
                })
            }
        }
    }

    /// How these shots print the figure as drawn, beside the neighbours' as they are.
    fn judged(&self, subject: &Subject, fracture: &Fracture) -> Fidelity {
        let mask = self.clips[subject.clip].mask;
        let blur = self.basis.setup.blur;
        let of = |other: usize, window: Rect| match &self.fractures[subject.clip][other] {
            _ if other == subject.figure => fracture.shots.rects().collect(),
            Ok(fracture) => fracture.shots.rects().collect(),
            Err(Unmade::NotDrawn) => made::stand_in(&mask.figures[other].figure, window, blur),
            Err(Unmade::Fracture(_)) => Vec::new(),
        };
        let scene = Scene::with(
            mask,
            &self.standings[subject.clip],
            subject.figure,
            blur,
            of,
        );
        let figure = &self.distinct(subject).figure;
        judge::judge(figure, &scene.neighbours, &scene.dose, &self.basis.settings)
    }

    /// Flashing and settling at all places, on the field where clips stand for one.
    fn seconds(&self, subject: &Subject, fracture: &Fracture) -> Result<f64, WriteTimeError> {
        let clip = &self.clips[subject.clip];
        let portions = exposure::evenly(self.distinct(subject), &fracture.shots, subject.dose);
        let placed = hours::placed(&portions);
        let (borders, spacing) = hours::borders(clip, self.terms.field);
        let sums = Sums::new(self.terms.profile, &placed, borders, spacing)?;
        Ok(sums.time(self.terms.profile).0 * clip.copies_exactly(self.terms.field))
    }

    /// The shortest list of changes, most seconds first, that brings the mask into the slot.
    ///
    /// A figure cannot save more than it takes. So with figures taken in the order of their seconds, the list is known to be the shortest as
    /// soon as its least saving is more than the seconds of the next figure.
    fn must_change(
        &self,
        slot: Hours,
        all: &[Subject],
        tried: &mut Tried,
    ) -> Result<Option<MustChange>, QuoteError> {
        let beamless = hours::beamless(self.clips, self.terms)?;
        if beamless > slot {
            return Ok(Some(self.quoted_again(
                slot,
                &[],
                Reach::Beamless(beamless),
            )?));
        }
        let mut done = 0;
        loop {
            let changes = best(tried);
            let needed = self.fewest(slot, &changes)?;
            let next = all.get(done).map_or(0.0, |subject| subject.seconds);
            let shortest = match needed {
                Some(n) => changes
                    .get(n - 1)
                    .is_some_and(|last| last.change.trial.saved_s >= next),
                None => next <= 0.0,
            };
            if shortest || done >= all.len().min(MOST_CHANGED) {
                let n = needed.unwrap_or(changes.len());
                let reach = if shortest || done >= all.len() {
                    Reach::All
                } else {
                    Reach::Some {
                        tried: done,
                        of: all.len(),
                    }
                };
                return Ok(Some(self.quoted_again(slot, &changes[..n], reach)?));
            }
            let few: Vec<&Subject> = all[done..]
                .iter()
                .take(16.min(MOST_CHANGED - done))
                .collect();
            done += few.len();
            let few: Vec<&Subject> = few
                .into_iter()
                .filter(|s| !tried.contains_key(&s.key()))
                .collect();
            tried.append(&mut self.try_all(&few)?);
        }
    }

    /// How many of the changes it takes; `None` if all are too few.
    fn fewest(&self, slot: Hours, changes: &[Fix<'_>]) -> Result<Option<usize>, QuoteError> {
        let fits = |n: usize| -> Result<bool, QuoteError> {
            Ok(self.timed(&changes[..n])?.high_h <= slot.0)
        };
        if changes.is_empty() || !fits(changes.len())? {
            return Ok(None);
        }
        let (mut too_few, mut enough) = (0, changes.len());
        while enough - too_few > 1 {
            let middle = (too_few + enough) / 2;
            if fits(middle)? {
                enough = middle
            } else {
                too_few = middle
            }
        }
        Ok(Some(enough))
    }

    /// The shots of all figures with the changes made; not judged.
    fn changed(&self, fixes: &[Fix<'_>]) -> Vec<Vec<Result<Fracture, Unmade>>> {
        let mut fractures = self.fractures.clone();
        for fix in fixes {
            let at = usize::try_from(fix.change.clip)
                .ok()
                .and_then(|clip| fractures.get_mut(clip - 1));
            let slot = at.and_then(|all| all.get_mut(usize::try_from(fix.change.figure).ok()?));
            if let Some(slot) = slot {
                *slot = Ok(fix.fracture.clone());
            }
        }
        fractures
    }

    /// Hours with the changes made.
    fn timed(&self, fixes: &[Fix<'_>]) -> Result<super::result::Hours, QuoteError> {
        let unjudged = |fracture: Result<Fracture, Unmade>| {
            fracture.map(|fracture| Made {
                fracture,
                fidelity: Fidelity::default(),
                peak: self.basis.correction.dose,
            })
        };
        let made: Vec<MadeMask> = self
            .changed(fixes)
            .into_iter()
            .map(|all| all.into_iter().map(unjudged).collect())
            .collect();
        self.hours_of(&made)
    }

    fn hours_of(&self, made: &[MadeMask]) -> Result<super::result::Hours, QuoteError> {
        self.hours_at(&self.exposed(made)?)
    }

    fn exposed<'m>(&self, made: &'m [MadeMask]) -> Result<Vec<Exposed<'m>>, QuoteError>
    where
        'a: 'm,
    {
        let lists: Vec<&MadeMask> = made.iter().collect();
        LongRange::new(self.terms.profile).expose_clips(self.clips, &lists)
    }

    fn hours_at(&self, exposed: &[Exposed<'_>]) -> Result<super::result::Hours, QuoteError> {
        let written = Written::new(self.clips, exposed, self.terms.field);
        let profile = self.terms.profile;
        let map = DoseMap::all(exposed.iter().filter_map(|of_clip| of_clip.map.as_ref()));
        let even = uncertain::of_map(self.basis.correction, map)?;
        let hours = written.hours(profile)?.0;
        uncertain::widened(hours, &written, profile, even)
    }

    /// The mask quoted with the changes made: timed and judged anew.
    fn quoted_again(
        &self,
        slot: Hours,
        fixes: &[Fix<'_>],
        reach: Reach,
    ) -> Result<MustChange, QuoteError> {
        let judged: Vec<MadeMask> = self
            .changed(fixes)
            .into_iter()
            .zip(self.clips)
            .map(|(fractures, clip)| {
                made::judge(clip.mask, fractures, &self.basis.settings, &|| ())
            })
            .collect();
        let doses = self.exposed(&judged)?;
        let hours = self.hours_at(&doses)?;
        let parts: Vec<summary::Part<'_>> = self
            .clips
            .iter()
            .zip(&judged)
            .zip(&doses)
            .map(|((clip, made), exposed)| summary::Part {
                figures: &clip.mask.figures,
                made,
                exposed,
                weight: if self.clips.len() > 1 {
                    clip.copies(self.terms.field)
                } else {
                    1
                },
            })
            .collect();
        let after: FractureSummary = summary::of_parts(
            &parts,
            self.basis.settings.background,
            self.basis.setup.limits.sliver,
        );
        let fits = hours.fits(slot.0);
        let missing = Some(hours.high_h - slot.0).filter(|missing| *missing > 0.0);
        Ok(MustChange {
            method: self.method,
            changes: fixes.iter().map(|fix| fix.change).collect(),
            hours_after: hours,
            fits_after: fits,
            missing_h: missing,
            edge_error_after_nm: after.edge_error_nm,
            figures_out_of_tolerance_after: after.figures_out_of_tolerance.unwrap_or_default(),
            sentence: sentence(slot, fixes, &hours, missing, reach),
        })
    }
}

fn sentence(
    slot: Hours,
    fixes: &[Fix<'_>],
    hours: &super::result::Hours,
    missing: Option<f64>,
    reach: Reach,
) -> String {
    let saved: f64 = fixes.iter().map(|fix| fix.change.trial.saved_s).sum();
    let with = format!(
        "with {} changed it takes {} h (up to {} h), {} h less",
        figures(fixes.len()),
        number(hours.total_h),
        number(hours.high_h),
        number(saved / 3600.0)
    );
    let tried = match reach {
        Reach::Some { tried, of } => {
            format!("; remedies were tried on the {tried} figures of the most seconds, of {of}")
        }
        Reach::All | Reach::Beamless(_) => String::new(),
    };
    match (missing, reach) {
        (_, Reach::Beamless(hours)) => out_of_reach(slot, hours),
        (None, _) => format!(
            "To fit the slot of {} h {} must change: {with}{tried}.",
            number(slot.0),
            figures(fixes.len())
        ),
        (Some(missing), _) => format!(
            "No remedies bring it into the slot of {} h: {with}, and {} h are still missing{tried}.",
            number(slot.0),
            number(missing)
        ),
    }
}

/// That the writer is too slow whatever it writes.
fn out_of_reach(slot: Hours, beamless: Hours) -> String {
    format!(
        "No change of figures brings it into the slot of {} h: without a single flash it takes {} h, {} h too many.",
        number(slot.0),
        number(beamless.0),
        number(beamless.0 - slot.0)
    )
}

/// The best remedy of each figure, most seconds saved first.
fn best(tried: &Tried) -> Vec<Fix<'_>> {
    let of = |tested: &'_ Tested| -> Option<usize> {
        let trials = tested.remedies.trials.iter().enumerate();
        let useful = trials.filter(|(_, trial)| trial.acceptable && trial.saved_s > 0.0);
        // The first of equals: what is changed least comes first.
        let best = useful.fold(None::<(usize, &Trial)>, |best, (i, trial)| match best {
            Some((at, best)) if best.saved_s >= trial.saved_s => Some((at, best)),
            _ => Some((i, trial)),
        });
        best.map(|(i, _)| i)
    };
    let mut fixes: Vec<Fix<'_>> = tried
        .values()
        .filter_map(|tested| Some((tested, of(tested)?)))
        .map(|(tested, i)| Fix {
            change: Change {
                clip: tested.remedies.clip,
                figure: tested.remedies.figure,
                trial: tested.remedies.trials[i],
            },
            fracture: &tested.fractures[i],
        })
        .collect();
    fixes.sort_by(|a, b| {
        let (a, b) = (&a.change, &b.change);
        let order = b.trial.saved_s.total_cmp(&a.trial.saved_s);
        order.then((a.clip, a.figure).cmp(&(b.clip, b.figure)))
    });
    fixes
}

/// How far the search for changes went.
#[derive(Clone, Copy, Debug)]
enum Reach {
    /// Nothing to search for: this is taken without a single flash.
    Beamless(Hours),
    /// As far as it matters.
    All,
    /// Only so many figures were tried.
    Some { tried: usize, of: usize },
}

/// How many figures, in words.
fn figures(n: usize) -> String {
    if n == 1 {
        "1 figure".to_owned()
    } else {
        format!("{n} figures")
    }
}

/// Convex corners and bumps rounded by opening, concave ones by closing; `None` where less or more than one figure is left.
fn smooth(figure: &Figure, radius: Nm) -> Option<Figure> {
    let r = radius.to_pm()?;
    let opened = offset(&offset(std::slice::from_ref(figure), -r), r);
    let closed = offset(&offset(&opened, r), -r);
    match <[Figure; 1]>::try_from(closed) {
        Ok([one]) => Some(one),
        Err(_) => None,
    }
}
