//! Tiles of a curved figure: slabs whose levels and widths are fitted to the print, merged while it holds.
//!
//! The start is the figure in horizontal and in vertical slabs, finer than needed; where neither follows the outline without slivers,
//! also in slabs of both directions, each part cut across the way it runs. [`crate::fracture::fit`] moves all sides together, keeps
//! tiles apart, and merges and drops tiles as long as the print stays within tolerance. Where it does not hold, shots are added; only
//! where that does not help either, single shots may be slivers, and are made wider again if their neighbours allow it in the end.

use crate::fracture::fit::{Budget, Fit, Flash, Setting, Slabs, best_of};
use crate::fracture::{Effort, Fracture, Job};

/// How far the outline may wander within a first slab, σ. Finer starts hardly ever fail to print and merge to the same counts or
/// less (assist and curvy sets: 423 tiles at 0.4, 425 at 0.6, 430 at 1.0); two starts find 420.
const SLACKS: [f64; 2] = [0.4, 0.8];

/// The fewest tiles found that print within tolerance, or the best found.
pub(super) fn fracture(job: &Job<'_>, effort: Effort) -> Fracture {
    let setting = Setting::new(job);
    let (budget, starts) = match effort {
        Effort::Quick => (
            Budget {
                window: 6,
                apart: 0.5,
                steps: 12,
                hopeless: 0.3,
            },
            1,
        ),
        Effort::Normal => (Budget::TILES, 1),
        Effort::Thorough => (
            Budget {
                window: 12,
                apart: 1.0,
                steps: 40,
                hopeless: 1.0,
            },
            2,
        ),
    };
    let slabs = Slabs::of(&setting);
    let [sliver, least] = setting.least_sides();
    let slacks = &SLACKS[..starts];
    let attempts = |starts: Vec<Vec<Flash>>| -> Vec<_> {
        let from = |start: &Vec<Flash>| setting.attempt(start, true, [sliver, least], budget);
        starts.iter().map(from).collect()
    };
    let mut found = attempts(slacks.iter().flat_map(|&s| slabs.both(s, sliver)).collect());
    // Where slabs of one direction serve, those of both have not been found to save a tile.
    if found.iter().all(|a| !a.holds) {
        found.extend(attempts(
            slacks
                .iter()
                .flat_map(|&s| slabs.mixed(s, sliver))
                .collect(),
        ));
    }
    let mut fit = best_of(found);
    // Shots that still fail somewhere: slivers anywhere, to be made wider where they can.
    // Where half as many places fail as there are samples, slivers do not help either.
    let lost = setting.samples.len() / 2;
    if fit
        .as_ref()
        .is_none_or(|f| f.faults() > 0 && f.faults() < lost)
    {
        let mut starts: Vec<Vec<Flash>> = SLACKS
            .iter()
            .flat_map(|&s| {
                slabs
                    .both(s, least)
                    .into_iter()
                    .chain(slabs.mixed(s, least))
            })
            .collect();
        starts.iter_mut().flatten().for_each(|f| f.slim = true);
        let slim = best_of(attempts(starts));
        let faults = |f: &Option<Fit>| f.as_ref().map_or(usize::MAX, Fit::faults);
        if faults(&slim) < faults(&fit) {
            fit = slim;
        }
    }
    setting.said(fit)
}
