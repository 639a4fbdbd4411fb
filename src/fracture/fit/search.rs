//! From a first guess to shots that print: relax, reduce, check, repair, snap.

use std::rc::Rc;

use crate::blur::{REACH, THRESHOLD};
use crate::fracture::{DoseLevels, Fracture, Job, Miss};
use crate::shot::ShotList;
use crate::target::{Target, Violation};
use crate::units::Dose;

use super::core::Core;
use super::field::Boxes;
use super::model::{Bins, Flash, Model};
use super::reduce::{Budget, reduce};
use super::relax::{mend, offenders, relax, widen};
use super::samples::{ContextDose, Sample, samples_of};
use super::snap::{check, piles, shots, snap, unfit};
use super::solve::{Rules, Solver};

/// A job with all that its fits share.
pub(in crate::fracture) struct Setting<'a> {
    pub(in crate::fracture) job: &'a Job<'a>,
    pub(in crate::fracture) target: Target,
    pub(in crate::fracture) context: ContextDose,
    pub(in crate::fracture) samples: Vec<Sample>,
    /// What fills a wide figure deep inside.
    pub(in crate::fracture) core: Option<Rc<Core>>,
    doses: Doses,
}

/// What is asked of doses besides the print rule.
#[derive(Clone, Copy, Debug, Default)]
pub(in crate::fracture) struct Doses {
    /// Doses that a shot may have.
    pub(in crate::fracture) levels: DoseLevels,
    /// No place may get more.
    pub(in crate::fracture) peak: Option<Dose>,
}

/// Shots on the address grid and the places where they break the rule.
#[derive(Clone, Debug)]
pub(in crate::fracture) struct Fit {
    pub(in crate::fracture) shots: ShotList,
    pub(in crate::fracture) violations: Vec<Violation>,
    /// Shots outside the limits, or tiles on another.
    pub(in crate::fracture) unfit: Vec<Flash>,
    /// Shots let be slivers, and that are.
    pub(in crate::fracture) slivers: usize,
    /// Places of more dose than is allowed anywhere, with it.
    pub(in crate::fracture) piles: Vec<([f64; 2], f64)>,
}

impl Fit {
    /// How much is wrong: nothing when it prints and can be written.
    pub(in crate::fracture) fn faults(&self) -> usize {
        self.violations.len() + self.unfit.len() + self.piles.len()
    }

    /// The less the better: fewer faults, then fewer slivers, then fewer shots.
    fn rank(&self) -> (usize, usize, usize) {
        (self.faults(), self.slivers, self.shots.len())
    }
}

impl Doses {
    /// What the fit holds the dose under: with something to spare, but no less than half of what the peak leaves over the
    /// dose 1 of a wide shot.
    fn cap(&self) -> Option<f64> {
        let spare = |peak: f64| (0.5 * (peak - 1.0)).clamp(0.0, 2.0 * f64::from(GUARD));
        self.peak
            .map(|Dose(peak)| peak - spare(peak) + f64::from(GUARD))
    }
}

/// Dose to spare at every sample. Rounding three sides to a tenth of a nanometre moves the dose by up to
/// `3·0.05·0.4/σ = 0.005` at σ = 12; what lies between samples is caught by the check.
const GUARD: f32 = 0.004;

/// Least distance of the places that one check adds to the samples, σ: many next to one another weigh no more than the worst of them.
const APART: f64 = 0.2;

/// Rounds of check and repair without less that is wrong after them; and where most shots are off the limits, as in a comb finer than
/// the blur, which would go on for long.
const STALE_REPAIRS: [usize; 2] = [6, 1];

/// Rounds of check and repair of a figure of one shot, and for how many shots there is one more: the longer a figure, the more
/// rounds until its last place holds.
const REPAIRS: (usize, usize) = (10, 50);

impl<'a> Setting<'a> {
    pub(in crate::fracture) fn new(job: &'a Job<'a>) -> Self {
        Self::with(job, Doses::default())
    }

    pub(in crate::fracture) fn with(job: &'a Job<'a>, doses: Doses) -> Self {
        Self::about(job, doses, |_| true)
    }

