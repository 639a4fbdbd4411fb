//! Shots that may overlap, their doses adding.
//!
//! Minimising their number is NP-hard. Propose: slabs of both directions, each grown across as far as the figure allows,
//! chosen greedily until they cover it. Refine and reduce: `fracture::fit`. Background: Kagalwalla and Gupta, DAC 2015; Chan et
//! al., ICCAD 2014; Jiang and Zakhor, Proc. SPIE 8166 (2011); greedy cover with rectangles: Heinrich-Litan and Lübbecke, ACM JEA
//! 11 (2007). We depart from them by fitting all neighbours of a dropped or merged shot at once on the closed-form dose.

mod bound;

use super::fit::{Budget, Flash, Setting, Slabs, Stage, best_of, cover};
use super::{Effort, Fracture, FractureError, Fracturer, Job, framed};

/// The overlap fracture.
#[derive(Clone, Copy, Debug, Default)]
pub struct Overlap {
    /// How hard to search.
    pub effort: Effort,
    /// Whether to work out a lower bound too: about half as much work again.
    pub bound: bool,
}

/// How far the outline may wander within a first slab, σ; as for tiles.
const SLACK: f64 = 0.6;

/// How much of both ends of a slab may stick out when it is grown, σ: a shot's corner prints rounded by about as much.
const INSETS: [f64; 2] = [0.3, 0.6];

/// Shots in a first cover from which a figure counts as long.
const LONG: usize = 40;

/// How tiles are searched for that a long figure starts from.
const TILES: Budget = Budget {
    window: 8,
    apart: 0.5,
    steps: 20,
    hopeless: 0.5,
};

impl Fracturer for Overlap {
    fn name(&self) -> &'static str {
        "overlap"
    }

    fn fracture(&self, job: &Job<'_>) -> Result<Fracture, FractureError> {
        framed(job, |job| Ok(self.search(job)))
    }
}

impl Overlap {
    /// The fewest shots found that print within tolerance, or the best found.
    fn search(&self, job: &Job<'_>) -> Fracture {
        let setting = Setting::new(job);
        // What the efforts cost and gain is measured in benches/fracture.rs.
        let (budget, starts) = match self.effort {
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
        };
        let slabs = Slabs::of(job, &setting.target);
        let grown = INSETS.map(|inset| slabs.grown(SLACK, inset * setting.sigma()));
        let both = grown.concat();
        let [slim, wide] = &grown;
        let mut starts: Vec<Vec<Flash>> = [&both, wide, slim][..starts]
            .iter()
            .map(|candidates| cover(candidates, &setting.samples, setting.sigma()))
            .collect();
        // Where one shot's width is all that a figure has, a cover needs as many as a cut, and tiles are the better start.
        let long = starts[0].len() > LONG;
        let cut = slabs.both(SLACK, 0.0).into_iter().min_by_key(Vec::len);
        if long {
            starts.truncate(1);
        }
        let stages = setting.least_sides().map(|least| Stage {
            start: 0.0,
            least,
            mend: true,
        });
        let mut fracture = setting.staged(&stages, |stage| {
            let tiles = cut.iter().filter(|_| long).map(|cut| {
                let mut tiles = setting.attempt(cut, true, [stage.least; 2], TILES);
                tiles.reduce();
                tiles.flashes()
            });
            let attempts = starts
                .iter()
                .cloned()
                .chain(tiles)
                .map(|start| setting.attempt(&start, false, [stage.least; 2], budget));
            best_of(attempts.collect(), stage.mend)
        });
        fracture.lower_bound = self.bound.then(|| {
            let context = |p| setting.context.dose(p);
            bound::lower_bound(&setting.target, job.blur, &job.limits, context)
        });
        fracture
    }
}
