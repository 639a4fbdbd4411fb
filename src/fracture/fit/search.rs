//! From a first guess to shots that print: relax, reduce, check, repair, snap.

use crate::fracture::overlap::DoseLevels;
use crate::fracture::{Fracture, Job, Miss};
use crate::shot::ShotList;
use crate::target::{Target, Violation};
use crate::units::Dose;

use super::model::{Flash, Model};
use super::reduce::{Budget, reduce};
use super::relax::{mend, relax};
use super::samples::{ContextDose, Sample, samples_of};
use super::snap::{check, piles, shots, snap, unfit};
use super::solve::{Rules, Solver};

/// A job with all that its fits share.
pub(in crate::fracture) struct Setting<'a> {
    pub(in crate::fracture) job: &'a Job<'a>,
    pub(in crate::fracture) target: Target,
    pub(in crate::fracture) context: ContextDose,
    pub(in crate::fracture) samples: Vec<Sample>,
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
    /// Places of more dose than is allowed anywhere, with it.
    pub(in crate::fracture) piles: Vec<([f64; 2], f64)>,
}

impl Fit {
    /// How much is wrong: nothing when it prints and can be written.
    fn faults(&self) -> usize {
        self.violations.len() + self.unfit.len() + self.piles.len()
    }

    /// The less the better: fewer faults, then fewer shots.
    fn rank(&self) -> (usize, usize) {
        (self.faults(), self.shots.len())
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

/// Rounds of check and repair.
const REPAIRS: usize = 10;

impl<'a> Setting<'a> {
    pub(in crate::fracture) fn new(job: &'a Job<'a>) -> Self {
        Self::with(job, Doses::default())
    }

    pub(in crate::fracture) fn with(job: &'a Job<'a>, doses: Doses) -> Self {
        let target = Target::new(job.figure, job.blur, job.tolerance);
        let context = ContextDose::of(job);
        let samples = samples_of(&target, job.blur, &context, doses.cap());
        Self {
            job,
            target,
            context,
            samples,
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
        let violations = check(&self.target, &model, &self.context);
        let unfit = unfit(&model, &self.job.limits, false);
        let peak = self.doses.peak;
        let piles = peak.map_or_else(Vec::new, |peak| piles(&model, &self.context, peak.0));
        self.reported(Some(Fit {
            shots,
            violations,
            unfit,
            piles,
        }))
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
        let start: Vec<Flash> = shots.rects().map(Flash::from).collect();
        let attempt = self.attempt(&start, disjoint, least, budget);
        best_of(vec![attempt], true).map(|fit| self.reported(Some(fit)))
    }

    /// A fit as the result of a fracture; without one, no shots and every sample that must print as a miss.
    pub(in crate::fracture) fn reported(&self, fit: Option<Fit>) -> Fracture {
        let fit = fit.unwrap_or_else(|| Fit {
            shots: ShotList::new(self.job.limits.address, Vec::new()),
            violations: self.samples.iter().filter_map(Sample::unprinted).collect(),
            unfit: Vec::new(),
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

    /// What `fit` finds at the first of some stages that prints, else at the one that misses least.
    ///
    /// A stage is skipped when it asks for no less than the one before. Slivers left are said in a note.
    pub(in crate::fracture) fn staged(
        &self,
        stages: &[Stage],
        fit: impl Fn(Stage) -> Option<Fit>,
    ) -> Fracture {
        let mut best: Option<Fit> = None;
        for (i, &stage) in stages.iter().enumerate() {
            if i > 0 && stages[i - 1] == stage {
                continue;
            }
            let found = fit(stage);
            let missed = |f: &Option<Fit>| f.as_ref().map_or(usize::MAX, Fit::faults);
            if missed(&found) < missed(&best) {
                best = found;
            }
            if missed(&best) == 0 {
                break;
            }
        }
        let mut fracture = self.reported(best);
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

    /// Shots that start as `start`, no side under `least` nm, moved to where the rule holds if moving them can bring that about.
    pub(in crate::fracture) fn attempt(
        &self,
        start: &[Flash],
        disjoint: bool,
        least: f64,
        budget: Budget,
    ) -> Attempt<'_> {
        let limits = &self.job.limits;
        let rules = Rules {
            least_side: least,
            // One address off, so that rounding cannot overstep it; `least` likewise.
            greatest_side: limits.greatest_side.0 - limits.address.nm().0,
            disjoint,
            guard: GUARD,
            levels: self.doses.levels,
        };
        let mut solver = Solver::new(self.sigma(), rules);
        let mut model = Model::new(self.target.bounds(), self.sigma(), self.samples.clone());
        let start: Vec<Flash> = start
            .iter()
            .flat_map(|f| f.parts(rules.greatest_side))
            .collect();
        solver.score(&model, &[], &start);
        solver.commit(&mut model, &[], &start);
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
    /// How many shots there are.
    pub(in crate::fracture) fn count(&self) -> usize {
        self.model.flashes().count()
    }

    /// The worst miss of the rule at the samples, in dose.
    pub(in crate::fracture) fn worst(&self) -> f64 {
        self.model.worst()
    }

    /// Adds shots until the rule holds at the samples, as far as a few can bring that about.
    pub(in crate::fracture) fn mend(&mut self) {
        let most = 4 + self.count() / 4;
        self.holds = mend(&mut self.model, &mut self.solver, self.budget.window, most);
    }

    /// Takes shots away where the rule holds around them.
    pub(in crate::fracture) fn reduce(&mut self) {
        reduce(&mut self.model, &mut self.solver, self.budget);
    }

    /// Check, repair what the samples did not see, snap, and check again what is then really flashed.
    pub(in crate::fracture) fn finish(mut self) -> Fit {
        let address = self.setting.job.limits.address;
        let Doses { peak, .. } = self.setting.doses;
        let mut best: Option<Fit> = None;
        // Shots were added that nobody tried to do without.
        let mut loose = false;
        for _ in 0..REPAIRS {
            let mut snapped = self.model.clone();
            snap(&mut snapped, &mut self.solver, address);
            let violations = check(&self.setting.target, &snapped, &self.setting.context);
            for v in &violations {
                self.model
                    .add_sample(Sample::new(v.place, v.need, &self.setting.context));
            }
            let piles = peak.map_or_else(Vec::new, |peak| {
                piles(&snapped, &self.setting.context, peak.0)
            });
            if let Some(cap) = self.setting.doses.cap() {
                for &(place, _) in &piles {
                    self.model
                        .add_sample(Sample::under(place, cap, &self.setting.context));
                }
            }
            let unfit = unfit(
                &snapped,
                &self.setting.job.limits,
                self.solver.rules.disjoint,
            );
            let fit = Fit {
                shots: shots(&snapped, address),
                violations,
                unfit,
                piles,
            };
            let holds = fit.faults() == 0;
            if best.as_ref().is_none_or(|b| fit.rank() < b.rank()) {
                best = Some(fit);
            }
            if holds && !loose {
                break;
            }
            let Self {
                model,
                solver,
                budget,
                ..
            } = &mut self;
            if holds {
                reduce(model, solver, *budget);
                loose = false;
            } else if !relax(model, solver, budget.window.max(10)) {
                loose = !mend(model, solver, budget.window, 2);
                if !loose {
                    reduce(model, solver, *budget);
                }
            }
        }
        best.unwrap_or_else(|| unreachable!("at least one round was made"))
    }
}

/// What a search asks of its shots; nm.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::fracture) struct Stage {
    /// No slab of the start is lower than this.
    pub(in crate::fracture) start: f64,
    /// No side is less than this.
    pub(in crate::fracture) least: f64,
    /// Whether shots are added where moving them does not do.
    pub(in crate::fracture) mend: bool,
}

/// The best of several attempts: reduced, and the one with fewest shots that really prints; else the one that misses least.
///
/// Those that do not hold are mended only when none does, the nearest first and until one holds; `None` if that is not wanted.
pub(in crate::fracture) fn best_of(mut attempts: Vec<Attempt<'_>>, mend: bool) -> Option<Fit> {
    attempts.sort_by(|a, b| b.holds.cmp(&a.holds).then(a.worst().total_cmp(&b.worst())));
    if attempts.first().is_some_and(|a| !a.holds) {
        if !mend {
            return None;
        }
        for attempt in &mut attempts {
            attempt.mend();
            if attempt.holds {
                break;
            }
        }
    }
    if attempts.iter().any(|a| a.holds) {
        attempts.retain(|a| a.holds);
    }
    attempts.iter_mut().for_each(Attempt::reduce);
    attempts.sort_by_key(Attempt::count);
    let mut best: Option<Fit> = None;
    for attempt in attempts {
        // Repairs may have added shots: only an attempt with fewer can still do better.
        if best
            .as_ref()
            .is_some_and(|b| b.faults() == 0 && b.shots.len() <= attempt.count())
        {
            break;
        }
        let fit = attempt.finish();
        if best.as_ref().is_none_or(|b| fit.rank() < b.rank()) {
            best = Some(fit);
        }
    }
    best
}