    /// For shots made before: without a core that they do not have.
    pub(in crate::fracture) fn of_shots(job: &'a Job<'a>, doses: Doses, shots: &ShotList) -> Self {
        Self::about(job, doses, |core| core.is_among(shots))
    }

    fn about(job: &'a Job<'a>, doses: Doses, wanted: impl FnOnce(&Core) -> bool) -> Self {
        let target = Target::new(job.figure, job.blur, job.tolerance);
        let context = ContextDose::of(job, &target);
        let core = Core::of(&target, job.blur.sigma().0, &job.limits).filter(wanted);
        let samples = samples_of(&target, job.blur, &context, core.as_ref(), doses.cap());
        Self {
            job,
            target,
            context,
            samples,
            core: core.map(Rc::new),
            doses,
        }
    }

    pub(in crate::fracture) fn sigma(&self) -> f64 {
        self.job.blur.sigma().0
    }

    /// Shots made elsewhere, with the places where they break the rule.
    pub(in crate::fracture) fn judged(&self, shots: ShotList) -> Fracture {
        let mut model = Model::new(self.target.bounds(), self.sigma(), Vec::new());
        for (slot, shot) in shots.rects().enumerate() {
            model.place(slot, Some(Flash::from(shot)));
        }
        let violations = self.broken(&model, None);
        let unfit = unfit(&model, &self.job.limits, false);
        let peak = self.doses.peak;
        let piles = peak.map_or_else(Vec::new, |peak| piles(&model, &self.context, peak.0));
        self.reported(Some(Fit {
            shots,
            violations,
            unfit,
            slivers: 0,
            piles,
        }))
    }

    /// Where the shots of a model break the rule; only in some boxes if there are any.
    fn broken(&self, model: &Model, boxes: Option<&[[f64; 4]]>) -> Vec<Violation> {
        check(
            &self.target,
            model,
            &self.context,
            self.core.as_deref(),
            boxes,
        )
    }

    /// Shots found before, moved to where they print; the rest of what was said of them is kept.
    pub(in crate::fracture) fn refit(
        &self,
        shots: &ShotList,
        disjoint: bool,
        budget: Budget,
    ) -> Option<Fracture> {
        let limits = &self.job.limits;
        let [sliver, least] = self.least_sides();
        let least = if shots.slivers(limits.sliver) > 0 {
            least
        } else {
            sliver
        };
        let start = shots.rects().map(Flash::from);
        let start: Vec<Flash> = start
            .filter(|f| self.core.as_ref().is_none_or(|core| !core.holds(f)))
            .collect();
        let attempt = self.attempt(&start, disjoint, [least; 2], budget);
        best_of(vec![attempt]).map(|fit| self.reported(Some(fit)))
    }

    /// A fit as the result of a fracture; without one, no shots and every sample that must print as a miss.
    pub(in crate::fracture) fn reported(&self, fit: Option<Fit>) -> Fracture {
        let fit = fit.unwrap_or_else(|| Fit {
            shots: ShotList::new(self.job.limits.address, Vec::new()),
            violations: self.samples.iter().filter_map(Sample::unprinted).collect(),
            unfit: Vec::new(),
            slivers: 0,
            piles: Vec::new(),
        });
        let broken = fit
            .violations
            .iter()
            .map(|v| Miss::of(v, &self.target, self.job.blur));
        let unfit = fit.unfit.iter().map(|f| Miss::unfit(f.side, Dose(f.dose)));
        let piles = fit.piles.iter().map(|&(p, dose)| Miss::pile(p, dose));
        let misses = broken.chain(unfit).chain(piles).collect();
        Fracture {
            shots: fit.shots,
            misses,
            lower_bound: None,
            notes: Vec::new(),
        }
    }

    /// What `fit` finds without slivers (it is given the least side, nm); where that does not print and slivers may be written, the
    /// better of that and of what it finds with them. Slivers left are said in a note.
    pub(in crate::fracture) fn staged(&self, fit: impl Fn(f64) -> Option<Fit>) -> Fracture {
        let [sliver, least] = self.least_sides();
        let missed = |f: &Option<Fit>| f.as_ref().map_or(usize::MAX, Fit::faults);
        let mut best = fit(sliver);
        if least < sliver && missed(&best) > 0 {
            let found = fit(least);
            if missed(&found) < missed(&best) {
                best = found;
            }
        }
        self.said(best)
    }

