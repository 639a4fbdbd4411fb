//! Shots that may overlap, their doses adding.
//!
//! Minimising their number is NP-hard. Propose: slabs of both directions, each grown across as far as the figure allows,
//! chosen greedily until they cover it. Refine and reduce: `fracture::fit`. Background: Kagalwalla and Gupta, DAC 2015; Chan et
//! al., ICCAD 2014; Jiang and Zakhor, Proc. SPIE 8166 (2011); greedy cover with rectangles: Heinrich-Litan and Lübbecke, ACM JEA
//! 11 (2007). We depart from them by fitting all neighbours of a dropped or merged shot at once on the closed-form dose.

mod bound;

use super::fit::{Budget, Doses, Flash, Setting, Slabs, best_of, cover};
use super::{
    DoseLevels, Effort, Fracture, FractureError, Fracturer, Job, Miss, MissReason, framed, misses,
    refitted,
};
use crate::shot::{ShotLimits, ShotList};
use crate::units::{Dose, Nm};

/// The overlap fracture.
#[derive(Clone, Copy, Debug, Default)]
pub struct Overlap {
    /// How hard to search.
    pub effort: Effort,
    /// Whether to work out a lower bound too: about half as much work again.
    pub bound: bool,
    /// No place may get more than this from all shots: 1 or more, since a wide shot alone gives that.
    pub peak_dose: Option<Dose>,
    /// The doses that a shot may have.
    pub dose_levels: DoseLevels,
}

impl Overlap {
    /// Any shots of dose 1, with an effort.
    #[must_use]
    pub const fn with(effort: Effort) -> Self {
        Self {
            effort,
            bound: false,
            peak_dose: None,
            dose_levels: DoseLevels::ONE,
        }
    }
}

/// How far the outline may wander within a first slab, σ; as for tiles.
const SLACK: f64 = 0.6;

/// How much of both ends of a slab may stick out when it is grown, σ: a shot's corner prints rounded by about as much.
const INSETS: [f64; 2] = [0.3, 0.6];

/// How many times as much a trial may cost at first when doses are held under a peak: stacks cost much and are soon spread.
const PILED: f64 = 4.0;

/// Shots in a first cover from which a figure counts as long.
const LONG: usize = 40;

impl Fracturer for Overlap {
    fn name(&self) -> &'static str {
        "overlap"
    }

    fn fracture(&self, job: &Job<'_>) -> Result<Fracture, FractureError> {
        framed(job, |job| Ok(self.explained(job)))
    }

    fn misses(&self, job: &Job<'_>, shots: &ShotList) -> Vec<Miss> {
        misses(job, shots, self.doses())
    }

    fn refit(&self, job: &Job<'_>, found: &Fracture) -> Option<Fracture> {
        let moved = refitted(job, &found.shots, |job, shots| {
            let setting = Setting::of_shots(job, self.doses(), shots);
            setting.refit(shots, false, self.budget().0)
        });
        // Where moving them does not do, others are looked for.
        let prints = |fracture: &Fracture| fracture.misses.is_empty();
        let mut best = match moved {
            Some(moved) if prints(&moved) && moved.shots.len() <= found.shots.len() => moved,
            moved => {
                let anew = self.fracture(job).ok();
                let all = moved.into_iter().chain(anew);
                all.min_by_key(|fracture| (fracture.misses.len(), fracture.shots.len()))?
            }
        };
        best.lower_bound = found.lower_bound;
        Some(best)
    }
}

impl Overlap {
    /// How much work is put in, and from how many starts.
    fn budget(&self) -> (Budget, usize) {
        // What the efforts cost and gain is measured in benches/fracture.rs.
        match self.effort {
            Effort::Quick => (
                Budget {
                    window: 10,
                    apart: 1.0,
                    steps: 15,
                    hopeless: 0.6,
                },
                1,
            ),
            Effort::Normal => (
                Budget {
                    window: 12,
                    apart: 1.0,
                    steps: 20,
                    hopeless: 1.0,
                },
                2,
            ),
            Effort::Thorough => (
                Budget {
                    window: 16,
                    apart: 3.0,
                    steps: 40,
                    hopeless: 4.0,
                },
                3,
            ),
        }
    }

