//! Tiles of a curved figure: slabs whose levels and widths are fitted to the print, merged while it holds.
//!
//! The start is the figure in horizontal and in vertical slabs, finer than needed; [`crate::fracture::fit`] moves all sides
//! together, keeps tiles apart, and merges and drops tiles as long as the print stays within tolerance. What comes
//! out mixes directions where a merge across slabs holds.

use crate::fracture::fit::{Budget, Setting, Slabs, best_of};
use crate::fracture::{Effort, Fracture, Job};

/// How far the outline may wander within a first slab, σ. Finer starts hardly ever fail to print and merge to the same count;
/// coarser ones fail more and more often (measured on the sets in `tests/data`: 0.6 fails on 1 of 48 figures, 1.5 on 12).
const SLACK: f64 = 0.6;

/// The fewest tiles found that print within tolerance, or the best found.
pub(super) fn fracture(job: &Job<'_>, effort: Effort) -> Fracture {
    let setting = Setting::new(job);
    let budget = match effort {
        Effort::Quick => Budget {
            window: 6,
            apart: 0.5,
            steps: 12,
            hopeless: 0.3,
        },
        Effort::Normal => Budget {
            window: 8,
            apart: 0.5,
            steps: 20,
            hopeless: 0.5,
        },
        Effort::Thorough => Budget {
            window: 12,
            apart: 1.0,
            steps: 40,
            hopeless: 2.0,
        },
    };
    let slabs = Slabs::of(job, &setting.target);
    let attempts = slabs
        .both(SLACK)
        .iter()
        .map(|start| setting.attempt(start, true, budget))
        .collect();
    setting.reported(best_of(attempts))
}