    /// A fit as the result of a fracture, with the slivers left in it said in a note.
    pub(in crate::fracture) fn said(&self, fit: Option<Fit>) -> Fracture {
        let mut fracture = self.reported(fit);
        let slivers = fracture.shots.slivers(self.job.limits.sliver);
        if slivers > 0 {
            fracture.notes.push(format!(
                "{slivers} slivers: nothing without them was found to print"
            ));
        }
        fracture
    }

    /// Least sides (nm) that keep off slivers and that keep the limits, one address more so that rounding cannot undercut them.
    pub(in crate::fracture) fn least_sides(&self) -> [f64; 2] {
        let limits = &self.job.limits;
        let unit = limits.address.nm().0;
        [
            limits.sliver.0.max(limits.least_side.0) + unit,
            limits.least_side.0 + unit,
        ]
    }

    /// Shots that start as `start`, moved to where the rule holds if moving them can bring that about.
    ///
    /// No side is under the first of `least` (nm), and under the second only of shots let be slivers where nothing else mends a place.
    pub(in crate::fracture) fn attempt(
        &self,
        start: &[Flash],
        disjoint: bool,
        least: [f64; 2],
        budget: Budget,
    ) -> Attempt<'_> {
        let limits = &self.job.limits;
        let rules = Rules {
            least_side: least[0],
            slim_side: least[1],
            // One address off, so that rounding cannot overstep it; `least` likewise.
            greatest_side: limits.greatest_side.0 - limits.address.nm().0,
            disjoint,
            guard: GUARD,
            levels: self.doses.levels,
        };
        let mut solver = Solver::new(self.sigma(), rules);
        let mut model = Model::new(self.target.bounds(), self.sigma(), self.samples.clone());
        // One by one: each then costs only what is near it.
        for &shot in self.core.iter().flat_map(|core| core.shots()) {
            let slot = model.slots();
            solver.set(&mut model, slot, Some(shot));
        }
        model.fix();
        for flash in start.iter().flat_map(|f| f.parts(rules.greatest_side)) {
            let slot = model.slots();
            solver.set(&mut model, slot, Some(flash));
        }
        let holds = relax(&mut model, &mut solver, budget.window);
        Attempt {
            setting: self,
            model,
            solver,
            budget,
            holds,
        }
    }
}

/// Shots on their way from a first guess to a fit.
pub(in crate::fracture) struct Attempt<'s> {
    setting: &'s Setting<'s>,
    model: Model,
    solver: Solver,
    budget: Budget,
    /// The rule holds at every sample.
    pub(in crate::fracture) holds: bool,
}