    fn doses(&self) -> Doses {
        Doses {
            levels: self.dose_levels,
            peak: self.peak_dose,
        }
    }

    /// [`Overlap::search`], and where it does not print, whether that is for the limits.
    fn explained(&self, job: &Job<'_>) -> Fracture {
        let mut found = self.search(job);
        let unknown = |fracture: &Fracture| {
            let mut misses = fracture.misses.iter();
            misses.any(|miss| miss.reason == MissReason::NotFound)
        };
        if unknown(&found) {
            let anything = ShotLimits {
                least_side: job.limits.address.nm(),
                sliver: job.limits.address.nm(),
                greatest_side: Nm(f64::INFINITY),
                ..job.limits
            };
            let freely = self.free().search(&Job {
                limits: anything,
                ..*job
            });
            if freely.misses.is_empty() {
                let unknown = |miss: &&mut Miss| miss.reason == MissReason::NotFound;
                let misses = found.misses.iter_mut().filter(unknown);
                misses.for_each(|miss| miss.reason = MissReason::Limits);
            }
        }
        found
    }

    /// The same search with the peak of the dose left free, without a bound.
    fn free(&self) -> Self {
        Self {
            peak_dose: None,
            bound: false,
            ..*self
        }
    }

    /// The fewest shots found that print within tolerance, or the best found.
    fn search(&self, job: &Job<'_>) -> Fracture {
        let setting = Setting::with(job, self.doses());
        let slabs = Slabs::of(&setting);
        let cuts = slabs.both(SLACK, 0.0).map(|cut| self.levelled(cut));
        let [first, second] = &cuts;
        let cut = if second.len() < first.len() {
            second
        } else {
            first
        };
        let (mut budget, count) = self.budget();
        let mut starts = self.covers(&setting, &slabs, count);
        // Where one shot's width is all that a figure has, a cover needs as many as a cut, and tiles are the better start.
        let long = starts[0].len() > LONG;
        if long {
            starts.truncate(1);
        }
        if self.peak_dose.is_some() {
            // What is found without it often needs little change; where the limit is low, a cut is nearer.
            let found = self.free().search(job).shots;
            starts = vec![found.rects().map(Flash::from).collect(), cut.clone()];
            budget.hopeless *= PILED;
        }
        let from = |starts: &[Vec<Flash>]| {
            setting.staged(|least| {
                let tiles = long.then(|| {
                    let mut tiles = setting.attempt(cut, true, [least; 2], Budget::TILES);
                    tiles.reduce();
                    tiles.flashes()
                });
                let starts = starts.iter().chain(&tiles);
                let attempts = starts.map(|s| setting.attempt(s, false, [least; 2], budget));
                best_of(attempts.collect())
            })
        };
        let mut fracture = from(&starts);
        // A cover may be too few shots for moving them to lead anywhere; a cut hardly ever is.
        if !fracture.misses.is_empty() {
            let other = from(&cuts);
            if other.misses.len() < fracture.misses.len() {
                fracture = other;
            }
        }
        // The proof is for shots of dose 1.
        fracture.lower_bound = (self.bound && self.dose_levels.are_one()).then(|| {
            let context = |p| setting.context.range(p).1;
            bound::lower_bound(&setting.target, job.blur, &job.limits, context)
        });
        fracture
    }

    /// First shots: up to three covers of a figure by slabs that stick out more or less.
    fn covers(&self, setting: &Setting<'_>, slabs: &Slabs, count: usize) -> Vec<Vec<Flash>> {
        let sigma = setting.sigma();
        let grown = INSETS.map(|inset| slabs.grown(SLACK, inset * sigma));
        let both = grown.concat();
        let [slim, wide] = &grown;
        let candidates = [&both, wide, slim].into_iter().take(count);
        candidates
            .map(|from| self.levelled(cover(from, &setting.samples, sigma)))
            .collect()
    }

    /// Shots whose dose is none of the levels at the one nearest to dose 1.
    fn levelled(&self, mut shots: Vec<Flash>) -> Vec<Flash> {
        let dose = self.dose_levels.nearest_to_one();
        for shot in &mut shots {
            if self.dose_levels.iter().all(|level| level != shot.dose) {
                shot.dose = dose;
            }
        }
        shots
    }
}