impl Attempt<'_> {
    /// The shots as they are now, those of the core left out.
    pub(in crate::fracture) fn flashes(&self) -> Vec<Flash> {
        self.model.movable().map(|(_, flash)| flash).collect()
    }

    /// How many shots there are.
    pub(in crate::fracture) fn count(&self) -> usize {
        self.model.flashes().count()
    }

    /// How many shots would have to do better for the rule to hold at all samples.
    pub(in crate::fracture) fn wrong(&self) -> usize {
        offenders(&self.model, &self.solver).len()
    }

    /// How many shots may be slivers and are.
    pub(in crate::fracture) fn slivers(&self) -> usize {
        let least = self.solver.rules.least_side;
        let slim = |f: &Flash| f.length(0).min(f.length(1)) < least;
        self.model
            .flashes()
            .filter(|(_, f)| f.slim && slim(f))
            .count()
    }

    /// Adds shots until the rule holds at the samples, as far as a few can bring that about; slivers only if nothing else does.
    pub(in crate::fracture) fn mend(&mut self) {
        let Self {
            model,
            solver,
            budget,
            ..
        } = self;
        let most = 4 + model.movable().count() / 4;
        let slim = solver.rules.slim_side < solver.rules.least_side;
        self.holds = mend(model, solver, budget.window, most, false)
            || (slim && mend(model, solver, budget.window, most, true));
    }

    /// Takes shots away where the rule holds around them, and makes slivers wider where it does.
    pub(in crate::fracture) fn reduce(&mut self) {
        let all: Vec<usize> = self.model.movable().map(|(slot, _)| slot).collect();
        reduce(&mut self.model, &mut self.solver, self.budget, &all);
        widen(&mut self.model, &mut self.solver, self.budget.window);
    }

    /// Check, repair what the samples did not see, snap, and check again what is then really flashed: all of it once, then what
    /// a repair changed.
    pub(in crate::fracture) fn finish(mut self) -> Fit {
        let setting = self.setting;
        let all: Vec<usize> = self.model.movable().map(|(slot, _)| slot).collect();
        let mut snapped = self.model.clone();
        snap(
            &mut snapped,
            &mut self.solver,
            setting.job.limits.address,
            &all,
        );
        let violations = setting.broken(&snapped, None);
        let mut fit = self.fit(&snapped, violations);
        let mut best = fit.clone();
        let mut stale = 0;
        let lost = 2 * fit.unfit.len() > fit.shots.len();
        let patience = STALE_REPAIRS[usize::from(lost)];
        // Shots were added that nobody tried to do without.
        let mut loose = false;
        for _ in 1..REPAIRS.0 + all.len() / REPAIRS.1 {
            let holds = fit.faults() == 0;
            if (holds && !loose) || stale == patience {
                break;
            }
            for sample in self.asked(&fit) {
                self.model.add_sample(sample);
                snapped.add_sample(sample);
            }
            let before: Vec<Option<Flash>> = self.model.all().to_vec();
            if holds {
                self.reduce();
                loose = false;
            } else {
                self.repair(&mut loose);
            }
            let boxes = self.snap_moved(&before, &mut snapped);
            let part = Boxes::only(boxes.clone(), setting.sigma());
            let mut violations = fit.violations;
            violations.retain(|v| !part.holds(v.place));
            violations.extend(setting.broken(&snapped, Some(&boxes)));
            fit = self.fit(&snapped, violations);
            stale += 1;
            if fit.rank() < best.rank() {
                best = fit.clone();
                stale = 0;
            }
        }
        best
    }

    /// Shots on the address grid as a fit, with what is wrong besides the `violations` found.
    fn fit(&self, snapped: &Model, violations: Vec<Violation>) -> Fit {
        let Setting {
            job,
            context,
            doses,
            ..
        } = self.setting;
        Fit {
            shots: shots(snapped, job.limits.address),
            violations,
            unfit: unfit(snapped, &job.limits, self.solver.rules.disjoint),
            slivers: self.slivers(),
            piles: doses
                .peak
                .map_or_else(Vec::new, |peak| piles(snapped, context, peak.0)),
        }
    }

    /// What is wrong with a fit as samples to hold the shots to.
    fn asked(&self, fit: &Fit) -> Vec<Sample> {
        let Setting { context, doses, .. } = self.setting;
        let broken = thinned(&fit.violations, APART * self.setting.sigma());
        let mut more: Vec<Sample> = broken
            .iter()
            .map(|v| Sample::new(v.place, v.need, context))
            .collect();
        if let Some(cap) = doses.cap() {
            let piles = fit.piles.iter();
            more.extend(piles.map(|&(p, _)| Sample::under(p, cap, context)));
        }
        more
    }

    /// Brings the shots that are no longer as `before` to the address grid anew; the boxes in which the dose changed by that.
    fn snap_moved(&mut self, before: &[Option<Flash>], snapped: &mut Model) -> Vec<[f64; 4]> {
        let moved: Vec<usize> = changed(before, self.model.all());
        let flashed: Vec<Option<Flash>> = snapped.all().to_vec();
        // Out first, so that what comes finds the place free.
        for &slot in &moved {
            self.solver.set(snapped, slot, None);
        }
        for &slot in &moved {
            self.solver.set(snapped, slot, self.model.get(slot));
        }
        let address = self.setting.job.limits.address;
        snap(snapped, &mut self.solver, address, &moved);
        let reach = REACH * self.setting.sigma();
        changed(&flashed, snapped.all())
            .into_iter()
            .flat_map(|slot| [flashed.get(slot).copied().flatten(), snapped.get(slot)])
            .flatten()
            .map(|f| f.grown(reach).side)
            .collect()
    }

    /// Moves shots to where the rule holds at all samples; where that does not do, adds one or two and takes away what they make
    /// needless. `loose`: some that were added stay without a look at what they make needless.
    fn repair(&mut self, loose: &mut bool) {
        let Self {
            model,
            solver,
            budget,
            ..
        } = self;
        if relax(model, solver, budget.window.max(10)) {
            return;
        }
        let before: Vec<Option<Flash>> = model.all().to_vec();
        let most = 2 + model.movable().count() / 32;
        let slim = solver.rules.slim_side < solver.rules.least_side;
        let mended = mend(model, solver, budget.window, most, false)
            || (slim && mend(model, solver, budget.window, most, true));
        if !mended {
            *loose = true;
        } else if *loose {
            self.reduce();
            *loose = false;
        } else {
            let moved = changed(&before, model.all());
            reduce(model, solver, *budget, &moved);
            widen(model, solver, budget.window);
        }
    }
}

/// The worst of the places where the rule is broken, none nearer to another than `apart` nm.
fn thinned(violations: &[Violation], apart: f64) -> Vec<Violation> {
    let mut worst = violations.to_vec();
    // Those as bad as one another in the order found.
    worst.sort_by(|a, b| {
        (b.dose - THRESHOLD)
            .abs()
            .total_cmp(&(a.dose - THRESHOLD).abs())
    });
    let at = |p: [f64; 2]| Flash::new([p[0], p[1], p[0], p[1]]);
    let Some(hull) = worst.iter().map(|v| at(v.place)).reduce(|a, b| a.hull(&b)) else {
        return worst;
    };
    let mut taken = Bins::new(hull.side, 8.0 * apart);
    let mut kept: Vec<Violation> = Vec::new();
    for v in worst {
        let [x, y] = v.place;
        let clash = taken.items(at(v.place).grown(apart).side).any(|id| {
            let [u, w] = kept[id as usize].place;
            (u - x).powi(2) + (w - y).powi(2) < apart * apart
        });
        if !clash {
            taken.insert(u32::try_from(kept.len()).unwrap_or(u32::MAX), v.place);
            kept.push(v);
        }
    }
    kept
}

/// Slots that do not hold the same shot in both lists, ascending.
fn changed(before: &[Option<Flash>], after: &[Option<Flash>]) -> Vec<usize> {
    (0..before.len().max(after.len()))
        .filter(|&slot| before.get(slot).copied().flatten() != after.get(slot).copied().flatten())
        .collect()
}

/// The best of several attempts: reduced, and the one with fewest shots that really prints; else the one that misses least.
///
/// Those that do not hold are mended only when none does, the nearest first and until one holds. `None` without an attempt.
pub(in crate::fracture) fn best_of(mut attempts: Vec<Attempt<'_>>) -> Option<Fit> {
    attempts.sort_by_cached_key(|a| (!a.holds, a.wrong()));
    if attempts.first().is_some_and(|a| !a.holds) {
        for attempt in &mut attempts {
            attempt.mend();
            if attempt.holds && attempt.slivers() == 0 {
                break;
            }
        }
    }
    if attempts.iter().any(|a| a.holds) {
        attempts.retain(|a| a.holds);
    }
    attempts.iter_mut().for_each(Attempt::reduce);
    attempts.sort_by_key(|a| (a.slivers(), a.count()));
    let mut best: Option<Fit> = None;
    for attempt in attempts {
        // Repairs may have added shots: only an attempt with fewer can still do better.
        if best.as_ref().is_some_and(|b| {
            b.faults() == 0 && (b.slivers, b.shots.len()) <= (attempt.slivers(), attempt.count())
        }) {
            break;
        }
        let fit = attempt.finish();
        if best.as_ref().is_none_or(|b| fit.rank() < b.rank()) {
            best = Some(fit);
        }
    }
    best
}
